"""A stored result back as records: what was found then, shown as it was found then.

A page never shows a fresh identification, it shows the stored one; so what is on the screen, on paper and in the case file is the
same. Entries of a library never change, so their spectra are taken from there by accession; scores, evidence, probabilities
and claim come from the stored JSON.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from identify.errors import FormatError, LibraryError
from identify.library.standing import ALL_STATUSES
from identify.library.store import Library
from identify.records import (
    Analogue,
    Candidate,
    Claim,
    ClaimLevel,
    ClassEvidence,
    Entry,
    EntryStatus,
    EvidenceItem,
    Explanation,
    FollowUp,
    Identification,
    LibraryState,
    MassEstimate,
    MolecularIonEstimate,
    Part,
    Peaks,
    Purity,
    Query,
    Report,
    SpectrumRecord,
    Verdict,
    read_only,
)
from identify.settings import Settings, resolve
from identify.spectra.align import align
from identify.spectra.cleaning import clean_spectrum
from identify.writers.results_json import report_to_dict


@dataclass(frozen=True, slots=True)
class Change:
    """An entry whose standing is not what it was when the result was made."""

    accession: str
    name: str
    then: str
    now: str


@dataclass(frozen=True, slots=True, eq=False)
class Rebuilt:
    """A stored result as the report shows it, and what has become of its entries since."""

    report: Report
    changes: tuple[Change, ...]

    @property
    def identification(self) -> Identification:
        """The one identification of the report."""
        return self.report.identifications[0]


def result_document(
    identification: Identification, settings: Settings, states: Sequence[LibraryState], version: str
) -> dict[str, Any]:
    """The result contract for one query: what the case file keeps.

    Parameters
    ----------
    identification : Identification
    settings : Settings
    states : sequence of LibraryState
    version : str
        Of the program.

    Returns
    -------
    dict
        Valid against the schema of results.
    """
    return report_to_dict(Report("ionwitness", version, settings.as_dict(), tuple(states), (identification,)))


def settings_of(document: Mapping[str, Any]) -> Settings:
    """The settings a stored result was made with.

    Parameters
    ----------
    document : mapping

    Returns
    -------
    Settings

    Raises
    ------
    UsageError
        If they hold a value that is out of range.
    """
    return resolve(settings_to_text(document["settings"]), where="stored result")


def settings_to_text(values: Mapping[str, Any]) -> str:
    """Settings as TOML text, the form `identify.settings.resolve` reads.

    Parameters
    ----------
    values : mapping
        From `Settings.as_dict`.

    Returns
    -------
    str

    Examples
    --------
    >>> print(settings_to_text({"top": 5, "cleaning": {"drop_noise": False}}))
    top = 5
    [cleaning]
    drop_noise = false
    """
    lines = [f"{name} = {json.dumps(value)}" for name, value in values.items() if not isinstance(value, Mapping)]
    for name, table in values.items():
        if isinstance(table, Mapping):
            lines += [f"[{name}]", *(f"{key} = {json.dumps(value)}" for key, value in table.items())]
    return "\n".join(lines)


def rebuild(document: Mapping[str, Any], record: SpectrumRecord, libraries: Sequence[Library]) -> Rebuilt:
    """The stored result as a report of one identification.

    Parameters
    ----------
    document : mapping
        From `result_document`.
    record : SpectrumRecord
        The query's record, as kept beside it.
    libraries : sequence of Library
        Those being served; an entry is looked up in the one it came from.

    Returns
    -------
    Rebuilt

    Raises
    ------
    LibraryError
        If an entry is in none of the libraries: the result belongs to other ones.
    FormatError
        If the document is not a stored result.
    SpectrumError
        If the stored record cannot be cleaned.
    """
    try:
        found = document["queries"][0]
        settings = settings_of(document)
        query = Query(found["id"], record, clean_spectrum(record, settings.cleaning))
        changes: list[Change] = []
        candidates = tuple(_candidate(hit, query, libraries, changes) for hit in found["hits"])
        identification = Identification(
            query=query,
            molecular_ion=_molecular_ion(found["molecular_ion"]),
            in_library_probability=found["in_library_probability"],
            claim=_claim(found["claim"]),
            candidates=candidates,
            follow_up=tuple(FollowUp(**{**p, "candidates": tuple(p["candidates"])}) for p in found["follow_up"]),
            notes=tuple(found["notes"]),
            purity=_purity(found.get("purity")),
            classes=tuple(
                ClassEvidence(c["name"], c["probability"], tuple(c["neighbours"]), tuple(c["ions"]))
                for c in found.get("classes", ())
            ),
            analogues=tuple(Analogue(**item) for item in found.get("analogues", ())),
        )
        states = tuple(LibraryState(**state) for state in document["libraries"])
        program = document["program"]
        report = Report(program["name"], program["version"], document["settings"], states, (identification,))
    except (KeyError, IndexError, TypeError, ValueError) as error:
        raise FormatError("stored result", found=repr(error), expected="a result of this program") from error
    return Rebuilt(report, tuple(changes))


def _candidate(hit: Mapping[str, Any], query: Query, libraries: Sequence[Library], changes: list[Change]) -> Candidate:
    entry = _find_entry(hit, libraries)
    then = EntryStatus(hit["status"])
    if entry.status is not then:
        changes.append(Change(entry.accession, entry.identity.name, then.value, entry.status.value))
        entry = replace(entry, status=then)
    return Candidate(
        rank=hit["rank"],
        entry=entry,
        library=hit["library"],
        aligned=align(query.spectrum, entry.spectrum),
        cosine=hit["cosine"],
        reverse=hit["reverse"],
        evidence=tuple(EvidenceItem(**{**item, "verdict": Verdict(item["verdict"])}) for item in hit["evidence"]),
        probability=hit["probability"],
        explanation=_explanation(hit["explanation"]),
        n_entries=hit["entries_of_compound"],
        notes=tuple(hit["notes"]),
    )


def _find_entry(hit: Mapping[str, Any], libraries: Sequence[Library]) -> Entry:
    # A library may have been moved since; another library may use the same accession for something else.
    for library in sorted(libraries, key=lambda library: str(library.path) != hit["library"]):
        found = library.find_entries(accession=hit["accession"], statuses=ALL_STATUSES, limit=1)
        if found and (found[0].identity.name, found[0].identity.inchikey) == (hit["name"], hit["inchikey"]):
            return found[0]
    raise LibraryError(
        "stored result", found=f"entry {hit['accession']} of {hit['library']}",
        expected="an entry of a library that is open",
        hint="Serve the library this result was made with.",
    )  # fmt: skip


def _explanation(tree: Mapping[str, Any]) -> Explanation:
    parts = tuple(_explanation(part) for part in tree["parts"])
    return Explanation(tree["label"], tree["value"], tree["detail"], parts)


def _molecular_ion(found: Mapping[str, Any]) -> MolecularIonEstimate:
    estimates = tuple(MassEstimate(**{**row, "basis": tuple(row["basis"])}) for row in found["estimates"])
    return MolecularIonEstimate(estimates, found["not_observed_probability"], found["agreement"])


def _purity(found: Mapping[str, Any] | None) -> Purity | None:
    """None too for a result of a version that did not look at it."""
    if found is None:
        return None
    left = found["residual"]
    return Purity(
        verdict=Verdict(found["verdict"]),
        reason=found["reason"],
        parts=tuple(Part(**part) for part in found["parts"]),
        explained_share=found["explained_share"],
        misfit=tuple(found["misfit"]),
        residual=None
        if left is None
        else Peaks(read_only([mz for mz, _ in left]), read_only([value for _, value in left])),
        background=tuple(found["background"]),
    )


def _claim(claim: Mapping[str, Any]) -> Claim:
    levels = claim["levels"]
    return Claim(
        level=ClaimLevel(claim["level"]),
        statement=claim["statement"],
        probability=claim["probability"],
        members=tuple(claim["members"]),
        compound_probability=levels["compound"],
        group_probability=levels["isomer group"],
        class_probability=levels["class"],
        unlisted_isomers=claim["unlisted_isomers"],
        msi_2007=claim["msi_2007"],
        schymanski_2014=claim["schymanski_2014"],
    )
