"""The index of a library: segments of entries, searched as one.

A library grows without its index being rebuilt: a new standard becomes a small segment beside the big one
(`add_entries`), a withdrawn entry is hidden (`hide_entries`), and `merge_index` folds everything into one segment when there
is time. All three give a new `SearchIndex` and leave the old one, which another thread may be searching, as it is::

    ┌────────── 350,000 entries ──────────┐  ┌─ 40 ─┐  ┌ 1 ┐
    │ built from the release      ▒       │  │  ▒   │  │   │        ▒ hidden
    └─────────────────────────────────────┘  └──────┘  └───┘
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from identify.errors import IndexDamaged, UsageError
from identify.index.build import Row, build_segment, merge_segments
from identify.index.exact import score_rows
from identify.index.query import WeighedQuery, weigh_query
from identify.index.scan import find_candidates
from identify.index.segment import Segment
from identify.records import CleanSpectrum, FloatArray, Hit
from identify.settings import Weighting

Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class SearchIndex:
    """Entries ready to be searched.

    Parameters
    ----------
    weighting : Weighting
        Exponents of the peak weight.
    segments : tuple of Segment
        The entries.
    hidden : tuple of (bool array or None)
        For each segment the rows that must not be found; None for no row.

    Raises
    ------
    IndexDamaged
        If a segment was built for another weighting, or an id is in two segments.
    """

    weighting: Weighting
    segments: tuple[Segment, ...] = ()
    hidden: tuple[Mask | None, ...] = ()

    def __post_init__(self) -> None:
        if len(self.hidden) != len(self.segments):
            object.__setattr__(self, "hidden", (*self.hidden, *[None] * (len(self.segments) - len(self.hidden))))
        for segment in self.segments:
            if segment.weighting != self.weighting:
                raise IndexDamaged("search index", found=str(segment.weighting), expected=str(self.weighting))
        if len(self.segments) > 1:
            ids = np.concatenate([segment.ids for segment in self.segments])
            if np.unique(ids).size < ids.size:
                raise IndexDamaged("search index", found="an entry in two segments", expected="each entry once")

    @property
    def n_entries(self) -> int:
        """Number of entries that can be found."""
        n_hidden = sum(int(mask.sum()) for mask in self.hidden if mask is not None)
        return sum(segment.n_entries for segment in self.segments) - n_hidden


def build_index(rows: Iterable[Row], weighting: Weighting) -> SearchIndex:
    """Index of the given entries.

    Parameters
    ----------
    rows : iterable of (entry id, Peaks, lowest m/z)
        Nominal peaks of each entry and the lowest m/z its measurement covers; read once, in any order.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    SearchIndex

    Raises
    ------
    SpectrumError
        If an m/z is not an integer, is out of range, or two rows have the same entry id.
    """
    return SearchIndex(weighting, (build_segment(rows, weighting),))


def add_entries(index: SearchIndex, rows: Iterable[Row]) -> SearchIndex:
    """Index that holds these entries too, as a segment of their own; the others are neither read nor copied.

    Parameters
    ----------
    index : SearchIndex
        The library so far.
    rows : iterable of (entry id, Peaks, lowest m/z)
        New entries.

    Returns
    -------
    SearchIndex

    Raises
    ------
    SpectrumError
        As `build_index`.
    IndexDamaged
        If the index already holds one of the ids.
    """
    segment = build_segment(rows, index.weighting)
    return replace(index, segments=(*index.segments, segment), hidden=(*index.hidden, None))


def hide_entries(index: SearchIndex, ids: Iterable[int]) -> SearchIndex:
    """Index in which exactly the given entries are not found.

    Parameters
    ----------
    index : SearchIndex
        The library; what was hidden in it before is visible again unless named.
    ids : iterable of int
        Entry ids; those the index does not hold are ignored.

    Returns
    -------
    SearchIndex
    """
    wanted = np.array(sorted(set(ids)), dtype=np.int64)
    masks = [np.isin(segment.ids, wanted) for segment in index.segments]
    return replace(index, hidden=tuple(mask if mask.any() else None for mask in masks))


def merge_index(index: SearchIndex) -> SearchIndex:
    """Index of one segment with the same entries, hidden ones left out; byte for byte as if built at once.

    Parameters
    ----------
    index : SearchIndex
        The library.

    Returns
    -------
    SearchIndex
    """
    hidden = [s.ids[mask] for s, mask in zip(index.segments, index.hidden, strict=True) if mask is not None]
    withdrawn = np.concatenate([np.zeros(0, dtype=np.int64), *hidden]).tolist()
    return SearchIndex(index.weighting, (merge_segments(index.segments, index.weighting, withdrawn),))


def score_all(index: SearchIndex, spectrum: CleanSpectrum) -> tuple[NDArray[np.int64], FloatArray, FloatArray]:
    """Exact scores of every entry.

    Parameters
    ----------
    index : SearchIndex
        The library.
    spectrum : CleanSpectrum
        The query.

    Returns
    -------
    ids : int64 array of shape (n_entries,)
        Entry ids, increasing; withdrawn entries are left out.
    cosine, reverse : float64 arrays of shape (n_entries,)
        Scores in [0, 1].
    """
    query = weigh_query(spectrum, index.weighting)
    rows = [
        np.arange(segment.n_entries) if mask is None else np.flatnonzero(~mask)
        for segment, mask in zip(index.segments, index.hidden, strict=True)
    ]
    ids, cosine, reverse = _score(index, query, rows)
    order = np.argsort(ids)
    return ids[order], cosine[order], reverse[order]


def search_index(index: SearchIndex, spectrum: CleanSpectrum, k: int, *, many: bool = False) -> tuple[Hit, ...]:
    """Best entries: the `k` best by cosine and the `k` best by reverse match, united.

    Parameters
    ----------
    index : SearchIndex
        The library.
    spectrum : CleanSpectrum
        The query.
    k : int
        How many by each score, ≥ 1.
    many : bool
        Whether thousands of queries follow: the answer is the same, sooner from about the five-hundredth on.

    Returns
    -------
    tuple of Hit
        At most ``2 k``, by falling cosine, then falling reverse match, then rising entry id. Entries without any common
        peak (cosine 0) are no hits.

    Raises
    ------
    UsageError
        If `k` is below 1.

    Notes
    -----
    Order among the best by reverse match: falling reverse match, then falling cosine, then rising entry id. The scores
    are those of `score_all`, bit for bit; `identify.index.scan` says why no entry is missed.
    """
    if k < 1:
        raise UsageError("number of hits", found=str(k), expected="at least 1")
    query = weigh_query(spectrum, index.weighting)
    rows = [
        find_candidates(segment, query, k, mask, many=many)
        for segment, mask in zip(index.segments, index.hidden, strict=True)
    ]
    ids, cosine, reverse = _score(index, query, rows)
    best = choose_best(ids, cosine, reverse, k)
    columns = ids[best].tolist(), cosine[best].tolist(), reverse[best].tolist()
    return tuple(Hit(*row) for row in zip(*columns, strict=True))


def _score(
    index: SearchIndex, query: WeighedQuery, rows: list[NDArray[np.int64]]
) -> tuple[NDArray[np.int64], FloatArray, FloatArray]:
    """Ids and exact scores of some rows of each segment."""
    pairs = list(zip(index.segments, rows, strict=True))
    scores = [score_rows(segment, query, chosen) for segment, chosen in pairs]
    ids = np.concatenate([np.zeros(0, dtype=np.int64), *(segment.ids[chosen] for segment, chosen in pairs)])
    cosine = np.concatenate([np.zeros(0), *(cosine for cosine, _ in scores)])
    reverse = np.concatenate([np.zeros(0), *(reverse for _, reverse in scores)])
    return ids, cosine, reverse


def choose_best(ids: NDArray[np.int64], cosine: FloatArray, reverse: FloatArray, k: int) -> NDArray[np.int64]:
    """Positions of the `k` best by each score, united, in the order of `search_index`.

    Parameters
    ----------
    ids, cosine, reverse : arrays of shape (n,)
        Entry ids and exact scores.
    k : int
        How many by each score.

    Returns
    -------
    int64 array
        At most ``2 k`` positions; entries with cosine 0 are left out.
    """
    by_cosine = np.lexsort((ids, -reverse, -cosine))[:k]
    by_reverse = np.lexsort((ids, -cosine, -reverse))[:k]
    chosen = np.union1d(by_cosine, by_reverse)
    chosen = chosen[cosine[chosen] > 0]
    return chosen[np.lexsort((ids[chosen], -reverse[chosen], -cosine[chosen]))]
