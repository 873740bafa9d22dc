"""Recompute everything a library states about itself, and name the first thing that is wrong.

Checked in this order: tables and triggers against this program's schema, the file structure (SQLite's own check), the
chain of events, every entry's content hash, the digests in the events, compounds, the standing of every entry as the
events tell it, and the chain of reported queries. Needs no write access.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from identify.errors import LibraryDamaged
from identify.library.connection import connect_any_version, read_version, translated, wrong_version
from identify.library.events import Event, find_chain_fault, read_events, sha256_of
from identify.library.insertion import digest_of
from identify.library.reported import find_reported_fault
from identify.library.rows import CONTENT_COLUMNS, content_hash
from identify.library.schema import SCHEMA_VERSION, find_schema_faults

Progress = Callable[[int, str], None]
MAX_PROBLEMS = 100
REPORTED_SINCE = 2
"""First schema version with the table of reported queries."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that does not agree."""

    place: str
    """`file`, `schema`, `event 7`, `entry 12 (ACCESSION)`, `compound 3`."""
    found: str

    def __str__(self) -> str:
        return f"{self.place}: {self.found}"


@dataclass(frozen=True, slots=True)
class VerifyReport:
    """Outcome of a verification."""

    path: str
    schema_version: int
    fingerprint: str
    """Head of the chain as stored; empty when there is none."""
    n_events: int
    n_entries: int
    problems: tuple[Problem, ...]
    """In the order found, the first 100."""

    @property
    def is_intact(self) -> bool:
        """Whether everything agrees."""
        return not self.problems

    @property
    def exit_code(self) -> int:
        """0 intact, 4 damaged."""
        return 0 if self.is_intact else 4


def verify_library(path: Path | str, *, progress: Progress | None = None) -> VerifyReport:
    """What recomputing all hashes and rules of a library finds.

    Parameters
    ----------
    path : Path or str
    progress : callable, optional
        Called with the number of entries checked.

    Returns
    -------
    VerifyReport
        Damage is a finding, not an error.

    Raises
    ------
    LibraryMissing, LibraryError, LibraryBusy
        If the file cannot be opened as a library at all.
    LibraryVersionError
        If it is of a newer schema version than this program knows.
    """
    path = Path(path)
    try:
        connection = connect_any_version(path, writable=False)
    except LibraryDamaged as error:
        return VerifyReport(str(path), 0, "", 0, 0, (Problem("file", error.found),))
    problems: list[Problem] = []
    counts, version = (0, 0), 0
    fingerprint = ""
    try:
        with translated(path):
            version = read_version(connection, path)
            if version > SCHEMA_VERSION:
                raise wrong_version(path, version)
            for problem in _find_problems(connection, version, progress):
                problems.append(problem)
                if len(problems) >= MAX_PROBLEMS:
                    break
            counts = connection.execute("SELECT (SELECT count(*) FROM event), (SELECT count(*) FROM entry)").fetchone()
            head = connection.execute("SELECT hash FROM event ORDER BY seq DESC LIMIT 1").fetchone()
            fingerprint = str(head[0]) if head else ""
    except LibraryDamaged as error:
        problems.append(Problem("file", error.found))
    finally:
        connection.close()
    return VerifyReport(str(path), version, fingerprint, counts[0], counts[1], tuple(problems))


def _find_problems(connection: sqlite3.Connection, version: int, progress: Progress | None) -> Iterator[Problem]:
    strange = [Problem("schema", f"{name} {fault}") for name, fault in find_schema_faults(connection, version)]
    if strange:
        yield from strange
        return  # everything else reads these tables
    yield from _check_file(connection)
    fault = find_chain_fault(read_events(connection))
    if fault:
        place, _, found = fault.partition(": ")
        yield Problem(place, found or "missing")
    yield from _check_entries(connection, progress)
    yield from _check_digests(connection)
    yield from _check_compounds(connection)
    yield from _check_standing(connection)
    if version >= REPORTED_SINCE and (fault := find_reported_fault(connection)):
        place, _, found = fault.partition(": ")
        yield Problem(place, found or "missing")


