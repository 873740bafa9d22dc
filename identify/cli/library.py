"""``ionwitness library …``: build, look into, check and pass on the reference library."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.cli.options import FILE, WHO, WHY, now
from identify.cli.progress import progress_bar

if TYPE_CHECKING:
    from collections.abc import Mapping


@click.group()
def library() -> None:
    """Build the reference library, look into it, check it, pass it on."""


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("sources", metavar="SOURCE...", nargs=-1, required=True, type=FILE)
@click.option(
    "--licence", "licences", default="free", show_default=True,
    help="free (CC0, CC BY, CC BY-SA and equal), all, or names separated by commas.",
)  # fmt: skip
@click.option("--replace", is_flag=True, help="Replace a library of this name.")
@WHO
@WHY
def build(path: Path, sources: tuple[Path, ...], licences: str, replace: bool, who: str, why: str) -> int:
    """Build LIB from the electron-ionization records in SOURCE... (files, folders, archives)."""
    from identify.library.build import build_library, describe_build

    choice = licences if licences in ("free", "all") else [name.strip() for name in licences.split(",")]
    with progress_bar("Reading records") as progress:
        report = build_library(
            path, sources, licences=choice, replace=replace, progress=progress, who=who, when=now(), reason=why
        )
    for line in describe_build(report):
        click.echo(line)
    return report.exit_code


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
def info(path: Path) -> None:
    """Show what LIB holds and in which state it is."""
    from identify.library.info import describe_library
    from identify.library.store import open_library

    with open_library(path) as opened:
        found = describe_library(opened)
    click.echo(f"{found.state.path}: {found.state.entries:,} entries of {found.state.compounds:,} compounds")
    click.echo(f"fingerprint {found.state.fingerprint} · schema {found.schema_version}")
    counts: tuple[tuple[str, Mapping[str, int]], ...] = (
        ("status", found.by_status),
        ("licence", found.by_licence),
        ("instrument type", found.by_instrument_type),
        ("energy", found.by_energy),
        ("derivative", found.by_derivative),
    )
    for title, numbers in counts:
        shown = ", ".join(f"{name or 'not stated'} {n:,}" for name, n in list(numbers.items())[:12])
        click.echo(f"{title}: {shown or 'none'}")
    click.echo(f"isotope-labelled entries: {found.n_labelled:,}")


@library.command()
@click.argument("path", metavar="LIB", type=FILE)
def verify(path: Path) -> int:
    """Recompute every hash of LIB and name the first thing that does not agree."""
    from identify.library.verify import verify_library

    with progress_bar("Verifying") as progress:
        report = verify_library(path, progress=progress)
    for problem in report.problems:
        click.echo(str(problem))
    click.echo(
        f"{report.path}: {report.n_events:,} events, {report.n_entries:,} entries, "
        + (f"{len(report.problems)} problems" if report.problems else "all hashes agree")
    )
    click.echo(f"fingerprint {report.fingerprint}")
    return report.exit_code
