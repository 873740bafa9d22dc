"""Accurate masses of a query: internal recalibration on well-known ions, and the ions worth judging."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from statistics import median

import numpy as np

from identify.chem.formula import parse_formula
from identify.records import Peaks

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

    A peak counts as an isotope peak when a peak 1.0018–1.0042 Da below it is at least 2.5 times taller (13C), or one
    1.9935–2.0000 Da below it is at least a fifth as tall (34S, 37Cl, 81Br): subformulas are made of principal isotopes.
    """
    mz, relative = peaks.mz, peaks.relative
    order = np.argsort(-relative * mz, kind="stable")
    chosen: list[tuple[float, float]] = []
    for place in order.tolist():
        if relative[place] < 100.0 * MIN_SHARE:
            continue
        below = (mz > mz[place] - 1.0042) & (mz < mz[place] - 1.0018)
        second = (mz > mz[place] - 2.0) & (mz < mz[place] - 1.9935)
        if bool((relative[below] >= 2.5 * relative[place]).any() or (relative[second] >= 0.2 * relative[place]).any()):
            continue
        chosen.append((float(mz[place]), float(relative[place])))
        if len(chosen) == MAX_IONS:
            break
    return tuple(chosen)
