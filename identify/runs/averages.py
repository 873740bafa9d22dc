"""A spectrum from scans that the analyst chooses: the mean of some, minus the mean of others."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.errors import InputError, UsageError
from identify.records import FloatArray, Peaks
from identify.runs.model import Run
from identify.runs.traces import build_ion_matrix


@dataclass(frozen=True, slots=True, eq=False)
class AveragedSpectrum:
    """Peaks left after subtraction, the middle of the scans averaged, and which scans they were, in words."""

    peaks: Peaks
    time_s: float
    title: str


def average_scans(run: Run, at_min: Sequence[float], background_min: Sequence[float] = ()) -> AveragedSpectrum:
    """Mean of the scans at a time or between two, minus the mean of background scans.

    Parameters
    ----------
    run : Run
    at_min : sequence of float
        One time (its nearest scan) or two (all scans between them), in minutes.
    background_min : sequence of float
        Each stands for its nearest scan; their mean is subtracted.

    Returns
    -------
    AveragedSpectrum
        Ions whose intensity stays above 0.

    Raises
    ------
    UsageError
        For no time, more than two, or a time outside the run.
    InputError
        When nothing is left after subtraction.
    """
    if len(at_min) not in (1, 2):
        raise UsageError("--at", found=f"{len(at_min)} times", expected="one time, or two for all scans between them")
    matrix = build_ion_matrix(run)
    chosen = [_nearest(matrix.time_s, minutes, "--at") for minutes in at_min]
    rows = list(range(min(chosen), max(chosen) + 1))
    mean = matrix.intensity[rows].mean(axis=0, dtype=np.float64)
    title = f"scan {rows[0] + 1}" if len(rows) == 1 else f"mean of scans {rows[0] + 1} to {rows[-1] + 1}"
    if background_min:
        others = sorted({_nearest(matrix.time_s, minutes, "--background") for minutes in background_min})
        mean = mean - matrix.intensity[others].mean(axis=0, dtype=np.float64)
        title += f" minus {'scan' if len(others) == 1 else 'mean of scans'} {', '.join(str(i + 1) for i in others)}"
    left = mean > 0
    if not left.any():
        raise InputError(
            "averaged spectrum", found="nothing above the background", expected="signal at the chosen time"
        )
    time_s = float(matrix.time_s[rows].mean())
    return AveragedSpectrum(
        Peaks(matrix.mz[left].astype(np.float64), mean[left]), time_s, f"{time_s / 60:.3f} min, {title}"
    )


def _nearest(time_s: FloatArray, minutes: float, option: str) -> int:
    low, high = float(time_s[0]) / 60.0, float(time_s[-1]) / 60.0
    if not low - 0.05 <= minutes <= high + 0.05:
        raise UsageError(
            option, found=f"{minutes:g} min", expected=f"a time within the run, {low:.2f} to {high:.2f} min"
        )
    return int(np.argmin(np.abs(time_s - 60.0 * minutes)))
