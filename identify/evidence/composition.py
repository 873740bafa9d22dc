"""The formula as such against the query: can it exist, does its nitrogen show, and can its pieces give the ions seen?"""

from __future__ import annotations

from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import Verdict

FORMULA_RULES = "nitrogen rule and rings"
EXPLAINED = "intensity explained"

LEAST_INTENSITY = 20.0
"""Summed relative intensity below which nothing is judged."""
RULES_SOURCE = (
    "Nitrogen rule; rings plus double bonds after Bright & Chen, J. Chem. Educ. 1983, 60, 557; "
    "weighed on open EI records"
)
EXPLAINED_SOURCE = (
    "Subformulas of the formula as measured at nominal mass (own enumeration); weighed on open EI records"
)


def check_formula_rules(facts: QueryFacts, formula: FormulaFacts | None) -> Finding:
    """Whether the formula can be a molecule, and whether fragment parity fits its number of nitrogens.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None

    Returns
    -------
    Finding

    Notes
    -----
    Without nitrogen, even-electron fragments of an even-mass molecule have odd m/z; one nitrogen turns that round. The share of
    intensity at even m/z (13C of the peak below taken away, upper half of the mass range, M itself left out) is what is weighed.
    """
    if formula is None:
        return not_assessed(FORMULA_RULES, "The entry has no formula.")
    if formula.saturation < 0 or formula.saturation != int(formula.saturation):
        return Finding(
            FORMULA_RULES,
            Verdict.CONFLICTS,
            f"Rings plus double bonds of {formula.saturation:g} are impossible for a molecule: check the entry's formula.",
            cell="impossible",
            observed=f"{formula.saturation:g}",
            expected="a whole number ≥ 0",
            source=RULES_SOURCE,
        )
    share = _even_share(facts, formula.nominal_mass)
    if share is None:
        return not_assessed(FORMULA_RULES, "Too little intensity below M to judge the parity of fragments.")
    size = "few" if share < 0.2 else "some" if share < 0.45 else "many"
    nitrogen = "no N" if formula.nitrogens == 0 else "odd N" if formula.nitrogens % 2 else "even N"
    if (nitrogen, size) in (("no N", "few"), ("odd N", "many"), ("even N", "some")):
        verdict, reason = Verdict.AGREES, f"The parity of the fragments is usual for {_count(formula.nitrogens)}."
    elif (nitrogen, size) == ("even N", "few"):
        verdict, reason = (
            Verdict.CONFLICTS,
            f"Hardly any fragment has an even m/z, as if there were no nitrogen; the formula has {formula.nitrogens} N.",
        )
    elif (nitrogen, size) == ("no N", "many"):
        verdict, reason = (
            Verdict.INCONCLUSIVE,
            "Fragments at even m/z dominate: nitrogen would explain them, and so do losses of whole molecules.",
        )
    else:
        verdict, reason = (
            Verdict.INCONCLUSIVE,
            f"The parity of the fragments says little about {_count(formula.nitrogens)}.",
        )
    return Finding(
        FORMULA_RULES,
        verdict,
        reason,
        cell=f"{nitrogen}, {size} even",
        observed=f"{100 * share:.0f} % of the fragment intensity at even m/z",
        expected=f"{_count(formula.nitrogens)}, rings plus double bonds {formula.saturation:g}",
        source=RULES_SOURCE,
    )


def _count(nitrogens: int) -> str:
    return "a molecule without nitrogen" if nitrogens == 0 else f"a molecule with {nitrogens} N"


def _even_share(facts: QueryFacts, mass: int) -> float | None:
    even_sums, odd_sums = facts.even_odd
    stop = min(max(mass - 3, 0), len(even_sums) - 1)
    even, odd = even_sums[stop], odd_sums[stop]
    return even / (even + odd) if even + odd >= LEAST_INTENSITY else None


def check_explained(facts: QueryFacts, formula: FormulaFacts | None) -> Finding:
    """Share of the query's intensity whose m/z a subformula of the candidate can have.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None

    Returns
    -------
    Finding
        The strongest ions that no subformula reaches are listed. Ions above M are left to their own check.
    """
    if formula is None:
        return not_assessed(EXPLAINED, "The entry has no formula to take apart.")
    mass = formula.nominal_mass
    total = missed = 0.0
    unexplained: list[tuple[float, int]] = []
    dense, reachable = facts.dense, formula.reachable
    for mz, value in facts.peaks:
        if mz > mass:
            break
        total += value
        if not reachable[mz]:
            left = value - 1.3 * (formula.ratio(1) * dense[mz - 1] + formula.ratio(2) * dense[max(mz - 2, 0)])
            if left > 0:
                missed += left
                unexplained.append((left, mz))
    if total < LEAST_INTENSITY:
        return not_assessed(EXPLAINED, "Almost nothing of the query lies at or below M.")
    share = 100.0 * missed / total
    size = next(
        word
        for limit, word in ((0.05, "none"), (0.5, "trace"), (2.0, "little"), (6.0, "some"), (200.0, "much"))
        if share < limit
    )
    unexplained.sort(reverse=True)
    listed = ", ".join(str(mz) for _, mz in unexplained[:6])
    if size in ("none", "trace"):
        verdict, reason = Verdict.AGREES, "Pieces of this formula can give practically all ions of the query."
    elif size == "much":
        verdict, reason = Verdict.CONFLICTS, f"No piece of this formula has the mass of m/z {listed}."
    else:
        verdict, reason = (
            Verdict.INCONCLUSIVE,
            f"A part of the intensity (m/z {listed}) is not reachable; background explains it.",
        )
    return Finding(
        EXPLAINED,
        verdict,
        reason,
        cell=size,
        observed=f"{100 - share:.1f} % of the intensity reachable" + (f"; not: m/z {listed}" if listed else ""),
        expected="all but background",
        source=EXPLAINED_SOURCE,
    )
