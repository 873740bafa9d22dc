"""The follow-up of a batch as a work list: one row per measurement, most information for the effort first."""

from __future__ import annotations

import csv
import io
from pathlib import Path

from identify.ranking.follow_up import build_work_list
from identify.records import Report
from identify.writers.files import write_atomically
from identify.writers.results_csv import make_harmless

COLUMNS = ("place", "measurement", "priority", "n_queries", "query_ids", "query_names", "reasons", "what_decides")


def write_work_list(path: Path, report: Report) -> None:
    """Nothing comes out; afterwards `path` holds the work list (RFC 4180, UTF-8), whole or not at all.

    Parameters
    ----------
    path : Path
    report : Report

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    write_atomically(path, work_list_to_csv(report).encode("utf-8", "backslashreplace"))


def work_list_to_csv(report: Report) -> str:
    """CSV text of the follow-up of all queries: what helps several queries comes once, with its priorities added.

    Parameters
    ----------
    report : Report

    Returns
    -------
    str
        The header of `COLUMNS`, then one row per measurement; lines end with CR LF. Cells for several queries are separated by
        " | ", in the same order.
    """
    names = {
        found.query.id: found.query.record.identity.name or found.query.record.title for found in report.identifications
    }
    decides = {
        (found.query.id, plan.action): plan.decides for found in report.identifications for plan in found.follow_up
    }
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\r\n")
    writer.writerow(COLUMNS)
    for place, item in enumerate(build_work_list(report.identifications), start=1):
        cells = (
            item.action,
            round(item.priority, 4),
            len(item.queries),
            " | ".join(item.queries),
            " | ".join(names[query] for query in item.queries),
            " | ".join(item.reasons),
            " | ".join(decides[query, item.action] for query in item.queries),
        )
        writer.writerow((place, *(make_harmless(cell) if isinstance(cell, str) else cell for cell in cells)))
    return stream.getvalue()
