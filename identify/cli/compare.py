"""``ionwitness compare``: what changed between two results, and why."""

from __future__ import annotations

from pathlib import Path

import click

from identify.cli.options import FILE, say, say_event, say_written


@click.command()
@click.argument("first", metavar="RESULT1", type=FILE)
@click.argument("second", metavar="RESULT2", type=FILE)
@click.option(
    "--library", "library", type=FILE, metavar="LIB", help="List what was done to LIB between the two results."
)
@click.option("--csv", "csv_path", type=FILE, help="Write one row per change as CSV.")
def compare(first: Path, second: Path, library: Path | None, csv_path: Path | None) -> None:
    """Say what changed from RESULT1 to RESULT2 (JSON files of `search`) and which causes can explain it."""
    from identify.pipeline.compare import compare_results, list_events_between, read_result
    from identify.report.words import counted

    before, after = read_result(first), read_result(second)
    found = compare_results(before, after, (str(first), str(second)))
    events = list_events_between(library, before, after) if library else ()
    if csv_path:
        from identify.writers.rows_csv import write_rows

        heading = ("query", "source", "what", "before", "after", "why")
        rows = [("", "", change.what, change.before, change.after, change.why) for change in found.causes]
        rows += [
            (query.name, query.source, change.what, change.before, change.after, change.why)
            for query in found.queries
            for change in query.changes
        ]
        write_rows(csv_path, heading, rows)
        say_written(csv_path)
    for cause in found.causes:
        say(f"{cause.what}: {cause.before} → {cause.after}")
    if not found.causes:
        say("same program, settings and library")
    for event in events:
        say_event(event)
    for query in found.queries:
        say(f"{query.name} ({query.source})")
        for change in query.changes:
            say(f"  {change.what}: {change.before} → {change.after}")
            say(f"    {change.why}")
    for title, names in (("only in the first", found.only_first), ("only in the second", found.only_second)):
        if names:
            say(f"{title}: {'; '.join(names[:20])}" + (f" and {len(names) - 20:,} more" if len(names) > 20 else ""))
    say(f"{counted(len(found.queries), 'query', 'queries')} changed, {found.n_same:,} did not")
