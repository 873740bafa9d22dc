"""``ionwitness library …``: build or fetch the reference library, and look into it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.cli.options import FILE, WHO, WHY, now, say, say_event
from identify.cli.progress import progress_bar

if TYPE_CHECKING:
    from collections.abc import Mapping

    from identify.library.build import BuildReport


@click.group()
def library() -> None:
    """Build the reference library, look into it, check it, pass it on."""


LICENCE = click.option(
    "--licence", "licences", default="free", show_default=True,
    help="free (CC0, CC BY, CC BY-SA and equal), all, or names separated by commas.",
)  # fmt: skip
REJECTED = click.option(
    "--rejected", "rejected_path", type=FILE, help="Write one row per record left out (the first 20,000) as CSV."
)
REPLACE = click.option("--replace", is_flag=True, help="Replace a library of this name.")


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("sources", metavar="SOURCE...", nargs=-1, required=True, type=FILE)
@LICENCE
@REPLACE
@REJECTED
@WHO
@WHY
def build(
    path: Path, sources: tuple[Path, ...], licences: str, replace: bool, rejected_path: Path | None, who: str, why: str
) -> int:
    """Build LIB from the electron-ionization records in SOURCE... (files, folders, archives)."""
    from identify.library.build import build_library

    with progress_bar("Reading records") as progress:
        report = build_library(
            path, sources, licences=licences, replace=replace, progress=progress, who=who, when=now(), reason=why
        )
    return say_build(report, rejected_path)


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("sources", metavar="SOURCE...", nargs=-1, required=True, type=FILE)
@LICENCE
@REJECTED
@WHO
@WHY
def add(path: Path, sources: tuple[Path, ...], licences: str, rejected_path: Path | None, who: str, why: str) -> int:
    """Add the records in SOURCE... to the existing library LIB, all that can be used or, after an error, none."""
    from identify.library.build import add_spectra
    from identify.library.store import open_library

    with open_library(path, writable=True) as opened, progress_bar("Reading records") as progress:
        report = add_spectra(opened, sources, licences=licences, progress=progress, who=who, when=now(), reason=why)
    return say_build(report, rejected_path)


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("recipe")
@LICENCE
@REPLACE
@REJECTED
@click.option("--keep-in", type=FILE, help="Folder for the download (default: the cache folder of this user).")
@WHO
@WHY
def fetch(
    path: Path,
    recipe: str,
    licences: str,
    replace: bool,
    rejected_path: Path | None,
    keep_in: Path | None,
    who: str,
    why: str,
) -> int:
    """Download the open records that RECIPE names (open-ei, or a TOML file), then build LIB from them.

    An interrupted download goes on where it stopped. What arrives is checked before LIB appears.
    """
    from identify.library.fetch import fetch_library

    with progress_bar("Fetching") as progress:

        def downloading(done: int, total: int) -> None:
            if progress:
                progress(done // 10**6, f"MB of {total // 10**6}" if total else "MB")

        report = fetch_library(
            path, recipe, licences=licences, replace=replace, downloading=downloading, progress=progress,
            folder=keep_in, who=who, when=now(), reason=why,
        )  # fmt: skip
    resumed = ", continued from an earlier try" if report.was_resumed else ""
    say(f"{report.n_bytes:,} bytes{resumed}, kept in {report.archive} (may be deleted)")
    return say_build(report.build, rejected_path)


def say_build(report: BuildReport, rejected_path: Path | None) -> int:
    """Exit code of a build, after saying what was taken and what was left out, each reason with its first case.

    Parameters
    ----------
    report : BuildReport
    rejected_path : Path or None
        Where the list of all that was left out is written.

    Returns
    -------
    int

    Raises
    ------
    UsageError
        If the list cannot be written.
    """
    from identify.library.build import describe_build

    for line in describe_build(report):
        say(line)
    first = {item.reason: item for item in reversed(report.rejected)}
    for reason in report.n_rejected:
        if reason in first:
            say(f"  the first: {first[reason].message}")
    if rejected_path:
        from identify.writers.rows_csv import write_rows

        heading = ("source", "line", "reason", "found", "expected", "hint")
        rows = ((r.source, str(r.line or ""), r.reason, r.found, r.expected, r.hint) for r in report.rejected)
        say(f"Written: {rejected_path}, {write_rows(rejected_path, heading, rows):,} left out")
    return report.exit_code


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.option("--events", "n_events", type=click.IntRange(0), default=10, show_default=True, help="Last events listed.")
def info(path: Path, n_events: int) -> None:
    """Show what LIB holds and in which state it is."""
    from identify.library.info import describe_library
    from identify.library.store import open_library

    with open_library(path) as opened:
        found = describe_library(opened)
    say(f"{found.state.path}: {found.state.entries:,} entries of {found.state.compounds:,} compounds")
    say(f"fingerprint {found.state.fingerprint} · schema {found.schema_version}")
    counts: tuple[tuple[str, Mapping[str, int]], ...] = (
        ("standing", found.by_status),
        ("licence", found.by_licence),
        ("instrument type", found.by_instrument_type),
        ("energy", found.by_energy),
        ("derivative", found.by_derivative),
    )
    for title, numbers in counts:
        shown = ", ".join(f"{name or 'not stated'} {n:,}" for name, n in list(numbers.items())[:12])
        more = f" and {len(numbers) - 12:,} more kinds" if len(numbers) > 12 else ""
        say(f"{title}: {shown or 'none'}{more}")
    say(f"isotope-labelled entries: {found.n_labelled:,} · with accurate m/z: {found.n_accurate:,}")
    say(f"with a retention index: {found.n_with_retention_index:,} · without structure: {found.n_without_structure:,}")
    say(f"events: {len(found.events):,}" + (f", the last {n_events:,}:" if len(found.events) > n_events > 0 else ""))
    for event in found.events[-n_events:] if n_events else ():
        say_event(event)
