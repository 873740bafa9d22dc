"""``ionwitness run``: a GC-MS run in, its components named."""

from __future__ import annotations

from pathlib import Path

import click

from identify.cli.search import FILE, deliver, progress_bar, read_settings


@click.command()
@click.argument("path", metavar="RUN", type=FILE)
@click.option("--library", "libraries", multiple=True, required=True, type=FILE, help="Library to search; repeatable.")
@click.option("--blank", type=FILE, help="Blank run: what it shows too is marked.")
@click.option("--ladder", "ladder_path", type=FILE, help="Retention times of n-alkanes: carbon number, minutes.")
@click.option("--json", "json_path", type=FILE, help="Write the full result as JSON.")
@click.option("--csv", "csv_path", type=FILE, help="Write one row per candidate as CSV.")
@click.option("--report", "html_path", type=FILE, help="Write a self-contained HTML report.")
@click.option("--settings", "settings_path", type=FILE, help="TOML file with settings.")
def run(
    path: Path,
    libraries: tuple[Path, ...],
    blank: Path | None,
    ladder_path: Path | None,
    json_path: Path | None,
    csv_path: Path | None,
    html_path: Path | None,
    settings_path: Path | None,
) -> int:
    """Find and name everything that eluted in RUN (ANDI-MS netCDF)."""
    from identify.pipeline.runs import run_file
    from identify.retention import parse_ladder
    from identify.settings import resolve

    settings = resolve(read_settings(settings_path), where=str(settings_path or "settings"))
    ladder = parse_ladder(ladder_path.read_text(encoding="utf-8"), str(ladder_path)) if ladder_path else None
    with progress_bar("Identifying") as progress:
        found = run_file(path, libraries, settings, blank=blank, ladder=ladder, progress=progress)
    return deliver(found.report, json_path, csv_path, html_path)
