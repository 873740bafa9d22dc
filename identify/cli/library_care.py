"""``ionwitness library …``: check a library, set entries aside, keep copies, bring old ones up to date."""

from __future__ import annotations

from pathlib import Path

import click

from identify.cli.options import FILE, WHO, WHY_REQUIRED, now, say, say_event, say_table, say_written
from identify.cli.progress import page_bar, progress_bar


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
def verify(path: Path) -> int:
    """Recompute every hash of LIB and name the first thing that does not agree."""
    from identify.library.verify import verify_library

    with progress_bar("Verifying") as progress:
        report = verify_library(path, progress=progress)
    for problem in report.problems:
        say(str(problem))
    say(
        f"{report.path}: {report.n_events:,} events, {report.n_entries:,} entries, "
        + (f"{len(report.problems)} problems" if report.problems else "all hashes agree")
    )
    say(f"fingerprint {report.fingerprint}")
    return report.exit_code


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("copy", type=FILE)
def backup(path: Path, copy: Path) -> None:
    """Write a verified COPY of LIB, while others may go on using it."""
    from identify.library.backup import backup_library

    with page_bar("Copying") as progress:
        report = backup_library(path, copy, progress=progress)
    say(f"{report.copy}: {report.n_events:,} events, {report.n_entries:,} entries, all hashes agree")
    say(f"fingerprint {report.fingerprint}")


@click.command()
@click.argument("copy", type=FILE)
@click.argument("path", metavar="LIB", type=FILE)
@click.option("--replace", is_flag=True, help="Move a library at LIB aside (it is kept).")
def restore(copy: Path, path: Path, replace: bool) -> None:
    """Bring LIB back from the backup COPY, after verifying it."""
    from identify.library.backup import restore_library

    with page_bar("Copying") as progress:
        report = restore_library(copy, path, replace=replace, progress=progress)
    say(f"{report.copy}: {report.n_events:,} events, {report.n_entries:,} entries, all hashes agree")
    say(f"fingerprint {report.fingerprint}")


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@WHO
def migrate(path: Path, who: str) -> None:
    """Bring LIB, written by an older version, up to date; a verified backup is made first."""
    from identify.library.backup import migrate_library

    report = migrate_library(path, who=who, when=now())
    say(f"{report.path}: schema {report.from_version} is now schema {report.to_version}")
    say(f"backup of what it was: {report.backup}")
    say(f"fingerprint {report.fingerprint}")


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("accessions", metavar="ACCESSION...", nargs=-1, required=True)
@WHO
@WHY_REQUIRED
def quarantine(path: Path, accessions: tuple[str, ...], who: str, why: str) -> None:
    """Set entries of LIB aside: they stay visible, and no search finds them."""
    from identify.library.standing import quarantine_entries
    from identify.library.store import open_library

    with open_library(path, writable=True) as opened:
        event = quarantine_entries(opened, dict.fromkeys(accessions, why), who=who, when=now(), reason=why)
    say_event(event)


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("accession")
@WHO
@WHY_REQUIRED
def reinstate(path: Path, accession: str, who: str, why: str) -> None:
    """Put an entry of LIB that was quarantined or withdrawn back into use."""
    from identify.library.standing import reinstate_entry
    from identify.library.store import open_library

    with open_library(path, writable=True) as opened:
        event = reinstate_entry(opened, accession, who=who, when=now(), reason=why)
    say_event(event)


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("accession", required=False)
@click.option("--csv", "csv_path", type=FILE, help="Write one row per recorded query as CSV.")
def affected(path: Path, accession: str | None, csv_path: Path | None) -> None:
    """List every recorded query that was answered with ACCESSION, or with any entry now withdrawn or quarantined."""
    from identify.library.reported import find_affected, find_affected_by_all_withdrawn
    from identify.library.store import open_library

    with open_library(path) as opened:
        found = {accession: find_affected(opened, accession)} if accession else find_affected_by_all_withdrawn(opened)
    heading = ("entry", "reported", "by", "result", "query", "source", "rank", "probability", "claim", "library state")
    rows = [
        (
            name, row.at[:19].replace("T", " "), row.who, row.result, row.query_name or row.query_id,
            row.query_source, str(row.rank), f"{row.probability:.2f}", row.claim, row.fingerprint[:16],
        )
        for name, queries in found.items()
        for row in queries
    ]  # fmt: skip
    if csv_path:
        from identify.writers.rows_csv import write_rows

        write_rows(csv_path, heading, rows)
        say_written(csv_path)
    say(f"recorded queries answered with {accession or 'entries that are now set aside'}: {len(rows):,}")
    if rows:
        say_table(heading, rows)


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("accession")
def consensus(path: Path, accession: str) -> None:
    """Show the spectrum that the replicates of an entry of LIB agree on, and how far each ion scatters."""
    from identify.library.replicates import build_consensus, find_replicates
    from identify.library.standing import get_entry
    from identify.library.store import open_library

    with open_library(path) as opened:
        entry = get_entry(opened, accession)
        found = build_consensus(find_replicates(opened, entry))
    say(f"{entry.identity.name}: {len(found.accessions)} replicates: {', '.join(found.accessions)}")
    numbers = zip(found.mz, found.intensity, found.spread, found.n_showing, found.n_covering, strict=True)
    say_table(
        ("m/z", "median %", "spread %", "seen in"),
        ((f"{mz:.0f}", f"{middle:.1f}", f"{spread:.1f}", f"{seen:.0f} of {of:.0f}") for mz, middle, spread, seen, of in numbers),
    )  # fmt: skip
