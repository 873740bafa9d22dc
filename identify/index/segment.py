"""How entries lie in memory and in a file, and how that is checked when it comes back.

Rows are entries in order of their highest m/z (then id), so that light molecules share blocks that have no columns at
high m/z. Every `BLOCK_ENTRIES` rows form a block. A block has one column per m/z that occurs in it; a column is dense
(one byte a row) where at least `DENSE_SHARE` of the rows have the peak, else a list of postings (row in the block, code)::

                 m/z 43      m/z 44        m/z 57              …     m/z 402
    block 0     ┌───┐       ┌───┐         ┌───┐                     rows 0 … 4095: highest m/z up to 73
                │ 91│       │  4│         │  0│                     38 dense columns, 26 of postings
                │  0│       │ 12│         │255│
                └───┘       └───┘         └───┘
    block 43    ┌───┐       (17, 3)       ┌───┐                     highest m/z 205 … 207
                │255│       (902, 11)     │ 40│                     121 dense columns, 71 of postings
                │ 18│       (4001, 2)     │  0│
                └───┘                     └───┘
      …
    block 85    ┌───┐                     ┌───┐         (5, 255)    highest m/z 642 … 2471
                                                        (77, 140)   143 dense columns, 1084 of postings

A code is the peak's weight on the entry's own scale, 255 for its largest weight, at least 1 for a peak that is there. A
scan reads codes only. Beside them lies each entry's exact peak list (m/z, float32 weight), read for the few entries
whose order the codes cannot decide. Any m/z up to `MAX_MZ` has its column, so nothing overflows.

Real numbers: 350,000 entries of 53.4 peaks made from the open records (`tests/benchmarks/search.py`) are 86 blocks of on
average 146 dense columns (one byte in three holds a peak) and 83 columns of postings (5.4 postings an entry). Of 510
bytes an entry, 163 are codes, 321 exact peaks, 26 the rest. What the choices cost there (processor time of the sums of one
query, median of 40, in the prototype that decided them; the loops have become faster since):

=========================== ====== ================
choice                      ms     code bytes/entry
=========================== ====== ================
as it is                    1.9    163
dense from a share of 0.06  2.6    192
dense from a share of 0.35  3.6    139
2,048 rows a block          3.2    160
8,192 rows a block          2.0    168
rows in order of id         2.6    189
=========================== ====== ================
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from identify.errors import IndexDamaged
from identify.settings import Weighting

LAYOUT_VERSION = 1
BLOCK_ENTRIES = 4096
"""Rows of a block: its three running sums (48 KB) stay in the first-level caches while the columns stream past."""
DENSE_SHARE = 0.15
"""A posting costs about eight times the time of a dense byte (0.9 against 0.12 ns) and three times its space."""
MAX_MZ = 65_535
"""Highest nominal m/z an index can hold (two bytes); cleaning stops far below."""
FULL_CODE = 255

Arrays = dict[str, NDArray[Any]]


@dataclass(frozen=True, slots=True, eq=False)
class Segment:
    """Entries as rows of exact weights and as columns of codes, all for one weighting.

    Attributes
    ----------
    layout : float64 array of shape (4,)
        `LAYOUT_VERSION`, `BLOCK_ENTRIES`, and the two exponents of the weighting.
    ids : int64 array of shape (n_entries,)
        Entry id of each row, distinct.
    lowest_mz : uint16 array of shape (n_entries,)
        Lowest m/z each measurement covers.
    row_start : int64 array of shape (n_entries + 1,)
        Row ``i`` owns the peaks ``row_start[i] : row_start[i + 1]``.
    mz : uint16 array of shape (n_peaks,)
        Nominal m/z, increasing within a row, none below the row's `lowest_mz`.
    weight : float32 array of shape (n_peaks,)
        Peak weights, positive; the squares of a row sum to 1.
    code_square : uint32 array of shape (n_entries,)
        Sum of the squared codes of each row.
    code_error : float32 array of shape (n_entries,)
        Length of the vector (weights on the scale of the codes - codes), rounded up.
    block_start : int64 array of shape (n_blocks + 1,)
        Block ``b`` owns the columns ``block_start[b] : block_start[b + 1]``.
    column_mz : uint16 array of shape (n_columns,)
        Increasing within a block.
    column_count : int32 array of shape (n_columns,)
        Number of postings; 0 for a dense column.
    column_at : int64 array of shape (n_columns,)
        Where the column begins: in `dense`, or in `posting_row` and `posting_code`.
    dense : uint8 array of shape (n_dense_columns * BLOCK_ENTRIES,)
        Codes of the dense columns; 0 where a row has no peak.
    posting_row : uint16 array of shape (n_postings,)
        Row within the block.
    posting_code : uint8 array of shape (n_postings,)
        Code of that peak.
    """

    layout: NDArray[np.float64]
    ids: NDArray[np.int64]
    lowest_mz: NDArray[np.uint16]
    row_start: NDArray[np.int64]
    mz: NDArray[np.uint16]
    weight: NDArray[np.float32]
    code_square: NDArray[np.uint32]
    code_error: NDArray[np.float32]
    block_start: NDArray[np.int64]
    column_mz: NDArray[np.uint16]
    column_count: NDArray[np.int32]
    column_at: NDArray[np.int64]
    dense: NDArray[np.uint8]
    posting_row: NDArray[np.uint16]
    posting_code: NDArray[np.uint8]

    @property
    def n_entries(self) -> int:
        """Number of entries."""
        return int(self.ids.size)

    @property
    def n_blocks(self) -> int:
        """Number of blocks."""
        return int(self.block_start.size) - 1

    @property
    def highest_mz(self) -> int:
        """Highest m/z of any entry; 0 when there is no peak. Rows lie in this order, so it is the last peak of all."""
        return int(self.mz[-1]) if self.mz.size else 0

    @property
    def weighting(self) -> Weighting:
        """Exponents of the peak weight the segment was built for."""
        return Weighting(float(self.layout[2]), float(self.layout[3]))

    @property
    def n_bytes(self) -> int:
        """Bytes of all arrays, in memory as in a file."""
        return sum(int(array.nbytes) for array in self.to_arrays().values())

    def to_arrays(self) -> Arrays:
        """The arrays to store, by name; `segment_from_arrays` takes them back."""
        return {item.name: getattr(self, item.name) for item in fields(self)}


DTYPES: dict[str, type[np.generic]] = {
    "layout": np.float64,
    "ids": np.int64,
    "lowest_mz": np.uint16,
    "row_start": np.int64,
    "mz": np.uint16,
    "weight": np.float32,
    "code_square": np.uint32,
    "code_error": np.float32,
    "block_start": np.int64,
    "column_mz": np.uint16,
    "column_count": np.int32,
    "column_at": np.int64,
    "dense": np.uint8,
    "posting_row": np.uint16,
    "posting_code": np.uint8,
}


def segment_from_arrays(arrays: Mapping[str, NDArray[Any]]) -> Segment:
    """Segment from stored arrays, which may be memory-mapped; they are checked, not copied.

    Parameters
    ----------
    arrays : mapping of str to array
        As `Segment.to_arrays` gave them.

    Returns
    -------
    Segment

    Raises
    ------
    IndexDamaged
        If an array is missing, has another type or size than the others ask for, points outside, or has another layout.

    Notes
    -----
    Peaks and codes themselves are not read (a file of a million entries opens in a fraction of a second); whoever stores
    them guards them with a checksum. Whatever they hold, a search reads and writes inside the arrays only.
    """
    for name, dtype in DTYPES.items():
        found = arrays.get(name)
        if found is None or found.dtype != dtype or found.ndim != 1:
            shape = "nothing" if found is None else f"{found.dtype} of shape {found.shape}"
            raise IndexDamaged("search index", found=f"{name}: {shape}", expected=f"{np.dtype(dtype)}, one dimension")
    segment = Segment(**{name: arrays[name] for name in DTYPES})
    for holds, what in _consistency(segment):
        if not holds:
            raise IndexDamaged("search index", found=f"{what} that does not fit", expected="arrays of one segment")
    return segment


def _consistency(s: Segment) -> list[tuple[bool, str]]:
    """Facts in an order in which each may rely on those before it."""
    facts = [
        (s.layout.size == 4 and s.layout[:2].tolist() == [LAYOUT_VERSION, BLOCK_ENTRIES], "layout"),
        (s.row_start.size == s.n_entries + 1, "row_start"),
        (s.lowest_mz.size == s.code_square.size == s.code_error.size == s.n_entries, "a row array"),
        (s.weight.size == s.mz.size and s.posting_code.size == s.posting_row.size, "a peak array"),
        (s.column_mz.size == s.column_count.size == s.column_at.size, "a column array"),
        (s.block_start.size == -(-s.n_entries // BLOCK_ENTRIES) + 1, "block_start"),
    ]
    if not all(holds for holds, _ in facts):
        return facts
    facts.append((_partitions(s.row_start, s.mz.size), "row_start"))
    facts.append((_partitions(s.block_start, s.column_mz.size), "block_start"))
    is_dense = s.column_count == 0
    end = s.column_at + np.where(is_dense, BLOCK_ENTRIES, s.column_count)
    limit = np.where(is_dense, s.dense.size, s.posting_row.size)
    facts.append((bool(((s.column_at >= 0) & (s.column_count >= 0) & (end <= limit)).all()), "a column"))
    return facts


def _partitions(start: NDArray[np.int64], total: int) -> bool:
    return bool(start[0] == 0 and start[-1] == total and (np.diff(start) >= 0).all())
