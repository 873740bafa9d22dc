"""The case file: what is on the bench and what people decided about it, in one SQLite file.

Queries, results, rejections and decisions are only added. Every method is one transaction: after a power cut it has
happened or it has not.
"""

from __future__ import annotations

import json
import sqlite3
import threading
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from identify.errors import LibraryError
from identify.library.connection import transaction, translated
from identify.records import Rejection, SpectrumRecord
from identify.workbench.case_rows import STATES, NewQuery, QueryRow, pack, unpack
from identify.workbench.case_schema import APPLICATION_ID, SCHEMA_VERSION, TABLES, TRIGGERS
from identify.workbench.record_json import record_from_dict, record_to_dict, rejection_from_dict, rejection_to_dict


def open_case(path: Path, *, busy_timeout_s: float = 10.0) -> CaseFile:
    """The case file at a path, made when there is none.

    Parameters
    ----------
    path : Path
    busy_timeout_s : float

    Returns
    -------
    CaseFile

    Raises
    ------
    LibraryError
        If the file is of another kind or version, or cannot be opened.
    """
    with translated(path):
        connection = sqlite3.connect(path, isolation_level=None, timeout=busy_timeout_s, check_same_thread=False)
        try:
            _prepare(connection, path)
        except BaseException:
            connection.close()
            raise
    return CaseFile(path, connection)


def _prepare(connection: sqlite3.Connection, path: Path) -> None:
    connection.execute("PRAGMA trusted_schema = OFF")
    connection.execute("PRAGMA foreign_keys = ON")
    with transaction(connection):
        (application,) = connection.execute("PRAGMA application_id").fetchone()
        (version,) = connection.execute("PRAGMA user_version").fetchone()
        (n_tables,) = connection.execute("SELECT count(*) FROM sqlite_schema").fetchone()
        if (application, version, n_tables) == (0, 0, 0):
            for statement in _statements(TABLES + TRIGGERS):
                connection.execute(statement)
            connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
            connection.execute(f"PRAGMA user_version = {SCHEMA_VERSION}")
        elif (application, version) != (APPLICATION_ID, SCHEMA_VERSION):
            raise LibraryError(
                "case file", where=str(path), found=f"another kind of file (version {version})",
                expected=f"a case file of version {SCHEMA_VERSION}",
            )  # fmt: skip
    connection.execute("PRAGMA journal_mode = WAL")
    connection.execute("PRAGMA synchronous = FULL")


def _statements(script: str) -> Iterator[str]:
    statement = ""
    for line in script.splitlines():
        statement += line + "\n"
        if sqlite3.complete_statement(statement):
            yield statement
            statement = ""


