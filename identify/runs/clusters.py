"""Which ion peaks belong together: moments at which many ions have their apex at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from identify.records import FloatArray
from identify.runs.ion_peaks import IonPeaks

GRID_SCANS = 0.05
MIN_SPREAD_SCANS = 0.12
"""Least uncertainty of an apex: what the parabola through three readings leaves (measured on synthetic peaks)."""
MAX_SPREAD_SCANS = 0.6
REACH_SCANS = 0.9
"""An ion peak further than this from every cluster belongs to none."""
MIN_WEIGHT = 5.0
"""Least summed weight of a cluster: two ions at signal/noise 12, or four at 4 (weight = ln(1 + signal/noise))."""
MIN_IONS = 2
SATELLITE_SHARE = 0.03
SATELLITE_IONS = 3


@dataclass(frozen=True, slots=True, eq=False)
class Cluster:
    """Ion peaks that have their apex at the same moment.

    Attributes
    ----------
    apex : float
        In scans.
    ion : ndarray of int64
        Columns of the ion matrix.
    ion_apex, height, signal_to_noise : ndarray
        As in `IonPeaks`.
    """

    apex: float
    ion: NDArray[np.int64]
    ion_apex: FloatArray
    height: FloatArray
    signal_to_noise: FloatArray


def cluster_ion_peaks(peaks: IonPeaks, n_scans: int, width: float) -> tuple[Cluster, ...]:
    """Clusters of ion apexes, in the order of time.

    Parameters
    ----------
    peaks : IonPeaks
    n_scans : int
    width : float
        Typical peak width in scans.

    Returns
    -------
    tuple of Cluster

    Notes
    -----
    Each ion peak spreads its weight ``ln(1 + signal/noise)`` as a Gaussian of its own apex uncertainty,
    ``width / (2.4 · signal/noise)`` between two limits; maxima of the sum are moments of common elution, so that two
    components half a scan apart separate when their own ions are strong enough to say so. The idea of perceiving
    components as coincident ion maxima is Biller & Biemann 1974 (Anal Lett 7:515); the uncertainty-weighted density is
    this project's. A cluster beside a much larger one (closer than half a width) must show ions of its own.
    """
    weight = np.log1p(peaks.signal_to_noise)
    spread = np.clip(width / (2.4 * peaks.signal_to_noise), MIN_SPREAD_SCANS, MAX_SPREAD_SCANS)
    density = _density(peaks.apex, weight, spread, n_scans)
    maxima = np.nonzero((density[1:-1] > density[:-2]) & (density[1:-1] >= density[2:]))[0] + 1
    centres = (maxima[density[maxima] > 1.0] * GRID_SCANS).astype(np.float64)
    if centres.size == 0:
        return ()
    found = _assign(peaks, weight, centres)
    return _drop_satellites(found, width)


def _density(apex: FloatArray, weight: FloatArray, spread: FloatArray, n_scans: int) -> FloatArray:
    density = np.zeros(int(n_scans / GRID_SCANS) + 2)
    for position, mass, sigma in zip(apex, weight, spread, strict=True):
        low = max(0, int((position - 3 * sigma) / GRID_SCANS))
        high = min(density.size, int((position + 3 * sigma) / GRID_SCANS) + 2)
        offset = np.arange(low, high) * GRID_SCANS - position
        density[low:high] += mass * np.exp(-0.5 * (offset / sigma) ** 2)
    return density


def _assign(peaks: IonPeaks, weight: FloatArray, centres: FloatArray) -> list[Cluster]:
    right = np.clip(np.searchsorted(centres, peaks.apex), 1, max(1, centres.size - 1))
    if centres.size == 1:
        nearest = np.zeros(peaks.apex.size, dtype=np.int64)
    else:
        nearest = np.where(peaks.apex - centres[right - 1] <= centres[right] - peaks.apex, right - 1, right)
    close = np.abs(peaks.apex - centres[nearest]) <= REACH_SCANS
    found = []
    for number in range(centres.size):
        own = np.nonzero(close & (nearest == number))[0]
        if own.size < MIN_IONS or weight[own].sum() < MIN_WEIGHT:
            continue
        apex = float(np.average(peaks.apex[own], weights=weight[own] ** 2))
        found.append(Cluster(apex, peaks.ion[own], peaks.apex[own], peaks.height[own], peaks.signal_to_noise[own]))
    return found


def _drop_satellites(found: list[Cluster], width: float) -> tuple[Cluster, ...]:
    """Clusters that are not mere scatter of a much larger neighbour's apexes."""
    apexes, heights = np.array([c.apex for c in found]), np.array([float(c.height.sum()) for c in found])
    reach = max(1.0, 0.5 * width)
    kept = []
    for place, cluster in enumerate(found):
        # Clusters come in the order of time: neighbours stand in one piece, and a run of noise has thousands.
        near = slice(*np.searchsorted(apexes, (cluster.apex - reach, cluster.apex + reach)))
        larger = float(heights[near].max())
        enough = np.count_nonzero(cluster.signal_to_noise >= 10.0) >= SATELLITE_IONS
        if heights[place] >= larger or (enough and heights[place] >= SATELLITE_SHARE * larger):
            kept.append(cluster)
    return tuple(kept)
