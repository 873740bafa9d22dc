"""Cleaning: what goes, what stays, and that every removal is in the log."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.errors import SpectrumError
from identify.records import Acquisition, CleanSpectrum, Source, SpectrumRecord
from identify.settings import REFERENCE_CLEANING, CleaningSettings
from identify.spectra.cleaning import MAX_PEAKS, clean_spectrum

BLEED = {207: 100.0, 208: 20.9, 209: 12.5, 281: 40.0, 282: 11.3, 283: 7.1, 73: 30.0}
"""Column bleed by the isotope ratios of C5H15O3Si3+ and C7H21O4Si4+ (standards table, [C])."""


def record(peaks: dict[float, float], **fields: object) -> SpectrumRecord:
    source = Source("invented.csv", 1)
    return SpectrumRecord(source, np.array(list(peaks)), np.array(list(peaks.values())), **fields)  # type: ignore[arg-type]


def clean(peaks: dict[float, float], settings: CleaningSettings | None = None, **fields: object) -> CleanSpectrum:
    return clean_spectrum(record(peaks, **fields), settings or CleaningSettings())


def removed(spectrum: CleanSpectrum, step: str) -> list[float]:
    (found,) = [s for s in spectrum.steps if s.step == step]
    assert found.peaks_before - found.peaks_after == len(found.removed)
    return [mz for mz, _ in found.removed]


def test_zero_and_negative_peaks_go_and_are_logged() -> None:
    # The public-domain acetophenone record of the standards table holds a bogus 0,0 point.
    spectrum = clean({0.0: 0.0, 105.0: 80.8, 77.0: 100.0, 51.0: -3.0})
    assert spectrum.nominal.mz.tolist() == [77.0, 105.0]
    assert removed(spectrum, "invalid peaks") == [0.0, 51.0]


def test_unsorted_duplicates_keep_the_most_intense() -> None:
    raw = SpectrumRecord(Source("x"), np.array([77.0, 51.0, 77.0]), np.array([3.0, 4.0, 9.0]))
    spectrum = clean_spectrum(raw, CleaningSettings())
    assert spectrum.nominal.intensity_at(77) == 9.0
    assert removed(spectrum, "duplicate m/z") == [77.0]


def test_accurate_peaks_of_one_nominal_mass_are_summed_and_kept() -> None:
    spectrum = clean({43.0178: 10.0, 43.0542: 5.0, 58.0413: 4.0})
    assert spectrum.nominal.intensity_at(43) == 15.0
    assert spectrum.accurate is not None
    assert len(spectrum.accurate) == 3


def test_air_is_dropped_by_its_ratio_only() -> None:
    with_air = clean({28: 40.0, 32: 10.0, 40: 1.0, 18: 20.0, 17: 5.0, 78: 100.0, 52: 20.0})
    assert with_air.nominal.mz.tolist() == [52.0, 78.0]
    assert with_air.lowest_mz == 17, "the scan did cover the gas: the low range counts as measured"


def test_methanol_is_not_taken_for_air() -> None:
    # CH3OH: 31 base, 32 molecular ion, 29, 28 (common practice).
    assert removed(clean({28: 6.0, 29: 60.0, 30: 5.0, 31: 100.0, 32: 70.0}), "air and water") == []


def test_pure_air_is_left_for_the_analyst() -> None:
    assert clean({28: 100.0, 32: 25.0}).nominal.mz.tolist() == [28.0, 32.0]


def test_bleed_goes_only_with_its_pattern() -> None:
    compound = {57: 1000.0, 71: 700.0, 85: 500.0}
    assert removed(clean(compound | BLEED), "column bleed") == [207.0, 208.0, 209.0, 281.0, 282.0, 283.0]
    without = compound | {207: 100.0, 208: 15.0, 281: 40.0}
    assert removed(clean(without), "column bleed") == []


def test_a_siloxane_is_not_erased() -> None:
    assert removed(clean(BLEED), "column bleed") == []


def test_noise_floor_is_found_and_never_above_one_percent() -> None:
    rng = np.random.default_rng(7)
    noise = {float(mz): float(i) for mz, i in zip(range(100, 220), rng.uniform(2.0, 5.0, 120), strict=True)}
    spectrum = clean(noise | {43.0: 1000.0, 58.0: 400.0, 300.0: 12.0})
    assert spectrum.nominal.intensity_at(300) == 12.0
    assert len(removed(spectrum, "noise floor")) > 100


def test_intensities_rounded_to_a_coarse_step_show_no_floor() -> None:
    rounded = {float(mz): float(1 + mz % 3) for mz in range(60, 160)} | {43.0: 999.0, 58.0: 400.0}
    assert removed(clean(rounded), "noise floor") == []


def test_reference_cleaning_keeps_what_was_published() -> None:
    peaks = {28: 40.0, 32: 10.0, 57: 100.0, 400.0: 0.001} | BLEED
    assert len(clean(peaks, REFERENCE_CLEANING).nominal) == len(peaks)


def test_stated_scan_limit_is_used_unless_a_peak_contradicts_it() -> None:
    assert clean({60: 5.0}, acquisition=Acquisition(lowest_mz=35.0)).lowest_mz == 35
    assert clean({60: 5.0}, acquisition=Acquisition(lowest_mz=85.0)).lowest_mz == 60


def test_profile_data_is_refused_with_advice() -> None:
    axis = np.arange(40.0, 80.0, 0.05)
    with pytest.raises(SpectrumError) as error:
        clean_spectrum(SpectrumRecord(Source("p.csv", 3), axis, np.ones(axis.size)), CleaningSettings())
    assert str(error.value) == (
        "spectrum in p.csv:3: found profile data, expected a centroided peak list. "
        "Centroid the spectrum (peak picking) in the data system, export it and try again."
    )


def test_a_million_peaks_are_refused() -> None:
    many = np.arange(1, 1_000_001, dtype=np.float64)
    with pytest.raises(SpectrumError, match=r"found 1,000,000 peaks, expected at most 100,000"):
        clean_spectrum(SpectrumRecord(Source("m.csv"), many, many), CleaningSettings())
    assert MAX_PEAKS == 100_000


def test_nothing_usable_is_an_error_with_the_place() -> None:
    with pytest.raises(SpectrumError, match=r"spectrum in invented.csv:1: found no peak with positive m/z"):
        clean({-5.0: 3.0, 40.0: 0.0})


@given(st.dictionaries(st.floats(-10, 1200, allow_nan=False), st.floats(-5, 1e6, allow_nan=False), max_size=60))
def test_log_and_result_account_for_every_peak(peaks: dict[float, float]) -> None:
    try:
        spectrum = clean(peaks)
    except SpectrumError:
        return
    before = [step.peaks_before for step in spectrum.steps]
    after = [step.peaks_after for step in spectrum.steps]
    assert before[0] == len(peaks)
    assert before[1:] == after[:-1]
    assert after[-1] == len(spectrum.nominal) >= 1
