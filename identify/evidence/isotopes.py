"""The molecular isotope cluster against a candidate: M+2 and beyond (Cl, Br, S, Si), and the carbon count from M+1."""

from __future__ import annotations

import math
from dataclasses import dataclass

from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import Verdict

PATTERN = "isotope pattern"
CARBONS = "carbon count"

CARBON_13 = 0.010816
PATTERN_SOURCE = (
    "Isotope abundances of Berglund & Wieser 2011 convolved for the formula; [M−2], [M−1] and [M+H]+ taken into account; "
    "weighed on open EI records"
)
CARBON_SOURCE = (
    "(M+1)/M with N, S, Si of the formula; error model fitted on open EI records per instrument class; common practice: CH4 1 %, "
    "C2H6 2 %, thirty carbons a third"
)


@dataclass(frozen=True, slots=True)
class ClusterParts:
    """The molecular cluster taken apart: how much of each ion, if the formula is right.

    Attributes
    ----------
    molecular, protonated, minus_one, minus_two : float
        Relative intensity of M+., [M+H]+, [M−1]+ and [M−2]+. at their first isotope peak.
    """

    molecular: float
    protonated: float
    minus_one: float
    minus_two: float

    def predicted(self, formula: FormulaFacts, offset: int) -> float:
        """Intensity that these ions give at M + `offset`."""
        return (
            self.molecular * formula.ratio(offset)
            + self.protonated * formula.ratio(offset - 1)
            + self.minus_one * formula.ratio(offset + 1)
            + self.minus_two * formula.ratio(offset + 2)
        )


def take_apart(facts: QueryFacts, formula: FormulaFacts) -> ClusterParts:
    """Ions of the molecular cluster, from the lowest mass upwards, each with the formula's own isotope pattern.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts

    Returns
    -------
    ClusterParts

    Notes
    -----
    The system is triangular: [M−2] is what lies at M−2, [M−1] what is left at M−1, and so on; negative remainders count as 0.
    Losing hydrogen changes the pattern by less than 0.01 % per atom and is neglected.
    """
    mass = formula.nominal_mass
    first, second, third = formula.ratio(1), formula.ratio(2), formula.ratio(3)
    minus_two = facts.at(mass - 2)
    minus_one = max(facts.at(mass - 1) - minus_two * first, 0.0)
    molecular = max(facts.at(mass) - minus_one * first - minus_two * second, 0.0)
    protonated = max(facts.at(mass + 1) - molecular * first - minus_one * second - minus_two * third, 0.0)
    return ClusterParts(molecular, protonated, minus_one, minus_two)


def check_isotope_pattern(facts: QueryFacts, formula: FormulaFacts | None) -> Finding:
    """Whether M+2 and beyond look as the candidate's Cl, Br, S and Si demand, or as their absence does.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None

    Returns
    -------
    Finding
    """
    if formula is None:
        return not_assessed(PATTERN, "The entry has no formula to compute a pattern from.")
    parts = take_apart(facts, formula)
    mass = formula.nominal_mass
    expected = [formula.ratio(offset) for offset in range(formula.last_offset + 1)]
    heavy = sum(expected[2:])
    height = parts.molecular
    if height < 1.0:
        return not_assessed(PATTERN, "The query does not show M strongly enough to judge its isotope peaks.")
    if mass + 2 > (facts.highest_mz or mass + 2):
        return not_assessed(PATTERN, f"M + 2 (m/z {mass + 2}) lies outside the measured range.")
    if height * max(heavy, 0.3) < 2.0 * facts.floor:
        return not_assessed(PATTERN, "Isotope peaks this weak are not recorded in the query.")
    offset = max(range(2, max(formula.last_offset, 2) + 1), key=formula.ratio)
    predicted, seen = parts.predicted(formula, offset), facts.at(mass + offset)
    sigma = math.hypot(0.12 * predicted, 0.02 * height, 0.5 * facts.floor, 0.3)
    deviation = (seen - predicted) / sigma
    family = "halogen" if heavy > 0.25 else "sulfur or silicon" if heavy > 0.035 else "none"
    side = "low" if deviation < -3 else "ok" if deviation <= 3 else "high"
    names = ", ".join(sorted(formula.heavy)) or "no Cl, Br, S or Si"
    if side == "ok" and family == "none":
        reason, verdict = f"M + {offset} is as small as a molecule with {names} should show.", Verdict.AGREES
    elif side == "ok":
        reason, verdict = f"M + {offset} is as tall as {names} demands.", Verdict.AGREES
    elif side == "low":
        reason, verdict = f"M + {offset} is too small for {names}.", Verdict.CONFLICTS
    else:
        reason = f"M + {offset} is taller than this formula ({names}) explains."
        verdict = Verdict.CONFLICTS if parts.molecular >= 5.0 else Verdict.INCONCLUSIVE
    return Finding(
        PATTERN,
        verdict,
        reason,
        cell=f"{family}, {side}",
        observed=f"M + {offset} {100 * seen / height:.1f} % of M",
        expected=f"{100 * predicted / height:.1f} %",
        uncertainty=f"± {100 * sigma / height:.1f} %",
        source=PATTERN_SOURCE,
    )


