"""Peak shapes: one per cluster, shared by its ions, from the ions that show it cleanest."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.records import FloatArray
from identify.runs.clusters import Cluster

HALF_WINDOW_WIDTHS = 2.5
CLEANEST_IONS = 12
MIN_AGREEMENT = 0.95
"""Correlation with the median shape that an ion needs to take part in the mean."""


@dataclass(frozen=True, slots=True, eq=False)
class Shape:
    """A peak shape sampled at scans: ``values[0]`` is scan `first`; maximum about 1, 0 outside."""

    first: int
    values: FloatArray

    def on(self, start: int, end: int) -> FloatArray:
        """The shape on scans ``start:end``, shape ``(end − start,)``.

        Parameters
        ----------
        start, end : int

        Returns
        -------
        ndarray
        """
        column = np.zeros(end - start)
        low, high = max(start, self.first), min(end, self.first + self.values.size)
        if low < high:
            column[low - start : high - start] = self.values[low - self.first : high - self.first]
        return column


def fit_shapes(clusters: Sequence[Cluster], signal: FloatArray, width: float) -> tuple[Shape, ...]:
    """A shape for each cluster.

    Parameters
    ----------
    clusters : sequence of Cluster
    signal : ndarray of shape (n_scans, n_ions)
        Intensity above background.
    width : float
        Typical full width at half height, in scans.

    Returns
    -------
    tuple of Shape

    Notes
    -----
    A cluster with no neighbour within two widths takes the signal-weighted mean of its strongest ions that agree with
    their median (correlation ≥ 0.95), falling monotonously on both sides. A crowded cluster takes the median shape of
    the nearest isolated ones, moved to its own apex, since its own ions show a mixture; without any isolated cluster
    in the run, a Gaussian of the typical width.
    """
    apexes = np.array([cluster.apex for cluster in clusters])
    isolated: list[tuple[float, FloatArray]] = []
    shapes: list[Shape | None] = []
    half = int(np.ceil(HALF_WINDOW_WIDTHS * width))
    offsets = np.arange(-half, half + 1, dtype=np.float64)
    for place, cluster in enumerate(clusters):
        alone = np.count_nonzero(np.abs(apexes - cluster.apex) < 2.0 * width) == 1
        values = _own_shape(cluster, signal, offsets) if alone else None
        if values is None:
            shapes.append(None)
            continue
        isolated.append((cluster.apex, values))
        shapes.append(_place(values, offsets, apexes[place], signal.shape[0]))
    gauss = np.exp(-4.0 * np.log(2.0) * (offsets / width) ** 2)
    return tuple(
        shape or _place(_borrowed(isolated, float(apex), gauss), offsets, float(apex), signal.shape[0])
        for shape, apex in zip(shapes, apexes, strict=True)
    )


def _own_shape(cluster: Cluster, signal: FloatArray, offsets: FloatArray) -> FloatArray | None:
    """Mean shape of the cleanest ions on `offsets` from their common apex; None when they do not agree."""
    strongest = np.argsort(-cluster.signal_to_noise, kind="stable")[:CLEANEST_IONS]
    strongest = strongest[cluster.signal_to_noise[strongest] >= 15.0]
    if strongest.size < 2:
        return None
    scans = np.arange(signal.shape[0], dtype=np.float64)
    traces = np.array(
        [np.interp(cluster.apex + offsets, scans, np.maximum(signal[:, i], 0.0)) for i in cluster.ion[strongest]]
    )
    traces /= np.maximum(traces.max(axis=1, keepdims=True), 1e-9)
    median = np.median(traces, axis=0)
    agree = np.array([np.corrcoef(trace, median)[0, 1] >= MIN_AGREEMENT for trace in traces])
    if not agree.any():
        return None
    weights = np.minimum(cluster.signal_to_noise[strongest][agree], 200.0)
    mean = np.average(traces[agree], axis=0, weights=weights)
    return _falling(mean)


def _falling(values: FloatArray) -> FloatArray:
    """The shape made to fall monotonously from its maximum, and 0 below 0.5 % of it."""
    top = int(np.argmax(values))
    left = np.minimum.accumulate(values[: top + 1][::-1])[::-1]
    right = np.minimum.accumulate(values[top:])
    falling = np.concatenate([left[:-1], right]) / max(float(values[top]), 1e-9)
    falling[falling < 0.005] = 0.0
    return falling


def _borrowed(isolated: Sequence[tuple[float, FloatArray]], apex: float, default: FloatArray) -> FloatArray:
    if not isolated:
        return default
    nearest = sorted(isolated, key=lambda pair: abs(pair[0] - apex))[:5]
    return _falling(np.median(np.array([values for _, values in nearest]), axis=0))


def _place(values: FloatArray, offsets: FloatArray, apex: float, n_scans: int) -> Shape:
    first = max(0, int(np.floor(apex + offsets[0])))
    last = min(n_scans - 1, int(np.ceil(apex + offsets[-1])))
    scans = np.arange(first, last + 1, dtype=np.float64)
    return Shape(first, np.interp(scans - apex, offsets, values, left=0.0, right=0.0))
