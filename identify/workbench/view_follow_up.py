"""Follow-up: what to fetch from the store room and what to put into the next sequence, over all open queries."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter, Request

from identify.report.words import sentence, visible_text
from identify.workbench.decisions import list_decisions
from identify.workbench.desk import Desk
from identify.workbench.pages import TheDesk, ThePerson, View, add_view

MAX_QUERIES = 500


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/follow-up", show_follow_up)


def show_follow_up(desk: TheDesk, person: ThePerson, request: Request) -> View:
    """Proposed measurements, each once, with the queries it would help; and what people asked for."""
    plans = gather_plans(desk)
    data = {
        "store_room": [plan for plan in plans if plan["is_material"]],
        "sequence": [plan for plan in plans if not plan["is_material"]],
        "asked": _asked(desk),
    }
    return View("follow_up.html", "Follow-up", data)


def gather_plans(desk: Desk) -> list[dict[str, Any]]:
    """Proposals of all queries nobody has closed, the same action once, most informative first.

    Parameters
    ----------
    desk : Desk

    Returns
    -------
    list of dict
    """
    by_action: dict[str, dict[str, Any]] = {}
    for query_id, name, state, proposals in desk.case.plans(MAX_QUERIES):
        for proposal in proposals:
            action = visible_text(proposal["action"], 400)
            plan = by_action.setdefault(
                action,
                {"action": action, "is_material": "standard" in action, "decides": sentence(proposal["decides"]),
                 "information": 0.0, "queries": []},
            )  # fmt: skip
            plan["information"] = round(plan["information"] + proposal["priority"], 6)
            shown = visible_text(name) or f"query {query_id}"
            plan["queries"].append(
                {"id": query_id, "name": shown, "state": state, "reason": sentence(proposal["reason"])}
            )
    return sorted(by_action.values(), key=lambda plan: (-plan["information"], plan["action"]))


def _asked(desk: Desk) -> list[dict[str, Any]]:
    rows = {row.id: row for row in desk.case.queries(state="follow-up", limit=MAX_QUERIES)}
    return [
        {"query": made.query_id, "name": visible_text(rows[made.query_id].name), "who": made.who, "at": made.at,
         "note": visible_text(made.note, 4000)}
        for made in list_decisions(desk.case)
        if made.query_id in rows and made.kind == "follow-up"
    ]  # fmt: skip
