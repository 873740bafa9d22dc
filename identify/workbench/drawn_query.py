"""A stored result as the parts of its page, drawn once: a result never changes, so its drawing is kept as long as the libraries
stay as they are."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from identify.records import Candidate, EntryStatus, Identification
from identify.report.context import build_page
from identify.report.words import probability_text, visible_text
from identify.workbench.desk import Desk
from identify.workbench.rendering import environment
from identify.workbench.stored import Change, settings_of

N_WITH_STANDARDS = 5


@dataclass(frozen=True, slots=True)
class DrawnQuery:
    """HTML of the parts of a query's page, and what its forms offer."""

    found: str
    steps: str
    cleaning: str
    sources: str
    claimed: str
    choices: tuple[dict[str, Any], ...]
    standards: tuple[dict[str, Any], ...]
    changes: tuple[Change, ...]
    is_newer_library: bool


def draw_query(desk: Desk, query_id: int, result_id: int) -> DrawnQuery:
    """The parts of a query's page for one of its results.

    Parameters
    ----------
    desk : Desk
    query_id, result_id : int

    Returns
    -------
    DrawnQuery

    Raises
    ------
    LibraryError
        See `identify.workbench.stored.rebuild`.
    """
    return desk.keep_drawn(result_id, lambda: draw_result(desk, query_id, result_id))


def draw_result(desk: Desk, query_id: int, result_id: int) -> DrawnQuery:
    """Like `draw_query`, but drawn afresh and not kept.

    Parameters
    ----------
    desk : Desk
    query_id, result_id : int

    Returns
    -------
    DrawnQuery

    Raises
    ------
    LibraryError
        See `identify.workbench.stored.rebuild`.
    """
    shown = desk.shown_result(query_id, result_id)
    found, page = shown.identification, build_page(shown.report)
    made_at = next(made_at for item, made_at, _ in desk.case.results_of(query_id) if item == result_id)
    context = {
        "page": page,
        "shown": page.queries[0],
        "entries": {str(candidate.rank): entry_address(desk, candidate) for candidate in found.candidates},
        "cleaning": settings_of({"settings": shown.report.settings}).cleaning,
        "query_id": query_id,
        "made_at": made_at,
    }
    parts = {
        name: environment().get_template(f"query.{name}.html").render(context)
        for name in ("found", "steps", "cleaning", "sources")
    }
    then = [state.fingerprint for state in shown.report.libraries]
    return DrawnQuery(
        **parts,
        claimed=found.claim.level.value,
        choices=tuple(_choice(candidate) for candidate in found.candidates),
        standards=tuple(_standards(desk, found)),
        changes=shown.changes,
        is_newer_library=then != [library.fingerprint for library in desk.libraries],
    )


def drawn_from_dict(values: Mapping[str, Any]) -> DrawnQuery:
    """What `dataclasses.asdict` made of drawn parts, as parts again.

    Parameters
    ----------
    values : mapping

    Returns
    -------
    DrawnQuery
    """
    whole = {name: tuple(values[name]) for name in ("choices", "standards")}
    return DrawnQuery(**{**values, **whole, "changes": tuple(Change(**change) for change in values["changes"])})


def _choice(candidate: Candidate) -> dict[str, Any]:
    name = visible_text(candidate.entry.identity.name) or candidate.entry.accession
    return {"rank": candidate.rank, "text": f"{candidate.rank}. {name}, {probability_text(candidate.probability)}"}


def entry_address(desk: Desk, candidate: Candidate) -> str:
    """Address of the page of a candidate's entry.

    Parameters
    ----------
    desk : Desk
    candidate : Candidate

    Returns
    -------
    str
    """
    paths = [str(library.path) for library in desk.libraries]
    number = paths.index(candidate.library) + 1 if candidate.library in paths else 1
    return f"/library/{number}/entries/{candidate.entry.id}"


def _standards(desk: Desk, found: Identification) -> list[dict[str, Any]]:
    """Own standards of the first candidates: what a confirmation can rest on."""
    told = []
    for candidate in found.candidates[:N_WITH_STANDARDS]:
        for library in desk.libraries:
            if str(library.path) != candidate.library:
                continue
            own = library.find_entries(
                compound_id=candidate.entry.compound_id, statuses={EntryStatus.OWN_STANDARD}, limit=20
            )
            told += [
                {"accession": e.accession, "name": visible_text(e.identity.name), "rank": candidate.rank} for e in own
            ]
    return told
