"""``ionwitness search``: unknowns in, names with reasons out."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from identify.pipeline.search import Progress
    from identify.records import Report

FILE = click.Path(path_type=Path)


@click.command()
@click.argument("queries", nargs=-1, required=True, type=FILE)
@click.option("--library", "libraries", multiple=True, required=True, type=FILE, help="Library to search; repeatable.")
@click.option("--json", "json_path", type=FILE, help="Write the full result as JSON.")
@click.option("--csv", "csv_path", type=FILE, help="Write one row per candidate as CSV.")
@click.option("--report", "html_path", type=FILE, help="Write a self-contained HTML report.")
@click.option("--top", type=int, help="Candidates reported per query (default 25).")
@click.option("--settings", "settings_path", type=FILE, help="TOML file with settings.")
def search(
    queries: tuple[Path, ...],
    libraries: tuple[Path, ...],
    json_path: Path | None,
    csv_path: Path | None,
    html_path: Path | None,
    top: int | None,
    settings_path: Path | None,
) -> int:
    """Identify every spectrum in QUERIES (files, folders, archives, or - for pasted peaks)."""
    from identify.pipeline import search_files, search_pasted
    from identify.settings import resolve

    settings = resolve(read_settings(settings_path), where=str(settings_path or "settings"), top=top)
    if queries == (Path("-"),):
        report = search_pasted(sys.stdin.read(), libraries, settings)
    else:
        with progress_bar("Identifying") as progress:
            report = search_files(queries, libraries, settings, progress)
    return deliver(report, json_path, csv_path, html_path)


def read_settings(path: Path | None) -> str:
    """Text of a settings file; empty without a path.

    Parameters
    ----------
    path : Path or None

    Returns
    -------
    str

    Raises
    ------
    UsageError
        If the file cannot be read as text.
    """
    if path is None:
        return ""
    from identify.errors import UsageError

    try:
        return path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise UsageError("settings", where=str(path), found=str(error), expected="a readable TOML file") from None


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
            click.echo(f"Written: {path}", err=True)
    render = render_terminal if len(report.identifications) <= DETAILS_UP_TO else render_overview
    render(report, Console())
    return report.exit_code


@contextmanager
def progress_bar(label: str) -> Iterator[Progress | None]:
    """A progress callback that draws on a terminal; None when output is piped.

    Parameters
    ----------
    label : str

    Yields
    ------
    callable or None
    """
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    if not console.is_terminal:
        yield None
        return
    columns = (TextColumn("{task.description}"), BarColumn(), TextColumn("{task.completed:.0f}"), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task(label, total=None)
        yield lambda done, name: bar.update(task, completed=done, description=f"{label} {name[:40]}")
