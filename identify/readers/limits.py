"""How much a reader takes from one input: every bound in one place, so that a hostile file costs bounded memory.

The bounds are far above what electron-ionization work produces (the largest open release has 14,155 records here and
some tens of thousands of peaks in its longest one) and far below what would hurt a laboratory computer.
"""

from __future__ import annotations

MAX_PEAKS = 100_000
"""Peaks of one spectrum. A profile scan of a high-resolution instrument stays below; 10⁶ peaks are refused."""

MAX_LINE_BYTES = 4 * 1024 * 1024
"""Bytes of one line: `MAX_PEAKS` pairs written on a single line still fit."""

MAX_RECORD_BYTES = 16 * 1024 * 1024
"""Bytes of one record with all metadata, `LINE_OVERHEAD_BYTES` added to each line: `MAX_PEAKS` lines, annotated, still fit."""

LINE_OVERHEAD_BYTES = 32
"""What a line costs beside its text, so that very many short lines count as well."""

MAX_FILE_BYTES = 512 * 1024 * 1024
"""Bytes of one mzML file, of one gzipped file, or of one member of an archive, after unpacking. Plain text has no such bound:
it is read record by record."""

MAX_ARCHIVE_BYTES = 4 * 1024 * 1024 * 1024
"""Bytes of all members of one archive together after unpacking."""

MAX_MEMBERS = 500_000
"""Members of one archive, files of one folder."""

MAX_FIELD_CHARS = 10_000
"""Characters of one metadata value; longer ones are cut and say so."""

HEAD_BYTES = 64 * 1024
"""Bytes looked at to recognize what a file is."""

CHUNK_BYTES = 1024 * 1024
"""Bytes decoded at a time."""

MAX_DIRECTORY_BYTES = 32 * 1024 * 1024
"""Bytes of a zip archive's table of contents, which has to be held in memory: some 300,000 members."""

MAX_TAR_HEADER_BYTES = 1024 * 1024
"""Bytes of one extended header of a tar archive (long names), which has to be held in memory."""
