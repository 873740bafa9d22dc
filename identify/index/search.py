"""The index of a library: segments of entries, searched as one."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from identify.index.exact import score_rows, weigh_query
from identify.index.segment import Row, Segment, build_segment
from identify.records import CleanSpectrum, FloatArray, Hit
from identify.settings import Weighting


@dataclass(frozen=True, slots=True, eq=False)
class SearchIndex:
    """Entries ready to be searched.

    Attributes
    ----------
    weighting : Weighting
        Exponents of the peak weight, fixed when the index is built.
    segments : tuple of Segment
        The entries; no id is in two of them.
    withdrawn : frozenset of int
        Ids that are in a segment and must not be found.
    """

    weighting: Weighting
    segments: tuple[Segment, ...]
    withdrawn: frozenset[int] = field(default_factory=frozenset)

    @property
    def n_entries(self) -> int:
        """Number of entries that can be found."""
        return sum(segment.n_entries for segment in self.segments) - len(self.withdrawn)

    def with_withdrawn(self, ids: Iterable[int]) -> SearchIndex:
        """Same index in which exactly these entries are not found (ids it does not hold are ignored)."""
        held = {entry_id for entry_id in ids if any(_holds(segment, entry_id) for segment in self.segments)}
        return replace(self, withdrawn=frozenset(held))

    def with_entries(self, rows: Iterable[Row]) -> SearchIndex:
        """Same index with a new segment of these entries; the old ones are neither read nor copied."""
        return replace(self, segments=(*self.segments, build_segment(rows, self.weighting)))


def _holds(segment: Segment, entry_id: int) -> bool:
    position = int(np.searchsorted(segment.ids, entry_id))
    return position < segment.n_entries and int(segment.ids[position]) == entry_id


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
    parts = [score_rows(segment, query, np.arange(segment.n_entries)) for segment in index.segments]
    ids = np.concatenate([segment.ids for segment in index.segments])
    cosine, reverse = np.concatenate([p[0] for p in parts]), np.concatenate([p[1] for p in parts])
    order = np.argsort(ids)
    if index.withdrawn:
        order = order[~np.isin(ids[order], list(index.withdrawn))]
    return ids[order], cosine[order], reverse[order]


def search_index(index: SearchIndex, spectrum: CleanSpectrum, k: int) -> tuple[Hit, ...]:
    """Best entries: the `k` best by cosine and the `k` best by reverse match, united.

    Parameters
    ----------
    index : SearchIndex
        The library.
    spectrum : CleanSpectrum
        The query.
    k : int
        How many by each score, ≥ 1.

    Returns
    -------
    tuple of Hit
        At most ``2 k``, by falling cosine, then falling reverse match, then rising entry id. Entries without any common
        peak (cosine 0) are no hits.

    Notes
    -----
    Order among the best by reverse match: falling reverse match, then falling cosine, then rising entry id.
    """
    ids, cosine, reverse = score_all(index, spectrum)
    best = choose_best(ids, cosine, reverse, k)
    return tuple(Hit(int(ids[i]), float(cosine[i]), float(reverse[i])) for i in best)


def choose_best(ids: NDArray[np.int64], cosine: FloatArray, reverse: FloatArray, k: int) -> NDArray[np.int64]:
    """Positions of the `k` best by each score, united, in the order of `search_index`; cosine 0 is left out."""
    by_cosine = np.lexsort((ids, -reverse, -cosine))[:k]
    by_reverse = np.lexsort((ids, -cosine, -reverse))[:k]
    chosen = np.union1d(by_cosine, by_reverse)
    chosen = chosen[cosine[chosen] > 0]
    return chosen[np.lexsort((ids[chosen], -reverse[chosen], -cosine[chosen]))]
