"""Components of a run: one spectrum, area and purity for each moment at which something eluted.

::

    ion traces ─ background ─► apexes ─► clusters ─► a peak shape per cluster, shared by its ions
        window around each cluster:   trace of ion i  =  Σ amplitude_ic · shape_c  +  offset_i     (least squares, ≥ 0)
        spectrum of c                 =  amplitude_ic for all i

Published ground: shared model shapes and least squares over co-eluting components, Dromey et al. 1976 (Anal Chem 48:1368)
and Stein 1999 (J Am Soc Mass Spectrom 10:770); non-negative least squares, Lawson & Hanson 1974.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from identify.records import FloatArray, Peaks
from identify.runs.clusters import Cluster, cluster_ion_peaks
from identify.runs.flanks import assign_flanks
from identify.runs.hidden import find_hidden
from identify.runs.ion_peaks import IonPeaks, correct_skew, estimate_skew, estimate_width, find_ion_peaks
from identify.runs.kinds import find_kind
from identify.runs.model import Component, Decomposition, IonMatrix, NoiseModel, Run
from identify.runs.overload import RATIO_ERROR, Overload, find_overloads
from identify.runs.shapes import Shape, fit_shapes
from identify.runs.traces import build_ion_matrix, estimate_background, fit_noise

NEIGHBOUR_WIDTHS = 3.5
MIN_AMPLITUDE_SIGMA = 3.0
MIN_COMPONENT_SNR = 8.0
MAX_NEIGHBOURS = 8
MAX_PASSES = 3
MAX_ION_PEAKS, MAX_CLUSTERS = 250_000, 1_000
"""Bounds of work: a run of noise has no end of peaks. A dense sample has some 300 components and 10,000 ion peaks an hour."""
MAX_LOOKED_AGAIN = 500
"""With more components than this nothing is looked at twice."""
REMNANT_IONS, REMNANT_PURITY = 4, 0.25
SIGNIFICANT_SIGMA = 3.0
FIT_ERROR = 0.1
"""A reading counts as unexplained when it exceeds the fit by three standard deviations and this share of itself: shapes differ
that much at the flanks of strong peaks."""
MIN_HIDDEN_SHARE = 0.05
"""A component hidden in an overloaded peak is reported from this share of its height (petrol run: ion chemistry in the source
makes up to 4 %)."""
KIN_SHARE, KIN_SIGNAL = 0.25, 0.75
"""Up to this share of its height when so much of the signal lies within one m/z unit of the overloaded peak's own ions: gain and
loss of hydrogen in a crowded ion source."""


def find_components(run: Run, blank: Sequence[Component] = ()) -> tuple[Component, ...]:
    """Everything that eluted, in the order of time: the components of `decompose`.

    Parameters
    ----------
    run : Run
    blank : sequence of Component
        Components of a blank run; what elutes there too is marked.

    Returns
    -------
    tuple of Component
        May be empty.

    Raises
    ------
    FormatError
        If the run holds no points, or too many cells.
    """
    return decompose(run, blank).components


def decompose(run: Run, blank: Sequence[Component] = ()) -> Decomposition:
    """The run as components, background and what belongs to neither.

    Parameters
    ----------
    run : Run
    blank : sequence of Component
        Components of a blank run; what elutes there too is marked.

    Returns
    -------
    Decomposition

    Raises
    ------
    FormatError
        If the run holds no points, or too many cells.
    """
    matrix = build_ion_matrix(run)
    background = estimate_background(matrix)
    noise = fit_noise(matrix, background)
    signal = np.maximum(matrix.intensity - background, 0.0)
    width = estimate_width(signal, noise)
    overloads = find_overloads(signal, width)
    residual, level = _without(overloads, signal, background, noise)
    peaks = find_ion_peaks(residual, level, noise, width)
    skew = estimate_skew(peaks, matrix.mz, width)
    if skew:
        matrix = correct_skew(matrix, skew)
        signal = np.maximum(matrix.intensity - background, 0.0)
        overloads = find_overloads(signal, width)
        residual, level = _without(overloads, signal, background, noise)
        peaks = find_ion_peaks(residual, level, noise, width)
    peaks, notes = _strongest_peaks(peaks)
    clusters, more = _strongest_clusters(cluster_ion_peaks(peaks, run.n_scans, width))
    significant = signal * (signal >= SIGNIFICANT_SIGMA * noise.sigma(background + signal))
    stage = Stage(matrix, residual, level, noise, width, float(significant.sum()), _detector_ceiling(matrix))
    shapes, extracted = _extract_all(clusters, stage)
    large = [_from_overload(overload, stage) for overload in overloads]
    extracted, unassigned = _with_flanks(extracted, shapes, overloads, stage)
    found = [c for c in extracted if c and not any(_is_drift(c, whole) for whole in large)] + large
    found.sort(key=lambda component: component.time_s)
    components = tuple(replace(c, number=n, **find_kind(c, found, blank)) for n, c in enumerate(found, start=1))
    total = matrix.intensity.sum(axis=1, dtype=np.float64)
    return Decomposition(
        components, matrix.time_s, total, background.sum(axis=1), unassigned, width, skew, (*notes, *more)
    )


def _strongest_peaks(peaks: IonPeaks) -> tuple[IonPeaks, tuple[str, ...]]:
    """At most `MAX_ION_PEAKS`, those furthest above noise, in their order; and a note when some were left out."""
    if peaks.apex.size <= MAX_ION_PEAKS:
        return peaks, ()
    kept = np.sort(np.argsort(-peaks.signal_to_noise, kind="stable")[:MAX_ION_PEAKS])
    note = (
        f"{peaks.apex.size:,} peaks of single ions, far more than compounds make: only the {MAX_ION_PEAKS:,} furthest above "
        "noise were looked at"
    )
    return IonPeaks(peaks.ion[kept], peaks.apex[kept], peaks.height[kept], peaks.signal_to_noise[kept]), (note,)


def _strongest_clusters(clusters: Sequence[Cluster]) -> tuple[Sequence[Cluster], tuple[str, ...]]:
    """At most `MAX_CLUSTERS`, those with most signal, in their order; and a note when some were left out."""
    if len(clusters) <= MAX_CLUSTERS:
        return clusters, ()
    limit = sorted((float(cluster.height.sum()) for cluster in clusters), reverse=True)[MAX_CLUSTERS - 1]
    kept = [cluster for cluster in clusters if cluster.height.sum() >= limit][:MAX_CLUSTERS]
    note = f"{len(clusters):,} moments of elution, far more than a run holds: only the {MAX_CLUSTERS:,} largest were taken apart"
    return kept, (note,)


def _extract_all(clusters: Sequence[Cluster], stage: Stage) -> tuple[Sequence[Shape], list[Component | None]]:
    """Shapes and components of the clusters that make one; what the others held goes to their neighbours.

    Then what is left over is looked at once more, for peaks whose ions have no common apex (see `identify.runs.hidden`).
    """
    clusters, shapes, extracted = _settle(clusters, {}, stage)
    if len(clusters) > MAX_LOOKED_AGAIN:
        return shapes, extracted
    rest = _rest(extracted, shapes, stage)
    sigma = stage.noise.sigma(stage.level + stage.signal)
    hidden = find_hidden(
        _left(rest, stage.signal, sigma), stage.signal * (stage.signal > SIGNIFICANT_SIGMA * sigma), sigma, stage.width
    )
    if hidden:
        given = {id(cluster): shape for cluster, shape in hidden}
        together = sorted([*clusters, *(cluster for cluster, _ in hidden)], key=lambda cluster: cluster.apex)
        _, shapes, extracted = _settle(together, given, stage)
    return shapes, extracted


def _settle(
    clusters: Sequence[Cluster], given: Mapping[int, Shape], stage: Stage
) -> tuple[Sequence[Cluster], Sequence[Shape], list[Component | None]]:
    """Clusters that make a component, with their shapes and components; `given` has known shapes by identity of the cluster."""
    shapes: Sequence[Shape] = ()
    extracted: list[Component | None] = []
    for _ in range(MAX_PASSES):
        fitted = fit_shapes(clusters, stage.signal, stage.width)
        shapes = [given.get(id(cluster), shape) for cluster, shape in zip(clusters, fitted, strict=True)]
        extracted = [_extract(place, clusters, shapes, stage) for place in range(len(clusters))]
        keep = [place for place, component in enumerate(extracted) if component and not _is_remnant(component)]
        if len(keep) == len(clusters):
            break
        clusters = [clusters[place] for place in keep]
        shapes, extracted = [shapes[place] for place in keep], [extracted[place] for place in keep]
    return clusters, shapes, extracted


def _rest(extracted: Sequence[Component | None], shapes: Sequence[Shape], stage: Stage) -> FloatArray:
    """Signal minus all components, shape ``(n_scans, n_ions)``."""
    rest = stage.signal.copy()
    for component, shape in zip(extracted, shapes, strict=True):
        if component:
            columns = np.searchsorted(stage.matrix.mz, component.peaks.mz.astype(np.int64))
            rows = slice(shape.first, shape.first + shape.values.size)
            rest[rows, columns] -= np.outer(shape.values, component.peaks.intensity)
    return rest


def _left(rest: FloatArray, of: FloatArray, sigma: FloatArray) -> FloatArray:
    """The part of a rest above noise and `FIT_ERROR` of what it is left of that lasts for two scans at least, 0 elsewhere."""
    over = rest > np.maximum(SIGNIFICANT_SIGMA * sigma, FIT_ERROR * of)
    beside = np.zeros_like(over)
    beside[1:] |= over[:-1]
    beside[:-1] |= over[1:]
    return np.where(over & beside, rest, 0.0)


def _is_remnant(component: Component) -> bool:
    """Whether a component is likelier what its neighbours' shapes left over: few ions, a small part of what is there."""
    return len(component.peaks) <= REMNANT_IONS and component.purity < REMNANT_PURITY