def _check_file(connection: sqlite3.Connection) -> Iterator[Problem]:
    for (message,) in connection.execute("PRAGMA integrity_check(20)"):
        if message != "ok":
            yield Problem("file", str(message).replace("\n", " "))
    for table, rowid, parent, _ in connection.execute("PRAGMA foreign_key_check"):
        yield Problem("file", f"row {rowid} of {table} points at a missing row of {parent}")


def _check_entries(connection: sqlite3.Connection, progress: Progress | None) -> Iterator[Problem]:
    columns = ", ".join(f"entry.{name}" for name in CONTENT_COLUMNS)
    rows = connection.execute(
        f"SELECT entry.id, entry.content_hash, compound.key, source_peaks.mz, source_peaks.intensity, {columns}"  # noqa: S608
        " FROM entry LEFT JOIN compound ON compound.id = entry.compound_id"
        " LEFT JOIN source_peaks ON source_peaks.entry_id = entry.id ORDER BY entry.id"
    )
    for number, (entry_id, stated, key, source_mz, source_intensity, *values) in enumerate(rows):
        if progress and number % 500 == 0:
            progress(number, "entries")
        content = dict(zip(CONTENT_COLUMNS, values, strict=True))
        place = f"entry {entry_id} ({content['accession']})"
        if key is None or not (isinstance(source_mz, bytes) and isinstance(source_intensity, bytes)):
            # A flipped bit can turn a blob's type in the file into text or a number.
            yield Problem(place, "its compound or its source peaks are missing or of another type")
        elif content_hash(content, key, source_mz, source_intensity) != stated:
            yield Problem(place, "its content does not agree with its content hash")


def _check_digests(connection: sqlite3.Connection) -> Iterator[Problem]:
    vouched: set[int] = set()
    for event in _readable_events(connection):
        stated = event.details.get("digest")
        if stated is None:
            continue
        hashes = connection.execute("SELECT content_hash FROM entry WHERE event_seq = ? ORDER BY id", (event.seq,))
        if digest_of(str(row[0]) for row in hashes) != stated:  # a flipped bit can leave no text there
            yield Problem(f"event {event.seq}", "the entries it vouches for are not those in the library")
        vouched.add(event.seq)
    for (seq,) in connection.execute("SELECT DISTINCT event_seq FROM entry"):
        if seq not in vouched:
            yield Problem(f"event {seq}", "entries name it, but it does not vouch for them")


def _readable_events(connection: sqlite3.Connection) -> Iterator[Event]:
    """Events whose content agrees with its hash; the others have been reported."""
    return (
        event
        for event in read_events(connection)
        if isinstance(event.content, str) and sha256_of(event.content) == event.content_hash
    )


def _check_compounds(connection: sqlite3.Connection) -> Iterator[Problem]:
    rows = connection.execute(
        "SELECT compound.id, compound.name IS entry.name AND (compound.is_labelled"
        " OR (compound.formula IS entry.formula AND compound.smiles IS entry.smiles))"
        " FROM compound LEFT JOIN entry ON entry.id ="
        " (SELECT min(id) FROM entry WHERE compound_id = compound.id) ORDER BY compound.id"
    )
    for compound_id, agrees in rows:
        if not agrees:
            yield Problem(f"compound {compound_id}", "it does not agree with its first entry")


def _check_standing(connection: sqlite3.Connection) -> Iterator[Problem]:
    told: dict[tuple[int, int], str] = {}
    for event in _readable_events(connection):
        for entry_id, status in event.details.get("standing", ()):
            told[(entry_id, event.seq)] = status
    stored = {
        (entry_id, seq): status
        for entry_id, seq, status in connection.execute("SELECT entry_id, event_seq, status FROM standing")
    }
    for entry_id, seq in sorted(told.keys() | stored.keys(), key=lambda pair: (pair[1], pair[0])):
        if told.get((entry_id, seq)) != stored.get((entry_id, seq)):
            yield Problem(f"entry {entry_id}", f"its standing does not agree with event {seq}")
