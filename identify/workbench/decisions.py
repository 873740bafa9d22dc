"""What people decided: added to the case file, chained by hash like a library's events, each on the result it was made on."""

from __future__ import annotations

import hashlib
import sqlite3
from dataclasses import asdict

from identify.errors import LibraryConflict, UsageError, quote
from identify.library.events import GENESIS, canonical_json, sha256_of
from identify.workbench.case_file import CaseFile
from identify.workbench.case_rows import Decision

MAX_NOTE = 4000
KINDS = ("accept", "reject", "follow-up", "note", "reopen")


def decide(
    case: CaseFile,
    query_id: int,
    *,
    kind: str,
    who: str,
    at: str,
    level: str = "",
    compound: str = "",
    accession: str = "",
    note: str = "",
    result_id: int,
    seen: int,
) -> Decision:
    """The decision, kept.

    Parameters
    ----------
    query_id : int
    kind, who, at, level, compound, accession, note : str
    result_id : int
        The result that was looked at; must be the latest one.
    seen : int
        Number of the last decision on this query that was looked at; 0 for none.

    Returns
    -------
    Decision

    Raises
    ------
    LibraryConflict
        If a newer result or decision exists than the one looked at.
    UsageError
        For an unknown kind or a note that is too long.
    """
    if kind not in KINDS:
        raise UsageError("decision", found=quote(kind), expected="accept, reject, follow-up, note or reopen")
    if len(note) > MAX_NOTE:
        raise UsageError("note", found=f"{len(note):,} characters", expected=f"at most {MAX_NOTE:,}")
    with case.writing() as connection:
        latest = connection.execute("SELECT max(id) FROM result WHERE query_id = ?", (query_id,)).fetchone()[0]
        last = connection.execute(
            "SELECT coalesce(max(seq), 0) FROM decision WHERE query_id = ?", (query_id,)
        ).fetchone()[0]
        if (latest, last) != (result_id, seen):
            raise LibraryConflict(
                "decision", found="a newer result or decision on this query than the one you looked at",
                expected="the latest", hint="Look at the page again, then decide.",
            )  # fmt: skip
        row = connection.execute("SELECT seq, hash FROM decision ORDER BY seq DESC LIMIT 1").fetchone()
        seq, previous = (row[0] + 1, row[1]) if row else (1, GENESIS)
        made = Decision(seq, query_id, result_id, at, who, kind, level, compound, accession, note.strip(), previous, "")
        digest = decision_hash(made, connection)
        values = {**asdict(made), "hash": digest}
        connection.execute(
            f"INSERT INTO decision ({', '.join(values)}) VALUES ({', '.join('?' * len(values))})",  # noqa: S608
            tuple(values.values()),
        )
    return Decision(**values)


def list_decisions(case: CaseFile, query_id: int | None = None) -> list[Decision]:
    """Decisions in order, of one query or of all."""
    with case.reading() as connection:
        rows = connection.execute(
            "SELECT seq, query_id, result_id, at, who, kind, level, compound, accession, note, previous_hash, hash"
            " FROM decision WHERE ? IS NULL OR query_id = ? ORDER BY seq",
            (query_id, query_id),
        ).fetchall()
    return [Decision(*row) for row in rows]


def find_fault(case: CaseFile) -> str:
    """First thing that is wrong with the chain of decisions, in words; empty when it is intact."""
    previous = GENESIS
    with case.reading() as connection:
        for number, made in enumerate(list_decisions(case), start=1):
            if made.seq != number or made.previous_hash != previous:
                return f"decision {number}: it does not continue the one before"
            if decision_hash(made, connection) != made.hash:
                return f"decision {number}: its hash does not agree with its fields or with the result it names"
            previous = made.hash
    return ""


def decision_hash(made: Decision, connection: sqlite3.Connection) -> str:
    """SHA-256 over a decision and the result it was made on.

    Parameters
    ----------
    made : Decision
    connection : sqlite3.Connection

    Returns
    -------
    str
    """
    (document,) = connection.execute("SELECT document FROM result WHERE id = ?", (made.result_id,)).fetchone()
    fields = {name: value for name, value in asdict(made).items() if name != "hash"}
    return sha256_of(canonical_json({**fields, "result": hashlib.sha256(document).hexdigest()}))
