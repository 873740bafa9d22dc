"""From peak lists to a segment, and from several segments to one."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from identify.errors import SpectrumError
from identify.index.segment import BLOCK_ENTRIES, DENSE_SHARE, FULL_CODE, LAYOUT_VERSION, MAX_MZ, Segment
from identify.records import FloatArray, Peaks
from identify.settings import Weighting
from identify.spectra.weights import peak_weights

LOWEST_WEIGHT = float(np.finfo(np.float32).tiny)
"""A peak that is there never gets weight 0, however small: the reverse match asks whether a peak is there."""
ROWS_PER_CHUNK = 16 * BLOCK_ENTRIES

Row = tuple[int, Peaks, int]
"""``(entry id, nominal peaks, lowest m/z the measurement covers)``."""


class FlatRows(NamedTuple):
    """Weighted rows in any order: the arrays of the same names in `Segment`."""

    ids: NDArray[np.int64]
    lowest_mz: NDArray[np.uint16]
    row_start: NDArray[np.int64]
    mz: NDArray[np.uint16]
    weight: NDArray[np.float32]


def build_segment(rows: Iterable[Row], weighting: Weighting) -> Segment:
    """Segment of the given entries.

    Parameters
    ----------
    rows : iterable of (entry id, Peaks, lowest m/z)
        Nominal peaks (integer m/z); read once, in any order. Peaks below an entry's lowest m/z do not count.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    Segment
        The same, byte for byte, for any order of the rows.

    Raises
    ------
    SpectrumError
        If an m/z is not an integer from 1 to `MAX_MZ`, or two rows have the same entry id.

    Notes
    -----
    About 60 bytes a peak at the peak of memory use, 10 s for a million entries besides reading them.
    """
    ids: list[int] = []
    lowest: list[int] = []
    counts: list[int] = [0]
    mz_parts: list[NDArray[np.uint16]] = []
    weight_parts: list[NDArray[np.float32]] = []
    for chunk in _chunks(rows):
        chunk_mz, chunk_weight, chunk_counts = _weigh_chunk(chunk, weighting)
        ids += [row[0] for row in chunk]
        lowest += [min(max(row[2], 0), MAX_MZ) for row in chunk]
        counts += chunk_counts.tolist()
        mz_parts.append(chunk_mz)
        weight_parts.append(chunk_weight)
    flat = FlatRows(
        np.array(ids, dtype=np.int64),
        np.array(lowest, dtype=np.uint16),
        np.cumsum(counts, dtype=np.int64),
        np.concatenate([np.zeros(0, dtype=np.uint16), *mz_parts]),
        np.concatenate([np.zeros(0, dtype=np.float32), *weight_parts]),
    )
    return lay_out(flat, weighting)


def merge_segments(segments: Sequence[Segment], weighting: Weighting, withdrawn: Collection[int] = ()) -> Segment:
    """One segment with the entries of several, without the withdrawn ones.

    Parameters
    ----------
    segments : sequence of Segment
        Segments of the given weighting.
    weighting : Weighting
        Exponents of the peak weight.
    withdrawn : collection of int
        Entry ids to leave out.

    Returns
    -------
    Segment
        The same, byte for byte, as if all entries had been built at once.

    Raises
    ------
    SpectrumError
        If two segments have an entry id in common.
    """
    ids = np.concatenate([np.zeros(0, dtype=np.int64), *(s.ids for s in segments)])
    counts = np.concatenate([np.zeros(0, dtype=np.int64), *(np.diff(s.row_start) for s in segments)])
    lowest = np.concatenate([np.zeros(0, dtype=np.uint16), *(s.lowest_mz for s in segments)])
    mz = np.concatenate([np.zeros(0, dtype=np.uint16), *(s.mz for s in segments)])
    weight = np.concatenate([np.zeros(0, dtype=np.float32), *(s.weight for s in segments)])
    if withdrawn:
        keep = ~np.isin(ids, np.fromiter(withdrawn, dtype=np.int64))
        peaks = np.repeat(keep, counts)
        ids, counts, lowest, mz, weight = ids[keep], counts[keep], lowest[keep], mz[peaks], weight[peaks]
    row_start = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
    return lay_out(FlatRows(ids, lowest, row_start, mz, weight), weighting)


def _chunks(rows: Iterable[Row]) -> Iterator[list[Row]]:
    chunk: list[Row] = []
    for row in rows:
        chunk.append(row)
        if len(chunk) == ROWS_PER_CHUNK:
            yield chunk
            chunk = []
    if chunk:
        yield chunk


def _weigh_chunk(
    chunk: list[Row], weighting: Weighting
) -> tuple[NDArray[np.uint16], NDArray[np.float32], NDArray[np.int64]]:
    """m/z, weights and number of peaks of some rows, one after the other."""
    sizes = np.array([len(peaks) for _, peaks, _ in chunk], dtype=np.int64)
    owner = np.repeat(np.arange(len(chunk)), sizes)
    mz: FloatArray = np.concatenate([peaks.mz for _, peaks, _ in chunk])
    intensity = np.concatenate([peaks.relative for _, peaks, _ in chunk])
    nominal = np.clip(mz, 0, MAX_MZ).astype(np.uint16)
    wrong = np.flatnonzero((nominal != mz) | (nominal == 0))
    if wrong.size:
        raise SpectrumError(
            "nominal peaks", where=f"entry {chunk[int(owner[wrong[0]])][0]}", found=f"m/z {mz[wrong[0]]:g}",
            expected=f"integers from 1 to {MAX_MZ}",
        )  # fmt: skip
    covered = mz >= np.array([lowest for _, _, lowest in chunk])[owner]
    owner, nominal = owner[covered], nominal[covered]
    weight = peak_weights(mz[covered], intensity[covered], weighting)
    # Scaled by the largest first: the square of a tiny intensity must not underflow in the norm.
    largest = np.zeros(len(chunk))
    np.maximum.at(largest, owner, weight)
    weight = weight / np.where(largest > 0, largest, 1.0)[owner]
    norm = np.sqrt(np.bincount(owner, weights=weight * weight, minlength=len(chunk)))
    weight = np.maximum(weight / np.where(norm > 0, norm, 1.0)[owner], LOWEST_WEIGHT)
    return nominal, weight.astype(np.float32), np.bincount(owner, minlength=len(chunk)).astype(np.int64)


def lay_out(flat: FlatRows, weighting: Weighting) -> Segment:
    """Segment of weighted rows: put in order, coded and cut into blocks.

    Parameters
    ----------
    flat : FlatRows
        The rows, weights already scaled so that the squares of each row sum to 1.
    weighting : Weighting
        Exponents with which the weights were made.

    Returns
    -------
    Segment

    Raises
    ------
    SpectrumError
        If two rows have the same entry id.
    """
    ids, lowest_mz, row_start, mz, weight = flat
    unique, repeats = np.unique(ids, return_counts=True)
    if unique.size < ids.size:
        raise SpectrumError("index rows", found=f"entry id {unique[repeats > 1][0]} twice", expected="distinct ids")
    counts = np.diff(row_start)
    highest = np.zeros(ids.size, dtype=np.uint16)
    highest[counts > 0] = mz[row_start[1:][counts > 0] - 1]
    order = np.lexsort((ids, highest))
    start = np.concatenate([[0], np.cumsum(counts[order])]).astype(np.int64)
    mz_ordered, weight_ordered = np.empty_like(mz), np.empty_like(weight)
    columns = _Columns()
    squares, errors = np.zeros(ids.size, dtype=np.uint32), np.zeros(ids.size, dtype=np.float32)
    for first in range(0, ids.size, BLOCK_ENTRIES):
        rows = order[first : first + BLOCK_ENTRIES]
        block = slice(first, first + rows.size)
        owner = np.repeat(np.arange(rows.size), counts[rows])
        peaks = np.arange(owner.size) + (row_start[rows] - start[block] + start[first])[owner]
        here = slice(int(start[first]), int(start[first] + owner.size))
        mz_ordered[here], weight_ordered[here] = mz[peaks], weight[peaks]
        code, squares[block], errors[block] = _encode(owner, weight_ordered[here], rows.size)
        columns.add_block(owner, mz_ordered[here], code)
    layout = np.array([LAYOUT_VERSION, BLOCK_ENTRIES, weighting.mz_power, weighting.intensity_power])
    return Segment(
        layout, ids[order], lowest_mz[order], start, mz_ordered, weight_ordered, squares, errors, *columns.arrays()
    )  # fmt: skip


def _encode(
    owner: NDArray[np.int64], weight: NDArray[np.float32], n_rows: int
) -> tuple[NDArray[np.uint8], NDArray[np.uint32], NDArray[np.float32]]:
    """Codes of the peaks, and per row the sum of squared codes and the length of the error, rounded up."""
    largest = np.zeros(n_rows)
    np.maximum.at(largest, owner, weight)
    scaled = weight * (FULL_CODE / np.where(largest > 0, largest, 1.0))[owner]
    code = np.clip(np.rint(scaled), 1, FULL_CODE)
    square = np.bincount(owner, weights=code * code, minlength=n_rows)
    error = np.sqrt(np.bincount(owner, weights=(scaled - code) ** 2, minlength=n_rows))
    rounded_up = np.nextafter((error * (1 + 1e-6)).astype(np.float32), np.float32(np.inf))
    return code.astype(np.uint8), square.astype(np.uint32), rounded_up.astype(np.float32)


class _Columns:
    """The columns of the blocks so far."""

    def __init__(self) -> None:
        self._block_start = [0]
        self._mz: list[int] = []
        self._count: list[int] = []
        self._at: list[int] = []
        self._dense: list[NDArray[np.uint8]] = []
        self._rows: list[NDArray[np.uint16]] = []
        self._codes: list[NDArray[np.uint8]] = []
        self._n_postings = 0

    def add_block(self, owner: NDArray[np.int64], mz: NDArray[np.uint16], code: NDArray[np.uint8]) -> None:
        by_mz = np.argsort(mz, kind="stable")
        rows, codes = owner[by_mz].astype(np.uint16), code[by_mz]
        values, starts, counts = np.unique(mz[by_mz], return_index=True, return_counts=True)
        for value, start, count in zip(values.tolist(), starts.tolist(), counts.tolist(), strict=True):
            part = slice(start, start + count)
            is_dense = count >= DENSE_SHARE * BLOCK_ENTRIES
            self._mz.append(value)
            self._count.append(0 if is_dense else count)
            if is_dense:
                self._at.append(len(self._dense) * BLOCK_ENTRIES)
                column = np.zeros(BLOCK_ENTRIES, dtype=np.uint8)
                column[rows[part]] = codes[part]
                self._dense.append(column)
            else:
                self._at.append(self._n_postings)
                self._n_postings += count
                self._rows.append(rows[part])
                self._codes.append(codes[part])
        self._block_start.append(len(self._mz))

    def arrays(
        self,
    ) -> tuple[
        NDArray[np.int64],
        NDArray[np.uint16],
        NDArray[np.int32],
        NDArray[np.int64],
        NDArray[np.uint8],
        NDArray[np.uint16],
        NDArray[np.uint8],
    ]:
        return (
            np.array(self._block_start, dtype=np.int64),
            np.array(self._mz, dtype=np.uint16),
            np.array(self._count, dtype=np.int32),
            np.array(self._at, dtype=np.int64),
            np.concatenate([np.zeros(0, dtype=np.uint8), *self._dense]),
            np.concatenate([np.zeros(0, dtype=np.uint16), *self._rows]),
            np.concatenate([np.zeros(0, dtype=np.uint8), *self._codes]),
        )
