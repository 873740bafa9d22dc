"""Records → a new library file: judged one by one, rejected with counted reasons, complete or not there at all."""

from __future__ import annotations

import hashlib
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from pathlib import Path
from typing import NamedTuple

from identify import __version__
from identify.errors import InputError
from identify.library.drafts import Policy, judge_record
from identify.library.events import append_event
from identify.library.insertion import Insertion
from identify.library.licences import resolve_licences
from identify.library.new_file import new_library_file
from identify.library.rows import Draft
from identify.library.schema import SCHEMA_VERSION
from identify.readers import read_spectra
from identify.records import EntryStatus, Rejection, SpectrumRecord

Progress = Callable[[int, str], None]
"""Called with the number of records read and the name of the source, about every 100 records."""
Accept = Callable[["BuildReport"], None]
OnReject = Callable[[Rejection], None]

DUPLICATE = "duplicate accession"
MAX_LISTED = 20_000
"""Rejections listed one by one; the counts are always complete."""
_PROGRESS_EVERY = 100


@dataclass(frozen=True, slots=True)
class BuildReport:
    """What a build took and what it left out."""

    path: str
    fingerprint: str
    n_read: int
    n_accepted: int
    n_compounds: int
    n_rejected: Mapping[str, int]
    """Rejected records by reason, most frequent first; the counts add up with `n_accepted` to `n_read`."""
    notes: Mapping[str, int]
    """Accepted records by remark (`energy not stated: taken as 70 eV`), most frequent first."""
    rejected: tuple[Rejection, ...]
    """The rejections one by one, the first 20,000."""

    @property
    def exit_code(self) -> int:
        """0: leaving out what the choice of licence and method excludes is what was asked for; 3: nothing was accepted."""
        return 0 if self.n_accepted else 3


@dataclass(slots=True)
class _Tally:
    """Counts of one source, or of the whole build."""

    n_read: int = 0
    n_accepted: int = 0
    reasons: Counter[str] = field(default_factory=Counter)
    notes: Counter[str] = field(default_factory=Counter)

    def add(self, other: _Tally) -> None:
        self.n_read += other.n_read
        self.n_accepted += other.n_accepted
        self.reasons.update(other.reasons)
        self.notes.update(other.notes)


def build_library(
    path: Path | str,
    sources: Sequence[Path | str],
    *,
    licences: str | Sequence[str] = "free",
    replace: bool = False,
    progress: Progress | None = None,
    who: str,
    when: datetime,
    reason: str = "",
    status: EntryStatus = EntryStatus.REFERENCE,
    accept: Accept | None = None,
) -> BuildReport:
    """Report on a new library made of all electron-ionization spectra in the sources.

    Parameters
    ----------
    path : Path or str
        Final name of the library; nothing appears there before it is complete.
    sources : sequence of Path or str
        Files, folders or archives that `identify.readers.read_spectra` reads, in this order.
    licences : str or sequence of str
        `free`, `all`, or names of licences (see `identify.library.licences`).
    replace : bool
        Whether a library at `path` is replaced.
    progress : callable, optional
    who : str
        Who builds it.
    when : datetime
        Time of the events, with time zone.
    reason : str
    status : EntryStatus
        Standing the entries get.
    accept : callable, optional
        Called with the report before the library takes its place; when it raises, there is no library.

    Returns
    -------
    BuildReport

    Raises
    ------
    UsageError
        For a wrong choice of licences, nobody named, or a time without zone.
    InputError
        If a source cannot be read at all, or nothing in the sources was accepted.
    LibraryConflict, LibraryBusy, LibraryError
        See `identify.library.new_file.new_library_file`.

    Notes
    -----
    One pass, memory bounded by one record and the pages SQLite keeps.
    """
    streams = [_stream_of(Path(source)) for source in sources]
    return _build(Path(path), streams, resolve_licences(licences), replace, progress, who, when, reason, status, accept)


def build_from_records(
    path: Path | str,
    records: Iterable[SpectrumRecord],
    *,
    origin: str,
    licences: str | Sequence[str] = "all",
    replace: bool = False,
    who: str,
    when: datetime,
    reason: str = "",
    status: EntryStatus = EntryStatus.REFERENCE,
) -> BuildReport:
    """Report on a new library made of records in memory; see `build_library`.

    Parameters
    ----------
    path : Path or str
    records : iterable of SpectrumRecord
    origin : str
        Where the records come from, for the event.
    licences, replace, who, when, reason, status
        As for `build_library`.

    Returns
    -------
    BuildReport

    Raises
    ------
    UsageError, InputError, LibraryError
        As `build_library`.
    """
    stream = [_Stream(origin, "", "", lambda _on_reject: iter(records))]
    return _build(Path(path), stream, resolve_licences(licences), replace, None, who, when, reason, status)


