"""Hits of several libraries, or of several parts of one, united into one exact answer.

The best k of a whole are among the best k of its parts, so uniting hits that each part found exactly is exact too.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from identify.errors import UsageError
from identify.index.search import choose_best
from identify.records import FloatArray, Hit

TIE = 6
"""Decimals at which scores of different libraries count as equal: the accuracy the index promises."""


@dataclass(frozen=True, slots=True)
class LibraryHit:
    """A hit and the library it came from.

    Attributes
    ----------
    library : int
        Position of the library in the order the analyst named them.
    hit : Hit
    is_own : bool
        Whether the entry is a standard of the laboratory itself.
    """

    library: int
    hit: Hit
    is_own: bool = False


def unite_parts(parts: Iterable[Sequence[Hit]], k: int) -> tuple[Hit, ...]:
    """Hits of a library that was searched in parts, as if it had been searched at once.

    Parameters
    ----------
    parts : iterable of sequence of Hit
        What `search_index` gave for each part, with the same or a larger `k`; entry ids are distinct over all parts.
    k : int
        How many by each score, ≥ 1.

    Returns
    -------
    tuple of Hit
        The `k` best by each score, united, in the order of `search_index`.

    Examples
    --------
    >>> unite_parts([[Hit(1, 0.5, 0.9)], [Hit(2, 0.8, 0.8), Hit(3, 0.1, 0.2)]], 1)
    (Hit(entry_id=2, cosine=0.8, reverse=0.8), Hit(entry_id=1, cosine=0.5, reverse=0.9))
    """
    hits = [hit for part in parts for hit in part]
    best = choose_best(
        np.array([hit.entry_id for hit in hits], dtype=np.int64),
        np.array([hit.cosine for hit in hits], dtype=np.float64),
        np.array([hit.reverse for hit in hits], dtype=np.float64),
        k,
    )
    return tuple(hits[i] for i in best)


def merge_hits(
    libraries: Sequence[Sequence[Hit]],
    k: int,
    own_standards: Sequence[Collection[int]] = (),
    *,
    prefer_own: bool = True,
) -> tuple[LibraryHit, ...]:
    """Hits of several libraries with their origin: the `k` best by each score over all of them, united.

    Parameters
    ----------
    libraries : sequence of sequence of Hit
        What `search_index` gave for each library; entry ids of different libraries may be the same.
    k : int
        How many by each score, ≥ 1.
    own_standards : sequence of collection of int
        For each library the entry ids that are standards of the laboratory itself; empty when there are none.
    prefer_own : bool
        Whether such a standard stands before another entry of the same scores (to `TIE` decimals).

    Returns
    -------
    tuple of LibraryHit
        By falling cosine, falling reverse match (both to `TIE` decimals), own standards first if preferred, then by the
        unrounded scores, the order of the libraries, and rising entry id.

    Raises
    ------
    UsageError
        If `own_standards` does not match `libraries`.

    Examples
    --------
    >>> merge_hits([[Hit(7, 0.9, 0.9)], [Hit(7, 0.9, 0.9)]], 2, [[], [7]])[0]
    LibraryHit(library=1, hit=Hit(entry_id=7, cosine=0.9, reverse=0.9), is_own=True)
    """
    if own_standards and len(own_standards) != len(libraries):
        raise UsageError("own standards", found=f"{len(own_standards)} lists", expected=f"{len(libraries)}")
    own = [frozenset(ids) for ids in own_standards] or [frozenset()] * len(libraries)
    merged = [
        LibraryHit(library, hit, hit.entry_id in own[library]) for library, hits in enumerate(libraries) for hit in hits
    ]

    cosine = np.array([found.hit.cosine for found in merged], dtype=np.float64)
    reverse = np.array([found.hit.reverse for found in merged], dtype=np.float64)
    last = [
        np.array([found.hit.entry_id for found in merged], dtype=np.int64),
        np.array([found.library for found in merged], dtype=np.int64),
    ]
    yields = np.array([not (prefer_own and found.is_own) for found in merged], dtype=np.bool_)

    def order(first: FloatArray, second: FloatArray) -> list[int]:
        rounded = (yields, -np.round(second, TIE), -np.round(first, TIE))
        return [int(place) for place in np.lexsort((*last, -second, -first, *rounded))]

    by_cosine = order(cosine, reverse)
    chosen = {*by_cosine[:k], *order(reverse, cosine)[:k]}
    return tuple(merged[place] for place in by_cosine if place in chosen)
