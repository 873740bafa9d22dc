"""Plain similarity definitions: hand-checked values and the properties each measure claims."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.records import AlignedPeaks
from identify.settings import Weighting
from identify.similarity import scores

PLAIN = Weighting(mz_power=0.0, intensity_power=1.0)

MEASURES: dict[str, Callable[[AlignedPeaks, Weighting], float]] = {
    "cosine": scores.cosine_score,
    "reverse": scores.reverse_score,
    "peak_ratio": scores.peak_ratio_score,
    "composite": scores.composite_score,
}
SYMMETRIC = ("cosine", "peak_ratio")
every_measure = pytest.mark.parametrize("measure", MEASURES.values(), ids=MEASURES.keys())
symmetric_measure = pytest.mark.parametrize("measure", [MEASURES[name] for name in SYMMETRIC], ids=SYMMETRIC)


def aligned(peaks: dict[int, tuple[float, float]], lowest_mz: int = 1) -> AlignedPeaks:
    """Pair from ``{m/z: (query intensity, entry intensity)}``."""
    mz = sorted(peaks)
    columns = np.array([peaks[value] for value in mz], dtype=np.float64).reshape(-1, 2)
    return AlignedPeaks(np.array(mz, dtype=np.float64), columns[:, 0].copy(), columns[:, 1].copy(), lowest_mz)


@st.composite
def pairs(draw: st.DrawFn) -> AlignedPeaks:
    intensity = st.one_of(st.just(0.0), st.floats(0.01, 100.0))
    return aligned(draw(st.dictionaries(st.integers(10, 600), st.tuples(intensity, intensity), max_size=25)))


weightings = st.builds(Weighting, mz_power=st.floats(0.0, 3.0), intensity_power=st.floats(0.1, 2.0))


@every_measure
@settings(max_examples=40)
@given(pair=pairs(), weighting=weightings)
def test_every_score_is_in_the_unit_interval(
    measure: Callable[..., float], pair: AlignedPeaks, weighting: Weighting
) -> None:
    assert 0.0 <= measure(pair, weighting) <= 1.0


@symmetric_measure
@settings(max_examples=40)
@given(pair=pairs(), weighting=weightings)
def test_symmetric_measures_ignore_which_spectrum_is_the_query(
    measure: Callable[..., float], pair: AlignedPeaks, weighting: Weighting
) -> None:
    swapped = replace(pair, query=pair.entry, entry=pair.query)
    assert measure(pair, weighting) == pytest.approx(measure(swapped, weighting), abs=1e-12)


@every_measure
@settings(max_examples=40)
@given(pair=pairs(), weighting=weightings, factor=st.sampled_from([0.25, 3.0, 1000.0]))
def test_scaling_one_spectrum_changes_no_score(
    measure: Callable[..., float], pair: AlignedPeaks, weighting: Weighting, factor: float
) -> None:
    scaled = replace(pair, query=pair.query * factor)
    # Correlation of nearly constant weights divides rounding by rounding; 1e-6 is the accuracy the index promises too.
    assert measure(scaled, weighting) == pytest.approx(measure(pair, weighting), abs=1e-6)


@every_measure
def test_a_spectrum_matches_itself_perfectly(measure: Callable[..., float]) -> None:
    pair = aligned({41: (20.0, 20.0), 43: (100.0, 100.0), 58: (7.0, 7.0), 85: (45.5, 45.5)})
    assert measure(pair, Weighting()) == pytest.approx(1.0, abs=1e-12)


@every_measure
def test_spectra_without_a_common_peak_score_zero(measure: Callable[..., float]) -> None:
    assert measure(aligned({41: (20.0, 0.0), 43: (0.0, 100.0)}), Weighting()) == pytest.approx(0.0, abs=1e-12)


@every_measure
@pytest.mark.parametrize("peaks", [{}, {43: (100.0, 0.0)}, {43: (0.0, 100.0)}], ids=["none", "query", "entry"])
def test_an_empty_spectrum_scores_zero(measure: Callable[..., float], peaks: dict[int, tuple[float, float]]) -> None:
    assert measure(aligned(peaks), Weighting()) == 0.0


def test_cosine_with_weights_follows_the_equation() -> None:
    # w = sqrt(I) * mz: query 10*50, 5*100 against entry 10*50, 10*100, with one entry peak more (1*200).
    pair = aligned({50: (100.0, 100.0), 100: (25.0, 100.0), 200: (0.0, 1.0)})
    expected = (500 * 500 + 500 * 1000) / math.sqrt((500**2 + 500**2) * (500**2 + 1000**2 + 200**2))
    assert scores.cosine_score(pair, Weighting(mz_power=1.0, intensity_power=0.5)) == pytest.approx(expected, abs=1e-14)


@settings(max_examples=40)
@given(pair=pairs(), weighting=weightings)
def test_contributions_add_up_to_the_cosine(pair: AlignedPeaks, weighting: Weighting) -> None:
    parts = scores.cosine_contributions(pair, weighting)
    assert parts.shape == pair.mz.shape
    assert (parts >= 0).all()
    assert (parts[(pair.query == 0) | (pair.entry == 0)] == 0).all()
    assert parts.sum() == pytest.approx(scores.cosine_score(pair, weighting), abs=1e-12)


@settings(max_examples=40)
@given(pair=pairs(), weighting=weightings)
def test_reverse_is_the_cosine_after_dropping_query_peaks_the_entry_lacks(
    pair: AlignedPeaks, weighting: Weighting
) -> None:
    cut = replace(pair, query=np.where(pair.entry > 0, pair.query, 0.0))
    assert scores.reverse_score(pair, weighting) == scores.cosine_score(cut, weighting)
    assert scores.reverse_score(pair, weighting) >= scores.cosine_score(pair, weighting) - 1e-12


def test_reverse_still_counts_entry_peaks_the_query_lacks() -> None:
    assert scores.reverse_score(aligned({43: (3.0, 3.0), 58: (0.0, 4.0)}), PLAIN) == pytest.approx(0.6)


def test_peak_ratio_takes_matched_neighbours_only() -> None:
    # 57 is matched by nobody, so 43 and 71 are neighbours: query ratio 1/2, entry ratio 1/4, agreement one half.
    pair = aligned({43: (100.0, 100.0), 57: (80.0, 0.0), 71: (50.0, 25.0)})
    assert scores.peak_ratio_score(pair, PLAIN) == pytest.approx(0.5)
    assert scores.peak_ratio_score(aligned({43: (100.0, 100.0), 57: (80.0, 0.0)}), PLAIN) == 0.0


def test_peak_ratio_does_not_depend_on_the_mz_power() -> None:
    pair = aligned({43: (100.0, 90.0), 57: (80.0, 60.0), 71: (50.0, 25.0)})
    heavy = Weighting(mz_power=3.0, intensity_power=1.0)
    assert scores.peak_ratio_score(pair, heavy) == scores.peak_ratio_score(pair, PLAIN)


def test_composite_weighs_by_query_peaks_and_matched_peaks() -> None:
    pair = aligned({43: (100.0, 100.0), 57: (80.0, 0.0), 71: (50.0, 25.0)})
    expected = (3 * scores.cosine_score(pair, PLAIN) + 2 * 0.5) / 5
    assert scores.composite_score(pair, PLAIN) == pytest.approx(expected)


def test_tiny_and_huge_intensities_keep_the_cosine() -> None:
    tiny = aligned({43: (1e-90, 1e90), 58: (1e-90, 1e90)})
    assert scores.cosine_score(tiny, PLAIN) == pytest.approx(1.0)
