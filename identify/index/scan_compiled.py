"""The pass of `identify.index.scan` as machine code; importing this module loads numba.

For each block: merge the query's m/z with the block's columns, add dense columns four at a time (the running sums are
then loaded and stored once for four columns) and postings one by one, and turn the sums into score intervals. A heap per
score holds the k best lower ends so far; a row whose upper end does not reach the heap's least one is forgotten at once,
the others are kept and judged again at the end, against the final floor.

The loops over rows are written so that the compiler makes vector instructions of them: one array for all sums (fewer
pointers that might overlap), table lookups in a loop of their own, no infinities, `minimum` instead of a comparison.
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
    HUGE,
    NEGLIGIBLE_SQUARE,
    UNDECIDED,
    float_slack,
    inverse_norms,
    scan_weights,
)
from identify.index.segment import BLOCK_ENTRIES, Segment

Function = TypeVar("Function", bound=Callable[..., Any])

_B = BLOCK_ENTRIES
_REACH = 65_536
"""Running sums are as long as a posting's two-byte row can reach, so that damaged postings cannot write outside."""
_MATCHED, _MARGIN, _NORM = _REACH, 2 * _REACH, 2 * _REACH + _B
_N_SUMS = 2 * _REACH + 2 * _B
"""One array: `dot` at 0, `matched` at `_MATCHED`, then the margin over the floors and the query's inverse norm."""

_STRIDE = 128
"""Rows passed over together when none of them reaches a floor."""

_CHORD_FACTOR, _CHORD_LIMIT = np.float32(CHORD_FACTOR), np.float32(CHORD_LIMIT)
_NEGLIGIBLE, _HUGE, _UNDECIDED = np.float32(NEGLIGIBLE_SQUARE), np.float32(HUGE), np.float32(UNDECIDED)
_ZERO, _ONE = np.float32(0), np.float32(1)


def _compiled(function: Function) -> Function:
    # Nothing here is NaN or infinite; products and sums may fuse, but sums keep their order.
    options: dict[str, Any] = {"nogil": True, "error_model": "numpy", "fastmath": {"contract", "nnan", "ninf", "nsz"}}
    try:
        return cast(Function, numba.njit(function, cache=True, **options))
    except RuntimeError:  # neither beside this file nor in the user's cache folder can anything be written
        return cast(Function, numba.njit(function, **options))


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
    best = np.full((2, max(1, min(k, segment.n_entries))), -_HUGE, dtype=np.float32)
    kept = np.empty(segment.n_entries, dtype=np.int64)
    upper = np.empty((2, segment.n_entries), dtype=np.float32)
    n_kept = _scan_blocks(
        (segment.block_start, segment.column_mz, segment.column_count, segment.column_at),
        (segment.dense, segment.posting_row, segment.posting_code),
        (segment.lowest_mz, segment.code_square, segment.code_error),
        (query.mz, scan_weights(query), query.lowest_mz, inverse_norms(segment, query)),
        np.float32(float_slack(query)),
        np.zeros(0, dtype=np.bool_) if hidden is None else hidden,
        (np.empty(_N_SUMS, dtype=np.float32), np.empty(_REACH, dtype=np.uint32)),
        (best[0], best[1], kept, upper[0], upper[1]),
    )
    may = (upper[0, :n_kept] >= best[0, 0]) | (upper[1, :n_kept] >= best[1, 0])
    return np.sort(kept[:n_kept][may])


@_compiled
def _scan_blocks(
    columns: Any, codes: Any, rows: Any, query: Any, slack: Any, hidden: Any, running: Any, results: Any
) -> int:
    """Fill the heaps and the kept rows with their upper ends; the number of rows kept."""
    sums, below = running
    n_entries = rows[0].size
    n_blocks = columns[0].size - 1
    nearest = _find_nearest_block(columns, query)
    n_kept = 0
    for turn in range(n_blocks):
        block = (nearest + turn) % n_blocks
        first = block * _B
        n_rows = min(_B, n_entries - first)
        for row in range(_B):
            sums[row], sums[_MATCHED + row], below[row] = _ZERO, _ZERO, 0
        _add_columns(columns, codes, block, query, sums, below)
        _measure(rows, first, n_rows, sums, below, query[3], slack, results[0][0], results[1][0])
        for start in range(0, n_rows, _STRIDE):
            end = min(start + _STRIDE, n_rows)
            if _largest(sums, _MARGIN + start, _MARGIN + end) < 0:
                continue
            n_kept = _keep(rows, first, start, end, sums, below, slack, hidden, results, n_kept)
    return n_kept


@_compiled
def _largest(values: Any, start: int, end: int) -> Any:
    largest = values[start]
    for i in range(start + 1, end):
        largest = values[i] if values[i] > largest else largest
    return largest


@_compiled
def _keep(
    rows: Any,
    first: int,
    start: int,
    end: int,
    sums: Any,
    below: Any,
    slack: Any,
    hidden: Any,
    results: Any,
    n_kept: int,
) -> int:
    """Keep the rows of a stretch that reach a floor, and raise the floors."""
    best_cosine, best_reverse, kept, kept_cosine, kept_reverse = results
    for row in range(start, end):
        if sums[_MARGIN + row] < 0 or sums[row] <= 0 or (hidden.size > 0 and hidden[first + row]):
            continue
        square = np.uint32(rows[1][first + row] - below[row])
        cosine, reverse, width = _ends(
            sums[row], sums[_MATCHED + row], square, rows[2][first + row], sums[_NORM + row], slack
        )
        kept[n_kept], kept_cosine[n_kept], kept_reverse[n_kept] = first + row, cosine, reverse
        n_kept += 1
        _offer(best_cosine, cosine - (width + width) if cosine < _UNDECIDED else -width)
        _offer(best_reverse, reverse - (width + width) if reverse < _UNDECIDED else -width)
    return n_kept


