from __future__ import annotations

import numpy as np
import pytest

from identify.records import Peaks
from identify.runs.flanks import assign_flanks
from identify.runs.model import Component
from identify.runs.shapes import Shape

MZ = np.array([43, 57, 91], dtype=np.int64)


def component(mz: tuple[int, ...], intensity: tuple[float, ...]) -> Component:
    peaks = Peaks(np.array(mz, dtype=float), np.array(intensity))
    return Component(
        1, 60.0, 58.0, 62.0, sum(intensity), 100.0, 0.1, 50.0, peaks, np.ones(len(mz)), 1.0, 1.0, is_saturated=False
    )


def test_tail_and_front_go_to_the_component_that_has_most_of_the_ion_and_overshoot_is_taken_off() -> None:
    misfit = np.zeros((40, 3))
    misfit[18, 0], misfit[11, 0], misfit[15, 1] = 8.0, 2.0, -5.0
    shapes = [Shape(10, np.ones(6)), Shape(12, np.ones(6))]
    gain, rest = assign_flanks(
        [component((43, 57), (100.0, 50.0)), component((43,), (40.0,))], shapes, MZ, misfit, width=2.0
    )
    assert gain.tolist() == [pytest.approx(5.0), 0.0]
    assert not rest.any()


def test_a_reading_too_high_or_at_a_foreign_ion_or_out_of_reach_stays_unexplained() -> None:
    misfit = np.zeros((40, 3))
    misfit[15, 0], misfit[15, 2], misfit[30, 1] = 60.0, 3.0, 3.0
    gain, rest = assign_flanks(
        [component((43, 57), (100.0, 50.0)), None],
        [Shape(10, np.ones(6)), Shape(20, np.ones(3))],
        MZ,
        misfit,
        width=2.0,
    )
    assert gain.tolist() == [0.0, 0.0]
    assert rest.sum() == pytest.approx(66.0)
