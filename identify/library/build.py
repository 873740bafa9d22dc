"""Records → a library: a new file, complete or not there at all, or more entries in an existing one."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from identify import __version__
from identify.errors import InputError
from identify.library.drafts import EXCLUDED, Policy
from identify.library.events import append_event
from identify.library.intake import Progress, Stream, Tally, stream_of, take_stream
from identify.library.licences import resolve_licences
from identify.library.new_file import new_library_file
from identify.library.schema import SCHEMA_VERSION
from identify.library.store import Library
from identify.records import EntryStatus, Rejection, SpectrumRecord

Accept = Callable[["BuildReport"], None]
"""Called with the report before the library takes its place; raises to prevent it."""


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
        """0, or 1 when inputs were faulty; what the choice of licence and method leaves out is no fault. 3: nothing taken."""
        if not self.n_accepted:
            return 3
        return 1 if self.n_faulty else 0

    @property
    def n_faulty(self) -> int:
        """Records rejected because they, or their file, could not be used: not those of another method or licence."""
        return sum(count for reason, count in self.n_rejected.items() if reason not in EXCLUDED)


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
    policy = Policy(resolve_licences(licences), status)
    streams = [stream_of(Path(source)) for source in sources]
    return _build(Path(path), streams, policy, replace, progress, who, when, reason, accept)


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
    policy = Policy(resolve_licences(licences), status)
    stream = Stream(origin, "", "", lambda _on_reject: iter(records))
    return _build(Path(path), [stream], policy, replace, None, who, when, reason)


def _build(
    path: Path,
    streams: Sequence[Stream],
    policy: Policy,
    replace: bool,
    progress: Progress | None,
    who: str,
    when: datetime,
    reason: str,
    accept: Accept | None = None,
) -> BuildReport:
    with new_library_file(path, replace) as connection:
        append_event(
            connection, kind="created", who=who, when=when, reason=reason,
            content={"schema": SCHEMA_VERSION, "program": f"ionwitness {__version__}"},
        )  # fmt: skip
        report = take_streams(
            connection, path, streams, policy, progress=progress, who=who, when=when, reason=reason
        )  # fmt: skip
        if accept:
            accept(report)
    return report


def take_streams(
    connection: sqlite3.Connection,
    path: Path,
    streams: Sequence[Stream],
    policy: Policy,
    *,
    progress: Progress | None,
    who: str,
    when: datetime,
    reason: str,
) -> BuildReport:
    """Report on all sources taken into an open transaction, one event each.

    Parameters
    ----------
    connection : sqlite3.Connection
        In a transaction.
    path : Path
        Of the library.
    streams : sequence of Stream
    policy : Policy
    progress : callable, optional
    who, reason : str
    when : datetime

    Returns
    -------
    BuildReport

    Raises
    ------
    InputError
        If a source cannot be read at all, or nothing was accepted.
    UsageError
        If nobody is named, or the time has no zone.
    """
    total, event = Tally(), None
    for stream in streams:
        tally, event = take_stream(
            connection, stream, policy, n_before=total.n_read, progress=progress, who=who, when=when, reason=reason
        )
        total.add(tally)
    if event is None or total.n_accepted == 0:
        raise InputError(
            "library build", where=str(path), found=_nothing(total), expected="at least one spectrum to keep",
            hint="See the reasons; `--licence all` takes every licence.",
        )  # fmt: skip
    (n_compounds,) = connection.execute("SELECT count(*) FROM compound").fetchone()
    reasons, notes = dict(total.reasons.most_common()), dict(total.notes.most_common())
    return BuildReport(
        str(path), event.hash, total.n_read, total.n_accepted, n_compounds, reasons, notes, tuple(total.rejected)
    )


def _nothing(tally: Tally) -> str:
    reasons = ", ".join(f"{count} × {reason}" for reason, count in tally.reasons.most_common(5))
    return f"nothing accepted ({reasons})" if reasons else "no spectrum"


def add_spectra(
    library: Library,
    sources: Sequence[Path | str],
    *,
    licences: str | Sequence[str] = "free",
    progress: Progress | None = None,
    who: str,
    when: datetime,
    reason: str = "",
    status: EntryStatus = EntryStatus.REFERENCE,
) -> BuildReport:
    """Report on the spectra of more sources taken into an existing library, all of them or none.

    Parameters
    ----------
    library : Library
        Open for writing; others wait for it to be written until all is read.
    sources, licences, progress, who, when, reason, status
        As for `build_library`.

    Returns
    -------
    BuildReport
        `n_compounds` counts those of the whole library.

    Raises
    ------
    InputError, UsageError
        As for `build_library`; nothing is changed then.
    LibraryBusy, LibraryError
        If the library cannot be written.
    """
    policy = Policy(resolve_licences(licences), status)
    streams = [stream_of(Path(source)) for source in sources]
    with library.writing() as connection:
        return take_streams(
            connection, library.path, streams, policy, progress=progress, who=who, when=when, reason=reason
        )


def describe_build(report: BuildReport) -> list[str]:
    """Lines for a terminal: accepted, rejected by reason, remarks."""
    lines = [f"{report.n_accepted:,} of {report.n_read:,} records accepted, {report.n_compounds:,} compounds"]
    lines += [
        f"  {'left out' if reason in EXCLUDED else 'rejected'} {count:,} × {reason}"
        for reason, count in report.n_rejected.items()
    ]
    lines += [f"  noted {count:,} × {remark}" for remark, count in report.notes.items()]
    return lines
