"""SPLASH against the published vectors; every key of the open records is checked in `tests/readers/test_massbank.py`."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.errors import SpectrumError
from identify.records import Source, SpectrumRecord
from identify.spectra.splash import compute_splash, verify_splash

# Vectors of the reference implementation's repository, found in standards.md 5.6 [F + C].
VECTORS = {
    "splash10-0002-0900000000-b112e4e059e1ecf98c5f": "138.0641:71.59 195.0815:261.7",
    "splash10-0udi-0049200000-ef488ecacceeaaadb4a2": (
        "303.07:100 662.26:1.2111 454.91:1.2023 433.25:0.8864 432.11:2.308 592.89:3.9052 259.99:0.6406 281.14:1.2549 "
        "451.34:1.1847 499.85:1.2374 482.14:2.4133 450:23.5191 483:1.0004 285.25:1.448 253.1:46.5731 254.11:3.247 "
        "259.13:6.9241 304.14:17.2795"
    ),
    "splash10-014i-4900000000-889a38f7ace2626a0435": (
        "66.0463:2.1827 105.0698:7.9976 103.0541:4.5676 130.065:8.6025 93.0572:0.2544 79.0542:4.4657 91.0541:2.5671 "
        "131.0728:2.6844 115.0541:1.3542 65.0384:0.6554 94.0412:0.5614 116.0494:1.2008 95.049:2.1338 117.0572:100 "
        "89.0385:11.7808 77.0385:3.3802 90.0463:35.6373 132.0806:2.343 105.0446:1.771"
    ),
}


def peaks(text: str) -> tuple[np.ndarray, np.ndarray]:
    pairs = np.array([[float(part) for part in pair.split(":")] for pair in text.split()])
    return pairs[:, 0], pairs[:, 1]


@pytest.mark.parametrize("key", VECTORS)
def test_published_vectors_are_reproduced(key: str) -> None:
    assert compute_splash(*peaks(VECTORS[key])) == key


@pytest.mark.parametrize("factor", [0.001, 9.99, 1e6])
def test_key_does_not_depend_on_the_unit_of_intensity(factor: float) -> None:
    mz, intensity = peaks("43:100 58:31.5 71:4.2")
    assert compute_splash(mz, intensity * factor) == compute_splash(mz, intensity)


@given(st.permutations(list(range(12))))
def test_key_does_not_depend_on_peak_order(order: list[int]) -> None:
    mz = np.array([41, 43, 43, 55, 57, 57, 69, 71, 85, 99, 113, 127.1])
    intensity = np.array([20, 100, 99, 20, 80, 80, 10, 10, 10, 10, 9.9999, 3])
    assert compute_splash(mz[order], intensity[order]) == compute_splash(mz, intensity)


@pytest.mark.parametrize(
    ("mz", "intensity"),
    [
        ([], []),
        ([43], [1, 2]),
        ([43], [0]),
        ([43], [-1]),
        ([-43], [1]),
        ([np.nan], [1]),
        ([43], [np.inf]),
        ([1e12], [1]),
    ],
)
def test_peaks_without_a_key_are_refused(mz: list[float], intensity: list[float]) -> None:
    with pytest.raises(SpectrumError):
        compute_splash(np.array(mz, dtype=float), np.array(intensity, dtype=float))


def record(splash: str, intensity: tuple[float, ...] = (71.59, 261.7)) -> SpectrumRecord:
    return SpectrumRecord(Source("a.txt", 3, 1), np.array([138.0641, 195.0815]), np.array(intensity), splash=splash)


def test_a_record_that_agrees_or_states_no_key_is_not_rejected() -> None:
    assert verify_splash(record("splash10-0002-0900000000-b112e4e059e1ecf98c5f")) is None
    assert verify_splash(record("")) is None


def test_a_changed_peak_is_a_splash_mismatch() -> None:
    found = verify_splash(record("splash10-0002-0900000000-b112e4e059e1ecf98c5f", (81.59, 261.7)))
    assert found is not None
    assert (found.reason, found.source, found.line) == ("splash mismatch", "a.txt", 3)
    assert "computed from the peaks" in found.expected


def test_peaks_that_cannot_be_hashed_do_not_agree_with_a_stated_key() -> None:
    found = verify_splash(record("splash10-0002-0900000000-b112e4e059e1ecf98c5f", (-1.0, 261.7)))
    assert found is not None and "no key" in found.expected
