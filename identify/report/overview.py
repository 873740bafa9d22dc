"""Many queries on a terminal: one row each, the details left to the report."""

from __future__ import annotations

from typing import TYPE_CHECKING

from identify.records import Identification, Report
from identify.report.terminal import print_notices
from identify.report.words import claim_probability_text, minutes_text, sentence, visible_text

if TYPE_CHECKING:
    from rich.console import Console

DETAILS_UP_TO = 3
"""Queries shown with their candidates; from the next one on a row each says more."""


def render_overview(report: Report, console: Console) -> None:
    """Nothing comes out; a table with one row per query is printed on `console`, then what every report ends with.

    Parameters
    ----------
    report : Report
    console : rich.console.Console
    """
    from rich.table import Table
    from rich.text import Text

    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="bold")
    table.add_column("query", overflow="fold", max_width=34)
    table.add_column("min", justify="right")
    table.add_column("level")
    table.add_column("what the data support", overflow="fold", ratio=1)
    table.add_column("prob.", justify="right")
    for found in report.identifications:
        time_s = found.query.record.retention.time_s
        minutes = minutes_text(time_s).removesuffix(" min") if time_s is not None else ""
        cells = (_name(found), minutes, found.claim.level.value, sentence(found.claim.statement))
        table.add_row(*(Text(cell) for cell in cells), Text(claim_probability_text(found.claim)))
    console.print(table)
    console.print()
    print_notices(report, console)


def _name(found: Identification) -> str:
    record = found.query.record
    return visible_text(record.identity.name or record.title) or f"query {visible_text(found.query.id)}"
