"""Hits of parts and of several libraries unite exactly, with their origin, own standards first on ties."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.errors import UsageError
from identify.index import build_index, search_index
from identify.index.union import LibraryHit, merge_hits, unite_parts
from identify.records import CleanSpectrum, Hit, Peaks
from identify.settings import Weighting

peak_maps = st.dictionaries(st.integers(40, 60), st.floats(0.01, 100.0), min_size=1, max_size=8)


def spectrum(peaks: dict[int, float]) -> CleanSpectrum:
    mz = sorted(peaks)
    return CleanSpectrum(Peaks(mz, [peaks[m] for m in mz]), None, 38)


@settings(max_examples=30)
@given(library=st.lists(peak_maps, max_size=20), query=peak_maps, n_parts=st.integers(1, 4), k=st.integers(1, 5))
def test_parts_unite_to_the_answer_of_the_whole(
    library: list[dict[int, float]], query: dict[int, float], n_parts: int, k: int
) -> None:
    rows = [(i, spectrum(peaks).nominal, 38) for i, peaks in enumerate(library)]
    parts = [search_index(build_index(rows[part::n_parts], Weighting()), spectrum(query), k) for part in range(n_parts)]
    assert unite_parts(parts, k) == search_index(build_index(rows, Weighting()), spectrum(query), k)


def test_the_origin_of_equal_ids_is_kept() -> None:
    merged = merge_hits([[Hit(1, 0.9, 0.9)], [Hit(1, 0.8, 0.95)]], 2)
    assert merged == (LibraryHit(0, Hit(1, 0.9, 0.9)), LibraryHit(1, Hit(1, 0.8, 0.95)))


def test_own_standards_come_first_on_ties_only() -> None:
    libraries = [[Hit(1, 0.9, 0.9), Hit(2, 0.7, 0.7)], [Hit(5, 0.9 - 2e-8, 0.9), Hit(6, 0.7 - 1e-4, 0.7)]]
    own = [[], [5, 6]]
    assert [found.hit.entry_id for found in merge_hits(libraries, 4, own)] == [5, 1, 2, 6]
    assert [found.hit.entry_id for found in merge_hits(libraries, 4, own, prefer_own=False)] == [1, 5, 2, 6]
    assert [found.hit.entry_id for found in merge_hits(libraries, 1, own)] == [5]


def test_the_best_by_each_score_are_united() -> None:
    libraries = [[Hit(1, 0.9, 0.9), Hit(2, 0.5, 0.97)], [Hit(1, 0.8, 0.85), Hit(3, 0.2, 0.99)]]
    assert [(f.library, f.hit.entry_id) for f in merge_hits(libraries, 1)] == [(0, 1), (1, 3)]


def test_equal_entries_of_two_libraries_come_in_the_order_the_libraries_were_named() -> None:
    merged = merge_hits([[Hit(9, 0.9, 0.9)], [Hit(2, 0.9, 0.9)]], 5)
    assert [found.library for found in merged] == [0, 1]


def test_lists_of_own_standards_must_match_the_libraries() -> None:
    with pytest.raises(UsageError, match="own standards: found 1 lists, expected 2"):
        merge_hits([[], []], 3, [[1]])
