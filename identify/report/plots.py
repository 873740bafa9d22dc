"""Spectra as drawings: pure functions from numbers to SVG text.

Every drawing names itself for screen readers (``role="img"``, title, description), has no colour or font of its own (classes,
styled by ``templates/plots.css``), and is one drawing for all widths: on a narrow screen the type grows and the labels that
only fit at the small size (class ``fine``) go away.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape

from identify.records import AlignedPeaks, Peaks
from identify.report.axes import Box, Label, PlacedLabel, Scale, choose_ticks, place_labels

WIDTH = 640.0
SMALL_TYPE, LARGE_TYPE = 13.0, 21.0
"""Type sizes in drawing units; the second is used where the drawing is shown at about half size."""
LEFT, RIGHT, TOP, BOTTOM = 46.0, 10.0, 26.0, 46.0
MIN_LABELLED = 1.5
"""Peaks below this relative intensity (percent) get no label."""

UNIT = "relative intensity, %"
MATCHED, QUERY_ONLY, ENTRY_ONLY = "matched", "query-only", "entry-only"


@dataclass(frozen=True, slots=True)
class MassMark:
    """A position on the m/z axis that deserves a word."""

    mz: float
    text: str


def spectrum_svg(
    peaks: Peaks, *, name: str, title: str, description: str, lowest_mz: int = 0, mark: MassMark | None = None
) -> str:
    """SVG of one spectrum, its principal peaks labelled.

    Parameters
    ----------
    peaks : Peaks
        m/z and intensity in any unit; drawn relative to the base peak.
    name : str
        Prefix of the ids inside the drawing, unique on the page.
    title, description : str
        What a screen reader says.
    lowest_mz : int
        Where the measurement starts; the axis begins there or at the first peak.
    mark : MassMark, optional
        A mass to point out, drawn as a dashed upright line.

    Returns
    -------
    str
    """
    height = 300.0
    masses, relative = peaks.mz.tolist(), peaks.relative.tolist()
    across = _mass_scale([*masses, *([mark.mz] if mark else [])], lowest_mz)
    up = Scale(0.0, 100.0, height - BOTTOM, TOP + LARGE_TYPE)
    frame = Box(LEFT, 0.0, WIDTH - RIGHT, height - BOTTOM)
    parts = [_grid(across, up, (0.0, 50.0, 100.0)), _mass_axis(across, height)]
    obstacles = [_stick_box(across(mz), up(value), up(0.0)) for mz, value in zip(masses, relative, strict=True)]
    parts.append(f'<g class="side"><text x="{LEFT:.0f}" y="16">{UNIT}</text></g>')
    obstacles.append(Box(LEFT, 0.0, LEFT + 0.55 * LARGE_TYPE * len(UNIT), LARGE_TYPE))
    if mark:
        tip = up(dict(zip(masses, relative, strict=True)).get(mark.mz, 0.0))
        drawn, box = _mass_mark(mark, across, frame, tip)
        parts.append(drawn)
        obstacles.append(box)
    parts.append(
        _sticks(((across(mz), up(0.0), up(value)) for mz, value in zip(masses, relative, strict=True)), "stick")
    )
    wanted = [
        Label(_ion_text(mz), across(mz), up(value))
        for value, mz in sorted(zip(relative, masses, strict=True), key=lambda pair: (-pair[0], pair[1]))
        if value >= MIN_LABELLED
    ]
    parts.append(_labels(_place(wanted, obstacles, frame)))
    return _svg(parts, height, name, title, description)


def mirror_svg(aligned: AlignedPeaks, *, name: str, title: str, description: str) -> str:
    """SVG of a mirror plot: query upwards, library entry downwards, matched and unmatched ions told apart by shape and colour.

    Parameters
    ----------
    aligned : AlignedPeaks
    name : str
        Prefix of the ids inside the drawing, unique on the page.
    title, description : str
        What a screen reader says.

    Returns
    -------
    str

    Notes
    -----
    Matched ions: full sticks with a round head. Only in the query: dashed sticks with a hollow diamond. Only in the entry: dotted
    sticks with a hollow square.
    """
    height = 390.0
    rows = list(zip(aligned.mz.tolist(), aligned.query.tolist(), aligned.entry.tolist(), strict=True))
    across = _mass_scale([row[0] for row in rows], aligned.lowest_mz)
    middle = (height - BOTTOM) / 2 + 2
    up = Scale(0.0, 100.0, middle, LARGE_TYPE + 8)
    down = Scale(0.0, 100.0, middle, height - BOTTOM - LARGE_TYPE - 4)
    frame = Box(LEFT, 0.0, WIDTH - RIGHT, height - BOTTOM)
    parts = [_grid(across, up, (50.0, 100.0)), _grid(across, down, (50.0, 100.0)), _mass_axis(across, height)]
    parts.append(f'<path class="axis" d="M{LEFT:.0f} {middle:.1f}H{across.end:.0f}"/>')
    wanted: list[tuple[float, Label]] = []
    sticks: dict[str, list[tuple[float, float, float]]] = {MATCHED: [], QUERY_ONLY: [], ENTRY_ONLY: []}
    for mz, query, entry in rows:
        kind = MATCHED if query > 0 and entry > 0 else QUERY_ONLY if query > 0 else ENTRY_ONLY
        upward = query >= entry
        high, low = (query, entry) if upward else (entry, query)
        near, far = (up, down) if upward else (down, up)
        sticks[kind].append((across(mz), far(low), near(high)))
        # One label an ion, at its higher side. One that does not match is news: it comes before a matched one as high.
        label = Label(_ion_text(mz), across(mz), near(high), upward, kind)
        wanted.append((high * (1.0 if kind == MATCHED else 2.0), label))
    for kind, group in sticks.items():
        parts += [_sticks(group, f"stick {kind}"), _heads(group, kind)]
    words, obstacles = _side_words(up, down)
    obstacles += [_stick_box(x, min(ends), max(ends)) for group in sticks.values() for x, *ends in group]
    labels = [
        label for weight, label in sorted(wanted, key=lambda item: (-item[0], item[1].x)) if weight >= MIN_LABELLED
    ]
    parts.append(_labels(_place(labels, obstacles, frame, n_large=8, n_fine=14)))
    parts.append(words)
    return _svg(parts, height, name, title, description)


def probability_bar_svg(probability: float, threshold: float | None = None) -> str:
    """SVG of a probability as a bar, with a tick at a threshold; decorative, the number stands beside it.

    Parameters
    ----------
    probability : float
        In [0, 1].
    threshold : float, optional
        In [0, 1].

    Returns
    -------
    str
    """
    limit = "" if threshold is None else f'<path class="limit" d="M{100 * threshold:.1f} 0V8"/>'
    return (
        '<svg class="chance" viewBox="0 0 100 8" preserveAspectRatio="none" aria-hidden="true">'
        f'<path class="rail" d="M0 4H100"/><path class="fill" d="M0 4H{100 * probability:.1f}"/>{limit}</svg>'
    )


def contribution_bar_svg(value: float, largest: float) -> str:
    """SVG of a signed contribution, to the right for and to the left against; decorative, the number stands beside it.

    Parameters
    ----------
    value : float
    largest : float
        Absolute value that fills half the bar; positive.

    Returns
    -------
    str
    """
    length = max(-50.0, min(50.0, 50.0 * value / largest)) if largest > 0 else 0.0
    kind = "for" if value >= 0 else "against"
    return (
        '<svg class="part" viewBox="-50 0 100 10" aria-hidden="true">'
        f'<path class="{kind}" d="M0 5h{length:.0f}"/></svg>'
    )


def _ion_text(mz: float) -> str:
    return f"{round(mz, 1):g}"


def _mass_scale(masses: Sequence[float], lowest_mz: int) -> Scale:
    low = min([*masses, float(lowest_mz)] if lowest_mz else masses, default=0.0)
    high = max(masses, default=low + 10.0)
    margin = max(3.0, 0.03 * (high - low))
    return Scale(low - margin, high + margin, LEFT, WIDTH - RIGHT)


def _grid(across: Scale, up: Scale, levels: Sequence[float]) -> str:
    lines = "".join(f"M{across.start:.0f} {up(level):.1f}H{across.end:.0f}" for level in levels)
    words = "".join(
        f'<text x="{LEFT - 6:.0f}" y="{up(level) + 4.5:.1f}" text-anchor="end">{level:.0f}</text>' for level in levels
    )
    return f'<path class="grid" d="{lines}"/><g class="tick">{words}</g>'


def _mass_axis(across: Scale, height: float) -> str:
    base = height - BOTTOM
    ticks = choose_ticks(across.low, across.high, 9)
    step = ticks[1] - ticks[0] if len(ticks) > 1 else 1.0
    # Every second tick keeps its number on a narrow screen.
    coarse = [tick for tick in ticks if len(ticks) < 4 or round(tick / step) % 2 == 0]
    fine = [tick for tick in ticks if tick not in coarse]
    marks = "".join(f"M{across(tick):.1f} {base:.1f}v5" for tick in (*coarse, *fine))
    words = "".join(_tick_word(across(tick), base, tick, "") for tick in coarse)
    words += "".join(_tick_word(across(tick), base, tick, ' class="fine"') for tick in fine)
    title = f'<text x="{WIDTH - RIGHT:.0f}" y="{height - 4:.1f}" text-anchor="end" class="unit">m/z</text>'
    return f'<path class="axis" d="M{LEFT:.0f} {base:.1f}H{across.end:.0f}{marks}"/><g class="tick">{words}{title}</g>'


def _tick_word(x: float, base: float, tick: float, extra: str) -> str:
    return f'<text x="{x:.1f}" y="{base + 21:.1f}" text-anchor="middle"{extra}>{tick:g}</text>'


def _mass_mark(mark: MassMark, across: Scale, frame: Box, tip: float) -> tuple[str, Box]:
    x, size = across(mark.mz), LARGE_TYPE
    width = 0.66 * size * len(mark.text)
    left = x - width - 6 if x + width + 6 > frame.right else x + 6
    # The line ends above the label of its own peak, where there is one.
    gap = 22.0 if tip < frame.bottom else 0.0
    line = f'<path class="mark" d="M{x:.1f} {frame.top + 4:.1f}V{tip - gap:.1f}"/>'
    word = f'<text class="mark" x="{left:.1f}" y="{frame.top + 18:.1f}">{escape(mark.text)}</text>'
    return line + word, Box(left - 4, frame.top, left + width + 4, frame.top + size)


def _stick_box(x: float, top: float, bottom: float) -> Box:
    return Box(x - 2.0, top + 0.5, x + 2.0, bottom)


def _sticks(sticks: Iterable[tuple[float, float, float]], classes: str) -> str:
    path = "".join(f"M{x:.4g} {foot:.0f}V{tip:.0f}" for x, foot, tip in sticks)
    return f'<path class="{classes}" d="{path}"/>' if path else ""


def _heads(sticks: Iterable[tuple[float, float, float]], kind: str) -> str:
    if kind == MATCHED:
        path = "".join(f"M{x:.4g} {foot:.0f}h0m0 {tip - foot:.0f}h0" for x, foot, tip in sticks)
    else:
        shape = "m0-4l4 4-4 4-4-4z" if kind == QUERY_ONLY else "m-3-3h6v6h-6z"
        path = "".join(f"M{x:.4g} {tip:.0f}{shape}" for x, _, tip in sticks)
    return f'<path class="head {kind}" d="{path}"/>' if path else ""


def _place(
    wanted: Sequence[Label], obstacles: Iterable[Box], frame: Box, n_large: int = 7, n_fine: int = 14
) -> tuple[PlacedLabel, ...]:
    return place_labels(
        wanted, obstacles, frame, size=SMALL_TYPE, large_size=LARGE_TYPE, n_large=n_large, n_fine=n_fine
    )


def _labels(placed: Sequence[PlacedLabel]) -> str:
    words = []
    for item in placed:
        classes = " ".join(word for word in (item.label.kind, "fine" if item.is_fine else "") if word)
        attribute = f' class="{classes}"' if classes else ""
        words.append(f'<text x="{item.x:.1f}" y="{item.baseline:.1f}"{attribute}>{escape(item.label.text)}</text>')
    return f'<g class="ion">{"".join(words)}</g>'


def _side_words(up: Scale, down: Scale) -> tuple[str, list[Box]]:
    left, width = LEFT + 4, 0.62 * LARGE_TYPE * 5
    top, bottom = up(100.0) - 6, down(100.0) + 0.8 * LARGE_TYPE
    words = f'<text x="{left:.0f}" y="{top:.1f}">query</text><text x="{left:.0f}" y="{bottom:.1f}">entry</text>'
    boxes = [Box(left, base - LARGE_TYPE, left + width, base + 3) for base in (top, bottom)]
    return f'<g class="side">{words}</g>', boxes


def _svg(parts: Sequence[str], height: float, name: str, title: str, description: str) -> str:
    name = escape(name)
    return (
        f'<svg class="plot" viewBox="0 0 {WIDTH:.0f} {height:.0f}" role="img" aria-labelledby="{name}-t {name}-d">'
        f'<title id="{name}-t">{escape(title)}</title><desc id="{name}-d">{escape(description)}</desc>'
        f"{''.join(parts)}</svg>"
    )
