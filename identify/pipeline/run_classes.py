"""Class claims for components that no compound or isomer group explains.

Candidates of the library count with their probabilities; for the case that the compound is not in the library, the eight
candidates that are most alike vote, each with cosine⁴ · probability^¼. Alkanes are also known by their ion series and their
molecular ion. What then is left is judged by its ions alone (`identify.runs.hydrocarbons`), with the run's own share of
hydrocarbons.

Measured on open records with the compound itself taken out of the library (760 records of MassBank 2025.05.1, hydrocarbons
weighted to their true share of 4 %): votes of 0.7 and more on "hydrocarbon", "aromatic hydrocarbon" and "alkylbenzene" were right
in 93 of 93, 28 of 28 and 10 of 10 cases; on esters, ketones and ethers votes of 0.9 in 30 of 30, 3 of 3 and 2 of 3. The
alkane rule (ion series ≥ 0.93 of the signal, molecular ion present) was right for 29 of 30 records; from 0.9 on for 39 of 43, and
the other four (ketones, an iodide) elute after the n-alkane of the same mass: so much is enough where the order of elution fits.
With the run's share, in simulated runs of held-out compounds: of the claims from 95 % on, 99.4 % were right where 98 % of a run
are hydrocarbons, 97.9 % where 90 %, 98.8 % where 70 %, 99.7 % where 50 %; none was made where 4 % are
(`tests/benchmarks/fit_hydrocarbons.py`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import sqrt

import numpy as np

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.pipeline.run_claims import claim_class
from identify.ranking.claim import percent
from identify.records import Candidate, ClaimLevel, Identification
from identify.retention import linear_index
from identify.runs.alkanes import alkane_carbons
from identify.runs.findings import Finding, RetentionScale
from identify.runs.hydrocarbons import hydrocarbon_probability, load_forest
from identify.runs.model import Component
from identify.settings import Settings

VOTERS = 8
VOTE_NEEDED = {"hydrocarbon": 0.7, "aromatic hydrocarbon": 0.7, "alkylbenzene": 0.7}
VOTE_NEEDED_OTHERWISE = 0.9
VOTE_PROBABILITY, ALKANE_PROBABILITY = 0.95, 0.95
"""What the measurements support: rounded down."""
ALKANE_SERIES_SHARE, SERIES_SHARE_IN_ORDER = 0.93, 0.9
HYDROCARBON = "hydrocarbon"
MIN_JUDGED, MOST_RUN_SHARE, MOST_FROM_RUN = 12, 0.95, 0.99
"""A class that rests on the rest of the run is never stated with more than 99 %: the odds are rough."""
MOST_OTHERS = 0.5
"""Candidates of other classes with this much probability together stand against a class from the run."""
MIN_NOTED = 0.5
"""Molecular masses below this probability are not worth a note."""
BRANCHED_BELOW, ALKANE_ABOVE, RING_ABOVE = 160.0, 20.0, 130.0
"""Index units by which the most branched alkane elutes before, and a ring after, the n-alkane of as many carbons on non-polar and
semi-polar columns (common practice: 2,2,4-trimethylpentane near 690, cyclohexane near 660, cyclooctane near 930)."""
MIN_COSINE = 0.6
"""Votes of entries less similar than this say nothing."""


def name_classes(
    findings: Sequence[Finding], settings: Settings, scale: RetentionScale | None = None
) -> tuple[Finding, ...]:
    """Findings with class claims where no compound or isomer group can be claimed.

    Parameters
    ----------
    findings : sequence of Finding
        All of one run, seen together already.
    settings : Settings
    scale : RetentionScale, optional
        Carbon numbers must fit the order of elution.

    Returns
    -------
    tuple of Finding
        As many, same order.

    Notes
    -----
    First each component alone (`name_class`). Then, with at least `MIN_JUDGED` components, the run's own share of hydrocarbons
    is estimated (`estimate_share`) and the rest are judged again with it in place of the library's (`shift_probability`). A claim
    made so has a note that says it. Last, a hydrocarbon whose molecular ion is clear enough gets its carbon number.
    """
    alone = [
        replace(f, identification=name_class(f.identification, f.component, settings, scale)) if f.identification else f
        for f in findings
    ]
    judged = [
        value
        for f in alone
        if not f.is_background and (value := hydrocarbon_probability(f.component.peaks)) is not None
    ]
    if len(judged) < MIN_JUDGED:
        return tuple(alone)
    library_share = load_forest().library_share
    share = estimate_share(judged, library_share)
    note = f"The class rests on the run as well: at least {percent(share)} of its {len(judged)} components are hydrocarbons."
    with_run = [_with_run_share(f, share, library_share, note, settings) for f in alone]
    return tuple(_with_carbons(f, settings, scale) for f in with_run)


def estimate_share(probabilities: Sequence[float], library_share: float) -> float:
    """Share of a class in a run, from what each component says alone: a cautious estimate.

    Parameters
    ----------
    probabilities : sequence of float
        Of the class, for every component, where it is as frequent as in the library.
    library_share : float
        That frequency, in (0, 1).

    Returns
    -------
    float
        Lower limit of the one-sided 95 % interval (Wilson) about the estimate, at most `MOST_RUN_SHARE`.

    Notes
    -----
    Expectation maximization of Saerens, Latinne & Decaestecker 2002 (Neural Comput 14:21): the share is the mean of the
    probabilities shifted to it.

    Examples
    --------
    >>> estimate_share([0.9] * 50, 0.04) > 0.9, estimate_share([0.001] * 50, 0.04) < 0.04
    (True, True)
    """
    share = 0.5
    for _ in range(200):
        share = sum(shift_probability(p, share, library_share) for p in probabilities) / len(probabilities)
        share = min(max(share, 1e-4), 1.0 - 1e-4)
    n, z = len(probabilities), 1.645
    centre, half = share + z * z / (2 * n), z * sqrt((share * (1 - share) + z * z / (4 * n)) / n)
    return max(1e-4, min(MOST_RUN_SHARE, (centre - half) / (1 + z * z / n)))


def shift_probability(probability: float, share: float, library_share: float) -> float:
    """A probability of a class after its frequency changes from the library's to the run's.

    Parameters
    ----------
    probability : float
        In [0, 1].
    share, library_share : float
        Both in (0, 1).

    Returns
    -------
    float
        In [0, 1]: odds are multiplied by the ratio of the odds of the shares.

    Examples
    --------
    >>> round(shift_probability(0.5, 0.8, 0.2), 3)
    0.941
    """
    kept = min(max(probability, 1e-6), 1.0 - 1e-6)
    odds = kept / (1.0 - kept) * (share / (1.0 - share)) / (library_share / (1.0 - library_share))
    return odds / (1.0 + odds)


def _with_run_share(finding: Finding, share: float, library_share: float, note: str, settings: Settings) -> Finding:
    found = finding.identification
    if found is None or finding.is_background or finding.is_explained:
        return finding
    probability = hydrocarbon_probability(finding.component.peaks)
    if probability is None:
        probability = _class_probability(found.candidates, HYDROCARBON) if found.candidates else 0.0
    others = sum(c.probability for c in found.candidates if HYDROCARBON not in _classes(c))
    posterior = min(MOST_FROM_RUN, shift_probability(probability, share, library_share))
    if posterior < settings.claim_threshold or others >= MOST_OTHERS:
        return finding
    claimed = claim_class(found, HYDROCARBON, posterior)
    return replace(finding, identification=replace(claimed, notes=(*claimed.notes, note)))


def _with_carbons(finding: Finding, settings: Settings, scale: RetentionScale | None) -> Finding:
    """The finding with the carbon number in its class claim, where claim and molecular ion together allow, else in a note."""
    found = finding.identification
    if found is None or found.claim.level is not ClaimLevel.CLASS or not found.molecular_ion.estimates:
        return finding
    if not {HYDROCARBON, "n-alkane", "branched alkane"} & set(found.claim.members):
        return finding
    likely = max(found.molecular_ion.estimates, key=lambda estimate: estimate.probability)
    kind = _aliphatic_kind(finding.component, likely.nominal_mass, scale)
    if not kind or likely.probability < MIN_NOTED:
        return finding
    both = found.claim.probability * likely.probability
    if both >= settings.claim_threshold:
        claimed = claim_class(found, f"{kind} by ion series and molecular ion", both)
        return replace(finding, identification=claimed)
    note = f"Its molecular ion is likeliest m/z {likely.nominal_mass} ({percent(likely.probability)}): {kind}."
    return replace(finding, identification=replace(found, notes=(*found.notes, note)))


def _aliphatic_kind(component: Component, mass: int, scale: RetentionScale | None) -> str:
    """Kind of hydrocarbon by molecular mass, where its base peak is that of a chain and it elutes in order; else empty."""
    base = int(component.peaks.mz[int(np.argmax(component.peaks.intensity))])
    carbons, rest = divmod(mass, 14)
    if base % 14 not in (0, 1, 13) or not 4 <= carbons <= 12 or rest not in (0, 2):
        return ""
    highest = ALKANE_ABOVE if rest == 2 else RING_ABOVE
    if scale is not None and not _elutes_within(component.time_s / 60.0, scale, carbons, highest):
        return ""
    return f"alkane with {carbons} carbons" if rest == 2 else f"cycloalkane or alkene with {carbons} carbons"


def _elutes_within(minutes: float, scale: RetentionScale, carbons: int, highest: float) -> bool:
    """Whether a time lies from `BRANCHED_BELOW` before to `highest` after the n-alkane, in index units.

    Outside the ladder only its end counts.
    """
    ladder = scale.ladder
    index = linear_index(minutes, ladder)
    if index is None:
        is_early = minutes < ladder.times[0]
        low, high = (0.0, 100.0 * ladder.carbons[0]) if is_early else (100.0 * ladder.carbons[-1], float("inf"))
    else:
        low = high = index
    return high >= 100.0 * carbons - BRANCHED_BELOW and low <= 100.0 * carbons + highest


def _class_probability(candidates: Sequence[Candidate], name: str) -> float:
    """Probability of a class from the candidates, and from their vote where the compound is not in the library."""
    inside = sum(c.probability for c in candidates)
    within = sum(c.probability for c in candidates if name in _classes(c))
    return within + max(0.0, 1.0 - inside) * _votes(candidates).get(name, 0.0)


def name_class(
    found: Identification, component: Component, settings: Settings, scale: RetentionScale | None = None
) -> Identification:
    """The identification, with a class claim where it had no claim and its candidates agree on a class.

    Parameters
    ----------
    found : Identification
    component : Component
    settings : Settings
    scale : RetentionScale, optional
        An alkane must elute in order.

    Returns
    -------
    Identification
    """
    if found.claim.level is not ClaimLevel.NO_CLAIM or not found.candidates:
        return found
    threshold = settings.claim_threshold
    votes = _votes(found.candidates)
    carbons = _alkane_in_order(component, scale) if threshold <= ALKANE_PROBABILITY else None
    alkane = f"alkane with {carbons} carbons by ion series and molecular ion" if carbons else ""
    for name in _most_telling_first(found.candidates):
        probability = _class_probability(found.candidates, name)
        if votes.get(name, 0.0) >= VOTE_NEEDED.get(name, VOTE_NEEDED_OTHERWISE):
            probability = max(probability, VOTE_PROBABILITY)
        if probability >= threshold:
            if name == HYDROCARBON and alkane:
                break  # The carbon number tells more.
            return claim_class(found, name, min(probability, 1.0))
    return claim_class(found, alkane, ALKANE_PROBABILITY) if alkane else found


def _alkane_in_order(component: Component, scale: RetentionScale | None) -> int | None:
    """Carbon number of the alkane that ion series, molecular ion and, with a scale, the order of elution agree on."""
    if scale is None:
        return alkane_carbons(component, ALKANE_SERIES_SHARE)
    carbons = alkane_carbons(component, SERIES_SHARE_IN_ORDER)
    fits = carbons and _elutes_within(component.time_s / 60.0, scale, carbons, ALKANE_ABOVE)
    return carbons if fits else None


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
