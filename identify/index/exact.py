"""Exact scores of chosen entries in float64: the last word on every score the index gives."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from identify.index.segment import MAX_MZ, Segment
from identify.records import CleanSpectrum, FloatArray
from identify.settings import Weighting
from identify.spectra.weights import peak_weights

ROWS_PER_CHUNK = 20_000
"""Entries scored at once: bounds the memory of one call to some tens of megabytes."""


@dataclass(frozen=True, slots=True, eq=False)
class WeighedQuery:
    """A query ready for scoring.

    Attributes
    ----------
    lowest_mz : int
        Lowest m/z the query covers.
    mz : int64 array of shape (n_peaks,)
        Nominal m/z of its peaks from there upwards.
    weight : float64 array of shape (n_peaks,)
        Their weights; the squares sum to 1.
    by_mz : float64 array of shape (MAX_MZ + 1,)
        The same weights by m/z, 0 where there is no peak.
    tail : float64 array of shape (MAX_MZ + 1,)
        ``tail[L]`` is the sum of squared weights at m/z ≥ L.
    """

    lowest_mz: int
    mz: NDArray[np.int64]
    weight: FloatArray
    by_mz: FloatArray
    tail: FloatArray


def weigh_query(spectrum: CleanSpectrum, weighting: Weighting) -> WeighedQuery:
    """Weighted query with its tail sums.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The nominal peaks are used; those above `MAX_MZ` count in the norms only, since no entry can match them.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    WeighedQuery
    """
    in_range = spectrum.nominal.mz >= spectrum.lowest_mz
    mz = spectrum.nominal.mz[in_range].astype(np.int64)
    weight = peak_weights(spectrum.nominal.mz[in_range], spectrum.nominal.relative[in_range], weighting)
    if mz.size:
        weight = weight / np.linalg.norm(weight)
    # Summed from the top: a small tail keeps its digits.
    sums = np.concatenate([np.cumsum((weight * weight)[::-1])[::-1], [0.0]])
    tail = sums[np.searchsorted(mz, np.arange(MAX_MZ + 1))]
    matchable = mz <= MAX_MZ
    by_mz = np.zeros(MAX_MZ + 1)
    by_mz[mz[matchable]] = weight[matchable]
    return WeighedQuery(spectrum.lowest_mz, mz[matchable], weight[matchable], by_mz, tail)


def score_rows(segment: Segment, query: WeighedQuery, rows: NDArray[np.int64]) -> tuple[FloatArray, FloatArray]:
    """Exact cosine and reverse-match similarity of some rows, both of shape ``(n_rows,)``, in [0, 1].

    Parameters
    ----------
    segment : Segment
        The entries.
    query : WeighedQuery
        The query.
    rows : int64 array of shape (n_rows,)
        Positions in the segment, in any order.

    Returns
    -------
    cosine, reverse : arrays of shape (n_rows,)

    Notes
    -----
    Sums run over an entry's peaks in order of m/z, one after the other, so a score depends on the entry and the query
    alone: bit for bit the same in any segment, at any position, in any batch.
    """
    cosine, reverse = np.empty(rows.size), np.empty(rows.size)
    for start in range(0, rows.size, ROWS_PER_CHUNK):
        part = slice(start, start + ROWS_PER_CHUNK)
        cosine[part], reverse[part] = _score_chunk(segment, query, rows[part])
    return cosine, reverse


def _score_chunk(segment: Segment, query: WeighedQuery, rows: NDArray[np.int64]) -> tuple[FloatArray, FloatArray]:
    starts = segment.row_start[rows]
    counts = segment.row_start[rows + 1] - starts
    owner = np.repeat(np.arange(rows.size), counts)
    before = np.cumsum(counts) - counts
    peaks = np.arange(owner.size) + (starts - before)[owner]
    mz, entry = segment.mz[peaks], segment.weight[peaks].astype(np.float64)
    matched = query.by_mz[mz]
    entry = np.where(mz >= query.lowest_mz, entry, 0.0)

    def total(values: FloatArray) -> FloatArray:
        # bincount answers integers when there is nothing to count.
        return np.bincount(owner, weights=values, minlength=rows.size).astype(np.float64)

    dot, entry_square, matched_square = total(matched * entry), total(entry * entry), total(matched * matched)
    query_square = query.tail[np.maximum(segment.lowest_mz[rows], min(query.lowest_mz, MAX_MZ))]
    return _divide(dot, query_square, entry_square), _divide(dot, matched_square, entry_square)


def _divide(dot: FloatArray, query_square: FloatArray, entry_square: FloatArray) -> FloatArray:
    norm = np.sqrt(query_square) * np.sqrt(entry_square)
    score: FloatArray = np.divide(dot, norm, out=np.zeros_like(dot), where=norm > 0)
    return np.minimum(score, 1.0)
