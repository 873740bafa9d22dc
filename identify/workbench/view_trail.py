"""Trail: every event of the libraries and every decision of the case, and whether both chains are intact."""

from __future__ import annotations

from dataclasses import asdict
from typing import Annotated, Any

from fastapi import APIRouter, Query, Request

from identify.report.words import file_name, visible_text
from identify.workbench.decisions import list_decisions
from identify.workbench.job_list import list_jobs
from identify.workbench.pages import Outcome, TheDesk, ThePerson, View, add_action, add_view, workbench_of
from identify.workbench.view_work_list import job_line

PAGE_SIZE = 100


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/trail", show_trail)
    add_action(pages, twins, "/trail/verify", verify)


def show_trail(
    desk: TheDesk, person: ThePerson, request: Request, page: Annotated[int, Query(ge=1, le=100_000)] = 1
) -> View:
    """Decisions and events, newest first, and the last verification."""
    first = (page - 1) * PAGE_SIZE
    decisions = list_decisions(desk.case)[::-1]
    libraries = []
    longest = len(decisions)
    for number, library in enumerate(desk.libraries, start=1):
        events = library.events()[::-1]
        longest = max(longest, len(events))
        shown = [
            {"seq": event.seq, "at": event.at, "who": visible_text(event.who), "kind": event.kind,
             "reason": visible_text(event.reason, 2000), "hash": event.hash}
            for event in events[first : first + PAGE_SIZE]
        ]  # fmt: skip
        libraries.append(
            {"number": number, "name": file_name(str(library.path)), "fingerprint": library.fingerprint,
             "n_events": len(events), "events": shown}
        )  # fmt: skip
    checks = [job_line(job) for job in list_jobs(desk.case, limit=200) if job.kind == "verify"][:1]
    data: dict[str, Any] = {
        "libraries": libraries,
        "decisions": [
            {**asdict(made), "note": visible_text(made.note, 4000)} for made in decisions[first : first + PAGE_SIZE]
        ],
        "n_decisions": len(decisions),
        "case": file_name(str(desk.case.path)),
        "check": checks[0] if checks else None,
        "page": page,
        "pages": max(1, -(-longest // PAGE_SIZE)),
    }
    return View("trail.html", "Trail", data, lambda: {"fault": desk.find_fault()})


def verify(desk: TheDesk, person: ThePerson, request: Request) -> Outcome:
    """Recompute every hash of the libraries, in the background."""
    job = workbench_of(request).jobs.add("verify", "verification of the libraries", person.name, {})
    return "/trail?said=verifying", {"job": job}
