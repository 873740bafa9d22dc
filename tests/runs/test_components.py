"""Components of synthetic runs with known truth: found once, with the right spectrum, area and kind."""

from __future__ import annotations

import numpy as np
import pytest

from identify.errors import FormatError
from identify.records import Source
from identify.runs.components import decompose, find_components
from identify.runs.findings import Finding, measure_shares
from identify.runs.model import ComponentKind, Run
from identify.runs.traces import build_ion_matrix, estimate_background, fit_noise
from tests.runs.synthetic_runs import COUNT, SCAN_TIME_S, Eluting, apex_time_s, emg, make_run

# Invented spectra: no compound of any library.
ONE = {39: 12.0, 51: 20.0, 65: 35.0, 77: 60.0, 91: 100.0, 119: 8.0, 147: 55.0}
OTHER = {41: 60.0, 55: 40.0, 57: 100.0, 71: 70.0, 85: 45.0, 99: 12.0, 128: 6.0}
THIRD = {43: 100.0, 58: 80.0, 71: 12.0, 91: 30.0, 150: 25.0}


def cosine(peaks, spectrum) -> float:
    found = dict(zip(peaks.mz.astype(int).tolist(), peaks.intensity.tolist(), strict=True))
    axis = sorted(set(found) | set(spectrum))
    a, b = (np.sqrt([values.get(mz, 0.0) for mz in axis]) for values in (found, spectrum))
    return float(a @ b / np.linalg.norm(a) / np.linalg.norm(b))


def compounds(run: Run):
    return [c for c in find_components(run) if c.kind is ComponentKind.COMPOUND]


def test_one_compound_gives_one_component_with_its_spectrum_time_and_area() -> None:
    truth = Eluting(ONE, 150.3, 20_000.0)
    (found,) = compounds(make_run([truth], 300, seed=1))
    assert found.time_s == pytest.approx(apex_time_s(truth), abs=0.15)
    assert cosine(found.peaks, ONE) > 0.995
    area = 20_000.0 * sum(ONE.values()) / 100.0 * emg(np.arange(-30, 60, 0.1), 1.4, 0.8).sum() * 0.1 * SCAN_TIME_S
    assert found.area == pytest.approx(area, rel=0.05)
    assert found.purity > 0.9
    assert not found.is_saturated


@pytest.mark.parametrize("separation", [1.0, 2.0, 3.0, 6.0])
def test_two_compounds_that_coelute_are_two_components(separation: float) -> None:
    first, second = Eluting(ONE, 150.2, 30_000.0), Eluting(OTHER, 150.2 + separation, 12_000.0)
    found = compounds(make_run([first, second], 300, seed=2))
    assert len(found) == 2
    least = 0.9 if separation < 2.0 else 0.95
    assert cosine(found[0].peaks, ONE) > least
    assert cosine(found[1].peaks, OTHER) > least


def test_an_ion_that_both_compounds_have_is_shared_between_them() -> None:
    first, second = Eluting(ONE, 150.2, 30_000.0), Eluting(THIRD, 153.4, 30_000.0)
    found = compounds(make_run([first, second], 300, seed=3))
    assert [round(c.peaks.intensity_at(91) / c.peaks.intensity.max(), 1) for c in found] == [1.0, 0.3]


def test_noise_bleed_and_air_alone_give_no_compound() -> None:
    assert compounds(make_run([], 600, seed=4, bleed=3000.0)) == []


def test_a_weak_compound_beside_a_ten_thousand_times_stronger_one_is_found() -> None:
    found = compounds(make_run([Eluting(ONE, 100.0, 1e6), Eluting(OTHER, 140.0, 150.0)], 300, seed=5))
    assert len(found) == 2
    assert cosine(found[1].peaks, OTHER) > 0.8


def test_scan_skew_is_seen_and_corrected() -> None:
    truth = [Eluting(ONE, 60.0 + 40.0 * k + 0.23 * k, 50_000.0) for k in range(6)]
    skewed = decompose(make_run(truth, 320, seed=6, skew=True))
    straight = decompose(make_run(truth, 320, seed=6, skew=False))
    # 90 % of a scan over 421 m/z units; high m/z are read first, so that their apex comes later in scan numbers.
    assert skewed.skew_scans_per_mz == pytest.approx(0.9 / 421.0, rel=0.25)
    assert straight.skew_scans_per_mz == pytest.approx(0.0, abs=0.0003)
    assert len([c for c in skewed.components if c.kind is ComponentKind.COMPOUND]) == 6


def overloaded_run() -> Run:
    """A solvent of 30 scans at the detector's ceiling with drifting ratios, a compound on its tail, more later."""
    run = make_run([Eluting(ONE, 120.0, 40_000.0), Eluting(OTHER, 200.0, 30_000.0)], 400, seed=7)
    matrix = build_ion_matrix(run)
    scans = np.arange(30)
    dense = {int(mz): matrix.intensity[:, k].astype(float) for k, mz in enumerate(matrix.mz)}
    for mz, level, drift in ((49, 1.0, 0.1), (84, 0.6, -0.3), (86, 0.4, -0.3), (51, 0.3, 0.1)):
        trace = dense.setdefault(mz, np.zeros(400))
        trace[60:90] += 1e6 * level * (1.0 + drift * scans / 30.0)
        trace[90:130] += 1e6 * level * np.exp(-np.arange(1, 41) / 2.0)
    table = np.column_stack([dense[mz] for mz in sorted(dense)])
    rows, columns = np.nonzero(table)
    first = np.concatenate([[0], np.cumsum(np.bincount(rows, minlength=400))]).astype(np.int64)
    mz = np.array(sorted(dense), dtype=np.float32)[columns]
    return Run(Source("x"), "", "", "", run.time_s, first, mz, table[rows, columns].astype(np.float32))