def _with_flanks(
    extracted: Sequence[Component | None], shapes: Sequence[Shape], overloads: Sequence[Overload], stage: Stage
) -> tuple[list[Component | None], FloatArray]:
    """Components whose areas follow their own traces at the flanks, and signal of each scan that none explains.

    Within an overloaded stretch what is left is its own drift, no flank of another peak.
    """
    sigma = stage.noise.sigma(stage.level + stage.signal)
    rest = _rest(extracted, shapes, stage)
    misfit = _left(rest, stage.signal, sigma) - _left(-rest, stage.signal - rest, sigma)
    drift = np.zeros(misfit.shape[0])
    for overload in overloads:
        rows = slice(overload.first, overload.last + 1)
        drift[rows] = np.maximum(misfit[rows], 0.0).sum(axis=1)
        misfit[rows] = 0.0
    gains, unassigned = assign_flanks(extracted, shapes, stage.matrix.mz, misfit, stage.width)
    grown = [
        component and _with_area(component, component.area + float(gain) * stage.matrix.scan_time_s, stage)
        for component, gain in zip(extracted, gains, strict=True)
    ]
    return grown, np.asarray(unassigned.sum(axis=1) + drift)


def _with_area(component: Component, area: float, stage: Stage) -> Component:
    share = area / (stage.total * stage.matrix.scan_time_s) if stage.total > 0 else 0.0
    return replace(component, area=area, share_of_signal=min(1.0, share))


