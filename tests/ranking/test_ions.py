"""Ions are counted in the cell they belong to, on both sides, over the range in common."""

from __future__ import annotations

import numpy as np
import pytest

from identify.ranking.ions import CLOSE_NAMES, ION_NAMES, TILT_NAMES, compare_closely
from identify.records import CleanSpectrum, Peaks
from tests.ranking.builders import XYLENE, build_spectrum


def counted(query: dict[int, float], entry: dict[int, float], lowest: int | None = None) -> dict[str, float]:
    row = compare_closely(build_spectrum(query, lowest), [build_spectrum(entry)])[0]
    return {name: value for name, value in zip(CLOSE_NAMES, row, strict=True) if value and name in ION_NAMES}


def test_a_spectrum_compared_with_itself_agrees_in_every_ion() -> None:
    found = counted(XYLENE, XYLENE)
    once = {name: n for name, n in found.items() if name.startswith(("ions from", "ions below"))}
    assert all(name.endswith("within 0.1") for name in found)
    assert sum(once.values()) == len(XYLENE)
    assert sum(found.values()) - sum(once.values()) == pytest.approx(sum(XYLENE) / 100.0)


def test_missing_ions_are_told_apart_by_side_strength_and_floor() -> None:
    found = counted({50: 100.0, 60: 20.0, 70: 2.0}, {50: 100.0, 65: 2.5, 80: 50.0})
    assert found["ions below 30 %, missing in the entry"] == 1
    assert found["ions below 3 %, missing in the entry, below its floor"] == 1, "the entry shows nothing below 2.5 %"
    assert found["ions from 30 %, missing in the query"] == 1
    assert found["ions below 3 %, missing in the query, below its floor"] == 1, "the query's floor is 2 %"


def test_ions_below_the_range_in_common_do_not_count() -> None:
    assert counted({30: 90.0, 50: 100.0, 60: 20.0}, {50: 100.0, 60: 20.0}) == counted(
        {50: 100.0, 60: 20.0}, {50: 100.0, 60: 20.0}
    )


def test_a_tilt_alone_leaves_the_ions_in_agreement() -> None:
    mz = np.arange(50, 250, 10)
    flat = np.full(mz.size, 50.0)
    tilted = flat * np.exp(0.004 * (mz - 150))
    query, entry = (CleanSpectrum(Peaks(mz, i), None, 50) for i in (tilted, flat))
    row = dict(zip(CLOSE_NAMES, compare_closely(query, [entry])[0], strict=True))
    assert 0.3 < row["tilt"] < 0.4, "ln of the ratio per 100 m/z, shrunk towards 0"
    assert row["tilt, either way"] == row["tilt"] and row["tilt unlike that of the others"] == 0.0
    near = sum(n for name, n in row.items() if name.startswith("ions ") and "by m/z" not in name and "within" in name)
    assert near == mz.size


def test_the_tilt_of_the_others_is_the_median_of_the_best_entries() -> None:
    rng = np.random.default_rng(8)
    mz = np.arange(50, 200, 5)
    base = rng.uniform(5, 100, mz.size)
    entries = [CleanSpectrum(Peaks(mz, base * np.exp(k * 0.002 * (mz - 125))), None, 50) for k in (0, 1, 2)]
    rows = compare_closely(CleanSpectrum(Peaks(mz, base), None, 50), entries)
    slope, unlike = rows[:, 0], rows[:, TILT_NAMES.index("tilt unlike that of the others")]
    np.testing.assert_allclose(unlike, np.abs(slope - slope[1]))
    assert np.isfinite(rows).all()
