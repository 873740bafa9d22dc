"""Settings: what was asked becomes complete, or is refused in one form of message."""

from __future__ import annotations

import pytest

from identify.errors import UsageError
from identify.settings import Settings, resolve


def test_options_win_over_the_text_and_the_rest_is_the_default() -> None:
    found = resolve("top = 5\nclaim_threshold = 0.8\n[weighting]\nmz_power = 1", top=7, claim_threshold=None)
    assert (found.top, found.claim_threshold, found.weighting.mz_power) == (7, 0.8, 1.0)
    assert found.cleaning == Settings().cleaning


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("top = 5.0", "'top' = 5.0"),
        ("top = true", "'top' = True"),
        ("top = 0", "0"),
        ("colour = 1", "'colour'"),
        ("weighting = 1", "'weighting' = 1"),
        ("cleaning = {noise = 1}", "'cleaning.noise'"),
        ("tolerance_ppm = nan", "nan"),
        ("tolerance_ppm = inf", "inf"),
        ("top =", "Invalid value"),
        # A hostile file: more digits than Python reads, a number no float holds, brackets a thousand deep.
        (f"top = {'1' * 5000}", "Exceeds the limit"),
        (f"tolerance_ppm = {'1' * 400}", "'tolerance_ppm' = 111"),
        (f"top = {'[' * 5000}", "maximum recursion depth"),
    ],
)
def test_what_makes_no_sense_is_refused(text: str, found: str) -> None:
    with pytest.raises(UsageError) as caught:
        resolve(text, where="mine.toml")
    assert caught.value.found.startswith(found)
    assert caught.value.expected
