"""Accurate masses: internal recalibration on well-known ions, and ions explained by pieces of the candidate's formula."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from statistics import median

import numpy as np

from identify.chem.formula import Formula, parse_formula
from identify.chem.subformulas import explain_mz
from identify.errors import FormulaError
from identify.evidence.facts import FormulaFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import Peaks, Verdict
from identify.settings import Settings

ACCURATE = "accurate mass"
SOURCE = (
    "Subformulas of the formula as measured within the tolerance of the settings, electron mass accounted for; weighed on the "
    "accurate-mass records among the open EI records"
)
MAX_IONS = 16
"""Ions judged per candidate: the ones with the greatest intensity times m/z."""
MIN_SHARE = 0.005
"""Smallest share of the base peak of an ion that is judged; below, mass errors grow."""

REFERENCE_IONS = {
    "CF3+": "calibrant m/z 69", "C3F5+": "calibrant m/z 131", "C4F9+": "calibrant m/z 219", "C3H9Si+": "siloxane m/z 73",
    "C5H15OSi2+": "siloxane m/z 147", "C5H15O3Si3+": "siloxane m/z 207", "C7H21O4Si4+": "siloxane m/z 281",
    "C9H27O5Si5+": "siloxane m/z 355", "C11H33O6Si6+": "siloxane m/z 429",
}  # fmt: skip
"""Ions whose formula is known beforehand: PFTBA calibrant and column bleed (`standards.md` 2.3 and 3.3)."""
SEARCH_PPM = 40.0
"""A reference ion is looked for within this distance; a calibration further off than that is not internal any more."""
AGREEMENT_PPM = 6.0
"""Two reference ions must agree this well before their shift is applied."""


@dataclass(frozen=True, slots=True)
class Recalibration:
    """A shift found on reference ions.

    Attributes
    ----------
    shift_ppm : float
        Measured minus true, median over the ions; 0 when none was found.
    applied : bool
        Whether at least two ions agree, so that the shift is taken away.
    ions : tuple of (str, float)
        Ions found, each with its own shift in ppm.
    reason : str
    """

    shift_ppm: float
    applied: bool
    ions: tuple[tuple[str, float], ...]
    reason: str

    def correct(self, mz: float) -> float:
        """m/z after the shift is taken away; unchanged when it is not applied."""
        return mz / (1.0 + self.shift_ppm * 1e-6) if self.applied else mz


@lru_cache(maxsize=1)
def _references() -> tuple[tuple[str, float], ...]:
    return tuple((REFERENCE_IONS[text], parse_formula(text).monoisotopic_mass) for text in REFERENCE_IONS)


def find_recalibration(peaks: Peaks) -> Recalibration:
    """Shift of an accurate-mass spectrum against calibrant and siloxane ions in it.

    Parameters
    ----------
    peaks : Peaks
        Accurate m/z.

    Returns
    -------
    Recalibration
        Applied only when at least two ions were found and agree within `AGREEMENT_PPM`.
    """
    found: list[tuple[str, float]] = []
    for label, exact in _references():
        place = int(np.argmin(np.abs(peaks.mz - exact))) if len(peaks) else -1
        if place >= 0:
            shift = (float(peaks.mz[place]) / exact - 1.0) * 1e6
            if abs(shift) <= SEARCH_PPM:
                found.append((label, shift))
    if not found:
        return Recalibration(0.0, False, (), "No calibrant or siloxane ion to recalibrate on.")
    middle = median(shift for _, shift in found)
    agreeing = sum(abs(shift - middle) <= AGREEMENT_PPM for _, shift in found)
    names = ", ".join(label for label, _ in found)
    if len(found) < 2:
        return Recalibration(
            middle, False, tuple(found), f"Only one reference ion ({names}, {middle:+.1f} ppm): not applied."
        )
    if agreeing < 0.7 * len(found):
        return Recalibration(middle, False, tuple(found), f"Reference ions disagree ({names}): not applied.")
    return Recalibration(middle, True, tuple(found), f"Shifted by {-middle:+.1f} ppm on {names}.")


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


def mass_error_histogram(errors_ppm: list[float], width_ppm: float = 2.0) -> tuple[tuple[float, int], ...]:
    """Number of ions per class of mass error.

    Parameters
    ----------
    errors_ppm : list of float
    width_ppm : float
        Width of a class, > 0.

    Returns
    -------
    tuple of (lower limit in ppm, number)
        Rising, without gaps from the first to the last class; empty for no ions.

    Examples
    --------
    >>> mass_error_histogram([-0.5, 0.4, 1.9, 5.0])
    ((-2.0, 1), (0.0, 2), (2.0, 0), (4.0, 1))
    """
    if not errors_ppm:
        return ()
    classes = [int(np.floor(error / width_ppm)) for error in errors_ppm]
    return tuple((number * width_ppm, classes.count(number)) for number in range(min(classes), max(classes) + 1))


def choose_ions(peaks: Peaks) -> tuple[tuple[float, float], ...]:
    """The (m/z, relative intensity) pairs worth judging: greatest intensity times m/z first, isotope peaks left out.

    A peak counts as an isotope peak when another one 1.002–1.004 Da below it is at least 2.5 times taller.
    """
    mz, relative = peaks.mz, peaks.relative
    order = np.argsort(-relative * mz, kind="stable")
    chosen: list[tuple[float, float]] = []
    for place in order.tolist():
        if relative[place] < 100.0 * MIN_SHARE:
            continue
        below = (mz > mz[place] - 1.0042) & (mz < mz[place] - 1.0018)
        if bool((relative[below] >= 2.5 * relative[place]).any()):
            continue
        chosen.append((float(mz[place]), float(relative[place])))
        if len(chosen) == MAX_IONS:
            break
    return tuple(chosen)


def check_accurate_mass(
    ions: tuple[tuple[float, float], ...] | None,
    recalibration: Recalibration | None,
    formula: FormulaFacts | None,
    settings: Settings,
) -> Finding:
    """Whether the accurate masses of the query are those of pieces of the candidate's formula.

    Parameters
    ----------
    ions : tuple of (m/z, relative intensity) or None
        From `choose_ions`; None for a nominal-mass query.
    recalibration : Recalibration or None
    formula : FormulaFacts or None
    settings : Settings
        Tolerance: the larger of `tolerance_ppm` and `tolerance_da`.

    Returns
    -------
    Finding
    """
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
        if best is None:
            missed.append(f"{mz:.4f}")
        else:
            explained += weight
            errors.append(best[1] / mz * 1e6)
    share = explained / total
    size = next(word for edge, word in ((0.5, "few"), (0.8, "half"), (0.95, "most"), (2.0, "all")) if share < edge)
    middle = f", median error {median(errors):+.1f} ppm" if errors else ""
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