class CaseFile:
    """An open case file; made by `open_case`. May be used from several threads."""

    def __init__(self, path: Path, connection: sqlite3.Connection) -> None:
        self.path = path
        self._connection = connection
        self._lock = threading.RLock()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file."""
        with self._lock:
            self._connection.close()

    def state(self) -> tuple[object, ...]:
        """Something that is the same only as long as nobody, here or elsewhere, has written to the file."""
        with self.reading() as connection:
            (by_others,) = connection.execute("PRAGMA data_version").fetchone()
            files = (self.path, self.path.with_name(self.path.name + "-wal"))
            told = [(found.st_mtime_ns, found.st_size) for found in (path.stat() for path in files if path.exists())]
            return (by_others, connection.total_changes, *told)

    @contextmanager
    def reading(self) -> Iterator[sqlite3.Connection]:
        """The connection, locked to this thread.

        Raises
        ------
        LibraryError
            Translated from sqlite3.
        """
        with self._lock, translated(self.path):
            yield self._connection

    @contextmanager
    def writing(self) -> Iterator[sqlite3.Connection]:
        """The connection inside one transaction.

        Raises
        ------
        LibraryError
            Translated from sqlite3.
        """
        with self._lock, translated(self.path), transaction(self._connection):
            yield self._connection

    def add_queries(
        self, job_id: int, queries: Sequence[NewQuery], *, who: str, at: str, run_id: int | None
    ) -> list[tuple[int, int]]:
        """Ids of query and result of each that was added; one that a job interrupted earlier has added is left as it is."""
        added: list[tuple[int, int]] = []
        with self.writing() as connection:
            for query in queries:
                name, source, time_s = _describe(query.record)
                cursor = connection.execute(
                    "INSERT OR IGNORE INTO query (job_id, number, run_id, name, source, time_s, record)"
                    " VALUES (?, ?, ?, ?, ?, ?, ?)",
                    (job_id, query.number, run_id, name, source, time_s, pack(record_to_dict(query.record))),
                )
                if cursor.rowcount == 1 and cursor.lastrowid is not None:
                    query_id = cursor.lastrowid
                    added.append((query_id, _insert_result(connection, query_id, query.document, who, at)))
        return added

    def add_result(self, query_id: int, document: Mapping[str, Any], *, who: str, at: str) -> int:
        """Id of a further result of a query."""
        with self.writing() as connection:
            return _insert_result(connection, query_id, document, who, at)

    def numbers_done(self, job_id: int) -> set[int]:
        """Numbers of the queries a job has added."""
        with self.reading() as connection:
            return {number for (number,) in connection.execute("SELECT number FROM query WHERE job_id = ?", (job_id,))}

    def add_rejections(self, job_id: int, items: Iterable[Rejection]) -> None:
        """Keep what a job could not use; once for each job."""
        with self.writing() as connection:
            if connection.execute("SELECT 1 FROM rejection WHERE job_id = ?", (job_id,)).fetchone() is None:
                rows = [(job_id, json.dumps(rejection_to_dict(item))) for item in items]
                connection.executemany("INSERT INTO rejection (job_id, item) VALUES (?, ?)", rows)

    def rejections(self, job_id: int, limit: int = 200) -> list[Rejection]:
        """What a job could not use."""
        with self.reading() as connection:
            rows = connection.execute(
                "SELECT item FROM rejection WHERE job_id = ? ORDER BY id LIMIT ?", (job_id, limit)
            ).fetchall()
        return [rejection_from_dict(json.loads(item)) for (item,) in rows]

    def count_rejections(self) -> dict[int, int]:
        """Number of rejections by job."""
        with self.reading() as connection:
            return dict(connection.execute("SELECT job_id, count(*) FROM rejection GROUP BY job_id").fetchall())

    def query(self, query_id: int) -> QueryRow | None:
        """One query with its latest result and decision."""
        found = self.queries(only=query_id)
        return found[0] if found else None

    def queries(
        self,
        *,
        only: int | None = None,
        run_id: int | None = None,
        state: str = "",
        text: str = "",
        in_runs: bool = True,
        limit: int = 100,
        offset: int = 0,
    ) -> list[QueryRow]:
        """Queries with latest result and decision: components of a run by number, everything else newest first."""
        clause, values = _condition(only, run_id, state, text, in_runs)
        order = "number" if run_id is not None else "job_id DESC, number"
        with self.reading() as connection:
            rows = connection.execute(
                f"{_LIST} WHERE {clause} ORDER BY {order} LIMIT ? OFFSET ?", (*values, limit, offset)
            ).fetchall()
        return [QueryRow(*row) for row in rows]

    def count_queries(self, *, text: str = "", in_runs: bool = True) -> dict[str, int]:
        """Number of queries by state; without components of runs on request."""
        clause, values = _condition(None, None, "", text, in_runs)
        with self.reading() as connection:
            rows = connection.execute(
                f"SELECT state, count(*) FROM ({_LIST}) AS item WHERE {clause} GROUP BY state",  # noqa: S608
                values,
            ).fetchall()
        return {state: dict(rows).get(state, 0) for state in STATES}

    def neighbours(self, query_id: int) -> tuple[int | None, int | None]:
        """Ids of the queries before and after in the order of the work list."""
        with self.reading() as connection:
            job_id, number = connection.execute("SELECT job_id, number FROM query WHERE id = ?", (query_id,)).fetchone()
            before = connection.execute(
                "SELECT id FROM query WHERE job_id > ? OR (job_id = ? AND number < ?) ORDER BY job_id, number DESC LIMIT 1",
                (job_id, job_id, number),
            ).fetchone()
            after = connection.execute(
                "SELECT id FROM query WHERE job_id < ? OR (job_id = ? AND number > ?) ORDER BY job_id DESC, number LIMIT 1",
                (job_id, job_id, number),
            ).fetchone()
        return (before[0] if before else None, after[0] if after else None)

    def record(self, query_id: int) -> SpectrumRecord:
        """The record a query was read as.

        Raises
        ------
        LibraryError
            If there is no such query.
        """
        with self.reading() as connection:
            row = connection.execute("SELECT record FROM query WHERE id = ?", (query_id,)).fetchone()
        if row is None:
            raise LibraryError("query", where=str(self.path), found=f"no query {query_id}", expected="a known number")
        return record_from_dict(unpack(row[0], self.path))

    def document(self, result_id: int) -> dict[str, Any]:
        """The stored result contract of one result.

        Raises
        ------
        LibraryError
            If there is no such result.
        """
        with self.reading() as connection:
            row = connection.execute("SELECT document FROM result WHERE id = ?", (result_id,)).fetchone()
        if row is None:
            raise LibraryError(
                "result", where=str(self.path), found=f"no result {result_id}", expected="a known number"
            )
        return unpack(row[0], self.path)

    def count_run(self, run_id: int) -> dict[str, dict[str, int]]:
        """Number of a run's components by level of the claim, and by state."""
        counts: dict[str, dict[str, int]] = {}
        with self.reading() as connection:
            for column in ("level", "state"):
                text = f"SELECT {column}, count(*) FROM ({_LIST}) AS item WHERE run_id = ? GROUP BY {column}"  # noqa: S608
                rows = connection.execute(text, (run_id,))
                counts[column] = dict(rows.fetchall())
        return counts

    def plans(self, limit: int = 500) -> list[tuple[int, str, str, list[dict[str, Any]]]]:
        """Id, name, state and proposed measurements of the queries nobody has accepted or rejected.

        Of a run's components, only those with a claim on a compound or its isomers, or marked for follow-up.
        """
        with self.reading() as connection:
            rows = connection.execute(_PLANS, (limit,)).fetchall()
        return [(query_id, name, state, json.loads(plans)) for query_id, name, state, plans in rows]

    def results_of(self, query_id: int) -> list[tuple[int, str, str]]:
        """Id, time and maker of every result of a query, oldest first."""
        with self.reading() as connection:
            return connection.execute(
                "SELECT id, made_at, who FROM result WHERE query_id = ? ORDER BY id", (query_id,)
            ).fetchall()

    def add_run(self, job_id: int, name: str, at: str, data: Mapping[str, Any]) -> int:
        """Id of the run a job has read; the one it has added already when it was interrupted."""
        with self.writing() as connection:
            connection.execute(
                "INSERT OR IGNORE INTO run (job_id, name, at, data) VALUES (?, ?, ?, ?)", (job_id, name, at, pack(data))
            )
            (run_id,) = connection.execute("SELECT id FROM run WHERE job_id = ?", (job_id,)).fetchone()
        return int(run_id)

    def runs(self, limit: int = 200) -> list[tuple[int, int, str, str]]:
        """Id, job, name and time of every run, newest first."""
        with self.reading() as connection:
            return connection.execute(
                "SELECT id, job_id, name, at FROM run ORDER BY id DESC LIMIT ?", (limit,)
            ).fetchall()

    def run(self, run_id: int) -> tuple[int, str, str, dict[str, Any]] | None:
        """Job, name, time and data of a run."""
        with self.reading() as connection:
            row = connection.execute("SELECT job_id, name, at, data FROM run WHERE id = ?", (run_id,)).fetchone()
        return None if row is None else (row[0], row[1], row[2], unpack(row[3], self.path))


