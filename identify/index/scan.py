"""One pass over the codes of every entry: which entries may be among the best?

For a query with weights ``q`` and an entry with codes ``c`` (bytes) the pass sums over the query's peaks::

    dot = Σ q c          matched = Σ_{c>0} q²          below = Σ_{m/z < query.lowest_mz} c²

and with the query's own tail sums ``Q(L) = Σ_{m/z ≥ L} q²`` every norm of the common range is there without another pass::

    |c|² = code_square - below          cosine ≈ dot / (sqrt(Q(entry.lowest_mz)) |c|)
                                        reverse ≈ dot / (sqrt(matched) |c|)

An entry has no peaks below its own lowest m/z and the query none below its own, so `dot` and `matched` need no cut.

Why nothing is lost
-------------------
Both scores are ``u · ŵ`` with ``u`` of length ≤ 1 and ``ŵ`` the unit vector of the exact weights. Replacing ``ŵ`` by the unit
vector of the codes changes them by at most the chord between the two::

    |u · ŵ - u · ĉ| ≤ |ŵ - ĉ| = 2 sin(θ/2),      sin θ ≤ code_error / |c| = s,      2 sin(θ/2) ≤ 1.02 s   for s ≤ 0.3

since ``c`` is no further than `code_error` from the line of ``w`` (for ``s > 0.3`` nothing is concluded: the score is somewhere
in [0, 1]). Float32 sums of ``n`` products that are all positive add a relative error below ``(n + 16) 2**-23``. So each score
lies in an interval, ``tau`` = the k-th largest lower end is a floor for the true k-th best, and every entry whose upper end
reaches ``tau`` by either score is rescored exactly. The true best k (with all ties) are among them.

Two implementations make the same promise, so a search has the same answer bit for bit with either: `_scan_arrays` here
(numpy; no start-up time) and `identify.index.scan_compiled` (numba; 0.7 s to load, then about ten times faster).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from identify.index.query import WeighedQuery
from identify.index.segment import BLOCK_ENTRIES, Segment
from identify.records import FloatArray

COMPILED_FROM_ENTRIES = 60_000
"""Below this the numpy pass is faster than loading the compiled one."""
CHORD_FACTOR = 1.02
CHORD_LIMIT = 0.3
"""2 sin(θ/2) / sin θ = 1 / cos(θ/2) = 1.0118 at sin θ = 0.3."""
NEGLIGIBLE_SQUARE = 1e-24
"""Sums of squared query weights below this may have lost digits to float32: nothing is concluded from them."""
SMALLEST_WEIGHT = 1e-20
"""Query weights are raised to this in the scan, so that a matched peak always shows in `dot`."""
HUGE = 1e30
"""Stands for the inverse of a negligible length; a score made with it comes out far above `UNDECIDED`."""
UNDECIDED = 10.0

Float32Array = NDArray[np.float32]


def find_candidates(
    segment: Segment, query: WeighedQuery, k: int, hidden: NDArray[np.bool_] | None = None, *, many: bool = False
) -> NDArray[np.int64]:
    """Rows that contain the true `k` best by cosine and by reverse match, with all ties, and few others.

    Parameters
    ----------
    segment : Segment
        The entries.
    query : WeighedQuery
        The query, weighted as the segment.
    k : int
        How many by each score, ≥ 1.
    hidden : bool array of shape (n_entries,), optional
        Rows that do not take part.
    many : bool
        Whether so many queries follow that loading the compiled pass pays in any library.

    Returns
    -------
    int64 array
        Rows, increasing, without those that share no peak with the query.
    """
    if many or segment.n_entries >= COMPILED_FROM_ENTRIES:
        from identify.index.scan_compiled import scan

        return scan(segment, query, k, hidden)
    return _scan_arrays(segment, query, k, hidden)


def scan_weights(query: WeighedQuery) -> Float32Array:
    """Query weights as the scan uses them, shape ``(n_peaks,)``."""
    return np.maximum(query.weight, SMALLEST_WEIGHT).astype(np.float32)


def inverse_norms(segment: Segment, query: WeighedQuery) -> Float32Array:
    """``1 / sqrt(Q(L))`` by lowest m/z of the entry, `HUGE` where `Q` is negligible; reaches up to the last one in use."""
    last = int(segment.lowest_mz.max(initial=0))
    lowest = np.maximum(np.arange(last + 1), query.lowest_mz).astype(np.uint16)
    square = query.square_from(lowest)
    inverse = np.full(last + 1, HUGE)
    np.divide(1.0, np.sqrt(square), out=inverse, where=square > NEGLIGIBLE_SQUARE)
    return inverse.astype(np.float32)


def float_slack(query: WeighedQuery) -> float:
    """Bound of the float32 rounding in a score that is at most 1."""
    return (query.mz.size + 16) * 2.0**-23


def bound_scores(segment: Segment, query: WeighedQuery) -> tuple[NDArray[np.int64], FloatArray, FloatArray, FloatArray]:
    """Scores from the codes, with the half-width of the interval in which each exact score lies.

    Parameters
    ----------
    segment : Segment
        The entries.
    query : WeighedQuery
        The query, weighted as the segment.

    Returns
    -------
    rows : int64 array of shape (n,)
        The rows that share a peak with the query, increasing; the scores of all others are 0.
    cosine, reverse : float64 arrays of shape (n,)
        Approximate scores; above `UNDECIDED` where nothing is known but that the score lies in [0, 1].
    slack : float64 array of shape (n,)
        Half-width of both intervals.
    """
    dot, matched, below = _sum_columns(segment, query)
    rows = np.flatnonzero(dot > 0)
    dot, matched = dot[rows], matched[rows]
    length = np.sqrt(segment.code_square[rows].astype(np.float64) - below[rows])
    slack = segment.code_error[rows] / length
    slack = np.where(slack <= CHORD_LIMIT, CHORD_FACTOR * slack, 1.0) + float_slack(query)
    inverse_norm = inverse_norms(segment, query)[segment.lowest_mz[rows]]
    is_known = matched > NEGLIGIBLE_SQUARE
    inverse_matched = np.divide(1.0, np.sqrt(matched), out=np.full(rows.size, HUGE), where=is_known)
    return rows, dot / length * inverse_norm, dot / length * inverse_matched, slack


def _scan_arrays(segment: Segment, query: WeighedQuery, k: int, hidden: NDArray[np.bool_] | None) -> NDArray[np.int64]:
    rows, cosine, reverse, slack = bound_scores(segment, query)
    if hidden is not None:
        seen = ~hidden[rows]
        rows, cosine, reverse, slack = rows[seen], cosine[seen], reverse[seen], slack[seen]
    if rows.size <= k:
        return rows
    return rows[_may_be_among_best(cosine, slack, k) | _may_be_among_best(reverse, slack, k)]


def _may_be_among_best(score: FloatArray, slack: FloatArray, k: int) -> NDArray[np.bool_]:
    lower = np.where(score < UNDECIDED, score, 0.0) - slack
    floor = np.partition(lower, lower.size - k)[lower.size - k]
    may: NDArray[np.bool_] = score + slack >= floor
    return may


def _sum_columns(segment: Segment, query: WeighedQuery) -> tuple[FloatArray, FloatArray, FloatArray]:
    """`dot`, `matched` and `below` of every row."""
    block_of = np.repeat(np.arange(segment.n_blocks), np.diff(segment.block_start))
    mz = segment.column_mz.astype(np.int64)
    weight = _weight_of(mz, query)
    touched = np.flatnonzero((weight > 0) | (mz < query.lowest_mz))
    is_dense = segment.column_count[touched] == 0
    dot, matched, below = _sum_postings(segment, touched[~is_dense], block_of, weight)
    dense = segment.dense.reshape(-1, BLOCK_ENTRIES)
    for block in range(segment.n_blocks):
        here = slice(block * BLOCK_ENTRIES, (block + 1) * BLOCK_ENTRIES)
        columns = touched[is_dense & (block_of[touched] == block)]
        codes = dense[segment.column_at[columns] // BLOCK_ENTRIES]
        q, low = weight[columns], mz[columns] < query.lowest_mz
        # einsum, not a matrix product: too small for threads to help, and they would fight with other work.
        dot[here] += np.einsum("i,ij->j", q, codes.astype(np.float32))
        matched[here] += np.einsum("i,ij->j", q * q, (codes > 0).astype(np.float32))
        if low.any():
            lost = codes[low].astype(np.float64)
            below[here] += np.einsum("ij,ij->j", lost, lost)
    return dot[: segment.n_entries], matched[: segment.n_entries], below[: segment.n_entries]


def _sum_postings(
    segment: Segment, columns: NDArray[np.int64], block_of: NDArray[np.int64], weight: Float32Array
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """What the postings of some columns add; columns without query weight lie below the query's range."""
    counts = segment.column_count[columns]
    owner = np.repeat(np.arange(columns.size), counts)
    at = np.arange(owner.size) + (segment.column_at[columns] - (np.cumsum(counts) - counts))[owner]
    rows = segment.posting_row[at] + (block_of[columns] * BLOCK_ENTRIES)[owner]
    code, q = segment.posting_code[at].astype(np.float64), weight[columns].astype(np.float64)[owner]
    n_rows = segment.n_blocks * BLOCK_ENTRIES

    def total(values: FloatArray) -> FloatArray:
        # Cut, because the two-byte row of a damaged posting may reach further; integers where there is nothing to count.
        return np.bincount(rows, weights=values, minlength=n_rows)[:n_rows].astype(np.float64, copy=False)

    low = q == 0
    return total(q * code), total(q * q), total(np.where(low, code * code, 0.0)) if low.any() else np.zeros(n_rows)


def _weight_of(mz: NDArray[np.int64], query: WeighedQuery) -> Float32Array:
    """Query weight at each m/z, 0 where there is no peak."""
    table = np.zeros(int(mz.max(initial=0)) + 1, dtype=np.float32)
    end = int(np.searchsorted(query.mz, table.size))
    table[query.mz[:end]] = scan_weights(query)[:end]
    return table[mz]
