"""Many queries on a terminal: one row each, the details left to the report."""

from __future__ import annotations

from typing import TYPE_CHECKING

from identify.records import Report
from identify.report.terminal import print_notices, printable
from identify.report.words import claim_probability_text, query_name, sentence

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

    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="bold")
    table.add_column("query", overflow="fold", max_width=34)
    table.add_column("min", justify="right")
    table.add_column("level")
    table.add_column("what the data support", overflow="fold", ratio=1)
    table.add_column("prob.", justify="right")
    for found in report.identifications:
        time_s = found.query.record.retention.time_s
        minutes = f"{time_s / 60.0:.2f}" if time_s is not None else ""
        claim = found.claim
        said = (claim.level.value, sentence(claim.statement), claim_probability_text(claim))
        cells = (query_name(found.query), minutes, *said)
        table.add_row(*(printable(cell, console) for cell in cells))
    console.print(table)
    console.print()
    print_notices(report, console)
