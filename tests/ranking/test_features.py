from __future__ import annotations

import math

import numpy as np
import pytest

from identify.ranking.features import (
    COSINES,
    NAMES,
    ONE_SIDED,
    PRIOR_DEVIATION,
    PRIOR_WEIGHT,
    compare_with_entries,
)
from identify.records import CleanSpectrum, Peaks
from identify.similarity.scores import cosine_score, peak_weights, reverse_score
from identify.spectra.align import align
from tests.ranking.builders import ALCOHOL, XYLENE, build_spectrum


def random_spectrum(rng: np.random.Generator) -> CleanSpectrum:
    mz = np.sort(rng.choice(np.arange(20, 200), size=int(rng.integers(1, 60)), replace=False)).astype(float)
    return CleanSpectrum(Peaks(mz, rng.uniform(0.1, 100, mz.size)), None, int(rng.integers(10, int(mz[-1]) + 1)))


def column(features: np.ndarray, name: str) -> np.ndarray:
    return features[:, NAMES.index(name)]


def test_cosines_are_those_of_the_plain_definition() -> None:
    rng = np.random.default_rng(1)
    for _ in range(20):
        query, entries = random_spectrum(rng), [random_spectrum(rng) for _ in range(15)]
        features = compare_with_entries(query, entries, [None] * 15)
        for place, entry in enumerate(entries):
            aligned = align(query, entry)
            for name, weighting in COSINES.items():
                assert column(features, f"cosine, {name}")[place] == pytest.approx(
                    cosine_score(aligned, weighting), abs=1e-6
                )
            kept = entry.nominal.mz >= max(query.lowest_mz, entry.lowest_mz)
            for name in ONE_SIDED:
                weights = peak_weights(entry.nominal.mz[kept], entry.nominal.intensity[kept], COSINES[name])
                n_peaks = weights.sum() ** 2 / (weights**2).sum() if kept.any() else 0.0
                assert column(features, f"reverse, {name}")[place] == pytest.approx(
                    reverse_score(aligned, COSINES[name]) * n_peaks / (n_peaks + 1.0), abs=1e-6
                )


def test_features_are_finite_whatever_the_spectra() -> None:
    rng = np.random.default_rng(2)
    for _ in range(40):
        entries = [random_spectrum(rng) for _ in range(8)]
        assert np.isfinite(compare_with_entries(random_spectrum(rng), entries, [None] * 8)).all()
    one, none_in_common = build_spectrum({50: 1.0}), build_spectrum({30: 1.0}, 20)
    assert np.isfinite(compare_with_entries(one, [none_in_common, one], [12.0, None])).all()


def test_a_spectrum_compared_with_itself_shows_no_difference() -> None:
    features = compare_with_entries(build_spectrum(XYLENE), [build_spectrum(XYLENE)], [70.0])
    for name in (*(f"cosine, {name}" for name in COSINES), "cosine without tilt"):
        assert column(features, name)[0] == pytest.approx(1.0)
    for name in ("entry peaks missing", "query peaks missing"):
        assert column(features, name)[0] == pytest.approx(0.0, abs=1e-9)
    seen = sum(math.sqrt(value) for value in XYLENE.values())
    for name in ("deviation of ratios", "deviation without tilt"):
        assert column(features, name)[0] == pytest.approx(PRIOR_DEVIATION * PRIOR_WEIGHT / (seen + PRIOR_WEIGHT))
    assert column(features, "same highest ion 5 %")[0] == 1.0


def test_the_unit_of_intensity_does_not_matter() -> None:
    query, scaled = build_spectrum(XYLENE), build_spectrum({mz: 37.0 * value for mz, value in XYLENE.items()})
    entry = build_spectrum({**XYLENE, 39: 15.0, 105: 60.0}, 30)
    np.testing.assert_allclose(
        compare_with_entries(query, [entry], [None]), compare_with_entries(scaled, [entry], [None]), atol=1e-9
    )


def test_a_row_does_not_depend_on_the_other_entries_nor_on_how_many_there_are() -> None:
    query = build_spectrum(XYLENE)
    entry, other = build_spectrum({**XYLENE, 105: 60.0}), build_spectrum(ALCOHOL)
    alone = compare_with_entries(query, [entry], [70.0])[0]
    among = compare_with_entries(query, [other, entry, entry, entry], [70.0] * 4)
    np.testing.assert_allclose(among[1:], np.tile(alone, (3, 1)), atol=1e-12)


def test_peaks_below_the_scan_range_of_either_side_are_not_held_against_the_entry() -> None:
    query = build_spectrum({39: 50.0, **XYLENE}, 30)
    late = build_spectrum(XYLENE, 50)
    assert column(compare_with_entries(query, [late], [None]), "query peaks missing")[0] == pytest.approx(0.0, abs=1e-9)
    early = build_spectrum(XYLENE, 30)
    assert column(compare_with_entries(query, [early], [None]), "query peaks missing")[0] > 0.05


def test_a_tilt_over_m_over_z_is_taken_out() -> None:
    peaks = {41: 60.0, 57: 100.0, 85: 50.0, 120: 40.0, 163: 55.0, 205: 70.0, 240: 30.0}
    query = build_spectrum(peaks)
    tilted = build_spectrum({mz: value * np.exp(0.005 * (mz - 120)) for mz, value in peaks.items()})
    features = compare_with_entries(query, [tilted], [None])
    itself = column(compare_with_entries(query, [query], [None]), "deviation of ratios")[0]
    without, as_seen = (column(features, name)[0] for name in ("deviation without tilt", "deviation of ratios"))
    assert without - itself < 0.4 * (as_seen - itself)
    assert column(features, "cosine without tilt")[0] > column(features, "cosine, root")[0]


def test_a_single_peak_in_common_is_neither_a_full_reverse_match_nor_a_ratio_without_deviation() -> None:
    query = build_spectrum({57: 100.0, 71: 70.0, 85: 50.0}, 50)
    features = compare_with_entries(query, [build_spectrum({43: 100.0, 57: 10.0}), query], [None, None])
    for name in ONE_SIDED:
        single, whole = column(features, f"reverse, {name}")
        assert single == pytest.approx(0.5) and whole > 0.7
    single, whole = column(features, "deviation of ratios")
    assert single == pytest.approx(PRIOR_DEVIATION / 2) and whole < 0.7 * single


def test_low_energy_is_told_only_where_it_is_stated() -> None:
    spectrum = build_spectrum(XYLENE)
    features = compare_with_entries(spectrum, [spectrum] * 3, [20.0, 70.0, None])
    assert column(features, "low energy").tolist() == [1.0, 0.0, 0.0]