class _Stream(NamedTuple):
    """Where records come from."""

    name: str
    sha256: str
    folder: str
    """Left out of the provenance of entries: the folders of one computer mean nothing years later."""
    read: Callable[[OnReject], Iterator[SpectrumRecord]]


def _stream_of(source: Path) -> _Stream:
    folder = str(source.parent / "x").removesuffix("x")
    return _Stream(source.name, _source_hash(source), folder, lambda on_reject: read_spectra(source, on_reject))


def _build(
    path: Path,
    streams: Sequence[_Stream],
    licences: frozenset[str] | None,
    replace: bool,
    progress: Progress | None,
    who: str,
    when: datetime,
    reason: str,
    status: EntryStatus,
    accept: Accept | None = None,
) -> BuildReport:
    policy, total, listed = Policy(licences, status), _Tally(), list[Rejection]()
    with new_library_file(path, replace) as connection:
        append_event(
            connection, kind="created", who=who, when=when, reason=reason,
            content={"schema": SCHEMA_VERSION, "program": f"ionwitness {__version__}"},
        )  # fmt: skip
        event = None
        for stream in streams:
            insertion, tally = Insertion(connection), _Tally()

            def reject(rejection: Rejection, tally: _Tally = tally) -> None:
                tally.reasons[rejection.reason] += 1
                if len(listed) < MAX_LISTED:
                    listed.append(rejection)

            for record in _watched(stream.read(reject), total, tally, progress, stream.name):
                _take(record, policy, stream.folder, insertion, tally, reject)
            tally.n_read = tally.n_accepted + tally.reasons.total()
            total.add(tally)
            content = {
                "source": stream.name,
                "sha256": stream.sha256,
                "licences": "all" if licences is None else sorted(licences),
                "read": tally.n_read,
                "rejected": dict(tally.reasons),
            }
            event = insertion.finish(kind="imported", who=who, when=when, reason=reason, content=content)
        if event is None or total.n_accepted == 0:
            raise InputError(
                "library build", where=str(path), found=_nothing(total), expected="at least one spectrum to keep",
                hint="See the reasons; `--licence all` takes every licence.",
            )  # fmt: skip
        (n_compounds,) = connection.execute("SELECT count(*) FROM compound").fetchone()
        report = _report(path, event.hash, n_compounds, total, listed)
        if accept:
            accept(report)
    return report


def _report(path: Path, fingerprint: str, n_compounds: int, total: _Tally, listed: list[Rejection]) -> BuildReport:
    reasons, notes = dict(total.reasons.most_common()), dict(total.notes.most_common())
    return BuildReport(
        str(path), fingerprint, total.n_read, total.n_accepted, n_compounds, reasons, notes, tuple(listed)
    )


def _nothing(tally: _Tally) -> str:
    reasons = ", ".join(f"{count} × {reason}" for reason, count in tally.reasons.most_common(5))
    return f"nothing accepted ({reasons})" if reasons else "no spectrum"


def _watched(
    records: Iterator[SpectrumRecord], total: _Tally, tally: _Tally, progress: Progress | None, name: str
) -> Iterator[SpectrumRecord]:
    for number, record in enumerate(records):
        if progress and number % _PROGRESS_EVERY == 0:
            progress(total.n_read + tally.n_accepted + tally.reasons.total(), name)
        yield record


def _take(
    record: SpectrumRecord, policy: Policy, folder: str, insertion: Insertion, tally: _Tally, reject: OnReject
) -> None:
    draft = judge_record(record, policy)
    if isinstance(draft, Rejection):
        reject(draft)
        return
    draft = _with_provenance(draft, record, folder)
    accession = str(draft.columns["accession"])
    if insertion.has_accession(accession):
        found, hint = f"{accession!r} again", "The first record with it was kept."
        where = record.source
        reject(Rejection(where.path, where.line, DUPLICATE, found, "each accession once", hint))
        return
    insertion.add(draft)
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


def _source_hash(source: Path) -> str:
    """SHA-256 of a file; empty for a folder or what cannot be read (reading it will say so)."""
    if not source.is_file():
        return ""
    try:
        with source.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except OSError:
        return ""


def describe_build(report: BuildReport) -> list[str]:
    """Lines for a terminal: accepted, rejected by reason, remarks."""
    lines = [f"{report.n_accepted:,} of {report.n_read:,} records accepted, {report.n_compounds:,} compounds"]
    lines += [f"  rejected {count:,} × {reason}" for reason, count in report.n_rejected.items()]
    lines += [f"  noted {count:,} × {remark}" for remark, count in report.notes.items()]
    return lines