@dataclass(frozen=True, slots=True, eq=False)
class Stage:
    """What every extraction needs.

    Attributes
    ----------
    signal : ndarray of shape (n_scans, n_ions)
        Above background and without overloaded peaks.
    level : ndarray of shape (n_scans, n_ions)
        What else was in a reading, as the intensity whose noise it carries.
    total : float
        All signal above background, summed over scans and ions.
    """

    matrix: IonMatrix
    signal: FloatArray
    level: FloatArray
    noise: NoiseModel
    width: float
    total: float
    ceiling: float

    def time_s(self, scan: float) -> float:
        """Time at a scan position between scans."""
        return float(np.interp(scan, np.arange(self.matrix.time_s.size), self.matrix.time_s))


def _without(
    overloads: Sequence[Overload], signal: FloatArray, background: FloatArray, noise: NoiseModel
) -> tuple[FloatArray, FloatArray]:
    """Signal without the overloaded peaks, and the noise level with the uncertainty of taking them out."""
    if not overloads:
        return signal, background
    rest, level = signal.copy(), background.astype(np.float64)
    for overload in overloads:
        rows = slice(overload.start, overload.start + overload.amount.shape[0])
        rest[rows] = np.maximum(rest[rows] - overload.amount, 0.0)
        level[rows] += overload.amount + (RATIO_ERROR * overload.amount) ** 2 / noise.per_count
    return rest, level


