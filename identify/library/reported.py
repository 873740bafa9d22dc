"""Which results showed which entries: so that a withdrawn entry can be followed to everything it ever answered.

Every row continues a chain of hashes of its own. Recording a result does not change the library's fingerprint: what a search
finds does not depend on it.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterable, Sequence
from dataclasses import astuple, dataclass
from datetime import datetime

from identify.errors import UsageError
from identify.library.drafts import tidy
from identify.library.events import GENESIS, canonical_json, format_time, sha256_of
from identify.library.standing import get_entry
from identify.library.store import Library
from identify.records import EntryStatus, Report

_COLUMNS = (
    "at", "who", "result", "query_id", "query_name", "query_source", "fingerprint", "entry_id", "rank", "probability",
    "claim",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class ReportedQuery:
    """One entry shown in one result for one query."""

    at: str
    who: str
    result: str
    """What the caller calls the result: a file name, or a hash of it."""
    query_id: str
    query_name: str
    query_source: str
    fingerprint: str
    """State of the library that answered."""
    entry_id: int
    rank: int
    probability: float
    claim: str


def record_report(library: Library, report: Report, *, result: str, who: str, when: datetime) -> int:
    """Number of candidates remembered from a report.

    Parameters
    ----------
    library : Library
        Open for writing; candidates from other libraries are left out.
    report : Report
    result : str
        Name of the result, by which it will be found again.
    who : str
    when : datetime

    Returns
    -------
    int

    Raises
    ------
    UsageError
        Without a name of the result or of a person.
    LibraryBusy, LibraryError
        If the library cannot be written, or a candidate is not in it.
    """
    if not result.strip() or not who.strip():
        raise UsageError("record of a result", found="no name", expected="the name of the result and of a person")
    states = {state.path: state.fingerprint for state in report.libraries}
    path = str(library.path)
    at = format_time(when)
    rows = [
        ReportedQuery(
            at,
            tidy(who),
            tidy(result),
            found.query.id,
            tidy(found.query.record.title),
            tidy(str(found.query.record.source)),
            states.get(path, ""),
            candidate.entry.id,
            candidate.rank,
            float(candidate.probability),
            found.claim.level.value,
        )
        for found in report.identifications
        for candidate in found.candidates
        if candidate.library == path
    ]
    with library.writing() as connection:
        _insert(connection, rows)
    return len(rows)


def _insert(connection: sqlite3.Connection, rows: Iterable[ReportedQuery]) -> None:
    last = connection.execute("SELECT id, hash FROM reported ORDER BY id DESC LIMIT 1").fetchone()
    number, previous = last or (0, GENESIS)
    for row in rows:
        number += 1
        digest = _row_hash(number, astuple(row), previous)
        connection.execute(
            f"INSERT INTO reported (id, {', '.join(_COLUMNS)}, previous_hash, hash)"  # noqa: S608
            f" VALUES ({', '.join('?' * (len(_COLUMNS) + 3))})",
            (number, *astuple(row), previous, digest),
        )
        previous = digest


def _row_hash(number: int, values: Sequence[object], previous: str) -> str:
    return sha256_of(canonical_json([number, *values, previous]))


def find_reported_fault(connection: sqlite3.Connection) -> str:
    """First thing wrong with the chain of reported queries, in words; empty when it is intact."""
    rows = connection.execute(f"SELECT id, {', '.join(_COLUMNS)}, previous_hash, hash FROM reported ORDER BY id")  # noqa: S608
    previous = GENESIS
    for expected, (number, *values, before, stated) in enumerate(rows, start=1):
        if number != expected or before != previous:
            return f"reported query {expected} is missing"
        if any(isinstance(value, bytes) for value in values):
            return f"reported query {number}: a field is neither text nor a number"
        if _row_hash(number, values, before) != stated:
            return f"reported query {number}: its hash does not agree with its fields"
        previous = stated
    return ""


def find_affected(library: Library, accession: str) -> tuple[ReportedQuery, ...]:
    """Every query ever recorded that was answered with an entry, oldest first.

    Parameters
    ----------
    library : Library
    accession : str

    Returns
    -------
    tuple of ReportedQuery

    Raises
    ------
    LibraryError
        If there is no such entry.
    """
    entry = get_entry(library, accession)
    return _read(library, entry.id)


def find_affected_by_all_withdrawn(library: Library) -> dict[str, tuple[ReportedQuery, ...]]:
    """Recorded queries answered with entries that are now withdrawn, superseded or quarantined, by accession.

    Raises
    ------
    LibraryError
        If the library cannot be read.
    """
    moved = library.standings()
    out: dict[str, tuple[ReportedQuery, ...]] = {}
    for entry in library.get_entries(sorted(moved)):
        if entry.status in (EntryStatus.WITHDRAWN, EntryStatus.QUARANTINED):
            rows = _read(library, entry.id)
            if rows:
                out[entry.accession] = rows
    return out


def _read(library: Library, entry_id: int) -> tuple[ReportedQuery, ...]:
    with library.reading() as connection:
        rows = connection.execute(
            f"SELECT {', '.join(_COLUMNS)} FROM reported WHERE entry_id = ? ORDER BY id",  # noqa: S608
            (entry_id,),
        )
        return tuple(ReportedQuery(*row) for row in rows)
