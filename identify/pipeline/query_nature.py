"""What is the query itself: one compound or several, and of which class when no entry names it?"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from identify.evidence.classes import find_analogues, find_classes
from identify.evidence.facts import QueryFacts
from identify.evidence.purity import MAX_ENTRIES, judge_purity, leave_over
from identify.evidence.shifted import match_shifted
from identify.ranking.grouping import Match, compound_key
from identify.ranking.shortlist import Draft
from identify.records import (
    Analogue,
    Claim,
    ClaimLevel,
    ClassEvidence,
    CleanSpectrum,
    Entry,
    MolecularIonEstimate,
    Purity,
    Query,
    Verdict,
)

N_DRAFTS = 18
"""Compounds of the shortlist tried as parts; the rest of `MAX_ENTRIES` are those that the query contains best."""
N_OF_RESIDUAL = 8
"""Compounds found by searching the residual that are tried as further parts."""
SURE_MASS = 0.8
"""From this probability on, the molecular mass fixes the mass difference to an analogue."""
LEAST_ALIKE = 0.5
"""An analogue is at least this similar after shifting."""
N_ANALOGUES = 3
UNNAMED = frozenset({ClaimLevel.NO_CLAIM, ClaimLevel.CLASS})

Search = Callable[[CleanSpectrum], Sequence[Match]]


def judge_parts(spectrum: CleanSpectrum, drafts: Sequence[Draft], matches: Sequence[Match], search: Search) -> Purity:
    """Whether one compound explains the query or several, tried with the hits and with hits of what they leave over.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    drafts : sequence of Draft
        Shortlist, best first.
    matches : sequence of Match
        All hits with their entries.
    search : callable
        Hits of another spectrum; called at most once, with what the best one leaves over where that is much.

    Returns
    -------
    Purity
    """
    tried = {draft.key: draft.entry for draft in drafts[:N_DRAFTS]}
    for match in sorted(matches, key=lambda match: -match.hit.reverse):
        if len(tried) == MAX_ENTRIES - N_OF_RESIDUAL:
            break
        tried.setdefault(compound_key(match.entry), match.entry)
    left = leave_over(spectrum, list(tried.values()))
    found = search(left) if left is not None else ()
    for match in sorted(found, key=lambda match: -match.hit.cosine):
        if len(tried) == MAX_ENTRIES:
            break
        tried.setdefault(compound_key(match.entry), match.entry)
    return judge_purity(spectrum, list(tried.values()))


def nearest_compounds(matches: Sequence[Match]) -> list[tuple[Entry, float]]:
    """The most similar entry of each compound with its cosine, nearest first.

    Parameters
    ----------
    matches : sequence of Match

    Returns
    -------
    list of (Entry, cosine in [0, 1])
    """
    nearest: dict[str, tuple[Entry, float]] = {}
    for match in sorted(matches, key=lambda match: -match.hit.cosine):
        nearest.setdefault(compound_key(match.entry), (match.entry, match.hit.cosine))
    return list(nearest.values())


def describe_unnamed(
    query: Query,
    facts: QueryFacts,
    claim: Claim,
    purity: Purity,
    molecular_ion: MolecularIonEstimate,
    matches: Sequence[Match],
) -> tuple[tuple[ClassEvidence, ...], tuple[Analogue, ...]]:
    """Classes and analogues of a query for which no compound or isomer group is claimed; none for the others.

    Parameters
    ----------
    query : Query
    facts : QueryFacts
    claim : Claim
    purity : Purity
        Of a mixture only classes are given: its fragments belong to several molecules.
    molecular_ion : MolecularIonEstimate
    matches : sequence of Match
        All hits with their entries; each compound counts once.

    Returns
    -------
    classes : tuple of ClassEvidence
    analogues : tuple of Analogue
        At most `N_ANALOGUES`.
    """
    if claim.level not in UNNAMED or not matches:
        return (), ()
    neighbours = nearest_compounds(matches)
    classes = find_classes(facts, neighbours)
    if purity.verdict is Verdict.CONFLICTS:
        return classes, ()
    best = molecular_ion.estimates[0] if molecular_ion.estimates else None
    mass = best.nominal_mass if best and best.probability >= SURE_MASS else None
    shifted = match_shifted(query.spectrum, neighbours, mass=mass)
    return classes, find_analogues([item for item in shifted if item.score >= LEAST_ALIKE], N_ANALOGUES)
