"""How many of the accepted answers of a batch are expected to be wrong: a table and its curve."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from identify.ranking.batch import BatchError, estimate_batch_error
from identify.records import Identification
from identify.report.axes import Scale
from identify.report.contexts import BatchRow, BatchTable
from identify.report.words import NONE, probability_text

LEAST_QUERIES: Final = 10
"""Fewer queries than this make no batch: shares of them would say nothing."""
WIDTH, HEIGHT, LEFT, BOTTOM, TOP = 720.0, 250.0, 56.0, 200.0, 16.0
DASHES: Final = {"by the model": "", "by second-ranked candidates": ' stroke-dasharray="6 4"'}
"""Line style of each estimate."""


def build_batch_tables(identifications: Sequence[Identification]) -> tuple[BatchTable, ...]:
    """Tables for the compound and the isomer-group level; none for fewer than `LEAST_QUERIES` queries.

    Parameters
    ----------
    identifications : sequence of Identification

    Returns
    -------
    tuple of BatchTable
    """
    if len(identifications) < LEAST_QUERIES:
        return ()
    tables = []
    for level, groups in (("compound", False), ("isomer group", True)):
        errors = estimate_batch_error(identifications, groups=groups)
        rows = tuple(
            BatchRow(
                f"{error.threshold:g}",
                str(error.n_accepted),
                probability_text(error.wrong_share) if error.n_accepted else NONE,
                NONE if error.second_hit_share is None else probability_text(error.second_hit_share),
            )
            for error in errors
        )
        tables.append(BatchTable(level, rows, error_curve_svg(errors, f"batch-{level.split()[-1]}", level)))
    return tuple(tables)


def error_curve_svg(errors: Sequence[BatchError], name: str, level: str) -> str:
    """SVG of the expected share of wrong answers over the threshold, one line per estimate.

    Parameters
    ----------
    errors : sequence of BatchError
        In ascending order of their thresholds.
    name : str
        Start of the ids inside the drawing.
    level : str

    Returns
    -------
    str
        Empty when nothing is accepted at any threshold.
    """
    told = [error for error in errors if error.n_accepted]
    if not told:
        return ""
    lines = {
        "by the model": [(error.threshold, error.wrong_share) for error in told],
        "by second-ranked candidates": [
            (error.threshold, error.second_hit_share) for error in told if error.second_hit_share is not None
        ],
    }
    highest = max(0.1, *(share for points in lines.values() for _, share in points))
    across = Scale(0.5, 1.0, LEFT, WIDTH - 150.0)
    up = Scale(0.0, highest, BOTTOM, TOP)
    parts = [f'<path class="axis" d="M{LEFT:.0f} {TOP:.0f}V{BOTTOM:.0f}H{WIDTH - 150:.0f}"/>']
    for tick in (0.5, 0.6, 0.7, 0.8, 0.9, 1.0):
        x = across(tick)
        parts.append(
            f'<g class="tick"><text x="{x:.0f}" y="{BOTTOM + 18:.0f}" text-anchor="middle">{tick:g}</text></g>'
        )
    for share in (0.0, highest / 2, highest):
        text = f'<text x="{LEFT - 6:.0f}" y="{up(share) + 4:.0f}" text-anchor="end">{100 * share:.0f} %</text>'
        parts.append(
            f'<path class="grid" d="M{LEFT:.0f} {up(share):.1f}H{WIDTH - 150:.0f}"/><g class="tick">{text}</g>'
        )
    parts.append(
        f'<text x="{(LEFT + WIDTH - 150) / 2:.0f}" y="{BOTTOM + 40:.0f}" text-anchor="middle">threshold</text>'
    )
    for number, (label, points) in enumerate(lines.items()):
        path = " ".join(f"{across(threshold):.1f},{up(share):.1f}" for threshold, share in points)
        style = f'fill="none" stroke="currentColor" stroke-width="2"{DASHES[label]}'
        parts.append(f'<polyline points="{path}" {style}/>')
        y = TOP + 20.0 + 22.0 * number
        first = label.split()[1:]
        parts.append(f'<polyline points="{WIDTH - 140:.0f},{y:.0f} {WIDTH - 110:.0f},{y:.0f}" {style}/>')
        parts.append(f'<text x="{WIDTH - 104:.0f}" y="{y + 4:.0f}">{" ".join(first).replace(" candidates", "")}</text>')
    title = f"Expected share of wrong answers among those accepted, {level} level"
    words = "; ".join(
        f"at {error.threshold:g}: {100 * error.wrong_share:.0f} % of {error.n_accepted}" for error in told
    )
    return (
        f'<svg class="plot" viewBox="0 0 {WIDTH:.0f} {HEIGHT:.0f}" role="img" aria-labelledby="{name}-t {name}-d">'
        f'<title id="{name}-t">{title}</title><desc id="{name}-d">{words}</desc>{"".join(parts)}</svg>'
    )
