"""Entries back to open formats, without loss, and without mixing what may not be passed on together.

The rule on licences is this project's own cautious reading, no legal advice: free licences without share-alike join anything;
two licences whose terms exclude each other (share-alike with a non-commercial or another share-alike licence, no-derivatives
with anything else) are refused in one file; what states no licence may not be passed on, unless it is the laboratory's own
standard.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, fields, replace
from datetime import datetime
from pathlib import Path

from identify.errors import LibraryConflict, UsageError
from identify.library.licences import UNSTATED, normalise_licence
from identify.library.standards import read_standard_details
from identify.library.standing import get_entry
from identify.library.store import SEARCHABLE, Library
from identify.records import Entry, EntryStatus, SpectrumRecord
from identify.writers.spectrum_files import write_spectra

OPEN_TO_ALL = frozenset({"CC0", "public domain", "CC BY", "dl-de/by-2-0", "dl-de/zero-2-0"})
OWN = "own standard, no licence stated"


@dataclass(frozen=True, slots=True)
class ExportReport:
    """What was written."""

    path: str
    file_format: str
    n_written: int
    licences: Mapping[str, int]
    fingerprint: str


def export_entries(
    library: Library,
    path: Path | str,
    file_format: str,
    *,
    accessions: Sequence[str] = (),
    statuses: Collection[EntryStatus] = SEARCHABLE,
    i_have_the_right: bool = False,
    contributor: str = "",
    when: datetime | None = None,
) -> ExportReport:
    """Report on the entries written to a file of an open format; licences and authors travel with them.

    Parameters
    ----------
    library : Library
    path : Path or str
        File to write or replace.
    file_format : str
        One of `identify.writers.spectrum_files.SUFFIXES`.
    accessions : sequence of str
        Entries to export; all with one of `statuses` when empty.
    statuses : collection of EntryStatus
    i_have_the_right : bool
        The user says that these licences may be passed on together.
    contributor : str
        For MassBank records.
    when : datetime, optional
        Date of MassBank records.

    Returns
    -------
    ExportReport

    Raises
    ------
    LibraryConflict
        If licences may not be passed on together (see the module).
    UsageError, FormatError
        If nothing is to be exported, or the format cannot hold it (see `write_spectra`).
    LibraryError
        If an accession is unknown.
    """
    ids = [get_entry(library, name).id for name in accessions] if accessions else library.entry_ids(statuses)
    if not ids:
        raise UsageError("export", where=str(library.path), found="no entry", expected="at least one")
    entries = library.get_entries(ids)
    licences = Counter(_licence_of(entry) for entry in entries)
    fault = find_licence_conflict(licences)
    if fault and not i_have_the_right:
        raise LibraryConflict(
            "export", where=str(library.path), found=fault, expected="licences that may be passed on together",
            hint="Export them into separate files, or say --i-have-the-right.",
        )  # fmt: skip
    records = [
        _with_details(library, entry, record) for entry, record in zip(entries, library.get_records(ids), strict=True)
    ]
    date = "" if when is None else when.strftime("%Y.%m.%d")
    n_written = write_spectra(Path(path), records, file_format, date=date, contributor=contributor)
    return ExportReport(str(path), file_format, n_written, dict(licences.most_common()), library.fingerprint)


def _licence_of(entry: Entry) -> str:
    licence = normalise_licence(entry.licence)
    return OWN if licence == UNSTATED and entry.status is EntryStatus.OWN_STANDARD else licence


def find_licence_conflict(licences: Collection[str]) -> str:
    """Why these licences may not be passed on together, in words; empty when they may.

    Parameters
    ----------
    licences : collection of str
        In normal form.

    Returns
    -------
    str

    Examples
    --------
    >>> find_licence_conflict({"CC BY", "CC BY-SA", "CC0"})
    ''
    >>> find_licence_conflict({"CC BY-SA", "CC BY-NC-SA"})
    'CC BY-NC-SA together with CC BY-SA'
    """
    if UNSTATED in licences:
        return "entries whose licence is not stated"
    bound = sorted(set(licences) - OPEN_TO_ALL - {OWN})
    unknown = [name for name in bound if not name.startswith("CC ")]
    if unknown and len(set(licences)) > 1:
        return f"{unknown[0]} together with other licences"
    for first in bound:
        for second in bound:
            if first < second and not _may_join(first, second):
                return f"{first} together with {second}"
    if any(name.endswith("-ND") for name in bound) and len(set(licences)) > 1:
        return f"{next(name for name in bound if name.endswith('-ND'))} together with other licences"
    return ""


def _may_join(first: str, second: str) -> bool:
    """Whether neither of two licences forbids what the other one's terms add: share-alike takes no further terms."""
    one, other = (set(name.split("-")[1:]) for name in (first, second))
    return ("SA" not in one or other <= one) and ("SA" not in other or one <= other)


def _with_details(library: Library, entry: Entry, record: SpectrumRecord) -> SpectrumRecord:
    if entry.status is not EntryStatus.OWN_STANDARD:
        return record
    details = read_standard_details(library, entry.accession)
    lines = [f"STANDARD {field.name} {getattr(details, field.name)}" for field in fields(details)]
    known = tuple(line for line, field in zip(lines, fields(details), strict=True) if getattr(details, field.name))
    return replace(record, comments=record.comments + known)
