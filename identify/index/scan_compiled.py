"""The pass of `identify.index.scan` as machine code; importing this module loads numba.

For each block: merge the query's m/z with the block's columns, add dense columns four at a time (the running sums are
then loaded and stored once for four columns), add postings one by one, and turn the sums into score intervals. A heap per
score holds the k best lower ends so far; a row whose upper end does not reach the heap's least one is forgotten at once,
the others are kept and judged again at the end, against the final floor.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba
import numpy as np
from numpy.typing import NDArray

from identify.index.query import WeighedQuery
from identify.index.scan import (
    CHORD_FACTOR,
    CHORD_LIMIT,
    NEGLIGIBLE_SQUARE,
    float_slack,
    inverse_norms,
    scan_weights,
)
from identify.index.segment import BLOCK_ENTRIES, Segment

Function = TypeVar("Function", bound=Callable[..., Any])

SUMS_SIZE = 65_536
"""Running sums are as long as a posting's two-byte row can reach, so that damaged postings cannot write outside."""

_B = BLOCK_ENTRIES
_CHORD_FACTOR, _CHORD_LIMIT = np.float32(CHORD_FACTOR), np.float32(CHORD_LIMIT)
_NEGLIGIBLE = np.float32(NEGLIGIBLE_SQUARE)
_ZERO, _ONE = np.float32(0), np.float32(1)


def _compiled(function: Function) -> Function:
    # Fused multiply-add only: infinities and NaN keep their meaning, sums keep their order.
    return cast(Function, numba.njit(function, cache=True, nogil=True, fastmath={"contract"}, error_model="numpy"))


def scan(segment: Segment, query: WeighedQuery, k: int, hidden: NDArray[np.bool_] | None) -> NDArray[np.int64]:
    """Rows that contain the true `k` best by each score; see `identify.index.scan.find_candidates`.

    Parameters
    ----------
    segment : Segment
        The entries.
    query : WeighedQuery
        The query.
    k : int
        How many by each score, ≥ 1.
    hidden : bool array of shape (n_entries,), or None
        Rows that do not take part.

    Returns
    -------
    int64 array
        Rows, increasing.
    """
    rows: NDArray[np.int64] = _scan_blocks(
        (segment.block_start, segment.column_mz, segment.column_count, segment.column_at),
        (segment.dense, segment.posting_row, segment.posting_code),
        (segment.lowest_mz, segment.code_square, segment.code_error),
        (query.mz, scan_weights(query), query.lowest_mz, inverse_norms(segment, query)),
        np.float32(float_slack(query)),
        min(k, segment.n_entries),
        np.zeros(0, dtype=np.bool_) if hidden is None else hidden,
    )
    return rows


@_compiled
def _scan_blocks(columns: Any, codes: Any, rows: Any, query: Any, slack: Any, k: int, hidden: Any) -> Any:
    n_entries = rows[0].size
    sums = np.empty((2, SUMS_SIZE), dtype=np.float32)
    below = np.empty(SUMS_SIZE, dtype=np.uint32)
    upper = np.empty((3, _B), dtype=np.float32)
    kept = np.empty(n_entries, dtype=np.int64)
    kept_upper = np.empty((2, n_entries), dtype=np.float32)
    heaps = np.full((2, k), -np.inf, dtype=np.float32)
    n_kept = 0
    for block in range(columns[0].size - 1):
        first = block * _B
        n_rows = min(_B, n_entries - first)
        sums[:, :_B] = 0
        below[:_B] = 0
        _add_columns(columns, codes, block, query, sums, below)
        _bound(rows, first, n_rows, sums, below, query[3], slack, upper)
        for row in range(n_rows):
            reaches = upper[0, row] >= heaps[0, 0] or upper[1, row] >= heaps[1, 0]
            if reaches and sums[0, row] > 0 and (hidden.size == 0 or not hidden[first + row]):
                kept[n_kept] = first + row
                for score in range(2):
                    kept_upper[score, n_kept] = upper[score, row]
                    _offer(heaps[score], _lower(upper[score, row], upper[2, row]))
                n_kept += 1
    may = (kept_upper[0, :n_kept] >= heaps[0, 0]) | (kept_upper[1, :n_kept] >= heaps[1, 0])
    return kept[:n_kept][may]


