"""Synthetic GC-MS runs with known truth, for the tests and the benchmark of the `runs` room.

What a run has: exponentially modified Gaussian peaks, ions read one after another within a scan (skew), counting statistics,
a threshold below which nothing is written, residual gas, and column bleed that rises with the oven.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from identify.records import FloatArray, Source
from identify.runs.model import Run

SCAN_TIME_S = 0.5
COUNT = 1.5
"""Intensity units of one ion counted."""
THRESHOLD = 20.0
BLEED = {
    73: 0.5,
    96: 0.05,
    133: 0.12,
    147: 0.2,
    191: 0.1,
    207: 1.0,
    208: 0.2,
    209: 0.13,
    253: 0.08,
    281: 0.35,
    282: 0.09,
    355: 0.1,
}
AIR = {17: 0.23, 18: 1.0, 28: 0.8, 32: 0.2, 40: 0.02, 44: 0.03}


@dataclass(frozen=True)
class Eluting:
    """A compound: relative spectrum, apex in scans, height of its base ion in intensity units."""

    spectrum: Mapping[int, float]
    apex: float
    height: float
    sigma: float = 1.4
    tail: float = 0.8


def emg(scans: FloatArray, sigma: float, tail: float) -> FloatArray:
    """Exponentially modified Gaussian with its maximum 1 at 0 (Grushka 1972, Anal Chem 44:1733)."""
    from scipy.special import erfcx

    def raw(t: FloatArray) -> FloatArray:
        z = (sigma / tail - t / sigma) / np.sqrt(2.0)
        return np.exp(-0.5 * (t / sigma) ** 2) * erfcx(np.maximum(z, -25.0))

    grid = np.linspace(-2 * sigma, 2 * sigma + 3 * tail, 4001)
    values = raw(grid)
    top = int(np.argmax(values))
    return np.where(scans + grid[top] < 12 * (sigma + tail), raw(scans + grid[top]) / values[top], 0.0)


def make_run(
    compounds: Sequence[Eluting],
    n_scans: int,
    seed: int,
    *,
    mz_range: tuple[int, int] = (29, 450),
    bleed: float = 400.0,
    air: float = 500.0,
    skew: bool = True,
    noisy: bool = True,
) -> Run:
    """A centroided run; ions are read from the highest m/z to the lowest within 90 % of a scan."""
    rng = np.random.default_rng(seed)
    axis = np.arange(mz_range[0], mz_range[1] + 1)
    scans = np.arange(n_scans, dtype=np.float64)
    lag = 0.9 * (axis[-1] - axis) / (axis[-1] - axis[0]) - 0.45 if skew else np.zeros(axis.size)
    clean = np.zeros((n_scans, axis.size))
    rise = np.exp(4.0 * (scans / n_scans - 1.0))
    for pattern, level in ((BLEED, bleed * rise), (AIR, np.full(n_scans, air))):
        for mz, share in pattern.items():
            if mz_range[0] <= mz <= mz_range[1]:
                clean[:, mz - mz_range[0]] += share * level
    for compound in compounds:
        low = max(0, int(compound.apex - 8 * compound.sigma))
        high = min(n_scans, int(compound.apex + 8 * (compound.sigma + 2 * compound.tail)) + 1)
        largest = max(compound.spectrum.values())
        for mz, value in compound.spectrum.items():
            if mz_range[0] <= mz <= mz_range[1]:
                column = mz - mz_range[0]
                times = scans[low:high] + lag[column] - compound.apex
                clean[low:high, column] += compound.height * value / largest * emg(times, compound.sigma, compound.tail)
    read = (
        rng.poisson(clean / COUNT) * COUNT + (rng.normal(0.0, 4.0, clean.shape) if noisy else 0.0) if noisy else clean
    )
    read = np.where(read >= THRESHOLD, read, 0.0)
    rows, columns = np.nonzero(read)
    counts = np.bincount(rows, minlength=n_scans)
    return Run(
        Source("synthetic"), "synthetic", "", "", scans * SCAN_TIME_S + 60.0,
        np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        axis[columns].astype(np.float32), read[rows, columns].astype(np.float32),
    )  # fmt: skip


def apex_time_s(compound: Eluting) -> float:
    """True time of the apex in seconds."""
    return 60.0 + SCAN_TIME_S * compound.apex
