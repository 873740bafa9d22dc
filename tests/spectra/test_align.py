"""Alignment: one axis, common range, nothing lost."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from identify.records import CleanSpectrum, Peaks
from identify.spectra.align import align, align_all

spectra = st.builds(
    lambda peaks, low: CleanSpectrum(
        Peaks(np.array(sorted(peaks)), np.array([peaks[m] for m in sorted(peaks)])), None, min(low, min(peaks))
    ),
    st.dictionaries(st.integers(10, 300), st.floats(0.1, 1e5), min_size=1, max_size=40),
    st.integers(10, 60),
)


def test_peaks_below_the_higher_lower_limit_do_not_count() -> None:
    query = CleanSpectrum(Peaks(np.array([28.0, 43.0, 58.0]), np.array([5.0, 100.0, 30.0])), None, 20)
    entry = CleanSpectrum(Peaks(np.array([43.0, 59.0]), np.array([50.0, 10.0])), None, 40)
    aligned = align(query, entry)
    assert aligned.lowest_mz == 40
    assert aligned.mz.tolist() == [43.0, 58.0, 59.0]
    assert aligned.query.tolist() == [100.0, 30.0, 0.0]
    assert aligned.entry.tolist() == [100.0, 0.0, 20.0]
    assert aligned.n_matched == 1


@given(spectra, spectra)
def test_swapping_the_spectra_swaps_the_columns(first: CleanSpectrum, second: CleanSpectrum) -> None:
    one, other = align(first, second), align(second, first)
    assert np.array_equal(one.mz, other.mz)
    assert np.array_equal(one.query, other.entry)
    assert np.array_equal(one.entry, other.query)


@given(spectra, st.lists(spectra, max_size=5))
def test_many_at_once_are_aligned_as_one_by_one_by_the_plain_definition(
    query: CleanSpectrum, entries: list[CleanSpectrum]
) -> None:
    found = align_all(query, entries)
    assert len(found) == len(entries)
    for aligned, entry in zip(found, entries, strict=True):
        lowest = max(query.lowest_mz, entry.lowest_mz)
        own, theirs = (
            dict(zip(one.nominal.mz.tolist(), one.nominal.relative.tolist(), strict=True)) for one in (query, entry)
        )
        axis = sorted(mz for mz in {*own, *theirs} if mz >= lowest)
        assert aligned.lowest_mz == lowest
        assert aligned.mz.tolist() == axis
        assert aligned.query.tolist() == [own.get(mz, 0.0) for mz in axis]
        assert aligned.entry.tolist() == [theirs.get(mz, 0.0) for mz in axis]
