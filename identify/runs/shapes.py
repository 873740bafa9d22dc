"""Peak shapes: one per cluster, shared by its ions, from the ions that show it cleanest."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.records import FloatArray
from identify.runs.clusters import Cluster

HALF_WINDOW_WIDTHS = 2.5
CLEANEST_IONS = 12
LENDERS = 5
SELECTIVE_APEX_SCANS = 0.25
SELECTIVE_FLANK = 0.08
"""An ion that only one of several crowded clusters shows has its apex there and falls to this share on both sides."""
MIN_OTHER_FORM = 0.22
"""Share of the usual shape's area by which a shape of usual width must depart from it to be used in its place."""
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
    their median (correlation ≥ 0.95), falling monotonously on both sides. A crowded cluster takes its shape from ions that
    only it shows (narrow, falling to the baseline on both sides, their apex at the cluster's) if these are clearly wider or
    narrower than usual. Usual is the median shape of the nearest isolated clusters, moved to its own apex by cubic splines;
    without any isolated cluster in the run, a Gaussian of the typical width.
    """
    apexes = np.array([cluster.apex for cluster in clusters])
    half = int(np.ceil(HALF_WINDOW_WIDTHS * width))
    own = []
    for cluster in clusters:
        alone = np.count_nonzero(np.abs(apexes - cluster.apex) < 2.0 * width) == 1
        own.append(_own_shape(cluster, signal, half) if alone else None)
    isolated = [(c.apex, shape) for c, shape in zip(clusters, own, strict=True) if shape is not None]
    shapes = []
    for cluster, shape in zip(clusters, own, strict=True):
        if shape is None:
            shape = _borrowed(isolated, cluster.apex, half, width, signal.shape[0])
            selective = _selective_shape(cluster, signal, half, width)
            if selective is not None and _differs(selective, shape):
                shape = selective
        shapes.append(shape)
    return tuple(shapes)


def _window(apex: float, half: int, n_scans: int) -> tuple[int, int]:
    """First scan and the one after the last of the window around an apex."""
    return max(0, round(apex) - half), min(n_scans, round(apex) + half + 1)


def _differs(own: Shape, usual: Shape) -> bool:
    """Whether a shape is narrower, wider or otherwise formed than the usual one by more than noise, and still a single peak's."""
    extent = float(usual.values.sum())
    ratio = float(own.values.sum()) / extent
    form = float(np.abs(own.values - usual.on(own.first, own.first + own.values.size)).sum()) / extent
    return 0.35 <= ratio <= 0.85 or 1.15 <= ratio <= 2.2 or (0.85 < ratio < 1.15 and form >= MIN_OTHER_FORM)


def _own_shape(cluster: Cluster, signal: FloatArray, half: int) -> Shape | None:
    """Mean shape of the cleanest ions, at their own scans; None when they do not agree."""
    strongest = np.argsort(-cluster.signal_to_noise, kind="stable")[:CLEANEST_IONS]
    strongest = strongest[cluster.signal_to_noise[strongest] >= 15.0]
    if strongest.size < 2:
        return None
    start, end = _window(cluster.apex, half, signal.shape[0])
    traces = np.maximum(signal[start:end][:, cluster.ion[strongest]], 0.0).T.astype(np.float64)
    traces /= np.maximum(traces.max(axis=1, keepdims=True), 1e-9)
    median = np.median(traces, axis=0)
    agree = np.array([np.corrcoef(trace, median)[0, 1] >= MIN_AGREEMENT for trace in traces])
    if not agree.any():
        return None
    weights = np.minimum(cluster.signal_to_noise[strongest][agree], 200.0)
    return Shape(start, _falling(np.average(traces[agree], axis=0, weights=weights)))


def _selective_shape(cluster: Cluster, signal: FloatArray, half: int, width: float) -> Shape | None:
    """Mean shape of the ions that only this cluster shows, at their own scans; None when there is no such ion."""
    near = (np.abs(cluster.ion_apex - cluster.apex) <= SELECTIVE_APEX_SCANS) & (cluster.signal_to_noise >= 50.0)
    chosen = np.nonzero(near)[0]
    if chosen.size == 0:
        return None
    start, end = _window(cluster.apex, half, signal.shape[0])
    offsets = np.arange(start, end) - cluster.apex
    traces = signal[start:end][:, cluster.ion[chosen]].T.astype(np.float64)
    inner, reach = np.abs(offsets) <= 1.2 * width, np.abs(offsets) <= 2.2 * width
    top = int(np.argmin(np.abs(offsets)))
    traces = traces / np.maximum(traces[:, [top]], 1e-9)
    clean = np.array([_stands_alone(trace[reach & (offsets <= offsets[top])][::-1]) for trace in traces])
    clean &= np.array([_stands_alone(trace[reach & (offsets >= offsets[top])]) for trace in traces])
    if not clean.any():
        return None
    traces, chosen = _fall_from(traces[clean], top), chosen[clean]
    extent = traces[:, inner].sum(axis=1)
    narrow = extent <= 1.1 * extent.min()
    weights = np.minimum(cluster.signal_to_noise[chosen][narrow], 300.0)
    return Shape(start, _falling(np.average(traces[narrow], axis=0, weights=weights)))


def _stands_alone(flank: FloatArray) -> bool:
    """Whether a flank, from the apex outwards, falls to the baseline without rising in between."""
    low = np.nonzero(flank <= SELECTIVE_FLANK)[0]
    return bool(low.size) and bool((np.diff(flank[1 : low[0] + 1]) <= 0.05).all())


def _fall_from(traces: FloatArray, top: int) -> FloatArray:
    """Traces, shape ``(n, n_scans)``, that fall monotonously on both sides of scan `top` (or the higher one beside it)."""
    top += int(np.argmax(traces[:, max(0, top - 1) : top + 2].mean(axis=0))) - min(1, top)
    left = np.minimum.accumulate(traces[:, : top + 1][:, ::-1], axis=1)[:, ::-1]
    right = np.minimum.accumulate(traces[:, top:], axis=1)
    return np.concatenate([left[:, :-1], right], axis=1)


def _falling(values: FloatArray) -> FloatArray:
    """The shape made to fall monotonously from its maximum, and 0 below 0.5 % of it."""
    top = int(np.argmax(values))
    falling: FloatArray = _fall_from(values[None, :], top)[0] / max(float(values[top]), 1e-9)
    falling[falling < 0.005] = 0.0
    return falling


def _borrowed(isolated: Sequence[tuple[float, Shape]], apex: float, half: int, width: float, n_scans: int) -> Shape:
    """Median shape of the nearest isolated clusters, moved to `apex`; a Gaussian when there is none."""
    from scipy.interpolate import CubicSpline

    start, end = _window(apex, half, n_scans)
    offsets = np.arange(start, end) - apex
    if not isolated:
        return Shape(start, np.exp(-4.0 * np.log(2.0) * (offsets / width) ** 2))
    moved = []
    for own_apex, shape in sorted(isolated, key=lambda pair: abs(pair[0] - apex))[:LENDERS]:
        scans = np.arange(shape.values.size) + shape.first - own_apex
        values = np.clip(CubicSpline(scans, shape.values, extrapolate=False)(offsets), 0.0, None)
        moved.append(np.nan_to_num(values))
    return Shape(start, _falling(np.median(np.array(moved), axis=0)))
