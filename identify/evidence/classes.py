"""What can be said when nothing in the library fits: class, shared substructure, and 'like X plus CH2'."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.evidence.class_ions import RULES, ClassRule
from identify.evidence.class_model import CALIBRATION, RULE_LOG_RATIO
from identify.evidence.facts import QueryFacts
from identify.evidence.shifted import ShiftedMatch
from identify.records import Analogue, ClassEvidence, Entry

MAX_NEIGHBOURS = 20
NEIGHBOUR_POWER = 8
"""Neighbours vote with the cosine to this power: only near ones count."""
SHIFTS = {
    0: "same mass", 2: "plus H2", -2: "minus H2", 12: "plus C", 14: "plus CH2", -14: "minus CH2", 15: "plus NH", 16: "plus O",
    -16: "minus O", 18: "plus H2O", -18: "minus H2O", 28: "plus C2H4 or CO", -28: "minus C2H4 or CO", 30: "plus CH2O",
    -30: "minus CH2O", 32: "plus O2, S or CH4O", -32: "minus O2, S or CH4O", 34: "chlorine for hydrogen",
    -34: "hydrogen for chlorine", 42: "plus C3H6 or C2H2O", -42: "minus C3H6 or C2H2O", 44: "plus CO2 or C2H4O",
    -44: "minus CO2 or C2H4O", 45: "plus nitro (for hydrogen)", 56: "plus C4H8", -56: "minus C4H8", 70: "plus C5H10",
    -70: "minus C5H10", 72: "plus trimethylsilyl (for hydrogen)", -72: "minus trimethylsilyl", 78: "bromine for hydrogen",
    -78: "hydrogen for bromine", 114: "plus tert-butyldimethylsilyl (for hydrogen)",
}  # fmt: skip
"""Formula changes usually behind a mass difference; several can share a nominal one."""


def met_rules(facts: QueryFacts) -> tuple[ClassRule, ...]:
    """Class rules whose ions the query shows.

    Parameters
    ----------
    facts : QueryFacts

    Returns
    -------
    tuple of ClassRule
        A rule with an ion below the measured range is not met.
    """
    return tuple(rule for rule in RULES if all(facts.at(mz) >= least for mz, least in rule.ions))


def vote_shares(neighbours: Sequence[tuple[Entry, float]]) -> tuple[dict[str, float], dict[str, list[str]]]:
    """Share of the neighbours' votes for each class, and who voted.

    Parameters
    ----------
    neighbours : sequence of (Entry, cosine in [0, 1])
        Best first; the first `MAX_NEIGHBOURS` with a readable structure vote.

    Returns
    -------
    shares : dict of str to float
        In [0, 1].
    voters : dict of str to list of str
        Names, nearest first.
    """
    shares: dict[str, float] = defaultdict(float)
    voters: dict[str, list[str]] = defaultdict(list)
    total = 0.0
    for entry, cosine in neighbours[:MAX_NEIGHBOURS]:
        if not entry.identity.smiles or cosine <= 0:
            continue
        try:
            classes = compound_classes(entry.identity.smiles)
        except StructureError:
            continue
        vote = cosine**NEIGHBOUR_POWER
        total += vote
        for name in classes:
            shares[name] += vote
            voters[name].append(entry.identity.name or entry.accession)
    return {name: share / total for name, share in shares.items()} if total else {}, dict(voters)


def find_classes(
    facts: QueryFacts, neighbours: Sequence[tuple[Entry, float]], least: float = 0.3
) -> tuple[ClassEvidence, ...]:
    """Classes the query probably belongs to, most probable first.

    Parameters
    ----------
    facts : QueryFacts
    neighbours : sequence of (Entry, cosine in [0, 1])
        Most similar entries, best first.
    least : float
        Smallest probability listed.

    Returns
    -------
    tuple of ClassEvidence

    Notes
    -----
    ``logit p = a + b · logit(share of votes) + c · (best cosine) + d · (log-ratio of characteristic ions)``, coefficients fitted
    on open records with the compound removed.
    """
    shares, voters = vote_shares(neighbours)
    best = max((cosine for _, cosine in neighbours[:MAX_NEIGHBOURS]), default=0.0)
    met: dict[str, list[ClassRule]] = defaultdict(list)
    for rule in met_rules(facts):
        met[rule.compound_class].append(rule)
    found = []
    for name in sorted(set(shares) | set(met)):
        ratio = max(
            (RULE_LOG_RATIO.get(f"{rule.compound_class}: {rule.text}", 0.0) for rule in met.get(name, ())), default=0.0
        )
        probability = class_probability(shares.get(name, 0.0), best, ratio)
        if probability >= least:
            ions = tuple(f"{rule.text} ({rule.source})" for rule in met.get(name, ()))
            found.append(ClassEvidence(name, probability, tuple(voters.get(name, ())[:3]), ions))
    return tuple(sorted(found, key=lambda item: (-item.probability, item.name)))


def class_probability(share: float, best_cosine: float, ion_log_ratio: float) -> float:
    """Calibrated probability of a class (see `find_classes`).

    Parameters
    ----------
    share : float
        Share of the neighbours' votes, in [0, 1].
    best_cosine : float
        Cosine of the nearest neighbour, in [0, 1].
    ion_log_ratio : float
        ln ratio of the best characteristic-ion rule met; 0 for none.

    Returns
    -------
    float
        In (0, 1).
    """
    clipped = min(max(share, 0.01), 0.99)
    logit = CALIBRATION[0] + CALIBRATION[1] * math.log(clipped / (1.0 - clipped))
    logit += CALIBRATION[2] * best_cosine + CALIBRATION[3] * ion_log_ratio
    return 1.0 / (1.0 + math.exp(-logit))


def describe_shift(shift: int) -> str:
    """A mass difference in words.

    Parameters
    ----------
    shift : int
        Query minus analogue, in Da.

    Returns
    -------
    str

    Examples
    --------
    >>> describe_shift(14), describe_shift(17)
    ('plus CH2', '+17 Da')
    """
    if shift in SHIFTS:
        return SHIFTS[shift]
    count, rest = divmod(abs(shift), 14)
    if rest == 0 and count <= 12:
        return f"{'plus' if shift > 0 else 'minus'} C{count}H{2 * count}"
    return f"{shift:+d} Da"


def find_analogues(matches: Sequence[ShiftedMatch], count: int = 5) -> tuple[Analogue, ...]:
    """Entries that resemble the query once their fragments are shifted, best first.

    Parameters
    ----------
    matches : sequence of ShiftedMatch
        From `identify.evidence.shifted.match_shifted`.
    count : int
        How many at most.

    Returns
    -------
    tuple of Analogue
        In words like 'plus CH2'; a difference without a usual explanation makes no analogue.
    """
    explained = [match for match in matches if not describe_shift(match.shift).endswith(" Da")]
    ranked = sorted(explained, key=lambda match: -match.score)[:count]
    return tuple(
        Analogue(
            match.entry.identity.name or match.entry.accession,
            match.entry.accession,
            match.shift,
            describe_shift(match.shift),
            match.score,
        )
        for match in ranked
    )
