"""Candidates too large to have eluted so early: the order of boiling points, by number of heavy atoms.

On every column the most branched alkane is the least retained compound of its size, so that a compound of n carbon, nitrogen,
oxygen, sulfur, chlorine and bromine atoms has a retention index of at least about ``85 n − 40`` (textbook knowledge; held against
indices from memory, not verified: neopentane 413 ≥ 385, diethyl ether 494, 2,2-dimethylbutane 537 ≥ 470, diisopropyl ether 602 ≥
555, 2,2,4-trimethylpentane 690 ≥ 640, 2,2,4,4-tetramethylpentane 773 ≥ 725, 2,2,4,4,6,8,8-heptamethylnonane 1320 ≥ 1320; none of
the 47 underivatized open records of this size with an index lies below). Fluorine and silicon compounds boil lower and are not
judged.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import log

from identify.chem.formula import Formula, parse_formula
from identify.errors import FormulaError
from identify.pipeline.run_claims import COMPOUND_LEVELS, claim_what_is_left, lower_claim
from identify.records import Candidate, ClaimLevel, EvidenceItem, Explanation, Identification, Verdict
from identify.retention import linear_index
from identify.runs.findings import Finding, RetentionScale
from identify.settings import Settings

KIND = "order of elution"
PER_ATOM, OFFSET, MOST_ATOMS = 85.0, 40.0, 20
JUDGED = frozenset({"C", "H", "N", "O", "S", "Cl", "Br"})
TOO_LARGE_ODDS = 50.0
"""How much less likely such a candidate becomes: the bound is a rule of thumb, no law."""
SLACK, SLACK_BEFORE = 30.0, 60.0
"""Index units, between rungs and before the first one."""
LAST_OF_EARLY = 8
WORTH_A_NOTE = 0.02


def weigh_by_elution(
    findings: Sequence[Finding], scale: RetentionScale | None, settings: Settings
) -> tuple[Finding, ...]:
    """Findings whose candidates are weighed by whether they can elute when their component does.

    Parameters
    ----------
    findings : sequence of Finding
    scale : RetentionScale or None
        Without one nothing is judged.
    settings : Settings

    Returns
    -------
    tuple of Finding
        As many, same order. Probabilities of the other candidates, and of what is not in the library, rise by as much as those of
        the candidates judged too large fall.
    """
    if scale is None:
        return tuple(findings)
    judged = []
    for finding in findings:
        found = finding.identification
        highest = highest_index(finding.component.time_s / 60.0, scale)
        if found is not None and highest is not None:
            found = _weigh(_without_impossible_mixture(found, highest, settings), highest, settings)
            finding = replace(finding, identification=found)
        judged.append(finding)
    return tuple(judged)


def least_index(formula: Formula) -> float | None:
    """Lower limit of the retention index of a compound, from its size; None where the rule does not judge.

    Parameters
    ----------
    formula : Formula

    Returns
    -------
    float or None

    Examples
    --------
    >>> least_index(parse_formula("C10H20O2")), least_index(parse_formula("C4H12Si"))
    (980.0, None)
    """
    elements = {symbol for symbol, _ in formula.counts}
    heavy = sum(count for symbol, count in formula.counts if symbol != "H")
    if not elements <= JUDGED or heavy > MOST_ATOMS:
        return None
    return PER_ATOM * heavy - OFFSET


def highest_index(minutes: float, scale: RetentionScale) -> float | None:
    """The largest retention index a peak at this time may have; None after the last rung.

    Parameters
    ----------
    minutes : float
    scale : RetentionScale

    Returns
    -------
    float or None
        With slack for the scale. Before a first rung of up to C8 the first two are extrapolated on a line: that early the
        distances of the alkanes shrink towards the hold-up time, so that the line lies above the truth. Before a later first
        rung, whose neighbours a warming oven has spread, the index is only known to be smaller.

    Examples
    --------
    >>> from identify.retention import Ladder
    >>> scale = RetentionScale(Ladder((7, 8), (3.0, 5.0)), "by hand", 5.0)
    >>> [highest_index(minutes, scale) for minutes in (4.0, 2.0, 5.1)]
    [780.0, 710.0, None]
    """
    ladder = scale.ladder
    index = linear_index(minutes, ladder)
    if index is not None:
        return index + SLACK
    if minutes > ladder.times[0]:
        return None
    first = 100.0 * ladder.carbons[0]
    if ladder.carbons[0] > LAST_OF_EARLY:
        return first + SLACK
    step = 100.0 * (ladder.carbons[1] - ladder.carbons[0]) / (ladder.times[1] - ladder.times[0])
    return min(first + SLACK, first - step * (ladder.times[0] - minutes) + SLACK_BEFORE)


def _without_impossible_mixture(found: Identification, highest: float, settings: Settings) -> Identification:
    """The identification without its doubt about purity, where that rests on parts too large to be there."""
    purity = found.purity
    if purity is None or purity.verdict is not Verdict.CONFLICTS or not found.candidates:
        return found
    impossible = [part.name for part in purity.parts if _is_too_large(part.formula, highest)]
    if not impossible:
        return found
    note = f"Not the mixture that its spectrum alone suggests: too large to elute so early are {'; '.join(impossible)}."
    reason = f"{purity.reason} But these cannot elute so early: {'; '.join(impossible)}."
    cleared = replace(
        found, purity=replace(purity, verdict=Verdict.INCONCLUSIVE, reason=reason), notes=(*found.notes, note)
    )
    return claim_what_is_left(cleared, settings.claim_threshold)


def _weigh(found: Identification, highest: float, settings: Settings) -> Identification:
    too_large = [_is_too_large(candidate.entry.formula_as_measured, highest) for candidate in found.candidates]
    lost = sum(c.probability for c, flag in zip(found.candidates, too_large, strict=True) if flag)
    if lost < WORTH_A_NOTE:
        return found
    whole = 1.0 - lost * (1.0 - 1.0 / TOO_LARGE_ODDS)
    weighed = [
        _with_probability(c, (c.probability / TOO_LARGE_ODDS if flag else c.probability) / whole, highest, flag)
        for c, flag in zip(found.candidates, too_large, strict=True)
    ]
    order = sorted(weighed, key=lambda candidate: -candidate.probability)
    ranked = tuple(replace(c, rank=rank) for rank, c in enumerate(order, start=1))
    names = [c.entry.identity.name for c, flag in zip(found.candidates, too_large, strict=True) if flag][:3]
    note = f"Too large to elute before index {highest:.0f}, hence hardly possible: {'; '.join(names)}."
    inside = min(1.0, sum(c.probability for c in ranked))
    changed = replace(found, candidates=ranked, in_library_probability=inside)
    if too_large[0] and found.claim.level in (*COMPOUND_LEVELS, ClaimLevel.ISOMER_GROUP):
        without = replace(changed.claim, level=ClaimLevel.TENTATIVE, group_probability=0.0)
        return lower_claim(replace(changed, claim=without), note, settings.claim_threshold)
    if too_large[0]:  # else the candidates' own evidence says it: nobody would have looked at them first
        changed = replace(changed, notes=(*changed.notes, note))
    if found.claim.level is not ClaimLevel.NO_CLAIM:
        return changed
    of_group = ranked[0].probability if too_large[0] else min(1.0, found.claim.group_probability / whole)
    claim = replace(changed.claim, compound_probability=ranked[0].probability, group_probability=of_group)
    return claim_what_is_left(replace(changed, claim=claim), settings.claim_threshold)


def _is_too_large(formula: str, highest: float) -> bool:
    try:
        least = least_index(parse_formula(formula))
    except FormulaError:
        return False
    return least is not None and least > highest


def _with_probability(candidate: Candidate, probability: float, highest: float, is_too_large: bool) -> Candidate:
    new = min(1.0 - 1e-9, max(1e-12, probability))
    old = min(1.0 - 1e-9, max(1e-12, candidate.probability))
    change = log(new / (1.0 - new)) - log(old / (1.0 - old))
    explanation = candidate.explanation
    if explanation.parts:
        part = Explanation(KIND, change, "candidates too large for this time leave their probability to the others")
        explanation = Explanation(
            explanation.label, explanation.value + change, explanation.detail, (*explanation.parts, part)
        )
    evidence = candidate.evidence
    if is_too_large:
        evidence = (
            *evidence,
            EvidenceItem(
                KIND, Verdict.CONFLICTS, "larger than what elutes by then", observed=f"index at most {highest:.0f}",
                expected=f"at least {least_index(parse_formula(candidate.entry.formula_as_measured)):.0f}",
                log_odds=-log(TOO_LARGE_ODDS), source="most branched alkanes elute first (textbook knowledge)",
            ),
        )  # fmt: skip
    return replace(candidate, probability=new, explanation=explanation, evidence=evidence)
