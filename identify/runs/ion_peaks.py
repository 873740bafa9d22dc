"""Peaks of single ion traces: apex between scans, height, width; and the skew that scanning puts on them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from identify.records import FloatArray
from identify.runs.model import IonMatrix, NoiseModel

MIN_SIGNAL_TO_NOISE = 4.0
MIN_RISE = 0.35
"""A maximum must rise by this share of its height above the lower of its flanks within two peak widths."""


@dataclass(frozen=True, slots=True, eq=False)
class IonPeaks:
    """All peaks of all ion traces, one row each; arrays of shape ``(n,)``.

    Attributes
    ----------
    ion : ndarray of int64
        Column of the ion matrix.
    apex : ndarray
        Apex in scans, between scans by a parabola through the three highest readings.
    height : ndarray
        Above background, intensity units.
    signal_to_noise : ndarray
    """

    ion: NDArray[np.int64]
    apex: FloatArray
    height: FloatArray
    signal_to_noise: FloatArray


def estimate_width(signal: FloatArray, noise: NoiseModel) -> float:
    """Typical full width at half height of a peak, in scans.

    Parameters
    ----------
    signal : ndarray of shape (n_scans, n_ions)
        Intensity above background.
    noise : NoiseModel

    Returns
    -------
    float
        At least 2; 5 when no clear peak is there.
    """
    from scipy.signal import find_peaks, peak_widths

    widths: list[float] = []
    strongest = np.argsort(-signal.max(axis=0))[:40]
    for ion in strongest:
        trace = signal[:, ion]
        floor = 30.0 * float(noise.sigma(np.zeros(1))[0])
        tops, _ = find_peaks(trace, prominence=max(floor, 0.02 * float(trace.max())))
        if tops.size:
            widths += peak_widths(trace, tops, rel_height=0.5)[0].tolist()
    return max(2.0, float(np.median(widths))) if len(widths) >= 3 else 5.0


def find_ion_peaks(signal: FloatArray, background: FloatArray, noise: NoiseModel, width: float) -> IonPeaks:
    """Maxima of all ion traces that stand out of the noise.

    Parameters
    ----------
    signal, background : ndarray of shape (n_scans, n_ions)
    noise : NoiseModel
    width : float
        Typical width in scans; see `estimate_width`.

    Returns
    -------
    IonPeaks
        In the order of the apex.

    Notes
    -----
    A reading is a maximum when no neighbour within a quarter width is higher, its height is at least
    `MIN_SIGNAL_TO_NOISE` times the noise there, and it rises by `MIN_RISE` of its height (and three times the noise) above
    the lowest reading within two widths on both sides. O(scans × ions).
    """
    from scipy.ndimage import maximum_filter1d, minimum_filter1d, uniform_filter1d

    near = max(1, round(width / 4))
    far = max(3, round(2 * width))
    smooth = uniform_filter1d(signal, 3, axis=0, mode="nearest") if width >= 4 else signal
    top = (smooth == maximum_filter1d(smooth, 2 * near + 1, axis=0)) & (signal > 0)
    sigma = noise.sigma(signal + background)
    top &= signal >= MIN_SIGNAL_TO_NOISE * sigma
    left = minimum_filter1d(smooth, far, axis=0, origin=(far - 1) // 2)
    right = minimum_filter1d(smooth, far, axis=0, origin=-((far - 1) // 2))
    rise = smooth - np.maximum(left, right)
    top &= (rise >= MIN_RISE * smooth) & (rise >= 3.0 * sigma)
    scan, ion = np.nonzero(top)
    keep = (scan > 0) & (scan < signal.shape[0] - 1)
    scan, ion = scan[keep], ion[keep]
    before, at, after = signal[scan - 1, ion], signal[scan, ion], signal[scan + 1, ion]
    bend = before - 2.0 * at + after
    shift = np.where(bend < 0, 0.5 * (before - after) / np.where(bend < 0, bend, -1.0), 0.0)
    apex = scan + np.clip(shift, -0.6, 0.6)
    order = np.argsort(apex, kind="stable")
    return IonPeaks(ion[order], apex[order], at[order], (at / sigma[scan, ion])[order])


def estimate_skew(peaks: IonPeaks, mz: NDArray[np.int64], width: float) -> float:
    """How many scans later per m/z unit an ion is read within a scan; 0 when the run shows none.

    Parameters
    ----------
    peaks : IonPeaks
    mz : ndarray of int64, shape (n_ions,)
    width : float

    Returns
    -------
    float
        Apex shift in scans per m/z; negative when the scan runs upwards (high m/z are read later in the scan, so that
        their apex seems earlier).

    Notes
    -----
    Weighted regression of apex on m/z within groups of strong peaks (signal/noise ≥ 30) that lie within half a width of
    the group's strongest; the slope is used when it passes four standard errors and shifts the ends of the mass range
    by less than one scan.
    """
    strong = np.nonzero(peaks.signal_to_noise >= 30.0)[0]
    rows, values, weights = [], [], []
    for group in np.split(strong, np.nonzero(np.diff(peaks.apex[strong]) > 0.5 * width)[0] + 1):
        if group.size < 4:
            continue
        x = mz[peaks.ion[group]].astype(np.float64)
        w = np.minimum(peaks.signal_to_noise[group], 300.0)
        rows.append(x - np.average(x, weights=w))
        values.append(peaks.apex[group] - np.average(peaks.apex[group], weights=w))
        weights.append(w)
    if not rows:
        return 0.0
    x, y, w = np.concatenate(rows), np.concatenate(values), np.concatenate(weights)
    inside = np.abs(y) < 0.75
    x, y, w = x[inside], y[inside], w[inside]
    total = float(np.sum(w * x * x))
    if total <= 0:
        return 0.0
    slope = float(np.sum(w * x * y)) / total
    spread = float(np.sqrt(np.sum((w * x * (y - slope * x)) ** 2))) / total
    reach = float(mz[-1] - mz[0])
    return slope if abs(slope) > 4.0 * spread and abs(slope) * reach < 1.0 else 0.0


def correct_skew(matrix: IonMatrix, skew: float) -> IonMatrix:
    """Traces as if all ions of a scan had been read at the same moment.

    Parameters
    ----------
    matrix : IonMatrix
    skew : float
        From `estimate_skew`.

    Returns
    -------
    IonMatrix
        Each trace shifted by linear interpolation between scans; unchanged for a skew of 0.
    """
    if skew == 0.0:
        return matrix
    scans = np.arange(matrix.intensity.shape[0], dtype=np.float64)
    shifted = np.empty_like(matrix.intensity)
    middle = float(np.mean(matrix.mz))
    for column, ion in enumerate(matrix.mz):
        shifted[:, column] = np.interp(scans + skew * (ion - middle), scans, matrix.intensity[:, column])
    return IonMatrix(matrix.time_s, matrix.mz, shifted)
