"""Findings of runs on a terminal: one line per component, then what is left unexplained and what to do next."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from identify.records import ClaimLevel
from identify.report.run_words import component_row, follow_up_plans, share_lines, share_text
from identify.report.terminal import print_notices
from identify.report.words import NO_BREAK, counted, file_name, sentence, visible_text
from identify.runs.findings import Finding, RunFindings, RunsReport

if TYPE_CHECKING:
    from rich.console import Console

LISTED_SHARE = 0.0005
"""Components below this share of the signal are counted, not listed (all stand in CSV, JSON and the report)."""
UNEXPLAINED_LISTED, PLANS_LISTED = 8, 5


def render_run_terminal(found: RunsReport, console: Console) -> None:
    """Nothing comes out; the findings are printed on `console`.

    Parameters
    ----------
    found : RunsReport
    console : rich.console.Console
    """
    for run in found.runs:
        _print_run(run, console)
    if found.unknowns:
        _line(
            console,
            f"{counted(len(found.unknowns), 'component')} shown by more than one run, each identified once:",
            bold=True,
        )
        for unknown in found.unknowns[:20]:
            members = ", ".join(f"run {run} component {number}" for run, number in unknown.members)
            _line(console, f"  {unknown.number}: {members}")
        console.print()
    plans = follow_up_plans(found.runs)
    if plans:
        _line(console, "Next measurements, those that decide most signal first", bold=True)
        for plan in plans[:PLANS_LISTED]:
            where = f"component {plan.component}, {plan.time}" + (f", run {plan.run}" if len(found.runs) > 1 else "")
            _line(console, f"  {visible_text(plan.plan.action)} ({where}): {sentence(plan.plan.reason)}")
        console.print()
    print_notices(found.report, console)


def _print_run(run: RunFindings, console: Console) -> None:
    shares = run.shares
    title = f"{file_name(run.run.source.path)}: {counted(len(run.findings), 'component')}, {counted(run.run.n_scans, 'scan')}"
    _line(console, title, bold=True)
    for note in run.notes:
        _line(console, f"Note: {sentence(note)}")
    if run.scale:
        _line(console, f"Retention index from {visible_text(run.scale.origin)}, ± {run.scale.uncertainty:.0f}.")
    total = shares.compounds
    listed = [f for f in run.findings if f.is_background or (total > 0 and f.component.area >= LISTED_SHARE * total)]
    _print_table(run, listed, console)
    hidden = len(run.findings) - len(listed)
    if hidden:
        _line(console, f"and {counted(hidden, 'component')} below {share_text(LISTED_SHARE)} of the signal each")
    _line(console, "Signal outside solvent and background: " + ", ".join(f"{n} {v}" for n, v in share_lines(run)) + ".")
    left = run.unexplained[:UNEXPLAINED_LISTED]
    if left:
        sizes = ", ".join(f"{f.component.time_s / 60:.2f} min ({share_text(f.component.area / total)})" for f in left)
        _line(console, f"Largest without a claim: {sizes}.")
    console.print()


def _print_table(run: RunFindings, listed: Sequence[Finding], console: Console) -> None:
    from rich.table import Table
    from rich.text import Text

    table = Table(box=None, pad_edge=False, header_style="dim")
    has_index = any(f.retention_index is not None for f in run.findings)
    table.add_column("min", justify="right", no_wrap=True)
    if has_index:
        table.add_column("index", justify="right", no_wrap=True)
    table.add_column("share", justify="right", no_wrap=True)
    table.add_column("purity", justify="right", no_wrap=True)
    table.add_column("what", ratio=1, overflow="fold")
    table.add_column("level", no_wrap=True)
    table.add_column("prob.", justify="right", no_wrap=True)
    total = run.shares.compounds
    for finding in listed:
        row = component_row(finding, total)
        level = finding.identification.claim.level if finding.identification else None
        style = (
            "bold"
            if level in (ClaimLevel.SUPPORTED, ClaimLevel.TENTATIVE)
            else "dim"
            if not finding.is_explained
            else ""
        )
        index = [row.index] if has_index else []
        cells = [row.time, *index, row.share, row.purity, row.answer, row.level, row.probability]
        table.add_row(*(Text(cell.replace(NO_BREAK, " "), style=style) for cell in cells))
    console.print(table)


def _line(console: Console, text: str, *, bold: bool = False) -> None:
    from rich.text import Text

    console.print(Text(text.replace(NO_BREAK, " "), style="bold" if bold else ""))
