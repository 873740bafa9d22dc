"""Two spectra on one m/z axis, over the range both cover. Align once, score many.

Why a range: old records start anywhere from m/z 10 to 85. A peak at m/z 43 says nothing against an entry whose scan began
at m/z 50. The common range therefore starts at the higher of the two lower limits; it has no upper limit, because nothing
above a spectrum's highest peak means "no ions there".
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from identify.records import AlignedPeaks, CleanSpectrum, FloatArray, Peaks


def align(query: CleanSpectrum, entry: CleanSpectrum) -> AlignedPeaks:
    """Peaks of both spectra at every nominal m/z either of them has, from the higher lower limit upwards.

    Parameters
    ----------
    query, entry : CleanSpectrum
        Cleaned spectra; their nominal peaks are used.

    Returns
    -------
    AlignedPeaks
        Intensities relative to each whole spectrum's base peak (= 100); 0 where one has no peak. May be empty.

    Notes
    -----
    O(n log n) in the number of peaks. Symmetric: swapping the arguments swaps the columns.

    Examples
    --------
    >>> query = CleanSpectrum(Peaks([43, 58], [100, 30]), None, 40)
    >>> entry = CleanSpectrum(Peaks([29, 43, 57], [20, 100, 5]), None, 29)
    >>> align(query, entry).mz.tolist()  # from m/z 40: below it the query was not measured
    [43.0, 57.0, 58.0]
    """
    return align_all(query, [entry])[0]


def align_all(query: CleanSpectrum, entries: Sequence[CleanSpectrum]) -> list[AlignedPeaks]:
    """`align` of a query with each of many entries, several times as fast as one by one.

    Parameters
    ----------
    query : CleanSpectrum
    entries : sequence of CleanSpectrum

    Returns
    -------
    list of AlignedPeaks
        In the order of the entries.

    Notes
    -----
    All pairs lie on one long axis, each at ``number of the pair · span + m/z``, which is then cut.
    """
    if not entries:
        return []
    n, query_mz = len(entries), query.nominal.mz
    lowest = np.maximum(query.lowest_mz, np.array([entry.lowest_mz for entry in entries], dtype=np.int64))
    entry_mz = np.concatenate([entry.nominal.mz for entry in entries])
    entry_owner = np.repeat(np.arange(n), [len(entry.nominal) for entry in entries])
    span = float(max(query_mz.max(initial=0.0), entry_mz.max(initial=0.0), lowest.max())) + 1.0
    query_owner, place = np.nonzero(query_mz >= lowest[:, np.newaxis])
    kept = entry_mz >= lowest[entry_owner]
    query_key = query_owner * span + query_mz[place]
    entry_key = (entry_owner * span + entry_mz)[kept]
    axis = np.union1d(query_key, entry_key)
    query_column, entry_column = np.zeros(axis.size), np.zeros(axis.size)
    query_column[np.searchsorted(axis, query_key)] = query.nominal.relative[place]
    relative = np.concatenate([entry.nominal.relative for entry in entries])
    entry_column[np.searchsorted(axis, entry_key)] = relative[kept]
    mz = axis % span
    cuts = pairwise(np.searchsorted(axis, np.arange(n + 1) * span).tolist())
    return [
        AlignedPeaks(mz[start:end], query_column[start:end], entry_column[start:end], low)
        for (start, end), low in zip(cuts, lowest.tolist(), strict=True)
    ]


def align_accurate(
    query: Peaks, entry: Peaks, lowest_mz: int, tolerance_ppm: float, tolerance_da: float
) -> AlignedPeaks:
    """Accurate peaks of both spectra on one axis; peaks that are each other's nearest within the tolerance are one.

    Parameters
    ----------
    query, entry : Peaks
        Accurate peaks of the two spectra.
    lowest_mz : int
        Higher of the two lower limits, nominal: accurate peaks from ``lowest_mz - 0.5`` upwards take part.
    tolerance_ppm, tolerance_da : float
        The larger of the two at the mean m/z of a pair applies, ≥ 0.

    Returns
    -------
    AlignedPeaks
        A pair stands at its mean m/z, other peaks at their own; intensities relative to each whole spectrum's base peak
        (= 100). May be empty.

    Notes
    -----
    O(n log n). Symmetric: swapping the spectra swaps the columns. Between two equally near peaks the lower is the nearer.

    Examples
    --------
    >>> query, entry = Peaks([43.0178, 58.0413], [100, 40]), Peaks([43.0180, 58.0651], [100, 40])
    >>> align_accurate(query, entry, 40, 10.0, 0.002).mz.round(4).tolist()
    [43.0179, 58.0413, 58.0651]
    """
    query_mz, query_intensity = _from_nominal(query, lowest_mz)
    entry_mz, entry_intensity = _from_nominal(entry, lowest_mz)
    if query_mz.size == 0 or entry_mz.size == 0:
        mine = theirs = np.zeros(0, dtype=np.int64)
    else:
        theirs_of = _nearest(query_mz, entry_mz)
        mine = np.flatnonzero(_nearest(entry_mz, query_mz)[theirs_of] == np.arange(query_mz.size))
        theirs = theirs_of[mine]
    middle = (query_mz[mine] + entry_mz[theirs]) / 2
    near = np.abs(query_mz[mine] - entry_mz[theirs]) <= np.maximum(tolerance_da, tolerance_ppm * 1e-6 * middle)
    mine, theirs, middle = mine[near], theirs[near], middle[near]
    alone, missed = np.delete(np.arange(query_mz.size), mine), np.delete(np.arange(entry_mz.size), theirs)
    axis = np.concatenate([middle, query_mz[alone], entry_mz[missed]])
    order = np.argsort(axis, kind="stable")
    query_column = np.concatenate([query_intensity[mine], query_intensity[alone], np.zeros(missed.size)])
    entry_column = np.concatenate([entry_intensity[theirs], np.zeros(alone.size), entry_intensity[missed]])
    return AlignedPeaks(axis[order], query_column[order], entry_column[order], lowest_mz)


def _from_nominal(peaks: Peaks, lowest_mz: int) -> tuple[FloatArray, FloatArray]:
    start = int(np.searchsorted(peaks.mz, lowest_mz - 0.5))
    return peaks.mz[start:], peaks.relative[start:]


def _nearest(points: FloatArray, axis: FloatArray) -> NDArray[np.int64]:
    """Position on the (not empty) axis nearest to each point; the lower one of two equally near."""
    right = np.clip(np.searchsorted(axis, points), 1, max(axis.size - 1, 1))
    left = right - 1
    right = np.minimum(right, axis.size - 1)
    return np.where(np.abs(axis[right] - points) < np.abs(points - axis[left]), right, left)
