"""Are the accurate masses of the query those of pieces of the candidate's formula?"""

from __future__ import annotations

from functools import lru_cache
from statistics import median

from identify.chem.elements import ELECTRON_MASS
from identify.chem.formula import Formula, parse_formula
from identify.chem.subformulas import explain_mz
from identify.errors import FormulaError
from identify.evidence.accurate import mass_error_histogram
from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import Verdict
from identify.settings import Settings

ACCURATE = "accurate mass"
SOURCE = (
    "Subformulas of the formula as measured within the tolerance of the settings, electron mass accounted for; weighed on the "
    "accurate-mass records among the open EI records"
)


CLASS_PPM = 2.0
"""Width of the classes in which mass errors are counted."""
DOUBLE_CHARGE_SATURATION = 6.0
"""Rings plus double bonds from which doubly charged ions are tried: common in polycyclic and polychlorinated aromatics."""


def tolerance_at(mz: float, settings: Settings) -> float:
    """Tolerance in Da at an m/z: the larger of the two that the settings give."""
    return max(settings.tolerance_da, settings.tolerance_ppm * mz * 1e-6)


@lru_cache(maxsize=20_000)
def _best_ion(formula: str, mz: float, tolerance_da: float) -> tuple[Formula, float] | None:
    """Subformula ion nearest to an m/z and its deviation in Da; None when none lies within the tolerance."""
    try:
        ions = explain_mz(parse_formula(formula), mz, min(tolerance_da, 0.5))
    except FormulaError:  # too many subsets to enumerate: such a formula explains everything and decides nothing
        return None
    return (ions[0], mz - ions[0].monoisotopic_mass) if ions else None


def check_accurate_mass(facts: QueryFacts, formula: FormulaFacts | None, settings: Settings) -> Finding:
    """Whether the accurate masses of the query are those of pieces of the candidate's formula.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None
    settings : Settings
        Tolerance: the larger of `tolerance_ppm` and `tolerance_da`.

    Returns
    -------
    Finding
    """
    ions, recalibration = facts.accurate_ions, facts.recalibration
    if not ions or recalibration is None:
        return not_assessed(ACCURATE, "The query has nominal masses only.")
    if formula is None:
        return not_assessed(ACCURATE, "The entry has no formula to take apart.")
    limit = formula.nominal_mass + 0.6
    explained = total = 0.0
    errors: list[float] = []
    missed: list[str] = []
    for measured, relative in ions:
        mz = recalibration.correct(measured)
        weight = relative * measured
        total += weight
        best = _best_ion(formula.formula.hill, mz, tolerance_at(mz, settings)) if mz <= limit else None
        if best is None and formula.saturation >= DOUBLE_CHARGE_SATURATION and 2 * mz <= limit:
            best = _best_ion(formula.formula.hill, 2 * mz + ELECTRON_MASS, tolerance_at(mz, settings))
        if best is None:
            missed.append(f"{mz:.4f}")
        else:
            explained += weight
            errors.append(best[1] / best[0].monoisotopic_mass * 1e6)
    share = explained / total
    size = next(word for edge, word in ((0.5, "few"), (0.8, "half"), (0.95, "most"), (2.0, "all")) if share < edge)
    middle = f", median error {median(errors):+.1f} ppm ({_describe_errors(errors)})" if errors else ""
    if size == "all":
        verdict, reason = Verdict.AGREES, "The main ions have the accurate masses of pieces of this formula."
    elif size == "most":
        verdict = Verdict.INCONCLUSIVE
        reason = f"Most ions fit pieces of this formula; m/z {', '.join(missed[:3])} does not."
    else:
        verdict, reason = (
            Verdict.CONFLICTS,
            f"No piece of this formula has the accurate mass of m/z {', '.join(missed[:4])}.",
        )
    return Finding(
        ACCURATE,
        verdict,
        reason,
        cell=size,
        observed=f"{len(errors)} of {len(ions)} ions, {100 * share:.0f} % by weight{middle}",
        expected="all main ions",
        uncertainty=f"± {settings.tolerance_ppm:g} ppm or ± {1000 * settings.tolerance_da:g} mDa. {recalibration.reason}",
        source=SOURCE,
    )


def _describe_errors(errors_ppm: list[float]) -> str:
    """Histogram of the mass errors in words: ions in each class of `CLASS_PPM` that has any."""
    classes = [
        f"{low:+g} to {low + CLASS_PPM:+g}: {number}"
        for low, number in mass_error_histogram(errors_ppm, CLASS_PPM)
        if number
    ]
    return f"ions by error in ppm: {', '.join(classes)}"
