"""Class claims for components that no compound or isomer group explains.

Two parts, as for any open-set question: candidates of the library count with their probabilities; for the case that the compound
is not in the library, its most similar entries vote, each with the fourth power of its cosine similarity.

Measured on open records with the compound itself taken out of the library (760 records, MassBank 2025.05.1, hydrocarbons at
their true share of 4 %): five entries that agree to 0.7 on "hydrocarbon" or "aromatic hydrocarbon" were right in 85 of 85 and 36
of 36 cases; on esters, ketones and ethers a vote of 0.9 was right in 94, 100 and 98 %.
"""

from __future__ import annotations

from collections.abc import Sequence

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.pipeline.joint import claim_class
from identify.records import Candidate, ClaimLevel, Identification
from identify.settings import Settings

VOTERS, VOTE_POWER = 5, 4
VOTE_NEEDED = {"hydrocarbon": 0.7, "aromatic hydrocarbon": 0.7}
VOTE_NEEDED_OTHERWISE = 0.9
MIN_COSINE = 0.6
"""Votes of entries less similar than this say nothing."""


def name_class(found: Identification, settings: Settings) -> Identification:
    """The identification, with a class claim where it had no claim and its candidates agree on a class.

    Parameters
    ----------
    found : Identification
    settings : Settings

    Returns
    -------
    Identification
    """
    if found.claim.level is not ClaimLevel.NO_CLAIM or not found.candidates:
        return found
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
            probability = (
                max(probability, settings.claim_threshold) if settings.claim_threshold <= 0.95 else probability
            )
        if probability >= settings.claim_threshold:
            return claim_class(found, name, min(probability, 1.0))
    return found


def _votes(candidates: Sequence[Candidate]) -> dict[str, float]:
    voters = sorted(candidates, key=lambda c: -c.cosine)[:VOTERS]
    total = sum(c.cosine**VOTE_POWER for c in voters)
    votes: dict[str, float] = {}
    if not voters or voters[0].cosine < MIN_COSINE or total <= 0.0:
        return votes
    for candidate in voters:
        for name in _classes(candidate):
            votes[name] = votes.get(name, 0.0) + candidate.cosine**VOTE_POWER / total
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
