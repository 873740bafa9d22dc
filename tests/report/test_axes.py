"""Scales, ticks and label places."""

from __future__ import annotations

import itertools
import random

import pytest

from identify.report.axes import Box, Label, Scale, choose_ticks, place_labels

FRAME = Box(40.0, 0.0, 630.0, 250.0)


def test_scale_maps_ends_and_survives_an_empty_range() -> None:
    scale = Scale(10.0, 20.0, 100.0, 0.0)
    assert [scale(value) for value in (10.0, 15.0, 20.0)] == [100.0, 50.0, 0.0]
    assert Scale(5.0, 5.0, 100.0, 0.0)(7.0) == 100.0


@pytest.mark.parametrize(("low", "high"), [(38.0, 131.0), (0.0, 1.0), (35.0, 1050.0), (119.5, 121.5), (-3.0, 3.0)])
@pytest.mark.parametrize("n_wanted", [1, 4, 9])
def test_ticks_are_round_inside_and_about_as_many_as_wanted(low: float, high: float, n_wanted: int) -> None:
    ticks = choose_ticks(low, high, n_wanted)
    assert all(low - 1e-6 <= tick <= high + 1e-6 for tick in ticks)
    steps = {round(b - a, 9) for a, b in itertools.pairwise(ticks)}
    assert len(steps) <= 1
    assert all(float(f"{step:.0e}"[0]) in (1.0, 2.0, 5.0) for step in steps)
    assert len(ticks) <= 2 * n_wanted + 2 and (n_wanted < 4 or len(ticks) >= n_wanted / 2.5)


def test_ticks_of_an_empty_range_are_its_value() -> None:
    assert choose_ticks(7.0, 7.0, 5) == (7.0,)


def _boxes(seed: int) -> tuple[list[Label], list[Box]]:
    source = random.Random(seed)
    peaks = [(source.uniform(45, 625), source.uniform(20, 245)) for _ in range(80)]
    labels = [Label(str(int(x)), x, y) for x, y in sorted(peaks, key=lambda peak: peak[1])]
    return labels, [Box(x - 2, y + 0.5, x + 2, 250.0) for x, y in peaks]


@pytest.mark.parametrize("seed", range(8))
def test_labels_touch_neither_each_other_nor_sticks_nor_the_frame(seed: int) -> None:
    labels, sticks = _boxes(seed)
    placed = place_labels(labels, sticks, FRAME, size=13, large_size=21, n_large=7, n_fine=14)
    assert len(placed) >= 5
    for sizes in ((21, False), (13, True)):
        boxes = []
        for item in placed:
            if item.is_fine and not sizes[1]:
                continue
            # Independent geometry: digits no wider than 0.6 em, capitals 0.73 em high.
            half = 0.3 * sizes[0] * len(item.label.text)
            boxes.append(Box(item.x - half, item.baseline - 0.73 * sizes[0], item.x + half, item.baseline))
        assert not any(a.overlaps(b) for a, b in itertools.combinations(boxes, 2))
        assert not any(box.overlaps(stick) for box in boxes for stick in sticks)
        assert all(box.left >= FRAME.left and box.right <= FRAME.right and box.top >= 0 for box in boxes)


def test_the_most_wanted_label_wins() -> None:
    labels = [Label("105", 300.0, 50.0), Label("106", 302.0, 50.0)]
    placed = place_labels(labels, [], FRAME, size=13, large_size=21, n_large=1, n_fine=0)
    assert [item.label.text for item in placed] == ["105"]


def test_downward_labels_stand_below_their_tip() -> None:
    (placed,) = place_labels(
        [Label("77", 300.0, 100.0, upward=False)], [], FRAME, size=13, large_size=21, n_large=1, n_fine=0
    )
    assert placed.baseline > 100.0 + 0.7 * 21
