"""The follow-up of a batch as a work list: one row per measurement, most information for the effort first."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from identify.ranking.follow_up import build_work_list
from identify.records import Report
from identify.writers.rows_csv import write_rows

COLUMNS = ("place", "measurement", "priority", "n_queries", "query_ids", "query_names", "reasons", "what_decides")


def write_work_list(path: Path, report: Report) -> None:
    """Nothing comes out; afterwards `path` holds the follow-up of all queries as CSV, whole or not at all.

    Parameters
    ----------
    path : Path
    report : Report

    Raises
    ------
    UsageError
        If the file cannot be written.

    Notes
    -----
    What helps several queries comes once, with its priorities added; its cells for several queries are separated by " | ",
    in the same order.
    """
    write_rows(path, COLUMNS, _rows(report))


def _rows(report: Report) -> Iterator[tuple[object, ...]]:
    names = {
        found.query.id: found.query.record.identity.name or found.query.record.title for found in report.identifications
    }
    decides = {
        (found.query.id, plan.action): plan.decides for found in report.identifications for plan in found.follow_up
    }
    for place, item in enumerate(build_work_list(report.identifications), start=1):
        yield (
            place,
            item.action,
            round(item.priority, 4),
            len(item.queries),
            " | ".join(item.queries),
            " | ".join(names[query] for query in item.queries),
            " | ".join(item.reasons),
            " | ".join(decides[query, item.action] for query in item.queries),
        )
