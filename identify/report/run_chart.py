"""The chromatogram as a drawing: total signal over time with labelled peaks, and the numbers a script needs to redraw a part."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape
from itertools import pairwise

import numpy as np

from identify.records import FloatArray
from identify.report.axes import choose_ticks
from identify.report.run_words import answer_text
from identify.report.words import visible_text
from identify.runs.findings import Finding, RunFindings
from identify.runs.model import ComponentKind

WIDTH, HEIGHT = 1120.0, 480.0
LEFT, RIGHT, BAND, BASE = 56.0, 12.0, 190.0, 438.0
"""The plot lies between `LEFT` and ``WIDTH - RIGHT``, `BAND` (labels above it) and `BASE`."""
LABEL_WIDTH = 15.0
MAX_LABEL = 22
MAX_MARKS = 150
"""Components the script may label, largest first."""
BUCKETS = 1100
SMALLEST_SHARE = 0.0002


@dataclass(frozen=True, slots=True)
class PeakMark:
    """A component on the chart: where it is, how it is called, where it leads."""

    minutes: float
    height: float
    area: float
    label: str
    name: str
    target: str


def chart_marks(run: RunFindings, targets: Sequence[str]) -> tuple[PeakMark, ...]:
    """Marks of the components that may carry a label, largest first.

    Parameters
    ----------
    run : RunFindings
    targets : sequence of str
        Anchor of each finding's table row or section, as many as findings.

    Returns
    -------
    tuple of PeakMark
    """
    total = run.decomposition.total
    pairs = [(f, target) for f, target in zip(run.findings, targets, strict=True) if not _is_gas(f)]
    pairs.sort(key=lambda pair: -pair[0].component.area)
    marks = []
    for finding, target in pairs[:MAX_MARKS]:
        c = finding.component
        scan = int(np.argmin(np.abs(run.decomposition.time_s - c.time_s)))
        answer = visible_text(answer_text(finding))
        plain = answer.removeprefix("solvent front: ").split(" (such as", maxsplit=1)[0]
        short = plain if len(plain) <= MAX_LABEL else plain[: MAX_LABEL - 1].rstrip() + "…"
        if not finding.is_explained and not finding.is_background:
            short = "not named"
        name = f"Component {c.number} at {c.time_s / 60:.2f} min: {answer}"
        marks.append(
            PeakMark(c.time_s / 60.0, float(total[scan]), c.area, f"{c.time_s / 60:.2f} {short}", name, target)
        )
    return tuple(marks)


def _is_gas(finding: Finding) -> bool:
    return finding.component.kind in (ComponentKind.AIR, ComponentKind.BLEED)


def chart_top(run: RunFindings) -> float:
    """Intensity at the upper end of the first view: that of the highest peak outside the solvent front.

    Parameters
    ----------
    run : RunFindings

    Returns
    -------
    float
        Positive.
    """
    inside = np.ones(run.decomposition.time_s.size, dtype=np.bool_)
    for finding in run.findings:
        if finding.component.kind is ComponentKind.SOLVENT:
            c = finding.component
            inside &= (run.decomposition.time_s < c.start_s - 2.0) | (run.decomposition.time_s > c.end_s + 2.0)
    seen = run.decomposition.total[inside]
    return 1.05 * float(seen.max()) if seen.size and seen.max() > 0 else 1.0


def chart_range(run: RunFindings) -> tuple[float, float]:
    """Minutes of the first view: from the first scan to a little beyond the last component that matters.

    Parameters
    ----------
    run : RunFindings

    Returns
    -------
    tuple of float
    """
    first, last = float(run.decomposition.time_s[0]) / 60.0, float(run.decomposition.time_s[-1]) / 60.0
    least = SMALLEST_SHARE * run.shares.compounds
    ends = [f.component.time_s / 60.0 for f in run.findings if not f.is_background and f.component.area >= least]
    return first, min(last, first + 1.1 * (max(ends) - first)) if ends else last


def chromatogram_svg(run: RunFindings, marks: Sequence[PeakMark], *, name: str) -> str:
    """SVG of the run, its largest peaks labelled and linked.

    Parameters
    ----------
    run : RunFindings
    marks : sequence of PeakMark
        Largest first.
    name : str
        Prefix of the ids inside the drawing, unique on the page.

    Returns
    -------
    str
        Stands by itself; the page's script redraws the parts of class ``line``, ``labels`` and ``ticks`` when zoomed.
    """
    minutes, total, top = run.decomposition.time_s / 60.0, run.decomposition.total, chart_top(run)
    low, high = chart_range(run)
    scale = (WIDTH - RIGHT - LEFT) / max(high - low, 1e-9)
    rise = (BASE - BAND) / top
    title = f"Chromatogram of {visible_text(run.run.source.path)}"
    text = (
        f"Total signal from {low:.1f} to {high:.1f} minutes. The labelled peaks are listed in the table of components."
    )
    ticks = choose_ticks(low, high, 12)
    tick_marks = "".join(f"M{LEFT + (tick - low) * scale:.1f} {BASE:.0f}v5" for tick in ticks)
    tick_words = "".join(
        f'<text x="{LEFT + (tick - low) * scale:.1f}" y="{BASE + 20:.0f}" text-anchor="middle">{tick:g}</text>'
        for tick in ticks
    )
    labels = []
    for x, mark in _spread([m for m in marks if low <= m.minutes <= high], low, scale):
        y = max(BAND, BASE - mark.height * rise)
        labels.append(
            f'<a href="#{escape(mark.target)}"><title>{escape(mark.name)}</title>'
            f'<path d="M{x:.1f} {BAND - 6:.0f}V{y - 3:.1f}"/>'
            f'<text transform="translate({x + 4:.1f} {BAND - 10:.0f}) rotate(-90)">{escape(mark.label)}</text></a>'
        )
    return (
        f'<svg class="chart" viewBox="0 0 {WIDTH:.0f} {HEIGHT:.0f}" role="group" aria-labelledby="{name}-t {name}-d">'
        f'<title id="{name}-t">{escape(title)}</title><desc id="{name}-d">{escape(text)}</desc>'
        f'<clipPath id="{name}-clip"><path d="M{LEFT:.0f} {BAND:.0f}H{WIDTH - RIGHT:.0f}V{BASE:.0f}H{LEFT:.0f}z"/></clipPath>'
        f'<path class="line" clip-path="url(#{name}-clip)" d="{_line(minutes, total, low, scale, rise)}"/>'
        f'<path class="axis" d="M{LEFT:.0f} {BASE:.0f}H{WIDTH - RIGHT:.0f}"/>'
        f'<g class="ticks"><path d="{tick_marks}"/>{tick_words}</g>'
        f'<text class="unit" x="{WIDTH - RIGHT:.0f}" y="{HEIGHT - 4:.0f}" text-anchor="end">minutes</text>'
        f'<text class="unit" x="{LEFT:.0f}" y="{BAND - 4:.0f}" text-anchor="end">signal</text>'
        f'<g class="labels">{"".join(labels)}</g></svg>'
    )


def _spread(marks: Sequence[PeakMark], low: float, scale: float) -> list[tuple[float, PeakMark]]:
    """Labels that do not overlap, larger components first, in the order of time."""
    placed: list[tuple[float, PeakMark]] = []
    for mark in marks:
        x = LEFT + (mark.minutes - low) * scale
        if all(abs(x - other) >= LABEL_WIDTH for other, _ in placed):
            placed.append((x, mark))
    return sorted(placed, key=lambda pair: pair[0])


def _line(minutes: FloatArray, total: FloatArray, low: float, scale: float, rise: float) -> str:
    """Path of the lowest and highest reading of each of `BUCKETS` pieces: what a line through all would cover."""
    inside = minutes <= low + (WIDTH - RIGHT - LEFT) / scale
    minutes, total = minutes[inside], total[inside]
    edges = np.unique(np.linspace(0, minutes.size, min(BUCKETS, minutes.size) + 1).astype(int))
    parts = []
    for start, end in pairwise(edges.tolist()):
        piece = total[start:end]
        for place in sorted({int(np.argmin(piece)), int(np.argmax(piece))}):
            x, y = LEFT + (minutes[start + place] - low) * scale, BASE - min(float(piece[place]) * rise, 4 * BASE)
            parts.append(f"{x:.1f} {y:.1f}")
    return "M" + "L".join(parts)


def chart_data(run: RunFindings, marks: Sequence[PeakMark]) -> str:
    """JSON text for the script, safe inside a ``script`` element.

    Parameters
    ----------
    run : RunFindings
    marks : sequence of PeakMark

    Returns
    -------
    str
        Times in minutes, total signal, marks, first view's upper end and the geometry.
    """
    data = {
        "box": [LEFT, BAND, WIDTH - RIGHT, BASE],
        "top": chart_top(run),
        "range": [round(value, 4) for value in chart_range(run)],
        "minutes": [round(float(value), 4) for value in run.decomposition.time_s / 60.0],
        "total": [round(float(value)) for value in run.decomposition.total],
        "marks": [[round(m.minutes, 4), round(m.height), m.label, m.name, m.target] for m in marks],
        "gap": LABEL_WIDTH,
    }
    return json.dumps(data, separators=(",", ":")).replace("<", "\\u003c").replace("&", "\\u0026")