_LATEST_RESULT = "(SELECT max(id) FROM result WHERE query_id = query.id)"
_LATEST_DECISION = "(SELECT max(seq) FROM decision WHERE query_id = query.id AND kind != 'note')"
_LIST = (
    "SELECT query.id, query.job_id, query.number, query.run_id, query.name, query.source, query.time_s,"  # noqa: S608
    " result.id AS result_id, result.made_at, result.level, result.statement, result.probability, result.best,"
    " CASE decision.kind WHEN 'accept' THEN 'accepted' WHEN 'reject' THEN 'rejected' WHEN 'follow-up' THEN 'follow-up'"
    " ELSE 'open' END AS state, coalesce(decision.level, ''), coalesce(decision.compound, ''),"
    " coalesce(decision.who, ''), coalesce(decision.at, '')"
    f" FROM query JOIN result ON result.id = {_LATEST_RESULT}"
    f" LEFT JOIN decision ON decision.seq = {_LATEST_DECISION}"
)

_PLANS = (
    f"SELECT item.id, item.name, state, follow_up FROM ({_LIST}) AS item JOIN result ON result.id = result_id"  # noqa: S608
    " WHERE state = 'follow-up'"
    " OR (state = 'open' AND (item.run_id IS NULL OR item.level NOT IN ('no claim', 'class')))"
    " ORDER BY item.id DESC LIMIT ?"
)


def _condition(only: int | None, run_id: int | None, state: str, text: str, in_runs: bool) -> tuple[str, list[Any]]:
    escaped = text.replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_")
    pattern = f"%{escaped}%"
    like = "(name LIKE ? ESCAPE '\\' OR source LIKE ? ESCAPE '\\' OR statement LIKE ? ESCAPE '\\' OR best LIKE ? ESCAPE '\\')"
    conditions: list[tuple[bool, str, tuple[Any, ...]]] = [
        (only is not None, "query.id = ?", (only,)),
        (run_id is not None, "run_id = ?", (run_id,)),
        (bool(state), "state = ?", (state,)),
        (bool(text), like, (pattern,) * 4),
        (not in_runs, "run_id IS NULL", ()),
    ]
    used = [(clause, values) for asked, clause, values in conditions if asked]
    return " AND ".join(clause for clause, _ in used) or "1", [value for _, some in used for value in some]


def _describe(record: SpectrumRecord) -> tuple[str, str, float | None]:
    return record.identity.name or record.title, str(record.source), record.retention.time_s


def _insert_result(
    connection: sqlite3.Connection, query_id: int, document: Mapping[str, Any], who: str, at: str
) -> int:
    found = document["queries"][0]
    claim, hits = found["claim"], found["hits"]
    cursor = connection.execute(
        "INSERT INTO result (query_id, made_at, who, level, statement, probability, best, follow_up, document)"
        " VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
        (
            query_id,
            at,
            who,
            claim["level"],
            claim["statement"],
            claim["probability"],
            hits[0]["name"] if hits else "",
            json.dumps(found["follow_up"]),
            pack(document),
        ),
    )
    return int(cursor.lastrowid or 0)