@_compiled
def _find_nearest_block(columns: Any, query: Any) -> int:
    """First block that reaches the query's highest m/z: likely relatives come first and raise the floors early."""
    block_start, column_mz = columns[0], columns[1]
    query_mz = query[0]
    highest = query_mz[-1] if query_mz.size else 0
    for block in range(block_start.size - 1):
        if block_start[block + 1] > block_start[block] and column_mz[block_start[block + 1] - 1] >= highest:
            return block
    return 0


@_compiled
def _add_columns(columns: Any, codes: Any, block: int, query: Any, sums: Any, below: Any) -> None:
    """Add to the running sums of one block every column that the query touches."""
    block_start, column_mz, column_count, column_at = columns
    dense, posting_row, posting_code = codes
    query_mz, query_weight, lowest_mz, _ = query
    at, weight = np.zeros(4, dtype=np.int64), np.zeros(4, dtype=np.float32)
    n_waiting = 0
    peak = 0
    for column in range(block_start[block], block_start[block + 1]):
        mz, start, count = column_mz[column], column_at[column], column_count[column]
        if mz < lowest_mz:
            if count == 0:
                _add_dense_squares(dense[start : start + _B], below)
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
            _add_postings(posting_row[part], posting_code[part], query_weight[peak], sums)
            continue
        at[n_waiting], weight[n_waiting] = start, query_weight[peak]
        n_waiting += 1
        if n_waiting == 4:
            _add_four(dense, at, weight, sums)
            n_waiting = 0
    if n_waiting > 0:
        for waiting in range(n_waiting, 4):
            weight[waiting] = 0  # a column of the last round once more, without weight
        _add_four(dense, at, weight, sums)


@_compiled
def _add_four(dense: Any, at: Any, weight: Any, sums: Any) -> None:
    c0, c1 = dense[at[0] : at[0] + _B], dense[at[1] : at[1] + _B]
    c2, c3 = dense[at[2] : at[2] + _B], dense[at[3] : at[3] + _B]
    q0, q1, q2, q3 = weight[0], weight[1], weight[2], weight[3]
    s0, s1, s2, s3 = q0 * q0, q1 * q1, q2 * q2, q3 * q3
    for row in range(_B):
        x0, x1, x2, x3 = _to_float(c0[row]), _to_float(c1[row]), _to_float(c2[row]), _to_float(c3[row])
        sums[row] = sums[row] + q0 * x0 + q1 * x1 + q2 * x2 + q3 * x3
        sums[_MATCHED + row] = (
            sums[_MATCHED + row] + s0 * _is_there(x0) + s1 * _is_there(x1) + s2 * _is_there(x2) + s3 * _is_there(x3)
        )


@_compiled
def _to_float(code: Any) -> Any:
    return np.float32(np.int32(code))


@_compiled
def _is_there(code: Any) -> Any:
    return code if code < _ONE else _ONE


@_compiled
def _add_postings(posting_row: Any, posting_code: Any, q: Any, sums: Any) -> None:
    square = q * q
    for i in range(posting_row.size):
        row = np.int64(posting_row[i])
        sums[row] += q * _to_float(posting_code[i])
        sums[_MATCHED + row] += square


@_compiled
def _add_dense_squares(code: Any, below: Any) -> None:
    for row in range(_B):
        below[row] += np.uint32(code[row]) * np.uint32(code[row])


@_compiled
def _add_posting_squares(posting_row: Any, posting_code: Any, below: Any) -> None:
    for i in range(posting_row.size):
        below[posting_row[i]] += np.uint32(posting_code[i]) * np.uint32(posting_code[i])


@_compiled
def _measure(
    rows: Any,
    first: int,
    n_rows: int,
    sums: Any,
    below: Any,
    inverse_norm: Any,
    slack: Any,
    floor: Any,
    floor_reverse: Any,
) -> None:
    """Write how far each row's upper ends stand above the floors (the better of the two scores)."""
    lowest_mz, code_square, code_error = rows
    for row in range(n_rows):
        sums[_NORM + row] = inverse_norm[lowest_mz[first + row]]
    for row in range(n_rows):
        square = np.uint32(code_square[first + row] - below[row])
        cosine, reverse, _ = _ends(
            sums[row], sums[_MATCHED + row], square, code_error[first + row], sums[_NORM + row], slack
        )
        cosine, reverse = cosine - floor, reverse - floor_reverse
        sums[_MARGIN + row] = cosine if cosine > reverse else reverse


@_compiled
def _ends(dot: Any, matched: Any, square: Any, error: Any, inverse_norm: Any, slack: Any) -> Any:
    """Upper ends of cosine and reverse match, and half the width of both intervals."""
    known_square = np.float32(square) if square > 0 else _ONE
    inverse_length = _ONE / np.sqrt(known_square)
    sine = error * inverse_length
    width = (_CHORD_FACTOR * sine if sine <= _CHORD_LIMIT else _ONE) + slack
    projected = dot * inverse_length
    inverse_matched = _ONE / np.sqrt(matched) if matched > _NEGLIGIBLE else _HUGE
    return projected * inverse_norm + width, projected * inverse_matched + width, width


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
