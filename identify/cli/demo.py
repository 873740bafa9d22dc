"""``ionwitness demo``: the starter library and an invented case, from nothing to the report."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from identify.cli.options import FILE, current_user, describe_os_error, now
from identify.cli.progress import progress_bar
from identify.cli.search import deliver
from identify.errors import UsageError


@click.command()
@click.option(
    "--out", "folder", type=FILE, default=Path("ionwitness-demo"), show_default=True, help="Folder for what is made."
)
@click.option("--browser/--no-browser", default=None, help="Open the report in a browser (default: on a terminal).")
def demo(folder: Path, browser: bool | None) -> int:
    """Play an invented case with the starter library: build, search, report.

    The starter library holds principal ions from memory, rounded, for demonstration; it is not reference data.
    """
    import tomllib
    from importlib.resources import as_file

    from identify.library.shipped import find_shipped
    from identify.library.starter import build_starter
    from identify.pipeline import search_files
    from identify.settings import Settings

    _make_folder(folder)
    library = folder / "starter.ionlib"
    built = build_starter(library, current_user(), now(), replace=True)
    click.echo(f"Starter library: {built.n_accepted} entries of {built.n_compounds} compounds, in {library}")
    with as_file(find_shipped("demo")) as case:
        told = tomllib.loads((case / "case.toml").read_text(encoding="utf-8"))
        click.echo(f"\n{told['title']}\n{told['story'].strip()}\n")
        unknowns = [case / "unknowns" / unknown["file"] for unknown in told["unknown"]]
        with progress_bar("Identifying") as progress:
            report = search_files(unknowns, [library], Settings(), progress)
    html = folder / "report.html"
    code = deliver(report, folder / "result.json", folder / "result.csv", html)
    click.echo("\nWhat was put in:")
    for unknown in told["unknown"]:
        kind = " (not in the library)" if unknown["kind"] == "not in library" else ""
        click.echo(f"  {unknown['file']}: {', '.join(unknown['answer'])}{kind}")
    click.echo(f"\n{told['caution']}\nReport: {html}")
    if browser or (browser is None and sys.stdout.isatty()):
        click.launch(html.resolve().as_uri())
    return code


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        found = "a file" if isinstance(error, FileExistsError) else describe_os_error(error)
        raise UsageError("folder", where=str(folder), found=found, expected="a folder to write to") from None