def test_an_overloaded_solvent_is_one_component_and_what_elutes_later_stays() -> None:
    found = find_components(overloaded_run())
    solvents = [c for c in found if c.kind is ComponentKind.SOLVENT]
    assert len(solvents) == 1
    assert solvents[0].peaks.base_peak_mz == 49
    assert solvents[0].is_saturated
    assert [c for c in found if 88.0 < c.time_s < 107.0] == solvents, "nothing else inside the front"
    later = [c for c in found if c.kind is ComponentKind.COMPOUND]
    assert [round(cosine(c.peaks, truth), 1) for c, truth in zip(later, (ONE, OTHER), strict=True)] == [1.0, 1.0]


def test_a_compound_that_the_blank_shows_too_is_marked() -> None:
    shared, own = Eluting(ONE, 100.0, 20_000.0), Eluting(OTHER, 180.0, 20_000.0)
    blank = find_components(make_run([shared], 300, seed=8))
    found = find_components(make_run([shared, own], 300, seed=9), blank=blank)
    assert [c.kind for c in found] == [ComponentKind.BLANK, ComponentKind.COMPOUND]
    assert "blank shows it" in found[0].note


def test_a_bleed_peak_and_an_air_peak_are_named_and_an_ether_with_mz_73_is_not_bleed() -> None:
    bleed = Eluting({73: 30.0, 207: 100.0, 281: 40.0, 191: 10.0, 133: 10.0}, 80.0, 30_000.0)
    air = Eluting({32: 60.0, 28: 100.0, 40: 3.0}, 120.0, 30_000.0)
    ether = Eluting({73: 100.0, 57: 12.0, 45: 6.0}, 160.0, 30_000.0)
    found = find_components(make_run([bleed, air, ether], 300, seed=10, mz_range=(20, 300)))
    assert [c.kind for c in found] == [ComponentKind.BLEED, ComponentKind.AIR, ComponentKind.COMPOUND]


def test_the_noise_of_a_reading_grows_with_the_square_root_of_its_intensity() -> None:
    run = make_run([], 2000, seed=11, bleed=20_000.0, air=3000.0)
    matrix = build_ion_matrix(run)
    noise = fit_noise(matrix, estimate_background(matrix))
    assert noise.per_count == pytest.approx(COUNT, rel=0.15)


def test_saturation_is_flagged_where_readings_stop_at_a_ceiling() -> None:
    run = make_run([Eluting(ONE, 100.0, 50_000.0), Eluting(OTHER, 200.0, 5_000.0)], 300, seed=12)
    clipped = Run(run.source, "", "", "", run.time_s, run.first_point, run.mz, np.minimum(run.intensity, 20_000.0))
    first, second = compounds(clipped)
    assert (first.is_saturated, second.is_saturated) == (True, False)


def test_signal_that_no_component_explains_is_counted() -> None:
    found = decompose(make_run([Eluting(ONE, 150.0, 20_000.0)], 300, seed=13, bleed=0.0))
    shares = measure_shares([Finding(c, None) for c in found.components], found)
    assert shares.compounds > 0
    assert shares.unassigned < 0.05 * shares.compounds


@pytest.mark.parametrize("n_scans", [2, 3, 5])
def test_runs_of_few_scans_and_empty_scans_give_components_or_none(n_scans: int) -> None:
    first = np.zeros(n_scans + 1, dtype=np.int64)
    first[-1] = 1
    times = np.arange(1.0, n_scans + 1.0)
    run = Run(Source("x"), "", "", "", times, first, np.array([50.0], np.float32), np.array([10.0], np.float32))
    assert find_components(run) == ()


def test_a_run_without_any_point_is_refused() -> None:
    empty = np.zeros(0, dtype=np.float32)
    run = Run(Source("x"), "", "", "", np.array([1.0, 2.0]), np.zeros(3, dtype=np.int64), empty, empty)
    with pytest.raises(FormatError, match="no points"):
        find_components(run)


def test_the_same_run_gives_the_same_components() -> None:
    run = make_run([Eluting(ONE, 100.0, 20_000.0), Eluting(OTHER, 101.5, 9_000.0)], 200, seed=14)
    one, two = find_components(run), find_components(run)
    assert [(c.time_s, c.area) for c in one] == [(c.time_s, c.area) for c in two]


def test_a_run_of_noise_is_bounded_and_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    rng = np.random.default_rng(0)
    n_scans, n_points = 300, 60
    mz = np.sort(rng.integers(35, 200, (n_scans, n_points)), axis=1).astype(np.float32).ravel()
    run = Run(
        Source("noise"), "", "", "", np.arange(n_scans) * 0.5 + 60.0,
        np.arange(n_scans + 1, dtype=np.int64) * n_points, mz, rng.exponential(300.0, mz.size).astype(np.float32) + 20,
    )  # fmt: skip
    free = decompose(run)
    assert free.notes == ()
    monkeypatch.setattr("identify.runs.components.MAX_ION_PEAKS", 400)
    monkeypatch.setattr("identify.runs.components.MAX_CLUSTERS", 5)
    bounded = decompose(run)
    apart = [sum("overloaded" not in c.note for c in found.components) for found in (bounded, free)]
    assert apart[0] <= 5 < apart[1]
    assert ["peaks of single ions" in bounded.notes[0], "moments of elution" in bounded.notes[1]] == [True, True]
