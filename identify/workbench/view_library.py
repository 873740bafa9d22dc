"""Library: look up entries; one entry with provenance, audit grade, replicates and history."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict
from typing import Annotated, Any

from fastapi import APIRouter, Query, Request

from identify.chem.formula import parse_formula
from identify.errors import FormulaError, LibraryDamaged, LibraryError, UsageError, quote
from identify.index import search_index
from identify.library.standing import ALL_STATUSES, entry_history
from identify.library.store import Library
from identify.pipeline.search import SearchableLibrary
from identify.records import CleanSpectrum, Entry, Peaks
from identify.report.plots import spectrum_svg
from identify.report.structures import StructureSheet
from identify.report.words import file_name, ions_text, relative_text, score_text, sentence, visible_text
from identify.similarity.pair import score_pair
from identify.workbench.desk import Desk, NotFound
from identify.workbench.pages import Id, LibraryNumber, TheDesk, ThePerson, View, add_view

Word = Annotated[str, Query(max_length=200)]
LIMIT = 200
MAX_IONS_NAMED = 12
MAX_IONS = 8


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/library", show_library)
    add_view(pages, twins, "/library/{library_number}/entries/{entry_id}", show_entry)


def show_library(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    name: Word = "",
    formula: Word = "",
    mass: Word = "",
    ion: Word = "",
) -> View:
    """Entries by part of the name, formula as measured, nominal mass, or principal ions."""
    asked = {"name": name.strip(), "formula": formula.strip(), "mass": mass.strip(), "ion": ion.strip()}
    libraries = [
        {
            "number": number, "name": file_name(str(item.library.path)), "entries": item.state.entries,
            "compounds": item.state.compounds, "fingerprint": item.state.fingerprint,
        }
        for number, item in enumerate(desk.searchable(), start=1)
    ]  # fmt: skip
    fault, found = "", []
    if any(asked.values()):
        try:
            found = [
                entry_line(number, entry, share)
                for number, item in enumerate(desk.searchable(), start=1)
                for entry, share in _look_up(item, **asked)
            ]
        except (UsageError, FormulaError) as error:
            fault = error.message
    data = {
        "asked": asked,
        "libraries": libraries,
        "fault": fault,
        "entries": found[:LIMIT],
        "is_cut": len(found) >= LIMIT,
    }
    return View("library.html", "Library", data, lambda: {"has_asked": any(asked.values())})


def _look_up(item: SearchableLibrary, name: str, formula: str, mass: str, ion: str) -> list[tuple[Entry, str]]:
    """Entries that fulfil every condition, with what the ions are of them."""
    conditions: dict[str, Any] = {}
    if name:
        conditions["name"] = name
    if formula:
        conditions["formula"] = parse_formula(formula).hill
    if mass:
        if not (mass.isdecimal() and mass.isascii() and len(mass) < 6):
            raise UsageError("nominal mass", found=quote(mass), expected="a whole number")
        conditions["nominal_mass"] = int(mass)
    entries = item.library.find_entries(**conditions, statuses=ALL_STATUSES, limit=LIMIT) if conditions else []
    if not ion:
        return [(entry, "") for entry in entries]
    ions = _parse_ions(ion)
    probe = CleanSpectrum(Peaks(ions, [1.0] * len(ions)), None, 1)  # type: ignore[arg-type]
    if conditions:
        kept = [entry for entry in entries if all(entry.spectrum.nominal.intensity_at(mz) > 0 for mz in ions)]
    else:
        hits = search_index(item.index, probe, LIMIT)
        close = item.library.get_entries([hit.entry_id for hit in hits])
        kept = [entry for entry in close if all(entry.spectrum.nominal.intensity_at(mz) > 0 for mz in ions)]
    return [(entry, _heights(entry, ions)) for entry in kept]


def _parse_ions(text: str) -> list[int]:
    words = text.replace(",", " ").replace(";", " ").split()
    if len(words) > MAX_IONS or not all(w.isdecimal() and w.isascii() and 0 < int(w[:6]) <= 10_000 for w in words):
        raise UsageError("ions", found=quote(text), expected=f"1 to {MAX_IONS} whole m/z values like 91 92")
    return sorted({int(word) for word in words})


def _heights(entry: Entry, ions: Sequence[int]) -> str:
    peaks = entry.spectrum.nominal
    base = peaks.intensity.max()
    return ", ".join(f"{mz} ({relative_text(100.0 * peaks.intensity_at(mz) / base)})" for mz in ions)


def entry_line(number: int, entry: Entry, share: str = "") -> dict[str, Any]:
    """A library entry in words.

    Parameters
    ----------
    number : int
        Of its library, from 1.
    entry : Entry
    share : str
        What is said of the ions asked for.

    Returns
    -------
    dict
    """
    return {
        "library": number, "id": entry.id, "address": f"/library/{number}/entries/{entry.id}",
        "accession": visible_text(entry.accession), "name": visible_text(entry.identity.name) or "unnamed",
        "formula": visible_text(entry.formula_as_measured or entry.identity.formula, 80),
        "measured_as": visible_text(entry.measured_as, 60), "status": entry.status.value,
        "licence": visible_text(entry.licence), "ions": share,
        "instrument": visible_text(entry.acquisition.instrument_type or entry.acquisition.instrument, 60),
    }  # fmt: skip


def show_entry(desk: TheDesk, person: ThePerson, request: Request, library_number: LibraryNumber, entry_id: Id) -> View:
    """One entry: spectrum, structure, provenance, audit, replicates, history.

    Raises
    ------
    NotFound
        If there is none.
    """
    library = desk.library(library_number)
    entry = find_entry(library, entry_id)
    history = [
        {"seq": item.event.seq, "at": item.event.at, "who": item.event.who, "kind": item.event.kind,
         "reason": visible_text(item.event.reason, 2000), "status": item.status.value, "hash": item.event.hash}
        for item in entry_history(library, entry.accession)
    ]  # fmt: skip
    peaks = entry.spectrum.nominal
    line = entry_line(library_number, entry)
    data = {
        "entry": {**line, "facts": entry_facts(entry, library)},
        "peaks": [[mz, round(value, 3)] for mz, value in zip(peaks.mz.tolist(), peaks.relative.tolist(), strict=True)],
        "standard": standard_details(library, entry),
        "audit": audit_lines(desk, library_number, entry),
        "replicates": _replicates(desk, library_number, entry),
        "history": history,
    }
    return View("entry.html", line["name"], data, lambda: _draw(entry))


def find_entry(library: Library, entry_id: int) -> Entry:
    """Entry by its id, whatever its standing.

    Parameters
    ----------
    library : Library
    entry_id : int

    Returns
    -------
    Entry

    Raises
    ------
    NotFound
        If there is none.
    """
    try:
        return library.get_entries([entry_id])[0]
    except LibraryDamaged:
        raise
    except LibraryError:
        raise NotFound("entry", found=str(entry_id), expected=f"an entry of {library.path.name}") from None


def _draw(entry: Entry) -> dict[str, Any]:
    name = visible_text(entry.identity.name) or entry.accession
    peaks = entry.spectrum.nominal
    caption = ions_text(zip(peaks.mz.tolist(), peaks.relative.tolist(), strict=True), MAX_IONS_NAMED)
    sheet = StructureSheet()
    return {
        "plot_svg": spectrum_svg(
            peaks, name="entry", title=f"Spectrum of {name}", description=caption, lowest_mz=entry.spectrum.lowest_mz
        ),
        "caption": f"Principal ions, m/z (relative intensity): {caption}.",
        "structure": sheet.symbol_for(entry.identity.smiles),
        "structures_svg": sheet.symbols_svg(),
        "in_use": entry.status.value in ("reference", "own standard", "demonstration"),
    }


def entry_facts(entry: Entry, library: Library) -> dict[str, str]:
    """What an entry states, in words; nothing for what it does not state.

    Parameters
    ----------
    entry : Entry
    library : Library

    Returns
    -------
    dict of str to str
    """
    identity, acquisition, retention = entry.identity, entry.acquisition, entry.retention
    energy = "not stated" if acquisition.energy_ev is None else f"{acquisition.energy_ev:g} eV"
    index = "" if retention.index is None else f"{retention.index:.0f} {retention.phase}"
    facts = {
        "accession": entry.accession, "standing": entry.status.value, "formula": identity.formula,
        "measured as": f"{entry.measured_as}, {entry.formula_as_measured}" if entry.measured_as else "",
        "InChIKey": identity.inchikey, "SMILES": identity.smiles, "CAS number": identity.cas,
        "other names": "; ".join(identity.other_names[:8]), "instrument": acquisition.instrument,
        "instrument type": acquisition.instrument_type, "electron energy": energy, "retention index": index,
        "licence": entry.licence, "authors": entry.authors, "source": entry.source, "library": library.path.name,
        "comments": " · ".join(entry.comments[:6]),
    }  # fmt: skip
    return {name: visible_text(text, 600) for name, text in facts.items() if text.strip()}


def standard_details(library: Library, entry: Entry) -> dict[str, str]:
    """What was stated of the material of a standard, in words; nothing for what was not.

    Parameters
    ----------
    library : Library
    entry : Entry

    Returns
    -------
    dict of str to str
    """
    from identify.library.standards import read_standard_details

    details = asdict(read_standard_details(library, entry.accession))
    return {name.replace("_", " "): visible_text(text, 600) for name, text in details.items() if text}


def audit_lines(desk: Desk, library_number: int, entry: Entry) -> dict[str, Any]:
    """Grade and findings of the audit of one entry.

    Parameters
    ----------
    desk : Desk
    library_number : int
    entry : Entry

    Returns
    -------
    dict
    """
    from identify.library.audit import audit_entry

    item = desk.searchable()[library_number - 1]
    audit = audit_entry(item.library, item.index, entry)
    return {
        "proposal": audit.proposal,
        "log_odds": round(audit.log_odds, 6),
        "suspicion": sentence(audit.suspicion),
        "overruled": visible_text(audit.overruled, 600),
        "findings": [
            {
                "kind": visible_text(finding.kind),
                "grade": finding.grade.value,
                "reason": sentence(finding.reason),
                "observed": visible_text(finding.observed, 600),
                "expected": visible_text(finding.expected, 600),
            }
            for finding in audit.findings
        ],
    }


def _replicates(desk: Desk, library_number: int, entry: Entry) -> list[dict[str, Any]]:
    library = desk.library(library_number)
    others = library.find_entries(compound_id=entry.compound_id, statuses=ALL_STATUSES, limit=LIMIT)
    told = []
    for other in others:
        if other.id != entry.id:
            pair = score_pair(entry.spectrum, other.spectrum, desk.settings)
            told.append({**entry_line(library_number, other), "cosine": score_text(pair.cosine)})
    return told
