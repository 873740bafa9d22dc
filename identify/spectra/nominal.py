"""One rule from accurate to nominal m/z, and the test whether an m/z axis is accurate at all.

Plain rounding is right below about m/z 440 for every chemistry. Above, the mass defect of saturated hydrocarbons passes
+0.5 (C40H82+ at m/z 562.64 is nominal 562) and that of heavily brominated compounds passes −0.5 (C12Br10O+ with all 79Br
at m/z 949.18 is nominal 950). Both at once cannot be told from one number, but a spectrum carries its own slope: fragments
of one compound share its mass defect per dalton. So the rule walks up the axis and subtracts the slope of the peaks
already assigned before it rounds.

::

    m/z        57.070  …  337.383  …  449.508  …  562.641      alkane: slope +0.00112 per Da
    predicted   0.000      +0.377      +0.502      +0.629
    nominal     57         337         449         562          (plain rounding gives 450 and 563)
"""

from __future__ import annotations

from math import floor

import numpy as np
from numpy.typing import NDArray

from identify.records import FloatArray

SAFE_MZ = 400.0
"""Below this, plain rounding is right: |defect| of CH2 chains (+0.00112 per Da) and bromine (−0.00103) stays under 0.45."""
SLOPE_LIMITS = (-0.00105, 0.00118)
"""Mass defect per dalton of 79Br (78.9183/79) and of CH2 with end hydrogens (14.01565/14): AME2020 masses."""
WINDOW_DA = 150.0
"""How far below a peak its neighbours tell the slope: wide enough to hold some, near enough to be of the same compound class."""
ACCURATE_DECIMALS = 3
"""Decimals that an accurate m/z has at least."""
MIN_ACCURATE_FRACTION = 0.9
"""Share of the intensity that must lie at possible mass defects."""


def nominal_mz(mz: FloatArray) -> NDArray[np.int64]:
    """Nominal (integer) m/z of each peak.

    Parameters
    ----------
    mz : ndarray of shape (n_peaks,)
        m/z in increasing order, positive.

    Returns
    -------
    ndarray of int64, shape (n_peaks,)
        Nominal m/z, at least 0; not necessarily distinct.

    Notes
    -----
    Peaks up to `SAFE_MZ` are rounded half up. A peak above is rounded after subtracting ``slope * mz``, where `slope` is
    the mean defect per dalton of the peaks assigned in the `WINDOW_DA` below it (weighted by m/z), clipped to
    `SLOPE_LIMITS`. With no peak there the slope stays that of the peak before, 0 (plain rounding) for the first. O(n).

    Examples
    --------
    >>> nominal_mz(np.array([57.0704, 127.148, 393.446, 449.508, 562.641])).tolist()
    [57, 127, 393, 449, 562]
    """
    nominal = np.floor(mz + 0.5).astype(np.int64)
    first_high = int(np.searchsorted(mz, SAFE_MZ, side="right"))
    if first_high == mz.size or not np.any(mz[first_high:] != nominal[first_high:]):
        return nominal
    # Sums over the window below the peak at hand move along with it: a dense list costs no more than a sparse one.
    start, slope = int(np.searchsorted(mz, mz[first_high] - WINDOW_DA)), 0.0
    mass = float(mz[start:first_high].sum())
    defect = float((mz[start:first_high] - nominal[start:first_high]).sum())
    masses, assigned = mz.tolist(), nominal.tolist()
    for position in range(first_high, mz.size):
        here = masses[position]
        while start < position and masses[start] < here - WINDOW_DA:
            mass -= masses[start]
            defect -= masses[start] - assigned[start]
            start += 1
        if start == position:
            mass = defect = 0.0  # nothing left over of rounding errors
        else:
            slope = min(max(defect / mass, SLOPE_LIMITS[0]), SLOPE_LIMITS[1])
        assigned[position] = floor(here * (1.0 - slope) + 0.5)
        mass += here
        defect += here - assigned[position]
    return np.array(assigned, dtype=np.int64)


def is_accurate_mz(mz: FloatArray, intensity: FloatArray) -> bool:
    """Whether an m/z axis carries accurate masses rather than decorated nominal ones.

    Parameters
    ----------
    mz, intensity : ndarray of shape (n_peaks,)
        Peaks; m/z positive.

    Returns
    -------
    bool
        True when most peaks have at least three decimals and at least 90 % of the intensity lies at mass defects that
        singly charged ions of C, H, N, O, S, Si and halogens can have.

    Notes
    -----
    Quadrupole files often hold values such as 43.05 or 56.95: decimals without accuracy. They fail either test.

    Examples
    --------
    >>> is_accurate_mz(np.array([43.0178, 58.0413]), np.array([100.0, 30.0]))
    True
    >>> is_accurate_mz(np.array([43.1, 58.0]), np.array([100.0, 30.0]))
    False
    """
    if mz.size == 0:
        return False
    scaled = mz * 10.0 ** (ACCURATE_DECIMALS - 1)
    if np.mean(np.abs(scaled - np.round(scaled)) > 1e-4) < 0.5:
        return False
    defect = mz - np.floor(mz + 0.5)
    low = np.minimum(-0.0012 * mz, -0.01)
    possible = (defect >= low) & (defect <= 0.0014 * mz + 0.02)
    return bool(intensity[possible].sum() >= MIN_ACCURATE_FRACTION * intensity.sum())
