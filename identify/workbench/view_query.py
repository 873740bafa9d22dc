"""Query: one spectrum, everything found for it, and what people decide about it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, replace
from typing import Annotated, Any, Literal

from fastapi import APIRouter, Form, Query, Request

from identify.errors import UsageError, quote
from identify.pipeline.why_not import WhyNot, explain_absence
from identify.records import Candidate, ClaimLevel, EntryStatus, Identification
from identify.report.words import LONG_TEXT, visible_text
from identify.settings import CleaningSettings
from identify.workbench.case_rows import Decision, QueryRow
from identify.workbench.decisions import decide, list_decisions
from identify.workbench.desk import Desk, NotFound
from identify.workbench.drawn_query import draw_query
from identify.workbench.pages import Id, Outcome, TheDesk, ThePerson, View, add_action, add_view, workbench_of
from identify.workbench.record_json import record_to_dict
from identify.workbench.sessions import Person
from identify.workbench.stored import settings_of
from identify.workbench.view_work_list import query_line

LEVELS = tuple(level for level in ClaimLevel if level is not ClaimLevel.NO_CLAIM)


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/queries/{query_id}", show_query)
    add_action(pages, twins, "/queries/{query_id}/decisions", add_decision)
    add_action(pages, twins, "/queries/{query_id}/cleaning", clean_again)


def find_query(desk: Desk, query_id: int) -> QueryRow:
    """The query with this number.

    Parameters
    ----------
    desk : Desk
    query_id : int

    Returns
    -------
    QueryRow

    Raises
    ------
    NotFound
        If there is none.
    """
    row = desk.case.query(query_id)
    if row is None:
        raise NotFound("query", found=str(query_id), expected="a number from the work list")
    return row


def show_query(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    query_id: Id,
    result: Annotated[int | None, Query(ge=1, le=2**40)] = None,
    why_not: Annotated[str, Query(max_length=100)] = "",
) -> View:
    """The query, its latest (or another) result, its decisions, and why a compound is not the answer.

    Raises
    ------
    NotFound
        If there is no such query or result.
    """
    row = find_query(desk, query_id)
    results = desk.case.results_of(query_id)
    if result is not None and result not in [item[0] for item in results]:
        raise NotFound("result", found=str(result), expected=f"one of those of query {query_id}")
    result_id = result or row.result_id
    decisions = list_decisions(desk.case, query_id)
    asked = why_not.strip()
    absent = _explain(desk, query_id, result_id, asked) if asked else ()
    before, after = desk.case.neighbours(query_id)
    line = query_line(row)
    data = {
        "query": line,
        "results": [{"id": item, "made_at": made_at, "who": who} for item, made_at, who in results],
        "decisions": [asdict(item) for item in decisions],
        "why_not": {"asked": asked, "answers": [_absence(item) for item in absent]},
        "before": before,
        "after": after,
    }

    def draw() -> dict[str, Any]:
        return _draw(desk, row, result_id, decisions)

    def more() -> dict[str, Any]:
        return {"record": record_to_dict(desk.case.record(query_id)), "result": desk.case.document(result_id)}

    return View("query.page.html", line["name"], data, draw, more)


def _explain(desk: Desk, query_id: int, result_id: int, asked: str) -> tuple[WhyNot, ...]:
    shown = desk.shown_result(query_id, result_id)
    settings = settings_of({"settings": shown.report.settings})
    return explain_absence(asked, shown.identification, desk.searchable(), settings)


def _absence(item: WhyNot) -> dict[str, Any]:
    return {
        "name": visible_text(item.name), "accession": visible_text(item.accession), "rank": item.rank,
        "reasons": [visible_text(reason, LONG_TEXT) for reason in item.reasons],
        "cosine": round(item.cosine, 6), "reverse": round(item.reverse, 6),
    }  # fmt: skip


def _draw(desk: Desk, row: QueryRow, result_id: int, decisions: list[Decision]) -> dict[str, Any]:
    return {
        "drawn": draw_query(desk, row.id, result_id),
        "is_latest": result_id == row.result_id,
        "result_id": result_id,
        "seen": decisions[-1].seq if decisions else 0,
        "decisions": decisions,
        "levels": LEVELS,
    }


def add_decision(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    query_id: Id,
    kind: Annotated[Literal["accept", "reject", "follow-up", "note", "reopen"], Form()],
    result: Annotated[int, Form(ge=1, le=2**40)],
    seen: Annotated[int, Form(ge=0, le=2**40)] = 0,
    level: Annotated[str, Form(max_length=40)] = "",
    candidate: Annotated[int, Form(ge=0, le=1000)] = 0,
    standard: Annotated[str, Form(max_length=200)] = "",
    note: Annotated[str, Form(max_length=4000)] = "",
) -> Outcome:
    """Keep what a person decided about a query.

    Raises
    ------
    NotFound
        If there is no such query or result.
    UsageError
        If something a decision needs is missing.
    LibraryConflict
        If somebody has decided in between.
    """
    row = find_query(desk, query_id)
    if result not in [item[0] for item in desk.case.results_of(query_id)]:
        raise NotFound("result", found=str(result), expected=f"one of those of query {query_id}")
    accepted: Mapping[str, str] = {}
    if kind == "accept":
        found = desk.shown_result(query_id, result).identification
        accepted = _accept(desk, person, found, level, candidate, standard, note)
    elif kind != "reopen" and not note.strip() and kind != "follow-up":
        raise UsageError("note", found="none", expected="a sentence that says why")
    made = decide(
        desk.case, row.id, kind=kind, who=person.name, at=desk.now(), note=note, result_id=result, seen=seen, **accepted
    )
    return f"/queries/{query_id}?said=decided#decide", {"decision": asdict(made)}


def _accept(
    desk: Desk, person: Person, found: Identification, level: str, rank: int, standard: str, note: str
) -> dict[str, str]:
    chosen = next((item for item in LEVELS if item.value == level), None)
    if chosen is None:
        raise UsageError("level", found=quote(level), expected=", ".join(item.value for item in LEVELS))
    picked = next((item for item in found.candidates if item.rank == rank), None)
    if picked is None:
        raise UsageError("candidate", found=str(rank), expected=f"a rank from 1 to {len(found.candidates)}")
    order = list(ClaimLevel)
    if order.index(chosen) < order.index(found.claim.level) and not note.strip():
        raise UsageError(
            "note", found=f"none, for a level above what the data support ({found.claim.level.value})",
            expected="a sentence that says what else speaks for it",
        )  # fmt: skip
    name = visible_text(picked.entry.identity.name) or picked.entry.accession
    accession = picked.entry.accession
    if chosen is ClaimLevel.CONFIRMED:
        accession = _check_confirmation(desk, picked, standard, note)
    return {"level": chosen.value, "compound": name, "accession": accession}


def _check_confirmation(desk: Desk, picked: Candidate, standard: str, note: str) -> str:
    library = next((item for item in desk.libraries if str(item.path) == picked.library), None)
    own = (
        library.find_entries(accession=standard, statuses={EntryStatus.OWN_STANDARD}, limit=1)
        if library and standard
        else []
    )
    if not own or own[0].compound_id != picked.entry.compound_id:
        raise UsageError(
            "confirmation", found="no own standard of this compound", expected="one that is in the library, accepted by review",
            hint="Propose the standard, have it reviewed, then confirm.",
        )  # fmt: skip
    if not note.strip():
        raise UsageError("note", found="none", expected="what was compared with the standard, and by which method")
    return own[0].accession


def clean_again(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    query_id: Id,
    air_and_water: Annotated[bool, Form()] = False,
    bleed: Annotated[bool, Form()] = False,
    noise: Annotated[bool, Form()] = False,
) -> Outcome:
    """Identify again with some cleaning steps switched; the earlier result is kept."""
    row = find_query(desk, query_id)
    settings = settings_of(desk.case.document(row.result_id))
    fraction = desk.settings.cleaning.noise_fraction if noise else 0.0
    settings = replace(settings, cleaning=CleaningSettings(air_and_water, bleed, noise, fraction))
    document = workbench_of(request).jobs.identifier.identify(desk.case.record(query_id), row.number, settings)
    result = desk.case.add_result(query_id, document, who=person.name, at=desk.now())
    return f"/queries/{query_id}?said=cleaned", {"result": result}
