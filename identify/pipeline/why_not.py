"""Why is a compound not the answer? Its entries, scored and weighed like the candidates, beside the best of them."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from identify.chem.structures import connectivity_block, inchikey_of
from identify.errors import StructureError
from identify.evidence.facts import formula_facts
from identify.evidence.gather import gather_evidence
from identify.library.standing import ALL_STATUSES
from identify.library.store import SEARCHABLE, Library
from identify.pipeline.search import SearchableLibrary, open_libraries
from identify.ranking.claim import percent
from identify.ranking.difference import compare_explanations
from identify.ranking.grouping import Match
from identify.ranking.model import default_model, explain_candidate
from identify.ranking.shortlist import shortlist
from identify.records import (
    Candidate,
    Entry,
    EvidenceItem,
    Explanation,
    Hit,
    Identification,
    Report,
    Verdict,
)
from identify.settings import Settings
from identify.similarity.pair import PairScores, score_pair

MAX_COMPOUNDS: Final = 5
MAX_ENTRIES: Final = 60
SMALLEST_PART: Final = 0.05
"""Differences of log-odds below this are not named."""
_KEY: Final = re.compile(r"^[A-Z]{14}(-[A-Z]{10}-[A-Z])?$")


@dataclass(frozen=True, slots=True)
class WhyNot:
    """One compound asked for, and the reasons; names and reasons as the sources write them."""

    name: str
    accession: str
    rank: int | None
    """Its rank when it is a candidate."""
    reasons: tuple[str, ...]
    cosine: float
    reverse: float
    evidence: tuple[EvidenceItem, ...]
    difference: Explanation | None = None
    """Its log-odds less those of the first candidate, part by part; None where there is nothing to compare."""


def explain_absence(
    asked: str, found: Identification, libraries: Sequence[SearchableLibrary], settings: Settings
) -> tuple[WhyNot, ...]:
    """Reasons for the compound asked for, else for those whose name contains it, best cosine first; none when none does.

    Parameters
    ----------
    asked : str
        InChIKey (or its first block), SMILES, or a name or part of it.
    found : Identification
    libraries : sequence of SearchableLibrary
    settings : Settings

    Returns
    -------
    tuple of WhyNot
        At most `MAX_COMPOUNDS`.
    """
    ranked = {(c.library, c.entry.compound_id): c for c in found.candidates}
    best: dict[tuple[str, int], tuple[float, Entry, PairScores]] = {}
    for item in libraries:
        for entry in _find_entries(item.library, asked.strip()):
            key = (item.state.path, entry.compound_id)
            pair = score_pair(found.query.spectrum, entry.spectrum, settings)
            if key not in best or pair.cosine > best[key][0]:
                best[key] = (pair.cosine, entry, pair)
    exact = asked.strip().casefold()
    named = {key: row for key, row in best.items() if row[1].identity.name.casefold() == exact}
    ordered = sorted((named or best).items(), key=lambda item: (-item[1][0], item[1][1].accession))
    return tuple(
        _explain(entry, pair, found, settings, ranked.get(key)) for key, (_, entry, pair) in ordered[:MAX_COMPOUNDS]
    )


def explain_report(
    asked: str, report: Report, library_paths: Sequence[Path], settings: Settings, *, as_of: Sequence[int | str] = ()
) -> tuple[tuple[WhyNot, ...], ...]:
    """For every identification of a report the reasons why a compound is not the answer.

    Parameters
    ----------
    asked : str
        See `explain_absence`.
    report : Report
    library_paths : sequence of Path
        Those the report was made with.
    settings : Settings
    as_of : sequence of int or str
        See `identify.pipeline.search.open_libraries`.

    Returns
    -------
    tuple of tuple of WhyNot
        In the order of the identifications.

    Raises
    ------
    LibraryError, UsageError
        See `identify.pipeline.search.open_libraries`.
    """
    with open_libraries(library_paths, settings, as_of) as libraries:
        return tuple(explain_absence(asked, found, libraries, settings) for found in report.identifications)


def explain_without_entry(asked: str, found: Identification) -> str:
    """What the query says of a structure that no library holds, in one sentence; empty when `asked` is no SMILES.

    Parameters
    ----------
    asked : str
        SMILES.
    found : Identification

    Returns
    -------
    str
    """
    from identify.chem.structures import formula_of

    try:
        formula = formula_of(asked.strip())
    except StructureError:
        return ""
    mass = formula.nominal_mass
    chance = sum(item.probability for item in found.molecular_ion.estimates if item.nominal_mass == mass)
    groups = [c.rank for c in found.candidates if c.entry.formula_as_measured == formula.hill]
    told = f"{formula.hill}, nominal mass {mass}: the query's own estimate gives this mass {percent(chance)}"
    if groups:
        return f"{told}; it is an isomer of candidate {groups[0]}, and counts among the isomers without an entry."
    return f"{told}; no candidate has this formula."


def _find_entries(library: Library, asked: str) -> list[Entry]:
    if _KEY.match(asked):
        keys = [connectivity_block(asked)]
    else:
        found = library.find_entries(name=asked, statuses=ALL_STATUSES, limit=MAX_ENTRIES)
        if found:
            return found
        try:
            keys = [connectivity_block(inchikey_of(asked))]
        except StructureError:
            return []
    return library.find_entries(inchikey=keys[0], statuses=ALL_STATUSES, limit=MAX_ENTRIES)


def _explain(
    entry: Entry, pair: PairScores, found: Identification, settings: Settings, candidate: Candidate | None
) -> WhyNot:
    name = entry.identity.name
    if candidate is not None:
        difference = None
        if candidate.rank > 1:
            difference = compare_explanations(_alone(found.candidates[0]), _alone(candidate))
        reasons = _reasons_ranked(candidate, found, difference)
        return WhyNot(
            name, candidate.entry.accession, candidate.rank, reasons, candidate.cosine, candidate.reverse,
            candidate.evidence, difference,
        )  # fmt: skip
    evidence = gather_evidence(found.query, entry, pair.aligned, settings)
    told: list[str] = []
    if entry.status not in SEARCHABLE:
        told.append(f"Its entry is not searched: its standing is “{entry.status.value}”.")
    difference = None
    if found.candidates:
        first, last = found.candidates[0], found.candidates[-1]
        told.append(
            f"Its spectrum is not among the {len(found.candidates)} nearest: cosine {pair.cosine:.3f} and reverse match"
            f" {pair.reverse:.3f}, against {first.cosine:.3f} and {first.reverse:.3f} for the first candidate and"
            f" {last.cosine:.3f} and {last.reverse:.3f} for the last."
        )
        difference = compare_explanations(_alone(first), _weigh(entry, pair, evidence, found, settings))
        told += _say_difference(difference)
    told += _conflicts(evidence)
    return WhyNot(name, entry.accession, None, tuple(told), pair.cosine, pair.reverse, evidence, difference)


def _alone(candidate: Candidate) -> Explanation:
    """What speaks for a candidate before its rivals are looked at."""
    return candidate.explanation.parts[0] if candidate.explanation.parts else candidate.explanation


def _weigh(
    entry: Entry, pair: PairScores, evidence: tuple[EvidenceItem, ...], found: Identification, settings: Settings
) -> Explanation:
    """What would speak for an entry that is no candidate."""
    match = Match(Hit(entry.id, pair.cosine, pair.reverse), entry)
    draft = shortlist(found.query.spectrum, [match], settings)[0]
    facts = formula_facts(entry.formula_as_measured)
    nominal_mass = facts.nominal_mass if facts else None
    return explain_candidate(default_model(), draft.match, evidence, nominal_mass, found.molecular_ion)


def _reasons_ranked(candidate: Candidate, found: Identification, difference: Explanation | None) -> tuple[str, ...]:
    if candidate.rank == 1 or difference is None:
        return (f"It is the first candidate, with probability {percent(candidate.probability)}.",)
    first = found.candidates[0]
    told = (
        f"It is candidate {candidate.rank} with probability {percent(candidate.probability)}; the first,"
        f" {first.entry.identity.name}, has {percent(first.probability)}."
    )
    return (told, *_say_difference(difference), *_conflicts(candidate.evidence))


def _say_difference(difference: Explanation) -> list[str]:
    """The parts by which a compound falls behind the first candidate, largest first."""
    behind = [
        (part.value, group.label, part.label)
        for group in difference.parts
        for part in (group.parts or (group,))
        if part.value <= -SMALLEST_PART
    ]
    told = [
        f"{label[:1].upper()}{label[1:]}: {abs(value):.2f} fewer log-odds than the first candidate."
        if group == label
        else f"{label[:1].upper()}{label[1:]} ({group}): {abs(value):.2f} fewer log-odds than the first candidate."
        for value, group, label in sorted(behind)
    ]
    return [f"Together {difference.value:+.2f} log-odds against the first candidate.", *told]


def _conflicts(evidence: Sequence[EvidenceItem]) -> list[str]:
    return [
        f"{item.kind[:1].upper()}{item.kind[1:]} conflicts: {item.reason}"
        for item in evidence
        if item.verdict is Verdict.CONFLICTS
    ]
