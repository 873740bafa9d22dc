"""What the components leave unexplained: stretches of the run in which most of the signal belongs to none.

A peak that rises on the flank of another, or holds its height for several scans, scatters the apexes of its ions, so that no
cluster of apexes forms. Its signal stays behind when all components are taken out, and shows the peak's own shape.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from identify.records import FloatArray
from identify.runs.clusters import Cluster
from identify.runs.shapes import Shape

MIN_LEFT_SHARE = 0.5
"""Share of the signal above noise that no component explains."""
MIN_SNR, MIN_IONS, MIN_ION_SNR = 60.0, 4, 10.0
SMALLEST_ION = 0.01
HALF_WINDOW_WIDTHS = 2.5


def find_hidden(
    left: FloatArray, signal: FloatArray, sigma: FloatArray, width: float
) -> tuple[tuple[Cluster, Shape], ...]:
    """Peaks in what the components leave over, with their shapes, in the order of time.

    Parameters
    ----------
    left : ndarray of shape (n_scans, n_ions)
        Signal above noise and misfit that belongs to no component, ≥ 0.
    signal : ndarray of shape (n_scans, n_ions)
        All signal above noise.
    sigma : ndarray of shape (n_scans, n_ions)
        Standard deviation of each reading.
    width : float
        Typical full width at half height, in scans.

    Returns
    -------
    tuple of (Cluster, Shape)
        Each stretch of at least half a width in which more than `MIN_LEFT_SHARE` of the signal is left, its sum stands
        `MIN_SNR` above noise, and `MIN_IONS` ions stand out by themselves.
    """
    total, whole = left.sum(axis=1), signal.sum(axis=1)
    inside = (total > MIN_LEFT_SHARE * whole) & (total > MIN_SNR * np.sqrt((sigma**2 * (left > 0)).sum(axis=1)))
    edges = np.nonzero(np.diff(np.concatenate([[0], inside.astype(np.int8), [0]])))[0].tolist()
    found = []
    for first, stop in list(pairwise(edges))[::2]:
        if stop - first < max(3, round(0.5 * width)):
            continue
        made = _measure(left, sigma, total, first, stop, width)
        if made is not None:
            found.append(made)
    return tuple(found)


def _measure(
    left: FloatArray, sigma: FloatArray, total: FloatArray, first: int, stop: int, width: float
) -> tuple[Cluster, Shape] | None:
    height = left[first:stop].mean(axis=0)
    ratio = height / sigma[first:stop].mean(axis=0)
    ions = np.nonzero((ratio >= MIN_ION_SNR) & (height >= SMALLEST_ION * height.max()))[0]
    if ions.size < MIN_IONS:
        return None
    top = first + int(np.argmax(total[first:stop]))
    half = int(np.ceil(HALF_WINDOW_WIDTHS * width))
    start, end = max(0, top - half), min(total.size, top + half + 1)
    profile = left[start:end][:, ions].sum(axis=1)
    falling = _falling_from(profile, top - start)
    apex = float(np.average(np.arange(start, end), weights=falling))
    cluster = Cluster(apex, ions, np.full(ions.size, apex), height[ions], ratio[ions])
    return cluster, Shape(start, falling / falling.max())


def _falling_from(profile: FloatArray, top: int) -> FloatArray:
    """The profile made to fall monotonously on both sides of `top`."""
    rising = np.minimum.accumulate(profile[: top + 1][::-1])[::-1]
    return np.concatenate([rising[:-1], np.minimum.accumulate(profile[top:])])
