"""A calibration finds what is wrong with the probabilities, and stays away where it cannot know better."""

from __future__ import annotations

import numpy as np
import pytest

from identify.ranking.calibration import SHIPPED, CalibrationResult, Played, Shift, fit_shift, shift_model
from identify.ranking.model import default_model


def played_by(shift: Shift, n: int, seed: int = 3) -> list[Played]:
    """Invented answers drawn from the probabilities that a shift of the shipped numbers gives."""
    rng = np.random.default_rng(seed)
    out = []
    for number in range(n):
        listed, unlisted, elsewhere = rng.normal(0, 2, 4), rng.normal(0, 2, 2), float(rng.normal(0, 2))
        odds = np.concatenate([listed, unlisted + shift.unlisted, [elsewhere + shift.elsewhere]])
        chance = np.exp(shift.sharpness * odds)
        answer = int(rng.choice(7, p=chance / chance.sum()))
        right = answer if answer < 4 else None
        group = answer - 4 if 4 <= answer < 6 else None
        out.append(Played(listed, unlisted, elsewhere, right, group, part=number % 5))
    return out


def test_the_numbers_that_made_the_answers_are_found() -> None:
    made = Shift(sharpness=0.6, unlisted=1.0, elsewhere=-0.8)
    found = fit_shift(played_by(made, 3000), 3000)
    assert found.is_refitted
    assert found.shift.sharpness == pytest.approx(0.6, abs=0.05)
    assert found.shift.unlisted == pytest.approx(1.0, abs=0.25)
    assert found.shift.elsewhere == pytest.approx(-0.8, abs=0.25)
    assert found.loss_refitted < found.loss_shipped


def test_answers_of_the_shipped_calibration_change_next_to_nothing() -> None:
    found: CalibrationResult = fit_shift(played_by(SHIPPED, 1500), 1500)
    assert found.shift.sharpness == pytest.approx(1.0, abs=0.08)
    assert abs(found.shift.unlisted) < 0.2 and abs(found.shift.elsewhere) < 0.2


def test_too_few_replicates_change_nothing_and_say_so() -> None:
    found = fit_shift(played_by(Shift(0.3), 59), 59)
    assert not found.is_refitted and found.shift == SHIPPED
    assert "59, at least 60 needed" in found.note


def test_a_shifted_model_keeps_its_weights() -> None:
    model = default_model()
    shifted = shift_model(model, Shift(0.5, 1.0, -2.0))
    assert shifted.spectra == model.spectra and shifted.sharpness == 0.5
    assert shifted.unlisted.constant == pytest.approx(model.unlisted.constant + 1.0)
    assert shifted.elsewhere.constant == pytest.approx(model.elsewhere.constant - 2.0)
