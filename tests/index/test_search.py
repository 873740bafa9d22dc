"""A search is exact: scores of the plain definition, the true best k, a stated order, whatever way the work is done."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.errors import IndexDamaged, SpectrumError, UsageError
from identify.index import SearchIndex, build_index, scan, score_all, search_index
from identify.index.search import add_entries, hide_entries, merge_index
from identify.records import CleanSpectrum, Hit, Peaks
from identify.settings import Weighting
from identify.similarity.scores import cosine_score, reverse_score
from identify.spectra.align import align

WEIGHTINGS = (Weighting(), Weighting(0.0, 1.0), Weighting(3.0, 0.6))
relaxed = settings(max_examples=20)


def spectrum(peaks: dict[int, float], lowest_mz: int | None = None) -> CleanSpectrum:
    mz = sorted(peaks)
    lowest = lowest_mz if lowest_mz is not None else mz[0]
    return CleanSpectrum(Peaks(mz, [peaks[m] for m in mz]), None, lowest)


def index_of(library: Sequence[CleanSpectrum], weighting: Weighting = WEIGHTINGS[0], first_id: int = 1) -> SearchIndex:
    return build_index(((first_id + i, s.nominal, s.lowest_mz) for i, s in enumerate(library)), weighting)


@st.composite
def spectra(draw: st.DrawFn, highest_mz: int = 70) -> CleanSpectrum:
    heights = st.one_of(st.floats(0.001, 1000.0), st.sampled_from([1.0, 50.0, 999.0]))
    peaks = draw(st.dictionaries(st.integers(10, highest_mz), heights, min_size=1, max_size=12))
    return spectrum(peaks, draw(st.one_of(st.none(), st.integers(5, highest_mz + 5))))


libraries = st.lists(spectra(), max_size=12)
weightings = st.sampled_from(WEIGHTINGS)


@pytest.fixture(params=["numpy", "compiled"])
def every_scan(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    monkeypatch.setattr(scan, "COMPILED_FROM_ENTRIES", 0 if request.param == "compiled" else 10**9)
    yield


def brute_force(index: SearchIndex, query: CleanSpectrum, k: int) -> list[tuple[int, float, float]]:
    """The stated answer, from all scores, in plain Python."""
    rows = [row for row in zip(*(a.tolist() for a in score_all(index, query)), strict=True) if row[1] > 0]
    by_cosine = sorted(rows, key=lambda row: (-row[1], -row[2], row[0]))
    by_reverse = sorted(rows, key=lambda row: (-row[2], -row[1], row[0]))
    return sorted({*by_cosine[:k], *by_reverse[:k]}, key=lambda row: (-row[1], -row[2], row[0]))


def found(hits: tuple[Hit, ...]) -> list[tuple[int, float, float]]:
    return [(hit.entry_id, hit.cosine, hit.reverse) for hit in hits]


@relaxed
@given(library=libraries, query=spectra(), weighting=weightings)
def test_index_scores_are_the_plain_definition(
    library: list[CleanSpectrum], query: CleanSpectrum, weighting: Weighting
) -> None:
    ids, cosine, reverse = score_all(index_of(library, weighting), query)
    pairs = [align(query, entry) for entry in library]
    assert ids.tolist() == list(range(1, len(library) + 1))
    assert cosine == pytest.approx(np.array([cosine_score(p, weighting) for p in pairs]), abs=1e-6)
    assert reverse == pytest.approx(np.array([reverse_score(p, weighting) for p in pairs]), abs=1e-6)
    assert ((cosine >= 0) & (cosine <= 1) & (reverse >= 0) & (reverse <= 1)).all()


@relaxed
@given(library=libraries, query=spectra(), weighting=weightings, k=st.integers(1, 6))
def test_a_search_finds_the_best_of_all_scores(
    every_scan: None, library: list[CleanSpectrum], query: CleanSpectrum, weighting: Weighting, k: int
) -> None:
    index = index_of(library, weighting)
    assert found(search_index(index, query, k)) == brute_force(index, query, k)


@relaxed
@given(library=st.lists(spectra(), min_size=1, max_size=12), query=spectra(), data=st.data())
def test_permuting_the_library_changes_nothing(
    library: list[CleanSpectrum], query: CleanSpectrum, data: st.DataObject
) -> None:
    order = data.draw(st.permutations(range(len(library))))
    rows = [(i, library[i].nominal, library[i].lowest_mz) for i in order]
    shuffled = build_index(rows, WEIGHTINGS[0])
    plain = build_index(sorted(rows, key=lambda row: row[0]), WEIGHTINGS[0])
    assert search_index(shuffled, query, 5) == search_index(plain, query, 5)
    for name, array in plain.segments[0].to_arrays().items():
        assert np.array_equal(array, shuffled.segments[0].to_arrays()[name]), name


@relaxed
@given(library=libraries, query=spectra(), factor=st.sampled_from([0.5, 7.0, 1e6]))
def test_scaling_intensities_changes_nothing(library: list[CleanSpectrum], query: CleanSpectrum, factor: float) -> None:
    def scale(s: CleanSpectrum) -> CleanSpectrum:
        return CleanSpectrum(Peaks(s.nominal.mz, s.nominal.intensity * factor), None, s.lowest_mz)

    _, cosine, reverse = score_all(index_of(library), query)
    _, scaled_cosine, scaled_reverse = score_all(index_of([scale(entry) for entry in library]), scale(query))
    assert scaled_cosine == pytest.approx(cosine, abs=1e-6)
    assert scaled_reverse == pytest.approx(reverse, abs=1e-6)


@relaxed
@given(library=libraries, query=spectra(), stranger=spectra(highest_mz=300))
def test_adding_an_entry_changes_no_other_score(
    library: list[CleanSpectrum], query: CleanSpectrum, stranger: CleanSpectrum
) -> None:
    before = [array.tolist() for array in score_all(index_of(library), query)]
    after = [array.tolist()[: len(library)] for array in score_all(index_of([*library, stranger]), query)]
    assert after == before


@relaxed
@given(entry=spectra(), weighting=weightings)
def test_a_spectrum_finds_itself_with_score_one(entry: CleanSpectrum, weighting: Weighting) -> None:
    if entry.nominal.mz[-1] < entry.lowest_mz:
        assert search_index(index_of([entry], weighting), entry, 1) == ()
        return
    (hit,) = search_index(index_of([entry], weighting), entry, 1)
    assert (hit.cosine, hit.reverse) == (pytest.approx(1.0, abs=1e-6), pytest.approx(1.0, abs=1e-6))


@relaxed
@given(one=spectra(), other=spectra(), weighting=weightings)
def test_cosine_is_symmetric(one: CleanSpectrum, other: CleanSpectrum, weighting: Weighting) -> None:
    _, forth, _ = score_all(index_of([one], weighting), other)
    _, back, _ = score_all(index_of([other], weighting), one)
    assert forth[0] == pytest.approx(back[0], abs=1e-6)


def test_only_the_range_both_cover_counts() -> None:
    # The entry's scan began at 50: the query's peaks at 41 and 43 say nothing against it.
    entry = spectrum({57: 60.0, 71: 40.0}, lowest_mz=50)
    query = spectrum({41: 80.0, 43: 100.0, 57: 60.0, 71: 40.0}, lowest_mz=40)
    assert found(search_index(index_of([entry]), query, 1)) == [(1, pytest.approx(1.0), pytest.approx(1.0))]
    # The other way round it is the same.
    assert found(search_index(index_of([query]), entry, 1)) == [(1, pytest.approx(1.0), pytest.approx(1.0))]


def test_equal_scores_come_by_entry_id() -> None:
    copies = [spectrum({43: 100.0, 58: 30.0})] * 5
    index = build_index(((i, s.nominal, 43) for i, s in zip([7, 3, 9, 1, 5], copies, strict=True)), WEIGHTINGS[0])
    assert [hit.entry_id for hit in search_index(index, copies[0], 3)] == [1, 3, 5]


def test_equal_cosine_comes_by_reverse_match() -> None:
    # Cosine 1/sqrt(2) for both (plain weights); entry 1 has a peak the query lacks, entry 2 lacks one of the query's.
    query = spectrum({50: 1.0, 60: 1.0}, lowest_mz=40)
    entries = [spectrum({50: 1.0, 60: 1.0, 70: 1.0, 80: 1.0}, 40), spectrum({60: 1.0}, 40)]
    hits = search_index(index_of(entries, Weighting(0.0, 1.0)), query, 2)
    assert found(hits) == [
        (2, pytest.approx(0.5**0.5), pytest.approx(1.0)),
        (1, pytest.approx(0.5**0.5), pytest.approx(0.5**0.5)),
    ]


def test_best_by_reverse_match_is_found_although_its_cosine_is_poor() -> None:
    rivals = [spectrum({60: 100.0, 61 + i: 40.0}) for i in range(20)]
    query = spectrum({60: 100.0, 65: 35.0, 40: 5.0}, lowest_mz=40)
    hits = search_index(index_of([*rivals, spectrum({40: 100.0}, 40)]), query, 1)
    assert {hit.entry_id for hit in hits} == {5, 21}


def test_entries_without_a_common_peak_are_no_hits() -> None:
    index = index_of([spectrum({43: 1.0}), spectrum({91: 1.0}, lowest_mz=40)])
    assert [hit.entry_id for hit in search_index(index, spectrum({43: 5.0}), 10)] == [1]


def test_an_empty_index_and_an_empty_query_find_nothing() -> None:
    query = spectrum({43: 1.0})
    assert search_index(index_of([]), query, 5) == ()
    assert search_index(SearchIndex(WEIGHTINGS[0]), query, 5) == ()
    assert search_index(index_of([query]), CleanSpectrum(Peaks([], []), None, 1), 5) == ()


def test_k_below_one_is_refused() -> None:
    with pytest.raises(UsageError, match=r"number of hits: found 0, expected at least 1\."):
        search_index(index_of([spectrum({43: 1.0})]), spectrum({43: 1.0}), 0)


def test_mz_far_above_the_usual_is_scored_like_any_other(every_scan: None) -> None:
    entries = [spectrum({100: 1.0, 5000: 3.0}, 50), spectrum({100: 1.0, 65535: 3.0}, 50)]
    index = index_of(entries)
    for query in (*entries, spectrum({100: 1.0, 90_000: 3.0}, 50)):
        expected = [cosine_score(align(query, entry), WEIGHTINGS[0]) for entry in entries]
        assert score_all(index, query)[1] == pytest.approx(np.array(expected), abs=1e-6)
        assert found(search_index(index, query, 2)) == brute_force(index, query, 2)


def test_huge_and_tiny_intensities_keep_order_and_scores(every_scan: None) -> None:
    library = [
        spectrum({43: 1e-200, 58: 1e-200}, 40),
        spectrum({43: 1e200, 58: 1e200}, 40),
        spectrum({43: 1.0, 58: 1e-180}, 40),
        spectrum({58: 1.0}, 40),
        spectrum({44: 1.0, 58: 1e-30}, 40),
    ]
    index = index_of(library)
    for query in library:
        assert found(search_index(index, query, 2)) == brute_force(index, query, 2)
        expected = [cosine_score(align(query, entry), WEIGHTINGS[0]) for entry in library]
        assert score_all(index, query)[1] == pytest.approx(np.array(expected), abs=1e-6)


@pytest.mark.parametrize("mz", [43.5, 0.0, 65_536.0, 1e9])
def test_an_mz_that_is_no_nominal_one_is_refused(mz: float) -> None:
    peaks = Peaks([mz or 1.0], [1.0]) if mz else Peaks([0.4], [1.0])
    with pytest.raises(
        SpectrumError, match=r"nominal peaks in entry 4: found m/z .*, expected integers from 1 to 65535"
    ):
        build_index([(4, peaks, 0)], WEIGHTINGS[0])


def test_an_id_twice_is_refused() -> None:
    row = (4, Peaks([43], [1.0]), 40)
    with pytest.raises(SpectrumError, match="index rows: found entry id 4 twice"):
        build_index([row, row], WEIGHTINGS[0])
    with pytest.raises(IndexDamaged, match="an entry in two segments"):
        add_entries(build_index([row], WEIGHTINGS[0]), [row])


@relaxed
@given(library=st.lists(spectra(), min_size=3, max_size=12), query=spectra(), data=st.data())
def test_segments_and_hidden_entries_answer_like_an_index_of_what_is_left(
    every_scan: None, library: list[CleanSpectrum], query: CleanSpectrum, data: st.DataObject
) -> None:
    rows = [(i, s.nominal, s.lowest_mz) for i, s in enumerate(library)]
    cut = data.draw(st.integers(0, len(rows)))
    gone = data.draw(st.sets(st.integers(0, len(rows) - 1)))
    index = hide_entries(add_entries(build_index(rows[:cut], WEIGHTINGS[0]), rows[cut:]), {*gone, 10**6})
    left = build_index([row for row in rows if row[0] not in gone], WEIGHTINGS[0])
    assert index.n_entries == left.n_entries
    for k in (1, 4):
        assert search_index(index, query, k) == search_index(left, query, k)
    assert [a.tolist() for a in score_all(index, query)] == [a.tolist() for a in score_all(left, query)]
    merged = merge_index(index)
    for name, array in left.segments[0].to_arrays().items():
        assert np.array_equal(array, merged.segments[0].to_arrays()[name]), name


def test_hiding_names_all_hidden_entries_anew() -> None:
    index = index_of([spectrum({43: 1.0}), spectrum({43: 1.0})])
    once = hide_entries(index, [1])
    assert [hit.entry_id for hit in search_index(once, spectrum({43: 1.0}), 5)] == [2]
    assert [hit.entry_id for hit in search_index(hide_entries(once, [2]), spectrum({43: 1.0}), 5)] == [1]
    assert hide_entries(once, []).n_entries == 2


def test_an_index_takes_segments_of_its_own_weighting_only() -> None:
    segment = index_of([spectrum({43: 1.0})]).segments[0]
    with pytest.raises(IndexDamaged):
        SearchIndex(Weighting(0.0, 1.0), (segment,))
