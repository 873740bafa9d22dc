"""Standards: propose what was measured here on authentic material, review it as a second person, withdraw it."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from fastapi import APIRouter, Form, Query, Request

from identify.errors import UsageError
from identify.library.identities import resolve_identity
from identify.library.standards import (
    StandardDetails,
    propose_standard,
    review_standard,
)
from identify.library.standing import entry_history, withdraw_entry
from identify.library.store import Library
from identify.records import Entry, EntryStatus
from identify.report.words import file_name, visible_text
from identify.workbench.desk import Desk
from identify.workbench.pages import (
    Id,
    LibraryNumber,
    Outcome,
    TheDesk,
    ThePerson,
    TheReviewer,
    View,
    add_action,
    add_view,
)
from identify.workbench.view_library import audit_lines, entry_line, find_entry, standard_details
from identify.workbench.view_query import find_query
from identify.workbench.view_work_list import query_line

Line = Annotated[str, Form(max_length=300)]
Long = Annotated[str, Form(max_length=2000)]


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/standards", show_standards)
    add_action(pages, twins, "/standards", propose)
    add_action(pages, twins, "/library/{library_number}/entries/{entry_id}/review", review)
    add_action(pages, twins, "/library/{library_number}/entries/{entry_id}/withdrawal", withdraw)


def show_standards(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    query: Annotated[int | None, Query(ge=1, le=2**40)] = None,
) -> View:
    """Standards that wait for review, those in use, and the form to propose one from a query."""
    waiting, in_use = [], []
    for number, library in enumerate(desk.libraries, start=1):
        waiting += [
            _proposal(desk, number, entry, person.name) for entry in desk.entries_with(number, EntryStatus.PROPOSED)
        ]
        own = desk.entries_with(number, EntryStatus.OWN_STANDARD)
        in_use += [{**entry_line(number, entry), **_came(library, entry)} for entry in own]
    row = find_query(desk, query) if query is not None else None
    data = {
        "waiting": waiting,
        "in_use": in_use,
        "query": query_line(row) if row else None,
        "name": visible_text(row.decided_compound or row.best) if row else "",
        "libraries": [
            {"number": number, "name": file_name(str(library.path))}
            for number, library in enumerate(desk.libraries, start=1)
        ],
    }
    recent = desk.case.queries(limit=60)
    return View("standards.html", "Standards", data, lambda: {"recent": [query_line(item) for item in recent]})


def _came(library: Library, entry: Entry) -> dict[str, str]:
    first = entry_history(library, entry.accession)[0].event
    last = entry_history(library, entry.accession)[-1].event
    return {"proposed_by": first.who, "proposed_at": first.at, "last_by": last.who, "last_at": last.at}


def _proposal(desk: Desk, number: int, entry: Entry, who: str) -> dict[str, Any]:
    library = desk.library(number)
    came = _came(library, entry)
    return {
        **entry_line(number, entry), **came, "details": standard_details(library, entry),
        "audit": audit_lines(desk, number, entry),
        "is_own": came["proposed_by"].casefold() == who.casefold(),
    }  # fmt: skip


def propose(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    query: Annotated[int, Form(ge=1, le=2**40)],
    library: Annotated[int, Form(ge=1, le=1000)] = 1,
    name: Line = "",
    smiles: Long = "",
    cas: Line = "",
    formula: Line = "",
    derivative: Line = "",
    supplier: Line = "",
    lot: Line = "",
    purity: Line = "",
    measured_on: Line = "",
    analyst: Line = "",
    method: Line = "",
    note: Long = "",
    reason: Long = "",
) -> Outcome:
    """Propose the spectrum of a query as an own standard.

    Raises
    ------
    NotFound, UsageError, InputError, LibraryError
        If there is no such query, something is missing, or the library refuses it.
    """
    find_query(desk, query)
    details = StandardDetails(supplier, lot, purity, measured_on, analyst, method, note)
    if not (details.supplier.strip() or details.lot.strip() or details.note.strip()):
        raise UsageError(
            "material of the standard", found="nothing", expected="supplier, lot or a note that says where it came from"
        )
    with desk.writable(library) as opened:
        identity = resolve_identity(
            opened, name=name.strip(), smiles=smiles.strip(), cas=cas.strip(), formula=formula.strip()
        )
        report = propose_standard(
            opened, desk.case.record(query), identity=identity, details=details, derivative=derivative.strip() or None,
            who=person.name, when=desk.clock(), reason=reason or f"measured as query {query} of {desk.case.path.name}",
            weighting=desk.settings.weighting,
        )  # fmt: skip
    told = {"accession": report.entry.accession, "entry": report.entry.id, "event": report.event.seq}
    return "/standards?said=proposed", told


def review(
    desk: TheDesk,
    person: TheReviewer,
    request: Request,
    library_number: LibraryNumber,
    entry_id: Id,
    verdict: Annotated[Literal["accept", "refuse"], Form()],
    reason: Long = "",
) -> Outcome:
    """Accept or refuse a proposed standard."""
    accession = _accession(desk, library_number, entry_id)
    with desk.writable(library_number) as opened:
        report = review_standard(
            opened, accession, accept=verdict == "accept", who=person.name, when=desk.clock(), reason=reason
        )
    told = {"accession": accession, "status": report.entry.status.value, "event": report.event.seq}
    return "/standards?said=reviewed", told


def withdraw(
    desk: TheDesk,
    person: TheReviewer,
    request: Request,
    library_number: LibraryNumber,
    entry_id: Id,
    reason: Long = "",
) -> Outcome:
    """Take an entry out of use."""
    accession = _accession(desk, library_number, entry_id)
    with desk.writable(library_number) as opened:
        event = withdraw_entry(opened, accession, who=person.name, when=desk.clock(), reason=reason)
    address = f"/library/{library_number}/entries/{entry_id}?said=withdrawn"
    return address, {"accession": accession, "event": event.seq}


def _accession(desk: Desk, library_number: int, entry_id: int) -> str:
    return find_entry(desk.library(library_number), entry_id).accession
