"""Exact scores of chosen entries in float64: the last word on every score the index gives."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from identify.index.query import WeighedQuery
from identify.index.segment import Segment
from identify.records import FloatArray

ROWS_PER_CHUNK = 20_000
"""Entries scored at once: bounds the memory of one call to some tens of megabytes."""


def score_rows(segment: Segment, query: WeighedQuery, rows: NDArray[np.int64]) -> tuple[FloatArray, FloatArray]:
    """Exact cosine and reverse-match similarity of some rows, both of shape ``(n_rows,)``, in [0, 1].

    Parameters
    ----------
    segment : Segment
        The entries.
    query : WeighedQuery
        The query, weighted as the segment.
    rows : int64 array of shape (n_rows,)
        Positions in the segment, in any order.

    Returns
    -------
    cosine, reverse : float64 arrays of shape (n_rows,)

    Notes
    -----
    Sums run over an entry's peaks in order of m/z, one after the other, so a score depends on the query and the entry
    alone: bit for bit the same in any segment, at any position, in any batch. Against the plain definition of
    `identify.similarity.scores` it is off by less than 1.2e-7: stored weights are rounded to float32 (2**-24, relative),
    which moves each of numerator and norm by at most that much.
    """
    cosine, reverse = np.empty(rows.size), np.empty(rows.size)
    by_mz = query.weight_by_mz(segment.highest_mz)
    for start in range(0, rows.size, ROWS_PER_CHUNK):
        part = slice(start, start + ROWS_PER_CHUNK)
        cosine[part], reverse[part] = _score_chunk(segment, query, by_mz, rows[part])
    return cosine, reverse


def _score_chunk(
    segment: Segment, query: WeighedQuery, by_mz: FloatArray, rows: NDArray[np.int64]
) -> tuple[FloatArray, FloatArray]:
    starts = segment.row_start[rows]
    counts = segment.row_start[rows + 1] - starts
    owner = np.repeat(np.arange(rows.size), counts)
    peaks = np.arange(owner.size) + (starts - (np.cumsum(counts) - counts))[owner]
    mz, entry = segment.mz[peaks], segment.weight[peaks].astype(np.float64)
    matched = np.take(by_mz, mz, mode="clip")
    entry[mz < query.lowest_mz] = 0.0

    def total(values: FloatArray) -> FloatArray:
        # bincount adds in order of position; it answers integers when there is nothing to count.
        return np.bincount(owner, weights=values, minlength=rows.size).astype(np.float64, copy=False)

    dot, entry_square, matched_square = total(matched * entry), total(entry * entry), total(matched * matched)
    query_square = query.square_from(np.maximum(segment.lowest_mz[rows], np.uint16(query.lowest_mz)))
    return _divide(dot, query_square, entry_square), _divide(dot, matched_square, entry_square)


def _divide(dot: FloatArray, query_square: FloatArray, entry_square: FloatArray) -> FloatArray:
    norm = np.sqrt(query_square) * np.sqrt(entry_square)
    score: FloatArray = np.divide(dot, norm, out=np.zeros_like(dot), where=norm > 0)
    return np.minimum(score, 1.0)
