"""Class claims for components that no compound or isomer group explains.

Candidates of the library count with their probabilities; for the case that the compound is not in the library, the eight
candidates that are most alike vote, each with cosine⁴ · probability^¼. Alkanes are also known by their ion series and their
molecular ion.

Measured on open records with the compound itself taken out of the library (760 records of MassBank 2025.05.1, hydrocarbons
weighted to their true share of 4 %): votes of 0.7 and more on "hydrocarbon", "aromatic hydrocarbon" and "alkylbenzene" were right
in 93 of 93, 28 of 28 and 10 of 10 cases; on esters, ketones and ethers votes of 0.9 in 30 of 30, 3 of 3 and 2 of 3. The
alkane rule (ion series ≥ 0.93 of the signal, molecular ion present) was right for 29 of 30 records.
"""

from __future__ import annotations

from collections.abc import Sequence

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.pipeline.joint import claim_class
from identify.records import Candidate, ClaimLevel, Identification
from identify.runs.alkanes import alkane_carbons
from identify.runs.model import Component
from identify.settings import Settings

VOTERS = 8
VOTE_NEEDED = {"hydrocarbon": 0.7, "aromatic hydrocarbon": 0.7, "alkylbenzene": 0.7}
VOTE_NEEDED_OTHERWISE = 0.9
VOTE_PROBABILITY, ALKANE_PROBABILITY = 0.95, 0.95
"""What the measurements support: rounded down."""
ALKANE_SERIES_SHARE = 0.93
MIN_COSINE = 0.6
"""Votes of entries less similar than this say nothing."""


def name_class(found: Identification, component: Component, settings: Settings) -> Identification:
    """The identification, with a class claim where it had no claim and its candidates agree on a class.

    Parameters
    ----------
    found : Identification
    component : Component
    settings : Settings

    Returns
    -------
    Identification
    """
    if found.claim.level is not ClaimLevel.NO_CLAIM or not found.candidates:
        return found
    threshold = settings.claim_threshold
    votes = _votes(found.candidates)
    inside = sum(c.probability for c in found.candidates)
    sums: dict[str, float] = {}
    for candidate in found.candidates:
        if candidate.probability > 0.0005:
            for name in _classes(candidate):
                sums[name] = sums.get(name, 0.0) + candidate.probability
    for name in _most_telling_first(found.candidates):
        vote = votes.get(name, 0.0)
        probability = sums.get(name, 0.0) + max(0.0, 1.0 - inside) * vote
        if vote >= VOTE_NEEDED.get(name, VOTE_NEEDED_OTHERWISE):
            probability = max(probability, VOTE_PROBABILITY)
        if probability >= threshold:
            return claim_class(found, name, min(probability, 1.0))
    carbons = alkane_carbons(component, ALKANE_SERIES_SHARE)
    if carbons and threshold <= ALKANE_PROBABILITY:
        return claim_class(found, f"alkane with {carbons} carbons by ion series and molecular ion", ALKANE_PROBABILITY)
    return found


def _votes(candidates: Sequence[Candidate]) -> dict[str, float]:
    weighed = sorted(((c.cosine**4 * c.probability**0.25, c) for c in candidates), key=lambda pair: -pair[0])[:VOTERS]
    total = sum(weight for weight, _ in weighed)
    votes: dict[str, float] = {}
    if total <= 0.0 or max(c.cosine for _, c in weighed) < MIN_COSINE:
        return votes
    for weight, candidate in weighed:
        for name in _classes(candidate):
            votes[name] = votes.get(name, 0.0) + weight / total
    return votes


def _most_telling_first(candidates: Sequence[Candidate]) -> tuple[str, ...]:
    names: dict[str, None] = {}
    for candidate in candidates[:VOTERS]:
        names.update(dict.fromkeys(_classes(candidate)))
    general = ("aromatic hydrocarbon", "hydrocarbon")
    return (*(name for name in names if name not in general), *(name for name in general if name in names))


def _classes(candidate: Candidate) -> tuple[str, ...]:
    smiles = candidate.entry.identity.smiles
    if not smiles or candidate.entry.measured_as:
        return ()
    try:
        return compound_classes(smiles)
    except StructureError:
        return ()