def check_carbon_count(facts: QueryFacts, formula: FormulaFacts | None) -> Finding:
    """Whether (M+1)/M fits the number of carbons in the candidate's formula.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None

    Returns
    -------
    Finding
        One-sided where [M+H]+ explains an excess; `not assessed` below the floor.
    """
    if formula is None:
        return not_assessed(CARBONS, "The entry has no formula to count carbons in.")
    mass = formula.nominal_mass
    parts = take_apart(facts, formula)
    if parts.molecular < 10.0:
        return not_assessed(CARBONS, "M is below 10 % of the base peak: M+1 says nothing reliable about carbons.")
    if not facts.has_isotope_peaks:
        return not_assessed(CARBONS, "The query records no isotope peaks.")
    if facts.highest_mz is not None and mass + 1 > facts.highest_mz:
        return not_assessed(CARBONS, f"M + 1 (m/z {mass + 1}) lies outside the measured range.")
    if mass in facts.saturated:
        return not_assessed(CARBONS, "M looks clipped by a saturated detector, which makes M+1 too tall.")
    height = parts.molecular
    others = formula.ratio(1) - CARBON_13 * formula.carbons
    seen = facts.at(mass + 1) - parts.minus_one * formula.ratio(2) - parts.minus_two * formula.ratio(3)
    counted = (seen / height - others) / CARBON_13
    sigma = math.hypot(0.12 * formula.carbons, 100 * 0.3 / height / 1.08, 0.5)
    deviation = (counted - formula.carbons) / sigma
    side = (
        "far low"
        if deviation < -3
        else "low"
        if deviation < -1.6
        else "ok"
        if deviation <= 1.6
        else "high"
        if deviation <= 4
        else "far high"
    )
    low, high = max(counted - 1.6 * sigma, 0.0), counted + 1.6 * sigma
    if side == "ok":
        verdict, reason = Verdict.AGREES, f"M+1 fits the {formula.carbons} carbons of the formula."
    elif side == "far low":
        verdict, reason = Verdict.CONFLICTS, f"M+1 is too small for {formula.carbons} carbons."
    elif side == "low":
        verdict, reason = Verdict.INCONCLUSIVE, f"M+1 is rather small for {formula.carbons} carbons."
    else:
        verdict = Verdict.INCONCLUSIVE
        reason = f"M+1 is taller than {formula.carbons} carbons give; [M+H]+ or a second compound would explain it."
    return Finding(
        CARBONS,
        verdict,
        reason,
        cell=side,
        observed=f"{counted:.1f} carbons ({low:.1f}–{high:.1f})",
        expected=f"{formula.carbons} carbons",
        uncertainty=f"± {sigma:.1f} (one standard deviation)",
        source=CARBON_SOURCE,
    )
