"""Records of one source into an open transaction: judged, counted, rejected with reasons."""

from __future__ import annotations

import hashlib
import sqlite3
from collections import Counter
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime
from pathlib import Path
from typing import NamedTuple

from identify.errors import LibraryConflict
from identify.library.drafts import OTHER_FILE, Policy, judge_record
from identify.library.events import Event
from identify.library.insertion import Insertion
from identify.library.rows import Draft
from identify.readers import read_spectra
from identify.readers.fault_reports import OnReject
from identify.readers.recognize import UNKNOWN_FORMAT
from identify.records import Rejection, SpectrumRecord

Progress = Callable[[int, str], None]
"""Called with the number of records read and the name of the source, about every 100 records."""

DUPLICATE = "duplicate accession"
MAX_LISTED = 20_000
"""Rejections listed one by one; the counts are always complete."""
_PROGRESS_EVERY = 100


class Stream(NamedTuple):
    """Where records come from."""

    name: str
    sha256: str
    folder: str
    """Left out of the provenance of entries: the folders of one computer mean nothing years later."""
    read: Callable[[OnReject], Iterator[SpectrumRecord]]


def stream_of(source: Path) -> Stream:
    """Records of a file, folder or archive."""
    return Stream(source.name, _source_hash(source), folder_of(source), lambda on_reject: _read(source, on_reject))


def folder_of(path: Path) -> str:
    """What to take off the front of a path to leave its name, as its text has it.

    Examples
    --------
    >>> folder_of(Path("data/a.msp")), folder_of(Path("a.msp"))
    ('data/', '')
    """
    return str(path.parent / "x").removesuffix("x")


def _read(source: Path, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Records; a file of no known format inside a folder or archive (a README) is another kind of file, no fault."""

    def judge(rejection: Rejection) -> None:
        is_beside = rejection.reason == UNKNOWN_FORMAT and rejection.source != str(source)
        on_reject(replace(rejection, reason=OTHER_FILE) if is_beside else rejection)

    return read_spectra(source, judge)


def _source_hash(source: Path) -> str:
    """SHA-256 of a file; empty for a folder or what cannot be read (reading it will say so)."""
    try:
        if not source.is_file():
            return ""
        with source.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except OSError:
        return ""


@dataclass(slots=True)
class Tally:
    """Counts of one source, or of several together."""

    n_read: int = 0
    n_accepted: int = 0
    reasons: Counter[str] = field(default_factory=Counter)
    notes: Counter[str] = field(default_factory=Counter)
    rejected: list[Rejection] = field(default_factory=list)

    def add(self, other: Tally) -> None:
        """Count what another tally counted."""
        self.n_read += other.n_read
        self.n_accepted += other.n_accepted
        self.reasons.update(other.reasons)
        self.notes.update(other.notes)
        self.rejected += other.rejected[: MAX_LISTED - len(self.rejected)]

    def reject(self, rejection: Rejection) -> None:
        """Count a record that stays out."""
        self.n_read += 1
        self.reasons[rejection.reason] += 1
        if len(self.rejected) < MAX_LISTED:
            self.rejected.append(rejection)


def take_stream(
    connection: sqlite3.Connection,
    stream: Stream,
    policy: Policy,
    *,
    n_before: int,
    progress: Progress | None,
    who: str,
    when: datetime,
    reason: str,
) -> tuple[Tally, Event]:
    """Counts of one source whose accepted records are now entries, and the event that vouches for them.

    Parameters
    ----------
    connection : sqlite3.Connection
        In a transaction.
    stream : Stream
    policy : Policy
    n_before : int
        Records read before, for the progress.
    progress : callable, optional
    who, reason : str
    when : datetime

    Returns
    -------
    tally : Tally
    event : Event

    Raises
    ------
    InputError
        If the source cannot be read at all.
    UsageError
        If nobody is named, or the time has no zone.
    """
    insertion, tally = Insertion(connection), Tally()
    for number, record in enumerate(stream.read(tally.reject)):
        if progress and number % _PROGRESS_EVERY == 0:
            progress(n_before + tally.n_read, stream.name)
        _take(record, policy, stream.folder, insertion, tally)
    content: Mapping[str, object] = {
        "source": stream.name,
        "sha256": stream.sha256,
        "licences": "all" if policy.licences is None else sorted(policy.licences),
        "read": tally.n_read,
        "rejected": dict(tally.reasons),
    }
    return tally, insertion.finish(kind="imported", who=who, when=when, reason=reason, content=content)


def _take(record: SpectrumRecord, policy: Policy, folder: str, insertion: Insertion, tally: Tally) -> None:
    draft = judge_record(record, policy)
    if isinstance(draft, Rejection):
        tally.reject(draft)
        return
    draft = _with_provenance(draft, record, folder)
    try:
        insertion.add(draft)
    except LibraryConflict as error:
        where, hint = record.source, "The first record with it was kept."
        tally.reject(Rejection(where.path, where.line, DUPLICATE, error.found, error.expected, hint))
        return
    tally.n_read += 1
    tally.n_accepted += 1
    tally.notes.update(draft.notes)


def _with_provenance(draft: Draft, record: SpectrumRecord, folder: str) -> Draft:
    """The draft with the file it came from, and named after it where the record has no accession."""
    source = record.source
    columns = {**draft.columns, "source": str(draft.columns["source"]).removeprefix(folder)}
    if not columns["accession"]:
        position = source.number if source.number is not None else source.line
        name = Path(source.path).name
        columns["accession"] = name if position is None else f"{name}#{position}"
    return replace(draft, columns=columns)