def _from_overload(overload: Overload, stage: Stage) -> Component:
    spectrum = overload.spectrum
    ions = np.nonzero(spectrum > max(stage.noise.smallest, 0.0005 * float(spectrum.max())))[0]
    rows = slice(overload.first, overload.last + 1)
    there = float(stage.signal[rows].sum() + overload.amount[: overload.last + 1 - overload.start].sum())
    mine = float(overload.amount[overload.first - overload.start : overload.last + 1 - overload.start].sum())
    area = float(overload.amount.sum() * stage.matrix.scan_time_s)
    spread = np.sqrt(stage.noise.sigma(spectrum[ions]) ** 2 + (RATIO_ERROR * spectrum[ions]) ** 2)
    return Component(
        number=0,
        time_s=stage.time_s(overload.apex),
        start_s=float(stage.matrix.time_s[overload.first]),
        end_s=float(stage.matrix.time_s[overload.last]),
        height=float(spectrum[ions].sum()),
        area=area,
        share_of_signal=min(1.0, area / (stage.total * stage.matrix.scan_time_s)),
        signal_to_noise=float(spectrum[ions].sum() / np.sqrt(np.sum(spread**2))),
        peaks=Peaks(stage.matrix.mz[ions].astype(np.float64), spectrum[ions]),
        uncertainty=spread,
        shape_quality=0.0,
        purity=min(1.0, mine / there) if there > 0 else 0.0,
        is_saturated=True,
        note="overloaded: its ion ratios drift over the peak",
    )


def _is_drift(component: Component, overloaded: Component) -> bool:
    """Whether a component within an overloaded stretch is too small to be told from the drift of its ions."""
    if not overloaded.start_s <= component.time_s <= overloaded.end_s:
        return False
    if component.height < MIN_HIDDEN_SHARE * overloaded.height:
        return True
    near = np.abs(component.peaks.mz[:, None] - overloaded.peaks.mz[None, :]).min(axis=1) <= 1.0
    kin = float(component.peaks.intensity[near].sum() / component.peaks.intensity.sum())
    return component.height < KIN_SHARE * overloaded.height and kin >= KIN_SIGNAL


