"""Rows of text as CSV, safe to open in a spreadsheet."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence
from pathlib import Path

from identify.writers.files import write_atomically
from identify.writers.results_csv import make_harmless


def write_rows(path: Path, heading: Sequence[str], rows: Iterable[Sequence[str]]) -> int:
    """Number of rows written below the heading to `path`, which then holds all of them, or what it held before.

    Parameters
    ----------
    path : Path
    heading : sequence of str
    rows : iterable of sequence of str
        As many cells as the heading; text a spreadsheet would run as a formula is made harmless.

    Returns
    -------
    int

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(heading)
    n_rows = 0
    for n_rows, row in enumerate(rows, start=1):  # noqa: B007  (counted)
        writer.writerow([make_harmless(cell) for cell in row])
    write_atomically(path, stream.getvalue().encode("utf-8", "replace"))
    return n_rows
