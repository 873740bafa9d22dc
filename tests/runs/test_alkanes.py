"""n-Alkanes found in runs by spectrum and spacing, and the ladders made of them."""

from __future__ import annotations

import pytest

from identify.retention import linear_index
from identify.runs.alkanes import alkane_carbons, find_alkane_ladder
from identify.runs.components import find_components
from tests.runs.synthetic_runs import Eluting, apex_time_s, make_run


def alkane(carbons: int, molecular_ion: float = 4.0) -> dict[int, float]:
    """A smooth n-alkane-like spectrum: CnH2n+1 falling from m/z 57, its neighbours, the molecular ion (invented heights)."""
    spectrum: dict[int, float] = {43: 85.0, 41: 35.0, 42: 10.0, 55: 28.0, 56: 15.0, 57: 100.0}
    value = 65.0
    for mz in range(71, 14 * carbons - 27, 14):
        spectrum[mz], spectrum[mz - 1], spectrum[mz - 2] = value, 0.2 * value, 0.25 * value
        value *= 0.68
    if molecular_ion:
        spectrum[14 * carbons + 2] = molecular_ion
    return spectrum


def alkane_run(
    carbons: list[int], *, without_ion: tuple[int, ...] = (), extra: tuple[Eluting, ...] = (), seed: int = 1
):
    """Alkanes whose spacing widens by 4 % from one to the next."""
    places = {n: 60.0 + sum(50.0 * 1.04**k for k in range(n - min(carbons))) for n in carbons}
    peaks = [Eluting(alkane(n, 0.0 if n in without_ion else 4.0), places[n], 40_000.0) for n in carbons]
    run = make_run([*peaks, *extra], int(max(places.values())) + 80, seed=seed)
    return run, {n: apex_time_s(peak) / 60.0 for n, peak in zip(carbons, peaks, strict=True)}


def test_the_molecular_ion_gives_the_carbon_number() -> None:
    run, _ = alkane_run([8, 11, 14])
    assert [alkane_carbons(c) for c in find_components(run)] == [8, 11, 14]


def test_a_ketone_like_and_an_aromatic_spectrum_are_no_alkanes() -> None:
    ketone = Eluting({43: 100.0, 58: 60.0, 57: 35.0, 71: 20.0, 85: 12.0, 128: 5.0}, 60.0, 30_000.0)
    aromatic = Eluting({91: 100.0, 106: 50.0, 77: 12.0, 51: 8.0}, 120.0, 30_000.0)
    found = find_components(make_run([ketone, aromatic], 200, seed=2))
    assert [alkane_carbons(c) for c in found] == [None, None]


def test_an_alkane_run_gives_its_ladder() -> None:
    run, times = alkane_run(list(range(8, 15)))
    ladder = find_alkane_ladder(find_components(run), alkanes_only=True)
    assert ladder is not None
    assert ladder.carbons == tuple(range(8, 15))
    assert ladder.times == pytest.approx(list(times.values()), abs=0.01)


def test_alkanes_without_molecular_ion_are_counted_between_their_neighbours() -> None:
    run, times = alkane_run(list(range(8, 15)), without_ion=(10, 11))
    ladder = find_alkane_ladder(find_components(run), alkanes_only=True)
    assert ladder is not None
    assert ladder.carbons == tuple(range(8, 15))
    assert ladder.times[2] == pytest.approx(times[10], abs=0.01)


def test_in_a_sample_the_last_of_the_isomers_is_the_n_alkane() -> None:
    branched = Eluting(alkane(10), 150.0, 30_000.0)
    other = Eluting({91: 100.0, 106: 50.0, 77: 12.0, 51: 8.0}, 190.0, 60_000.0)
    run, times = alkane_run([8, 9, 10, 11], extra=(branched, other), seed=3)
    ladder = find_alkane_ladder(find_components(run), alkanes_only=False)
    assert ladder is not None
    assert dict(zip(ladder.carbons, ladder.times, strict=True)) == pytest.approx(times, abs=0.01)
    assert linear_index(times[10], ladder) == pytest.approx(1000.0, abs=2.0)


def test_two_alkanes_make_no_ladder() -> None:
    run, _ = alkane_run([9, 12])
    assert find_alkane_ladder(find_components(run), alkanes_only=True) is None


def test_an_alkane_far_off_the_spacing_of_the_others_is_no_rung() -> None:
    stray = Eluting(alkane(13), 420.0, 40_000.0)
    run = make_run([*(Eluting(alkane(8 + k), 60.0 + 40.0 * k, 40_000.0) for k in range(4)), stray], 500, seed=4)
    ladder = find_alkane_ladder(find_components(run), alkanes_only=True)
    assert ladder is not None
    assert ladder.carbons == (8, 9, 10, 11)
