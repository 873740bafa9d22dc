"""The molecular isotope cluster against a candidate: M+2 and beyond (Cl, Br, S, Si), and the carbon count from M+1."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

from identify.evidence.carbon_errors import ERRORS, NARROW_CLASSES, CarbonErrors
from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import Verdict

PATTERN = "isotope pattern"
CARBONS = "carbon count"

CARBON_13 = 0.010816
"""13C/12C, 0.0107/0.9893 (Berglund & Wieser 2011)."""
PATTERN_SOURCE = (
    "Isotope abundances of Berglund & Wieser 2011 convolved for the formula; [M−2], [M−1] and [M+H]+ taken into account; "
    "weighed on open EI records"
)
CARBON_SOURCE = (
    "(M+1)/M with N, S, Si of the formula; error model fitted on open EI records per instrument class; common practice: CH4 1 %, "
    "C2H6 2 %, thirty carbons a third"
)


@dataclass(frozen=True, slots=True)
class CarbonCount:
    """Carbons counted from M+1, with the interval that holds 90 % and the one that holds half of the open records."""

    counted: float
    low: float
    high: float
    inner_low: float
    inner_high: float


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
    sigma = math.hypot(0.12 * predicted, 0.008 * height, 0.5 * facts.floor, 0.3)
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


def count_carbons(facts: QueryFacts, formula: FormulaFacts) -> CarbonCount | str:
    """Carbons counted from (M+1)/M with an interval, or the reason why M+1 says nothing.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts
        Gives M and the contributions of N, S, Si and the like; its own carbon number is not used.

    Returns
    -------
    CarbonCount or str

    Notes
    -----
    ``n = [(M+1 − 13C of M−1 and M−2) / M − others] / 0.010816`` where *others* is what H, N, O, S and Si of the formula add.
    The interval holds 90 % of the open records of the instrument class at this intensity of M; it reaches further down than up,
    because [M+H]+, saturation and rounding make M+1 too tall far more often than anything makes it too small.
    """
    mass = formula.nominal_mass
    parts = take_apart(facts, formula)
    model = ERRORS.get(facts.instrument_class, ERRORS["unknown"])
    if parts.molecular < model[0].molecular:
        return f"M is below {model[0].molecular:g} % of the base peak: M+1 says nothing reliable about carbons."
    if not facts.has_isotope_peaks:
        return "The query records no isotope peaks."
    if facts.highest_mz is not None and mass + 1 > facts.highest_mz:
        return f"M + 1 (m/z {mass + 1}) lies outside the measured range."
    if mass in facts.saturated:
        return "M looks clipped by a saturated detector, which makes M+1 too tall."
    if facts.at(mass + 1) <= 0 and facts.floor >= 0.004 * parts.molecular * max(formula.carbons, 1):
        return "M+1 is not recorded and may lie below what the query records."
    others = formula.ratio(1) - CARBON_13 * formula.carbons
    seen = facts.at(mass + 1) - parts.minus_one * formula.ratio(2) - parts.minus_two * formula.ratio(3)
    counted = max((seen / parts.molecular - others) / CARBON_13, 0.0)
    row = error_row(parts.molecular, model)
    interval = tuple(counted * math.exp(-quantile) for quantile in (row.high, row.low))
    inner = tuple(counted * math.exp(-quantile) for quantile in (row.upper, row.lower))
    return CarbonCount(counted, interval[0], interval[1], inner[0], inner[1])


def error_row(molecular: float, model: tuple[CarbonErrors, ...]) -> CarbonErrors:
    """Error quantiles at an intensity of M, interpolated on its logarithm between the fitted knots."""
    if molecular <= model[0].molecular:
        return model[0]
    for left, right in pairwise(model):
        if molecular <= right.molecular:
            share = math.log(molecular / left.molecular) / math.log(right.molecular / left.molecular)
            return CarbonErrors(*(low + share * (high - low) for low, high in zip(left, right, strict=True)))
    return model[-1]


def check_carbon_count(facts: QueryFacts, formula: FormulaFacts | None) -> Finding:
    """Whether (M+1)/M fits the number of carbons in the candidate's formula.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None

    Returns
    -------
    Finding
        An excess conflicts only where [M+H]+ cannot explain it: no N, O or S in the formula, or an instrument class on
        which the open records show hardly any.
    """
    if formula is None:
        return not_assessed(CARBONS, "The entry has no formula to count carbons in.")
    if formula.carbons == 0:
        return not_assessed(CARBONS, "The formula has no carbon to count.")
    count = count_carbons(facts, formula)
    if isinstance(count, str):
        return not_assessed(CARBONS, count)
    carbons = formula.carbons
    family = "narrow" if facts.instrument_class in NARROW_CLASSES else "wide"
    if count.low <= carbons <= count.high:
        middle = count.inner_low <= carbons <= count.inner_high
        verdict, side = Verdict.AGREES, "near" if middle else "within"
        reason = f"M+1 fits the {carbons} carbons of the formula."
    elif carbons > count.high:
        verdict, reason = Verdict.CONFLICTS, f"M+1 is too small for {carbons} carbons."
        side = "too few" if count.counted > 0.3 * carbons else "far too few"
    elif family == "narrow":
        verdict, side = Verdict.CONFLICTS, "excess"
        reason = f"M+1 is taller than {carbons} carbons give; on {facts.instrument_class} instruments [M+H]+ rarely adds so much."
    elif any(formula.formula.count(symbol) for symbol in ("N", "O", "S")):
        verdict, side = Verdict.INCONCLUSIVE, "excess explainable"
        reason = f"M+1 is taller than {carbons} carbons give; [M+H]+ or a second compound would explain it."
    else:
        verdict, side = Verdict.CONFLICTS, "excess"
        reason = f"M+1 is taller than {carbons} carbons give, and this formula hardly forms [M+H]+."
    return Finding(
        CARBONS,
        verdict,
        reason,
        cell=f"{family}, {side}",
        observed=f"{count.counted:.1f} carbons",
        expected=f"{carbons} carbons",
        uncertainty=f"{count.low:.1f}–{count.high:.1f} (90 % of open records, {facts.instrument_class} instruments)",
        source=CARBON_SOURCE,
    )