def _extract(place: int, clusters: Sequence[Cluster], shapes: Sequence[Shape], stage: Stage) -> Component | None:
    shape, matrix, noise = shapes[place], stage.matrix, stage.noise
    start, end = shape.first, shape.first + shape.values.size
    design = _design(place, clusters, shapes, start, end, stage.width)
    window = stage.signal[start:end]
    sigma = noise.sigma(window + stage.level[start:end])
    amplitude, spread, explained = _solve(design, window, sigma)
    ions = np.nonzero((amplitude >= MIN_AMPLITUDE_SIGMA * spread) & (amplitude >= noise.smallest))[0]
    if ions.size == 0:
        return None
    own = amplitude[ions]
    snr = float(own.sum() / np.sqrt(np.sum(spread[ions] ** 2)))
    if snr < MIN_COMPONENT_SNR:
        return None
    area = float(own.sum() * shape.values.sum() * matrix.scan_time_s)
    top = round(clusters[place].apex)
    raw = matrix.intensity[max(0, top - 1) : top + 2][:, ions]
    return Component(
        number=0,
        time_s=stage.time_s(clusters[place].apex),
        start_s=float(matrix.time_s[start]),
        end_s=float(matrix.time_s[min(end, matrix.time_s.size) - 1]),
        height=float(own.sum()),
        area=area,
        share_of_signal=min(1.0, area / (stage.total * matrix.scan_time_s)) if stage.total > 0 else 0.0,
        signal_to_noise=snr,
        peaks=Peaks(matrix.mz[ions].astype(np.float64), own),
        uncertainty=spread[ions],
        shape_quality=float(np.average(explained[ions], weights=own)),
        purity=_purity(window, own, ions, shape),
        is_saturated=bool((raw >= stage.ceiling).any()),
    )


def _design(
    place: int, clusters: Sequence[Cluster], shapes: Sequence[Shape], start: int, end: int, width: float
) -> FloatArray:
    """Columns: own shape, shapes of the neighbours inside the window, a constant."""
    apex = clusters[place].apex
    reach = NEIGHBOUR_WIDTHS * width
    near = [i for i in range(len(clusters)) if i != place and abs(clusters[i].apex - apex) <= reach]
    near.sort(key=lambda i: abs(clusters[i].apex - apex))
    columns = [column for i in near[:MAX_NEIGHBOURS] if (column := shapes[i].on(start, end)).max() > 0.02]
    return np.column_stack([shapes[place].on(start, end), *columns, np.ones(end - start)])


def _solve(design: FloatArray, window: FloatArray, sigma: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Amplitude of the own shape, its standard deviation and the share of variance explained, for every ion."""
    from scipy.optimize import nnls

    n_ions = window.shape[1]
    amplitude, explained = np.zeros(n_ions), np.zeros(n_ions)
    covariance = np.linalg.pinv(design.T @ design)
    mean_variance = np.sum(design[:, :1] * sigma**2, axis=0) / design[:, 0].sum()
    spread = np.sqrt(max(covariance[0, 0], 0.0) * mean_variance)
    # With no column below 0, the amplitude of the own shape alone is the most it can have beside others.
    own = design[:, 0]
    most = own @ window / float(own @ own)
    varies = window.var(axis=0) * window.shape[0]
    for ion in np.nonzero((window.max(axis=0) >= 2.0 * sigma.min(axis=0)) & (most >= MIN_AMPLITUDE_SIGMA * spread))[0]:
        solution, rest = nnls(design, window[:, ion])
        amplitude[ion] = solution[0]
        explained[ion] = max(0.0, 1.0 - rest**2 / varies[ion]) if varies[ion] > 0 else 0.0
    return amplitude, spread, explained


def _purity(window: FloatArray, own: FloatArray, ions: np.ndarray, shape: Shape) -> float:
    core = shape.values >= 0.5
    there = float(np.maximum(window[core], 0.0).sum())
    mine = float(own.sum() * shape.values[core].sum())
    return min(1.0, mine / there) if there > 0 else 0.0


def _detector_ceiling(matrix: IonMatrix) -> float:
    """Intensity at which the detector stops; infinite when the highest reading does not repeat."""
    highest = float(matrix.intensity.max())
    repeats = int(np.count_nonzero(matrix.intensity >= 0.9999 * highest))
    return 0.9999 * highest if repeats >= 3 else float("inf")
