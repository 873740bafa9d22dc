"""A chromatogram as a drawing: summed signal over time, each component a mark that leads to its page."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from identify.report.axes import Box, Label, Scale, choose_ticks, place_labels

WIDTH, HEIGHT = 960.0, 300.0
LEFT, RIGHT, TOP, BOTTOM = 12.0, 12.0, 22.0, 44.0
SMALL_TYPE, LARGE_TYPE = 13.0, 30.0
N_COLUMNS = 900
LABELLED_FROM = 0.015
"""Components below this share of the upper edge are marked, but not numbered."""


@dataclass(frozen=True, slots=True)
class Mark:
    """One component on the time axis."""

    number: int
    time_s: float
    height: float
    style: str
    text: str
    address: str
    """Page of its query; empty when it has none."""


def chromatogram_svg(
    time_s: Sequence[float],
    intensity: Sequence[float],
    marks: Sequence[Mark],
    start_s: float,
    end_s: float,
    title: str,
    top: float = 0.0,
) -> str:
    """SVG of a chromatogram between two times.

    Parameters
    ----------
    time_s, intensity : sequences of float
    marks : sequence of Mark
    start_s, end_s : float
        Window shown, in seconds.
    title : str
    top : float
        Signal at the upper edge; higher peaks are cut. 0 for that of the highest.

    Returns
    -------
    str
    """
    inside = [(t, y) for t, y in zip(time_s, intensity, strict=True) if start_s <= t <= end_s]
    across = Scale(start_s, end_s, LEFT, WIDTH - RIGHT)
    top = top or max((y for _, y in inside), default=1.0) or 1.0
    up = Scale(0.0, top, HEIGHT - BOTTOM, TOP + SMALL_TYPE + 6)
    columns = _envelope(inside, across)
    line = "".join(
        f"{'L' if place else 'M'}{x:.1f} {up(min(y, 1.04 * top)):.1f}" for place, (x, y) in enumerate(columns)
    )
    shown = [mark for mark in marks if start_s <= mark.time_s <= end_s]
    parts = [
        _axis(start_s, end_s, across),
        f'<path class="trace" d="{line}"/>',
        *(_mark(m, across, up, top) for m in shown),
    ]
    labels = [
        Label(str(m.number), across(m.time_s), up(min(m.height, top)))
        for m in sorted(shown, key=lambda m: -m.height)
        if m.height > LABELLED_FROM * top
    ]
    frame = Box(LEFT, 0.0, WIDTH - RIGHT, HEIGHT - BOTTOM)
    placed = place_labels(labels[:60], [], frame, size=SMALL_TYPE, large_size=LARGE_TYPE, n_large=6, n_fine=40)
    words = "".join(
        f'<text x="{item.x:.1f}" y="{item.baseline:.1f}"{_fine(item.is_fine)}>{item.label.text}</text>'
        for item in placed
    )
    return (
        f'<svg class="plot chromatogram" viewBox="0 0 {WIDTH:.0f} {HEIGHT:.0f}" role="group" aria-label="{escape(title)}">'
        f'{"".join(parts)}<g class="ion" aria-hidden="true">{words}</g></svg>'
    )


def _fine(is_fine: bool) -> str:
    return ' class="fine"' if is_fine else ""


def _envelope(points: Sequence[tuple[float, float]], across: Scale) -> list[tuple[float, float]]:
    """At most two points a column, its lowest and its highest: a narrow peak never vanishes."""
    if len(points) <= 2 * N_COLUMNS:
        return [(across(t), y) for t, y in points]
    columns: dict[int, list[tuple[float, float]]] = {}
    for t, y in points:
        columns.setdefault(int(across(t) * N_COLUMNS / WIDTH), []).append((t, y))
    drawn: list[tuple[float, float]] = []
    for column in columns.values():
        ends = {min(column, key=lambda point: point[1]), max(column, key=lambda point: point[1])}
        drawn += [(across(t), y) for t, y in sorted(ends)]
    return drawn


def _axis(start_s: float, end_s: float, across: Scale) -> str:
    base = HEIGHT - BOTTOM
    ticks = choose_ticks(start_s / 60.0, end_s / 60.0, 12)
    marks = "".join(f"M{across(60.0 * tick):.1f} {base:.1f}v5" for tick in ticks)
    words = "".join(
        f'<text x="{across(60.0 * tick):.1f}" y="{base + 19:.1f}" text-anchor="middle"{_fine(place % 3 != 0)}>{tick:g}</text>'
        for place, tick in enumerate(ticks)
    )
    unit = f'<text x="{WIDTH - RIGHT:.0f}" y="{HEIGHT - 5:.1f}" text-anchor="end" class="unit">min</text>'
    path = f'<path class="axis" d="M{LEFT:.0f} {base:.1f}H{across.end:.0f}{marks}"/>'
    return f'{path}<g class="tick">{words}{unit}</g>'


def _mark(mark: Mark, across: Scale, up: Scale, top: float) -> str:
    x, foot, tip = across(mark.time_s), HEIGHT - BOTTOM, up(min(mark.height, top))
    drawn = f'<path class="hit" d="M{x:.1f} {foot:.1f}V{tip:.1f}"/><path class="mark {mark.style}" d="M{x:.1f} {foot:.1f}v-8"/>'
    title = f"<title>{escape(mark.text)}</title>"
    if not mark.address:
        return f"<g>{title}{drawn}</g>"
    # The table below holds the same links for the keyboard; hundreds of stops in a drawing would be in the way.
    return f'<a href="{escape(mark.address)}" tabindex="-1">{title}{drawn}</a>'
