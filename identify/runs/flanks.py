"""Front and tail of a peak: what its shape puts too low or too high at its own ions belongs to the peak, not to nobody.

A shape shared by many ions, or lent by another peak, never fits an overloaded front or a long tail to the percent. Where a
component holds an ion as good as alone, its area is that of the ion's own trace, as an integrator would take it.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from identify.records import FloatArray
from identify.runs.model import Component
from identify.runs.shapes import Shape

MOST_SHARE = 0.2
"""A reading left over is a flank up to this share of the ion's height in the component; more is something else."""
TAIL_WIDTHS = 4.0
"""Tails count so many widths beyond the window of the shape."""


def assign_flanks(
    components: Sequence[Component | None],
    shapes: Sequence[Shape],
    mz: NDArray[np.int64],
    misfit: FloatArray,
    width: float,
) -> tuple[FloatArray, FloatArray]:
    """What each component gains at its flanks, and what is left for none.

    Parameters
    ----------
    components : sequence of Component or None
    shapes : sequence of Shape
        As many, same order.
    mz : ndarray of int64, shape (n_ions,)
    misfit : ndarray of shape (n_scans, n_ions)
        Signal minus all components where that is more than noise, else 0; negative where the shapes put too much.
    width : float
        Typical full width at half height, in scans.

    Returns
    -------
    gain : ndarray of shape (n_components,)
        Intensity summed over ions and scans; may be negative.
    rest : ndarray of shape (n_scans, n_ions)
        Misfit above 0 that is no component's flank.

    Notes
    -----
    A reading is judged against the component in reach that has most of its ion: from the start of the window of its shape to
    `TAIL_WIDTHS` beyond the end.
    """
    height = np.zeros(misfit.shape)
    owner = np.full(misfit.shape, -1, dtype=np.int32)
    for place, (component, shape) in enumerate(zip(components, shapes, strict=True)):
        if component is None:
            continue
        end = shape.first + shape.values.size + round(TAIL_WIDTHS * width)
        rows = slice(shape.first, min(end, misfit.shape[0]))
        columns = np.searchsorted(mz, component.peaks.mz.astype(np.int64))
        highest = np.maximum(height[rows, columns], component.peaks.intensity)
        owner[rows, columns] = np.where(highest > height[rows, columns], place, owner[rows, columns])
        height[rows, columns] = highest
    is_flank = (misfit != 0.0) & (owner >= 0) & (misfit <= MOST_SHARE * height)
    gain = np.bincount(owner[is_flank], weights=misfit[is_flank], minlength=len(components))
    return gain.astype(np.float64), np.where(is_flank, 0.0, np.maximum(misfit, 0.0))
