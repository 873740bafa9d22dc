"""A block of library entries as flat arrays: what is stored, and how it is checked when it comes back from a file."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from identify.errors import IndexDamaged, SpectrumError
from identify.records import Peaks
from identify.settings import Weighting
from identify.spectra.weights import peak_weights

MAX_MZ = 65_535
"""Highest nominal m/z an index can hold (two bytes); cleaning stops far below."""
LOWEST_WEIGHT = float(np.finfo(np.float32).tiny)
"""A peak that is there never gets weight 0, however small: the reverse match asks whether a peak is there."""

Row = tuple[int, Peaks, int]
"""``(entry id, nominal peaks, lowest m/z the measurement covers)``."""
Arrays = dict[str, NDArray[Any]]


@dataclass(frozen=True, slots=True, eq=False)
class Segment:
    """Entries as rows of weighted peaks.

    Attributes
    ----------
    ids : int64 array of shape (n_entries,)
        Entry ids, strictly increasing.
    lowest_mz : uint16 array of shape (n_entries,)
        Lowest m/z each measurement covers.
    row_start : int64 array of shape (n_entries + 1,)
        Entry ``i`` owns the peaks ``row_start[i] : row_start[i + 1]``.
    mz : uint16 array of shape (n_peaks,)
        Nominal m/z, increasing within an entry, not below the entry's `lowest_mz`.
    weight : float32 array of shape (n_peaks,)
        Peak weights, positive; the squares of an entry's weights sum to 1. Rounding to float32 moves a score by less
        than 1.2e-7 (2 · 2**-24).
    """

    ids: NDArray[np.int64]
    lowest_mz: NDArray[np.uint16]
    row_start: NDArray[np.int64]
    mz: NDArray[np.uint16]
    weight: NDArray[np.float32]

    @property
    def n_entries(self) -> int:
        """Number of entries."""
        return int(self.ids.size)

    def to_arrays(self) -> Arrays:
        """The arrays to store, by name; `segment_from_arrays` takes them back."""
        return {name: getattr(self, name) for name in DTYPES}


DTYPES: dict[str, type[np.generic]] = {
    "ids": np.int64,
    "lowest_mz": np.uint16,
    "row_start": np.int64,
    "mz": np.uint16,
    "weight": np.float32,
}


def build_segment(rows: Iterable[Row], weighting: Weighting) -> Segment:
    """Segment of the given entries, in order of their ids.

    Parameters
    ----------
    rows : iterable of (entry id, Peaks, lowest m/z)
        Nominal peaks (integer m/z); read once, in any order.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    Segment

    Raises
    ------
    SpectrumError
        If an m/z is not an integer from 1 to `MAX_MZ`, or two rows have the same entry id.
    """
    ids: list[int] = []
    lowest: list[int] = []
    mz_parts: list[NDArray[np.uint16]] = []
    weight_parts: list[NDArray[np.float32]] = []
    for entry_id, peaks, lowest_mz in sorted(rows, key=lambda row: row[0]):
        if ids and ids[-1] == entry_id:
            raise SpectrumError("index rows", found=f"entry id {entry_id} twice", expected="distinct ids")
        mz, weight = _weigh_row(entry_id, peaks, lowest_mz, weighting)
        ids.append(entry_id)
        lowest.append(min(max(lowest_mz, 0), MAX_MZ))
        mz_parts.append(mz)
        weight_parts.append(weight)
    counts = np.array([part.size for part in mz_parts], dtype=np.int64)
    return Segment(
        np.array(ids, dtype=np.int64),
        np.array(lowest, dtype=np.uint16),
        np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        np.concatenate(mz_parts) if mz_parts else np.zeros(0, dtype=np.uint16),
        np.concatenate(weight_parts) if weight_parts else np.zeros(0, dtype=np.float32),
    )


def _weigh_row(
    entry_id: int, peaks: Peaks, lowest_mz: int, weighting: Weighting
) -> tuple[NDArray[np.uint16], NDArray[np.float32]]:
    in_range = peaks.mz >= lowest_mz
    mz = peaks.mz[in_range]
    if mz.size == 0:
        return np.zeros(0, dtype=np.uint16), np.zeros(0, dtype=np.float32)
    nominal = mz.astype(np.uint16)
    if mz[-1] > MAX_MZ or mz[0] < 1 or (nominal != mz).any():
        raise SpectrumError(
            "nominal peaks", where=f"entry {entry_id}", found="an m/z that is no integer or out of range",
            expected=f"integers from 1 to {MAX_MZ}",
        )  # fmt: skip
    weight = peak_weights(mz, peaks.relative[in_range], weighting)
    weight = weight / np.linalg.norm(weight)
    return nominal, np.maximum(weight, LOWEST_WEIGHT).astype(np.float32)


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
        If an array is missing, has another type or shape, or does not fit the others.
    """
    for name, dtype in DTYPES.items():
        found = arrays.get(name)
        if found is None or found.dtype != dtype or found.ndim != 1:
            shape = "nothing" if found is None else f"{found.dtype} of shape {found.shape}"
            raise IndexDamaged("search index", found=f"{name}: {shape}", expected=f"{np.dtype(dtype)}, one dimension")
    segment = Segment(**{name: arrays[name] for name in DTYPES})
    n_entries, n_peaks = segment.ids.size, segment.mz.size
    if segment.lowest_mz.size != n_entries or segment.row_start.size != n_entries + 1:
        raise IndexDamaged("search index", found="arrays of different length", expected=f"{n_entries} entries")
    if segment.weight.size != n_peaks or segment.row_start[0] != 0 or segment.row_start[-1] != n_peaks:
        raise IndexDamaged("search index", found="peaks that do not fit the rows", expected=f"{n_peaks} peaks")
    if (np.diff(segment.row_start) < 0).any() or (np.diff(segment.ids) <= 0).any():
        raise IndexDamaged("search index", found="rows or ids out of order", expected="increasing")
    return segment
