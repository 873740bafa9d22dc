"""``ionwitness run``: GC-MS runs in, their components named."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.cli.options import (
    FILE,
    JSON,
    LIBRARIES,
    RECORD,
    REPORT,
    SETTINGS,
    WHO,
    check_outputs,
    read_settings,
    read_text,
    say_written,
)
from identify.cli.progress import progress_bar
from identify.cli.search import deliver, first_written, remember
from identify.errors import UsageError

if TYPE_CHECKING:
    from identify.pipeline.runs import RunOptions
    from identify.runs.findings import RunsReport


@click.command()
@click.argument("paths", metavar="RUN...", nargs=-1, required=True, type=FILE)
@LIBRARIES
@click.option("--blank", type=FILE, help="Blank run: what it shows too is marked.")
@click.option("--ladder", type=FILE, help="n-Alkanes: a table (carbon number, minutes) or a run of an alkane mixture.")
@click.option(
    "--column", default="", help="Column phase, such as '5% phenyl methylpolysiloxane': indices become evidence."
)
@click.option("--at", "at", help="Search one spectrum by hand: minutes, or two for the mean of the scans between.")
@click.option("--background", help="With --at: minutes of scans to subtract, separated by commas.")
@JSON
@click.option("--csv", "csv_path", type=FILE, help="Write one row per component as CSV.")
@REPORT
@click.option("--top", type=int, default=10, show_default=True, help="Candidates kept per component.")
@SETTINGS
@RECORD
@WHO
def run(
    paths: tuple[Path, ...],
    libraries: tuple[Path, ...],
    blank: Path | None,
    ladder: Path | None,
    column: str,
    at: str | None,
    background: str | None,
    json_path: Path | None,
    csv_path: Path | None,
    html_path: Path | None,
    top: int,
    settings_path: Path | None,
    is_recorded: bool | None,
    who: str,
) -> int:
    """Find and name everything that eluted in each RUN (ANDI-MS netCDF, mzML)."""
    from identify.pipeline.runs import identify_scans, run_files
    from identify.settings import resolve

    settings = resolve(read_settings(settings_path), where=str(settings_path or "settings"), top=top)
    outputs = (json_path, csv_path, html_path)
    check_outputs(outputs, [*paths, *libraries, *(path for path in (blank, ladder, settings_path) if path)])
    written = first_written(outputs, is_recorded)
    _check_by_hand(at, background, len(paths) == 1 and not (blank or ladder or column))
    if at is not None:
        report = identify_scans(
            paths[0], _minutes(at, "--at"), _minutes(background or "", "--background"), libraries, settings
        )
        code = deliver(report, json_path, csv_path, html_path)
        if written and is_recorded is not False:
            remember(report, written, who, is_required=bool(is_recorded))
        return code
    options = _options(blank, ladder, column)
    with progress_bar("Identifying") as progress:
        found = run_files(paths, libraries, settings, options, progress)
    _write(found, json_path, csv_path, html_path)
    from rich.console import Console

    from identify.report.run_terminal import render_run_terminal

    render_run_terminal(found, Console())
    if written and is_recorded is not False:
        remember(found.report, written, who, is_required=bool(is_recorded))
    return found.report.exit_code


def _check_by_hand(at: str | None, background: str | None, is_alone: bool) -> None:
    if at is not None and not is_alone:
        raise UsageError(
            "--at", found="several runs, a blank, a ladder or a column beside it", expected="one run alone"
        )
    if background is not None and at is None:
        raise UsageError("--background", found="no --at", expected="--at with the minutes of the peak")


def _write(found: RunsReport, json_path: Path | None, csv_path: Path | None, html_path: Path | None) -> None:
    from identify.report.run_html import write_run_html
    from identify.writers.run_csv import write_run_csv
    from identify.writers.run_json import write_run_json

    for path, write in ((json_path, write_run_json), (csv_path, write_run_csv), (html_path, write_run_html)):
        if path is not None:
            write(path, found)
            say_written(path)


def _options(blank: Path | None, ladder: Path | None, column: str) -> RunOptions:
    from identify.pipeline.runs import RunOptions
    from identify.readers.runs import is_run
    from identify.retention import parse_ladder, phase_class

    if column and not phase_class(column):
        raise UsageError(
            "--column", found=repr(column[:60]), expected="a column or phase name whose phase class is known",
            hint="Such as DB-5, DB-WAX or '5% phenyl methylpolysiloxane'.",
        )  # fmt: skip
    if ladder is None:
        return RunOptions(blank=blank, column=column)
    if is_run(ladder):
        return RunOptions(blank=blank, ladder_run=ladder, column=column)
    text = read_text(ladder, "--ladder", UsageError)
    return RunOptions(blank=blank, ladder=parse_ladder(text, str(ladder)), column=column)


def _minutes(text: str, option: str) -> tuple[float, ...]:
    import math

    values = []
    for part in text.split(","):
        if not part.strip():
            continue
        try:
            value = float(part)
        except ValueError:
            value = math.nan
        if not math.isfinite(value):
            raise UsageError(option, found=repr(part[:40]), expected="minutes separated by commas, like 6.55,6.75")
        values.append(value)
    return tuple(values)
