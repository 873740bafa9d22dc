"""The list of background work in a case file: what waits, what runs, what became of it."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from identify.workbench.case_file import CaseFile
from identify.workbench.case_rows import Job


def add_job(case: CaseFile, kind: str, name: str, who: str, at: str, options: Mapping[str, Any]) -> int:
    """Id of a new job that waits."""
    with case.writing() as connection:
        cursor = connection.execute(
            "INSERT INTO job (kind, name, who, created_at, options) VALUES (?, ?, ?, ?, ?)",
            (kind, name, who, at, json.dumps(options)),
        )
    return int(cursor.lastrowid or 0)


def find_job(case: CaseFile, job_id: int) -> Job | None:
    """The job with this id."""
    found = list_jobs(case, only=job_id)
    return found[0] if found else None


def list_jobs(case: CaseFile, *, only: int | None = None, active: bool = False, limit: int = 50) -> list[Job]:
    """Jobs, newest first; only those that are not over with `active`."""
    with case.reading() as connection:
        rows = connection.execute(
            "SELECT id, kind, name, who, created_at, options, state, n_done, n_total, message, finished_at FROM job"
            " WHERE (? IS NULL OR id = ?) AND (NOT ? OR state IN ('waiting', 'running'))"
            " ORDER BY id DESC LIMIT ?",
            (only, only, active, limit),
        ).fetchall()
    return [_job(row) for row in rows]


def next_job(case: CaseFile) -> Job | None:
    """The oldest waiting job, now marked as running."""
    with case.writing() as connection:
        row = connection.execute("SELECT min(id) FROM job WHERE state = 'waiting'").fetchone()
        if row[0] is None:
            return None
        connection.execute("UPDATE job SET state = 'running', message = '' WHERE id = ?", row)
    return find_job(case, row[0])


def report_progress(case: CaseFile, job_id: int, n_done: int, n_total: int | None, message: str) -> None:
    """Note how far a running job is."""
    with case.writing() as connection:
        connection.execute(
            "UPDATE job SET n_done = ?, n_total = ?, message = ? WHERE id = ? AND state = 'running'",
            (n_done, n_total, message, job_id),
        )


def finish_job(case: CaseFile, job_id: int, state: str, message: str, at: str) -> None:
    """End a job that is not over yet."""
    with case.writing() as connection:
        connection.execute(
            "UPDATE job SET state = ?, message = ?, finished_at = ? WHERE id = ? AND state IN ('waiting', 'running')",
            (state, message, at, job_id),
        )


def requeue_jobs(case: CaseFile) -> int:
    """How many jobs were running when the program ended; they wait again."""
    with case.writing() as connection:
        return connection.execute("UPDATE job SET state = 'waiting' WHERE state = 'running'").rowcount


def _job(row: tuple[Any, ...]) -> Job:
    job_id, kind, name, who, created_at, options, state, n_done, n_total, message, finished_at = row
    return Job(job_id, kind, name, who, created_at, json.loads(options), state, n_done, n_total, message, finished_at)
