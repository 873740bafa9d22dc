"""Nominal m/z: right for every chemistry where plain rounding is not."""

from __future__ import annotations

import time

import numpy as np
import pytest

from identify.spectra.nominal import is_accurate_mz, nominal_mz

CH2, H, ELECTRON = 14.01565006, 1.00782503, 0.00054858
C, O16, BR79 = 12.0, 15.99491462, 78.91833757


def test_alkyl_series_of_tetracontane_keeps_its_nominal_masses() -> None:
    # Masses computed from AME2020 nuclides; plain rounding fails from C32 (450.52) upwards.
    carbons = np.arange(3, 40)
    fragments = carbons * CH2 + H - ELECTRON
    molecular = 40 * CH2 + 2 * H - ELECTRON
    mz = np.append(fragments, molecular)
    expected = np.append(carbons * 14 + 1, 562)
    assert nominal_mz(mz).tolist() == expected.tolist()
    assert (np.floor(mz + 0.5) != expected).any(), "the naive rule must fail here, or the test shows nothing"


def test_brominated_diphenyl_ether_series_keeps_its_nominal_masses() -> None:
    # C12BrnO+ with all 79Br, n = 2..10; plain rounding gives 949 for the decabrominated one (nominal 950).
    n = np.arange(2, 11)
    mz = 12 * C + O16 + n * BR79 - ELECTRON
    expected = 144 + 16 + 79 * n
    assert nominal_mz(mz).tolist() == expected.tolist()
    assert (np.floor(mz + 0.5) != expected).any()


@pytest.mark.parametrize("mz", [15.0, 43.0, 399.0, 640.0, 950.0])
def test_integer_axis_is_unchanged(mz: float) -> None:
    assert nominal_mz(np.array([mz])).tolist() == [int(mz)]


def test_quadrupole_decimals_are_not_accurate_masses() -> None:
    rng = np.random.default_rng(1)
    mz = np.arange(40, 100) + rng.normal(0.05, 0.12, 60)
    assert not is_accurate_mz(np.sort(mz), np.ones(60))


def test_common_ions_with_four_decimals_are_accurate() -> None:
    # C2H3O+, C3H5+, C4H9+, C6H5+, C7H7+ (monoisotopic, electron removed).
    mz = np.array([41.0386, 43.0178, 57.0699, 77.0386, 91.0542])
    assert is_accurate_mz(mz, np.ones(5))


def test_a_dense_list_above_m_z_400_costs_no_more_than_a_sparse_one() -> None:
    # A megabyte of pasted text may hold this; with the sum of the window taken anew at each peak it took half a minute.
    mz = 450.0 + 0.002 * np.arange(60_000)
    started = time.process_time()
    nominal = nominal_mz(mz)
    assert time.process_time() - started < 5.0
    assert nominal[0] == 450
    assert (np.diff(nominal) >= 0).all()
