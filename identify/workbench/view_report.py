"""Report: what was decided, by whom and when, with the evidence it rests on; made for the browser's print."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, replace
from typing import Annotated, Any

from fastapi import APIRouter, Query, Request

from identify.records import Candidate
from identify.report.context import build_page
from identify.report.contexts import CandidateDetail
from identify.report.words import visible_text
from identify.workbench.case_rows import Decision, QueryRow
from identify.workbench.decisions import list_decisions
from identify.workbench.desk import Desk
from identify.workbench.pages import TheDesk, ThePerson, View, add_view
from identify.workbench.view_work_list import query_line

MAX_QUERIES = 100
DECIDED = ("accepted", "rejected", "follow-up")


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/report", show_report)


def show_report(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    job: Annotated[int | None, Query(ge=1, le=2**40)] = None,
    text: Annotated[str, Query(max_length=100)] = "",
) -> View:
    """Decided queries, of one upload or all, with their decisions."""
    rows = [row for state in DECIDED for row in desk.case.queries(state=state, text=text, limit=MAX_QUERIES)]
    rows = sorted((row for row in rows if job is None or row.job_id == job), key=lambda row: (row.job_id, row.number))
    by_query: dict[int, list[Decision]] = {}
    for made in list_decisions(desk.case):
        by_query.setdefault(made.query_id, []).append(made)
    shown = rows[:MAX_QUERIES]
    data = {
        "text": text,
        "job": job,
        "made_at": desk.now(),
        "made_by": person.name,
        "queries": [{**query_line(row), "decisions": [asdict(made) for made in by_query[row.id]]} for row in shown],
        "n_left_out": len(rows) - len(shown),
        "libraries": [
            {"path": item.state.path, "fingerprint": item.state.fingerprint, "entries": item.state.entries}
            for item in desk.searchable()
        ],
        "fault": desk.find_fault(),
    }
    return View("report.html", "Report of decisions", data, lambda: _draw(desk, shown, by_query))


def _draw(desk: Desk, rows: Sequence[QueryRow], by_query: dict[int, list[Decision]]) -> dict[str, Any]:
    """Every query with the result its decision was made on, drawn as one report so that anchors are unique."""
    lasts = [next(made for made in reversed(by_query[row.id]) if made.kind != "note") for row in rows]
    results = [desk.shown_result(row.id, last.result_id) for row, last in zip(rows, lasts, strict=True)]
    if not results:
        return {"decided": [], "page": None}
    whole = replace(results[-1].report, identifications=tuple(result.identification for result in results))
    page = build_page(whole)
    decided = [
        {
            "line": query_line(row),
            "decisions": by_query[row.id],
            "last": last,
            "shown": context,
            "detail": _accepted_detail(context.details, result.identification.candidates, last),
            "libraries": result.report.libraries,
            "program": f"{result.report.program} {result.report.version}",
        }
        for row, last, result, context in zip(rows, lasts, results, page.queries, strict=True)
    ]
    return {"decided": decided, "page": page}


def _accepted_detail(
    details: Sequence[CandidateDetail], candidates: Sequence[Candidate], last: Decision
) -> CandidateDetail | None:
    """Evidence of the accepted candidate where it is among those shown in detail, else of the first."""
    wanted = [
        place
        for place, candidate in enumerate(candidates)
        if (visible_text(candidate.entry.identity.name) or candidate.entry.accession) == last.compound
    ]
    place = wanted[0] if wanted else 0
    return details[place] if place < len(details) else None
