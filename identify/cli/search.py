"""``ionwitness search``: unknowns in, names with reasons out."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.cli.options import (
    FILE,
    JSON,
    LIBRARIES,
    MAX_TEXT_BYTES,
    RECORD,
    REPORT,
    SETTINGS,
    WHO,
    check_outputs,
    now,
    read_settings,
    say,
    say_written,
)
from identify.cli.progress import progress_bar
from identify.errors import InputError, UsageError

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from identify.records import Report
    from identify.settings import Settings

PASTED = Path("-")


@click.command()
@click.argument("queries", nargs=-1, required=True, type=FILE)
@LIBRARIES
@JSON
@click.option("--csv", "csv_path", type=FILE, help="Write one row per candidate as CSV.")
@REPORT
@click.option(
    "--work-list", "work_list_path", type=FILE, help="Write the next measurements of all queries, ranked, as CSV."
)
@click.option("--top", type=int, help="Candidates reported per query (default 25).")
@SETTINGS
@click.option(
    "--prefer-own/--no-prefer-own", default=None, help="Own standards before other entries that score the same."
)
@click.option(
    "--as-of", metavar="EVENT", multiple=True,
    help="The library as it stood after this event (number or hash); with several libraries once for each, in order.",
)  # fmt: skip
@RECORD
@click.option(
    "--why-not", "why_not", metavar="COMPOUND",
    help="Say why this compound (name, InChIKey or SMILES) is not the answer to each query.",
)  # fmt: skip
@WHO
def search(
    queries: tuple[Path, ...],
    libraries: tuple[Path, ...],
    json_path: Path | None,
    csv_path: Path | None,
    html_path: Path | None,
    work_list_path: Path | None,
    top: int | None,
    settings_path: Path | None,
    prefer_own: bool | None,
    as_of: tuple[str, ...],
    is_recorded: bool | None,
    why_not: str | None,
    who: str,
) -> int:
    """Identify every spectrum in QUERIES (files, folders, archives, or - for pasted peaks)."""
    from identify.pipeline import search_files, search_pasted, search_to_json
    from identify.settings import resolve

    settings = resolve(
        read_settings(settings_path), where=str(settings_path or "settings"), top=top, prefer_own_standards=prefer_own
    )
    outputs = (json_path, csv_path, html_path, work_list_path)
    check_outputs(outputs, (*queries, *libraries))
    written = first_written(outputs, is_recorded)
    _check_pasted(queries)
    if queries == (PASTED,):
        report = search_pasted(_read_pasted(), libraries, settings, as_of=as_of)
    else:
        with progress_bar("Identifying") as progress:
            if json_path and not (csv_path or html_path or work_list_path or why_not):
                report = search_to_json(queries, libraries, settings, json_path, progress, as_of=as_of)
                say_written(json_path)
                json_path = None  # written already
            else:
                report = search_files(queries, libraries, settings, progress, as_of=as_of)
    code = deliver(report, json_path, csv_path, html_path)
    if work_list_path:
        from identify.writers.work_list_csv import write_work_list

        write_work_list(work_list_path, report)
        say_written(work_list_path)
    if why_not:
        say_why_not(why_not, report, libraries, settings, as_of)
    if written and is_recorded is not False:
        remember(report, written, who, is_required=bool(is_recorded))
    return code


def say_why_not(
    asked: str, report: Report, libraries: Sequence[Path], settings: Settings, as_of: Sequence[str]
) -> None:
    """Nothing comes out; for each query it is said why a compound is not the answer.

    Parameters
    ----------
    asked : str
        Name or part of it, InChIKey, or SMILES.
    report : Report
    libraries : sequence of Path
    settings : Settings
    as_of : sequence of str
    """
    from identify.pipeline.why_not import explain_report, explain_without_entry

    told = explain_report(asked, report, libraries, settings, as_of=as_of)
    for found, answers in zip(report.identifications, told, strict=True):
        click.echo()
        say(f"Why not {asked}? Query {found.query.record.title or found.query.id}")
        for answer in answers:
            say(f"  {answer.name} ({answer.accession})")
            for reason in answer.reasons:
                say(f"    {reason}")
        if not answers:
            say("  No entry of the libraries searched is this compound.")
            without = explain_without_entry(asked, found)
            if without:
                say(f"  {without}")


def _check_pasted(queries: Sequence[Path]) -> None:
    if PASTED in queries and len(queries) > 1:
        raise UsageError("QUERIES", found="- with other inputs", expected="files, or - alone for pasted peaks")


def first_written(outputs: Sequence[Path | None], is_recorded: bool | None) -> Path | None:
    """The file by which a recorded result can be found again: the first that is written.

    Parameters
    ----------
    outputs : sequence of Path or None
    is_recorded : bool or None
        What was asked for; None for nothing.

    Returns
    -------
    Path or None

    Raises
    ------
    UsageError
        If the answer is to be recorded, but no file is written.
    """
    written = next((path for path in outputs if path), None)
    if is_recorded and written is None:
        raise UsageError("--record", found="no result file", expected="--json, --csv or --report with it")
    return written


def remember(report: Report, result: Path, who: str, *, is_required: bool) -> None:
    """Nothing comes out; afterwards the libraries know which entries answered, or it is said why not.

    Parameters
    ----------
    report : Report
    result : Path
        File the report was written to.
    who : str
    is_required : bool
        Whether a library that cannot remember it is an error.

    Raises
    ------
    LibraryError
        If a library cannot be written although it is required.
    """
    from identify.pipeline.remember import remember_report

    for fault in remember_report(report, result, who=who, when=now()):
        if is_required:
            raise fault
        click.echo(f"Not recorded in the library: {fault}", err=True)


def _read_pasted() -> str:
    data = sys.stdin.buffer.read(MAX_TEXT_BYTES + 1)
    if len(data) > MAX_TEXT_BYTES:
        raise InputError(
            "pasted text", found=f"more than {MAX_TEXT_BYTES // 2**20} MB", expected="less", hint="Give it as a file."
        )
    return data.decode("utf-8", "replace")


def deliver(report: Report, json_path: Path | None, csv_path: Path | None, html_path: Path | None) -> int:
    """Exit code of the report, after writing the files asked for and showing it on the terminal.

    Parameters
    ----------
    report : Report
    json_path, csv_path, html_path : Path or None

    Returns
    -------
    int
    """
    from rich.console import Console

    from identify.report.html import write_html
    from identify.report.overview import DETAILS_UP_TO, render_overview
    from identify.report.terminal import render_terminal
    from identify.writers.results_csv import write_csv
    from identify.writers.results_json import write_json

    writers: tuple[tuple[Path | None, Callable[[Path, Report], None]], ...] = (
        (json_path, write_json),
        (csv_path, write_csv),
        (html_path, write_html),
    )
    for path, write in writers:
        if path is not None:
            write(path, report)
            say_written(path)
    render = render_terminal if len(report.identifications) <= DETAILS_UP_TO else render_overview
    render(report, Console())
    return report.exit_code