@_compiled
def _add_columns(columns: Any, codes: Any, block: int, query: Any, sums: Any, below: Any) -> None:
    """Add to the running sums of one block every column that the query touches."""
    block_start, column_mz, column_count, column_at = columns
    dense, posting_row, posting_code = codes
    query_mz, query_weight, lowest_mz, _ = query
    at = np.zeros(4, dtype=np.int64)
    weight = np.zeros(4, dtype=np.float32)
    n_waiting = 0
    peak = 0
    for column in range(block_start[block], block_start[block + 1]):
        mz, start, count = column_mz[column], column_at[column], column_count[column]
        if mz < lowest_mz:
            if count == 0:
                _add_dense_square(dense[start : start + _B], below)
            else:
                _add_posting_squares(posting_row[start : start + count], posting_code[start : start + count], below)
            continue
        while peak < query_mz.size and query_mz[peak] < mz:
            peak += 1
        if peak == query_mz.size:
            break
        if query_mz[peak] != mz:
            continue
        if count > 0:
            part = slice(start, start + count)
            _add_postings(posting_row[part], posting_code[part], query_weight[peak], sums[0], sums[1])
            continue
        at[n_waiting], weight[n_waiting] = start, query_weight[peak]
        n_waiting += 1
        if n_waiting == 4:
            _add_four(
                dense[at[0] : at[0] + _B], dense[at[1] : at[1] + _B], dense[at[2] : at[2] + _B],
                dense[at[3] : at[3] + _B], weight, sums[0, :_B], sums[1, :_B],
            )  # fmt: skip
            n_waiting = 0
    for waiting in range(n_waiting):
        _add_dense(dense[at[waiting] : at[waiting] + _B], weight[waiting], sums[0, :_B], sums[1, :_B])


@_compiled
def _add_four(c0: Any, c1: Any, c2: Any, c3: Any, weight: Any, dot: Any, matched: Any) -> None:
    q0, q1, q2, q3 = weight[0], weight[1], weight[2], weight[3]
    s0, s1, s2, s3 = q0 * q0, q1 * q1, q2 * q2, q3 * q3
    for row in range(_B):
        dot[row] += (q0 * np.float32(c0[row]) + q1 * np.float32(c1[row])) + (
            q2 * np.float32(c2[row]) + q3 * np.float32(c3[row])
        )
        matched[row] += ((s0 if c0[row] > 0 else _ZERO) + (s1 if c1[row] > 0 else _ZERO)) + (
            (s2 if c2[row] > 0 else _ZERO) + (s3 if c3[row] > 0 else _ZERO)
        )


@_compiled
def _add_dense(code: Any, q: Any, dot: Any, matched: Any) -> None:
    square = q * q
    for row in range(_B):
        dot[row] += q * np.float32(code[row])
        matched[row] += square if code[row] > 0 else _ZERO


@_compiled
def _add_postings(posting_row: Any, posting_code: Any, q: Any, dot: Any, matched: Any) -> None:
    square = q * q
    for i in range(posting_row.size):
        row = posting_row[i]
        dot[row] += q * np.float32(posting_code[i])
        matched[row] += square


@_compiled
def _add_dense_square(code: Any, below: Any) -> None:
    for row in range(_B):
        below[row] += np.uint32(code[row]) * np.uint32(code[row])


@_compiled
def _add_posting_squares(posting_row: Any, posting_code: Any, below: Any) -> None:
    for i in range(posting_row.size):
        below[posting_row[i]] += np.uint32(posting_code[i]) * np.uint32(posting_code[i])


@_compiled
def _bound(
    rows: Any, first: int, n_rows: int, sums: Any, below: Any, inverse_norm: Any, slack: Any, upper: Any
) -> None:
    """Upper ends of cosine (0) and reverse (1) and the slack (2); NaN where nothing matches, infinite if undecided."""
    lowest_mz, code_square, code_error = rows
    for row in range(n_rows):
        inverse_length = _ONE / np.sqrt(np.float32(np.uint32(code_square[first + row] - below[row])))
        sine = code_error[first + row] * inverse_length
        width = (_CHORD_FACTOR * sine if sine <= _CHORD_LIMIT else _ONE) + slack
        projected = sums[0, row] * inverse_length
        matched = sums[1, row] if sums[1, row] > _NEGLIGIBLE else _ZERO
        upper[0, row] = projected * inverse_norm[lowest_mz[first + row]] + width
        upper[1, row] = projected / np.sqrt(matched) + width
        upper[2, row] = width


@_compiled
def _lower(upper: Any, width: Any) -> Any:
    return upper - (width + width) if np.isfinite(upper) else -width


@_compiled
def _offer(heap: Any, value: Any) -> None:
    """Keep `value` in a heap of the largest values (the least of them on top) if it belongs there."""
    if value <= heap[0]:
        return
    place = 0
    while True:
        child = 2 * place + 1
        if child >= heap.size:
            break
        if child + 1 < heap.size and heap[child + 1] < heap[child]:
            child += 1
        if heap[child] >= value:
            break
        heap[place] = heap[child]
        place = child
    heap[place] = value
