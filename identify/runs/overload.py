"""Overloaded peaks: stretches in which detector or column no longer follow, taken as one component each.

A solvent front holds its ceiling for many scans while its ion ratios drift, so that no single peak shape fits it and apex
clustering breaks it to pieces. Here such a stretch is found, its own traces and its tail are taken out of the signal, and
what its traces cannot explain stays behind for the ordinary way: that is what hides in it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from identify.records import FloatArray

MIN_SHARE_OF_RUN = 0.25
"""An overloaded peak's strongest ion reaches this share of the highest reading of the run."""
MIN_WIDTHS = 2.5
"""And stays above half its height for this many typical peak widths."""
GUIDE_IONS = 6
GUIDE_SHARE = 0.08
ION_SHARE = 0.002
TAIL_WIDTHS = 60.0
LINGERING_SHARE = 0.8
"""An ion whose trace after the stretch is a falling tail to this share is all the overloaded peak's, slower than its other ions:
what sticks to the walls of the source (hydrogen chloride after a chlorinated solvent)."""
RATIO_ERROR = 0.04
"""How far ion ratios drift within a stretch beyond what the guide traces describe (petrol run: 2–5 %)."""


@dataclass(frozen=True, slots=True, eq=False)
class Overload:
    """One overloaded stretch.

    Attributes
    ----------
    first, last : int
        Scans between which its strongest ion stays above half its height, both included.
    apex : float
        Scan at the centre of gravity of its signal.
    amount : ndarray of shape (n_scans, n_ions)
        What is its own, tail included, in intensity units; a window of the run from scan `start`.
    start : int
    """

    first: int
    last: int
    apex: float
    start: int
    amount: FloatArray

    @property
    def spectrum(self) -> FloatArray:
        """Intensity of each ion at its mean over the stretch, shape ``(n_ions,)``."""
        rows = self.amount[self.first - self.start : self.last + 1 - self.start]
        return np.asarray(rows.mean(axis=0))


def find_overloads(signal: FloatArray, width: float) -> tuple[Overload, ...]:
    """Overloaded stretches of a run, in the order of time.

    Parameters
    ----------
    signal : ndarray of shape (n_scans, n_ions)
        Intensity above background, ≥ 0.
    width : float
        Typical full width at half height of a peak, in scans.

    Returns
    -------
    tuple of Overload
        Usually empty, or the solvent front alone.

    Notes
    -----
    A stretch is overloaded when the ion that dominates it stands within `MIN_SHARE_OF_RUN` of the run's highest reading, its
    trace stays above half its height for `MIN_WIDTHS` typical widths, and the second strongest ion of the stretch is as wide:
    overlapping peaks that share one ion are not. An ion's own part is the non-negative least-squares combination of the
    stretch's strongest (guide) traces; after the stretch it is the lower envelope that never rises again.
    """
    highest = float(signal.max()) if signal.size else 0.0
    if highest <= 0.0:
        return ()
    found: list[Overload] = []
    taken = np.zeros(signal.shape[0], dtype=np.bool_)
    for ion in np.argsort(-signal.max(axis=0), kind="stable"):
        if signal[:, ion].max() < MIN_SHARE_OF_RUN * highest:
            break
        for first, last in _wide_stretches(signal[:, ion], MIN_SHARE_OF_RUN * highest, MIN_WIDTHS * width):
            if taken[first : last + 1].any() or not _is_shared(signal, first, last, int(ion), width):
                continue
            overload = _measure(signal, first, last, width)
            taken[overload.start : overload.start + overload.amount.shape[0]] |= overload.amount.max(axis=1) > 0
            found.append(overload)
    return tuple(sorted(found, key=lambda overload: overload.first))


def _wide_stretches(trace: FloatArray, floor: float, least: float) -> list[tuple[int, int]]:
    """Stretches around maxima ≥ `floor` that stay above half of the maximum for `least` scans."""
    stretches = []
    left = trace.copy()
    while left.max() >= floor:
        top = int(np.argmax(left))
        half = 0.5 * float(trace[top])
        first = last = top
        while first > 0 and trace[first - 1] >= half:
            first -= 1
        while last + 1 < trace.size and trace[last + 1] >= half:
            last += 1
        if last - first + 1 >= least:
            stretches.append((first, last))
        left[max(0, first - 1) : last + 2] = 0.0
    return stretches


def _is_shared(signal: FloatArray, first: int, last: int, ion: int, width: float) -> bool:
    """Whether the second strongest ion of the stretch is as wide as an overloaded peak's."""
    means = signal[first : last + 1].mean(axis=0)
    means[ion] = 0.0
    second = int(np.argmax(means))
    trace = signal[first : last + 1, second]
    return bool(means[second] > 0 and np.count_nonzero(trace >= 0.3 * trace.max()) >= 0.7 * MIN_WIDTHS * width)


def _measure(signal: FloatArray, first: int, last: int, width: float) -> Overload:
    from scipy.optimize import nnls

    edge = max(1, round(0.75 * width))
    start, stop = max(0, first - edge), min(signal.shape[0], last + 1 + edge)
    window = signal[start:stop]
    mean = signal[first : last + 1].mean(axis=0)
    guides = _guides(window, mean)
    traces = window[:, guides]
    end = min(signal.shape[0], stop + round(TAIL_WIDTHS * width))
    amount = np.zeros((end - start, signal.shape[1]))
    for ion in np.nonzero(mean >= ION_SHARE * mean.max())[0]:
        weights, _ = nnls(traces, window[:, ion])
        own = np.minimum(traces @ weights, window[:, ion])
        amount[: stop - start, ion] = own
        tail = signal[stop:end, ion]
        amount[stop - start :, ion] = _falling_tail(tail, float(own[-1]))
        lingering = _falling_tail(tail, float(window[-1, ion]))
        if lingering.sum() >= LINGERING_SHARE * tail.sum():
            amount[stop - start :, ion] = lingering
    total = amount.sum(axis=1)
    apex = start + float(np.average(np.arange(stop - start), weights=total[: stop - start]))
    return Overload(first, last, apex, start, amount)


def _guides(window: FloatArray, mean: FloatArray) -> NDArray[np.int64]:
    """The strongest ions of the stretch: they are its own beyond doubt."""
    order = np.argsort(-mean, kind="stable")[:GUIDE_IONS]
    return np.asarray(order[mean[order] >= GUIDE_SHARE * mean.max()], dtype=np.int64)


def _falling_tail(trace: FloatArray, start_value: float) -> FloatArray:
    """Part of a trace that only falls: the running minimum of a median over three scans, from at most `start_value`."""
    if trace.size < 3 or start_value <= 0.0:
        return np.zeros(trace.size)
    middle = np.median(np.lib.stride_tricks.sliding_window_view(np.pad(trace, 1, mode="edge"), 3), axis=1)
    envelope = np.minimum.accumulate(np.minimum(middle, start_value))
    return np.minimum(envelope, trace)
