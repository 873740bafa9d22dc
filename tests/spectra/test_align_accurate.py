"""Accurate alignment: nearest pairs within the tolerance, one to one, symmetric."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.records import Peaks
from identify.spectra.align import align_accurate

peak_lists = st.dictionaries(
    st.integers(40_000, 60_000).map(lambda n: n / 1000), st.floats(0.1, 100.0), max_size=15
).map(lambda peaks: Peaks(sorted(peaks), [peaks[mz] for mz in sorted(peaks)]))


def pairs(
    query: Peaks, entry: Peaks, ppm: float = 10.0, da: float = 0.0, lowest_mz: int = 1
) -> list[tuple[float, ...]]:
    aligned = align_accurate(query, entry, lowest_mz, ppm, da)
    columns = np.column_stack([aligned.mz, aligned.query, aligned.entry])
    return [tuple(row) for row in columns.tolist() if row[1] > 0 and row[2] > 0]


def test_peaks_within_the_tolerance_become_one_at_their_mean() -> None:
    query, entry = Peaks([100.0, 200.0], [50.0, 100.0]), Peaks([100.0005, 200.01], [100.0, 30.0])
    assert pairs(query, entry) == [(pytest.approx(100.00025), 50.0, 100.0)]


@pytest.mark.parametrize(("difference", "matches"), [(0.0009, True), (0.0011, False)])
def test_ten_ppm_at_mz_100_is_one_millidalton(difference: float, matches: bool) -> None:
    assert bool(pairs(Peaks([100.0], [1.0]), Peaks([100.0 + difference], [1.0]))) is matches


def test_the_larger_of_the_two_tolerances_applies() -> None:
    query, entry = Peaks([100.0], [1.0]), Peaks([100.0018], [1.0])
    assert not pairs(query, entry, ppm=10.0, da=0.001)
    assert pairs(query, entry, ppm=10.0, da=0.002)
    assert pairs(query, entry, ppm=20.0, da=0.001)


def test_of_two_near_peaks_the_nearer_is_taken_and_the_other_stays_alone() -> None:
    # CO+ and C2H4+ at nominal 28, invented intensities.
    query = Peaks([27.9944], [100.0])
    entry = Peaks([27.9949, 28.0313], [40.0, 100.0])
    aligned = align_accurate(query, entry, 20, 20.0, 0.05)
    assert aligned.mz.tolist() == [pytest.approx(27.99465), 28.0313]
    assert aligned.query.tolist() == [100.0, 0.0]
    assert aligned.entry.tolist() == [40.0, 100.0]


def test_the_common_range_starts_half_a_dalton_below_the_nominal_limit() -> None:
    query, entry = Peaks([42.4, 42.6], [1.0, 1.0]), Peaks([42.4, 42.6], [1.0, 1.0])
    assert align_accurate(query, entry, 43, 10.0, 0.0).mz.tolist() == [42.6]


@settings(max_examples=60)
@given(query=peak_lists, entry=peak_lists, da=st.sampled_from([0.0, 0.001, 0.05, 3.0]))
def test_alignment_is_symmetric_one_to_one_and_loses_no_peak(query: Peaks, entry: Peaks, da: float) -> None:
    forth, back = align_accurate(query, entry, 1, 0.0, da), align_accurate(entry, query, 1, 0.0, da)
    assert forth.mz.tolist() == back.mz.tolist()
    assert forth.query.tolist() == back.entry.tolist()
    assert sorted(forth.query[forth.query > 0].tolist()) == sorted(query.relative.tolist())
    assert sorted(forth.entry[forth.entry > 0].tolist()) == sorted(entry.relative.tolist())
    assert (np.diff(forth.mz) >= 0).all()
    assert ((forth.query > 0) | (forth.entry > 0)).all()


@settings(max_examples=40)
@given(query=peak_lists, entry=peak_lists)
def test_pairs_are_each_others_nearest(query: Peaks, entry: Peaks) -> None:
    tolerance = 0.5
    matched = {
        (float(q), float(e))
        for q in query.mz
        for e in entry.mz
        if abs(q - e) <= tolerance
        and e == min(entry.mz, key=lambda other: (abs(other - q), other))
        and q == min(query.mz, key=lambda other: (abs(other - e), other))
    }
    aligned = align_accurate(query, entry, 1, 0.0, tolerance)
    assert sorted((q + e) / 2 for q, e in matched) == pytest.approx(
        aligned.mz[(aligned.query > 0) & (aligned.entry > 0)].tolist()
    )
