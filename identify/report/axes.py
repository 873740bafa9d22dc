"""Scales, ticks and label places for plots: plain geometry, no markup."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Scale:
    """Linear map from data to drawing units."""

    low: float
    high: float
    start: float
    end: float

    def __call__(self, value: float) -> float:
        """Drawing coordinate of `value`."""
        span = self.high - self.low
        return self.start if span <= 0 else self.start + (value - self.low) * (self.end - self.start) / span


def choose_ticks(low: float, high: float, n_wanted: int) -> tuple[float, ...]:
    """Round tick values inside [low, high], about `n_wanted` of them.

    Parameters
    ----------
    low, high : float
        With ``low < high``; anything else gives the single tick `low`.
    n_wanted : int
        At least 1.

    Returns
    -------
    tuple of float
        Multiples of 1, 2 or 5 times a power of ten.

    Examples
    --------
    >>> choose_ticks(38, 131, 5)
    (40.0, 60.0, 80.0, 100.0, 120.0)
    """
    if not high > low:
        return (float(low),)
    rough = (high - low) / max(1, n_wanted)
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(factor * power for factor in (1.0, 2.0, 5.0, 10.0) if factor * power >= rough * 0.8)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return tuple(round(count * step, 9) for count in range(first, last + 1))


@dataclass(frozen=True, slots=True)
class Box:
    """Rectangle in drawing units, y downwards."""

    left: float
    top: float
    right: float
    bottom: float

    def overlaps(self, other: Box) -> bool:
        """Whether the two share any area."""
        return (
            self.left < other.right and other.left < self.right and self.top < other.bottom and other.top < self.bottom
        )


@dataclass(frozen=True, slots=True)
class Label:
    """Text that wants to stand at the tip of a stick."""

    text: str
    x: float
    tip: float
    upward: bool = True
    kind: str = ""
    """Goes through to the drawing: which class of peak the label belongs to."""


@dataclass(frozen=True, slots=True)
class PlacedLabel:
    """Label with the place it got; `is_fine` marks those that only fit at the small type size."""

    label: Label
    x: float
    baseline: float
    is_fine: bool


COLUMN_WIDTH = 32.0
GLYPH_WIDTH = 0.68
"""Width of a bold digit in ems, a little generous."""


def place_labels(
    wanted: Sequence[Label],
    obstacles: Iterable[Box],
    frame: Box,
    *,
    size: float,
    large_size: float,
    n_large: int,
    n_fine: int,
) -> tuple[PlacedLabel, ...]:
    """Labels that fit without touching each other, a stick or the frame, most wanted first.

    Parameters
    ----------
    wanted : sequence of Label
        In order of importance.
    obstacles : iterable of Box
        Sticks and other text.
    frame : Box
        Labels stay inside.
    size, large_size : float
        Type size on a wide and on a narrow screen, in drawing units: the same drawing is shown smaller there, so its type is
        set larger.
    n_large, n_fine : int
        Most labels that fit at the large size; most further ones that fit at the small size only.

    Returns
    -------
    tuple of PlacedLabel

    Notes
    -----
    Greedy: each label tries to stand centred on its tip, then a little to the right or left, then
    beside it; if nothing is free it
    is left out. Only obstacles in the same columns of the drawing are looked at.
    """
    blocked = _Columns(obstacles)
    placed: list[PlacedLabel] = []
    for type_size, limit, is_fine in ((large_size, n_large, False), (size, n_fine, True)):
        used = {item.label for item in placed}
        n_here = 0
        for label in wanted:
            if n_here == limit:
                break
            if label in used:
                continue
            found = _free_place(label, type_size, blocked, frame)
            if found is None:
                continue
            x, box = found
            baseline = box.bottom if label.upward else box.top + 0.75 * type_size
            placed.append(PlacedLabel(label, x, baseline, is_fine))
            blocked.add(box)
            n_here += 1
    return tuple(placed)


class _Columns:
    """Boxes filed by the columns of the drawing they stand in, so that a test looks at neighbours only."""

    def __init__(self, boxes: Iterable[Box]) -> None:
        self._columns: dict[int, list[Box]] = {}
        for box in boxes:
            self.add(box)

    def add(self, box: Box) -> None:
        for column in self._range(box):
            self._columns.setdefault(column, []).append(box)

    def touches(self, box: Box) -> bool:
        return any(box.overlaps(other) for column in self._range(box) for other in self._columns.get(column, ()))

    @staticmethod
    def _range(box: Box) -> range:
        return range(int(box.left // COLUMN_WIDTH), int(box.right // COLUMN_WIDTH) + 1)


def _free_place(label: Label, size: float, blocked: _Columns, frame: Box) -> tuple[float, Box] | None:
    width, gap = size * (GLYPH_WIDTH * len(label.text) + 0.25), 0.35 * size
    for shift in (0.0, 0.3 * width, -0.3 * width, 0.5 * width, -0.5 * width):
        x = label.x + shift
        if label.upward:
            box = Box(x - width / 2, label.tip - gap - 0.75 * size, x + width / 2, label.tip - gap)
        else:
            box = Box(x - width / 2, label.tip + gap, x + width / 2, label.tip + gap + 0.75 * size)
        inside = (
            box.left >= frame.left and box.right <= frame.right and box.top >= frame.top and box.bottom <= frame.bottom
        )
        if inside and not blocked.touches(box):
            return x, box
    return None
