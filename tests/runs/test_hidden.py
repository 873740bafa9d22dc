"""Peaks without a common apex are found in what the components leave over, and nowhere else."""

from __future__ import annotations

import numpy as np

from identify.runs.hidden import find_hidden

PROFILE = np.array([0.1, 0.5, 0.95, 1.0, 0.97, 0.98, 0.6, 0.2, 0.05])
IONS = (100.0, 80.0, 40.0, 20.0, 8.0)


def rest_with_a_flat_peak(scale: float = 1000.0) -> np.ndarray:
    left = np.zeros((60, 12))
    left[20:29, 2:7] = scale * np.outer(PROFILE, IONS) / 100.0
    return left


def test_a_flat_peak_that_nothing_explains_is_found_with_its_own_shape() -> None:
    left = rest_with_a_flat_peak()
    ((cluster, shape),) = find_hidden(left, left, np.full(left.shape, 1.0), 4.0)
    assert cluster.ion.tolist() == [2, 3, 4, 5, 6]
    assert 23.0 < cluster.apex < 25.0
    assert abs(shape.on(20, 29) - np.array([0.1, 0.5, 0.95, 1.0, 0.97, 0.97, 0.6, 0.2, 0.05])).max() < 1e-9


def test_a_rest_that_is_a_small_part_of_the_signal_is_no_peak() -> None:
    left = rest_with_a_flat_peak()
    assert find_hidden(left, 3.0 * left, np.full(left.shape, 1.0), 4.0) == ()


def test_a_rest_near_the_noise_is_no_peak() -> None:
    left = rest_with_a_flat_peak(30.0)
    assert find_hidden(left, left, np.full(left.shape, 10.0), 4.0) == ()


def test_a_single_reading_is_no_peak() -> None:
    left = rest_with_a_flat_peak()
    left[:22] = left[23:] = 0.0
    assert find_hidden(left, left, np.full(left.shape, 1.0), 4.0) == ()
