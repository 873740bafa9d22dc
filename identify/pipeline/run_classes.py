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
from dataclasses import replace

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.pipeline.joint import claim_class
from identify.records import Candidate, ClaimLevel, Identification
from identify.runs.alkanes import alkane_carbons
from identify.runs.findings import Finding
from identify.runs.model import Component
from identify.settings import Settings

VOTERS = 8
VOTE_NEEDED = {"hydrocarbon": 0.7, "aromatic hydrocarbon": 0.7, "alkylbenzene": 0.7}
VOTE_NEEDED_OTHERWISE = 0.9
VOTE_PROBABILITY, ALKANE_PROBABILITY = 0.95, 0.95
"""What the measurements support: rounded down."""
ALKANE_SERIES_SHARE = 0.93
HYDROCARBON = "hydrocarbon"
LIBRARY_SHARE = 0.042
"""Hydrocarbons among the 9,355 full-scan records measured: what probabilities of the library's candidates assume."""
MIN_WITNESSES, MOST_RUN_SHARE, MOST_FROM_RUN = 10, 0.5, 0.99
"""A class that rests on the rest of the run is never stated with more than 99 %: the odds are rough."""
MIN_COSINE = 0.6
"""Votes of entries less similar than this say nothing."""


def name_classes(findings: Sequence[Finding], settings: Settings) -> tuple[Finding, ...]:
    """Findings with class claims where no compound or isomer group can be claimed.

    Parameters
    ----------
    findings : sequence of Finding
        All of one run, seen together already.
    settings : Settings

    Returns
    -------
    tuple of Finding
        As many, same order.

    Notes
    -----
    First each component alone (`name_class`). Then, if at least `MIN_WITNESSES` components of the run stand as hydrocarbons by
    claims of their own, the rest are judged again with the run's share of hydrocarbons in place of the library's
    (`LIBRARY_SHARE`), never above one half: posterior odds = odds from the candidates × run odds / library odds. A claim made
    so has a note that says it.
    """
    alone = [
        replace(f, identification=name_class(f.identification, f.component, settings)) if f.identification else f
        for f in findings
    ]
    judged = [f for f in alone if f.is_explained and not f.is_background]
    witnesses = sum(1 for f in judged if _is_hydrocarbon(f))
    if witnesses < MIN_WITNESSES:
        return tuple(alone)
    share = min(MOST_RUN_SHARE, (witnesses + 1.0) / (len(judged) + 2.0))
    gain = share / (1.0 - share) * (1.0 - LIBRARY_SHARE) / LIBRARY_SHARE
    note = f"The class rests on the run as well: {witnesses} of its {len(judged)} components with a claim are hydrocarbons."
    return tuple(_with_run_share(f, gain, note, settings) for f in alone)


def _is_hydrocarbon(finding: Finding) -> bool:
    found = finding.identification
    if found is None or not found.candidates:
        return False
    if found.claim.level is ClaimLevel.CLASS:
        return any(word in found.claim.statement.lower() for word in ("hydrocarbon", "alkyl", "alkane"))
    return HYDROCARBON in _classes(found.candidates[0])


def _with_run_share(finding: Finding, gain: float, note: str, settings: Settings) -> Finding:
    found = finding.identification
    if found is None or finding.is_background or finding.is_explained or not found.candidates:
        return finding
    probability = min(0.999, _class_probability(found.candidates, HYDROCARBON))
    odds = probability / (1.0 - probability) * gain
    posterior = min(MOST_FROM_RUN, odds / (1.0 + odds))
    if posterior < settings.claim_threshold or max(c.cosine for c in found.candidates) < MIN_COSINE:
        return finding
    claimed = claim_class(found, HYDROCARBON, posterior)
    return replace(finding, identification=replace(claimed, notes=(*claimed.notes, note)))


def _class_probability(candidates: Sequence[Candidate], name: str) -> float:
    """Probability of a class from the candidates, and from their vote where the compound is not in the library."""
    inside = sum(c.probability for c in candidates)
    within = sum(c.probability for c in candidates if name in _classes(c))
    return within + max(0.0, 1.0 - inside) * _votes(candidates).get(name, 0.0)


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
    for name in _most_telling_first(found.candidates):
        probability = _class_probability(found.candidates, name)
        if votes.get(name, 0.0) >= VOTE_NEEDED.get(name, VOTE_NEEDED_OTHERWISE):
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
