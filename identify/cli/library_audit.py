"""``ionwitness library audit`` and ``export``: which entries to trust, and what may be passed on."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.cli.options import FILE, WHO, WHY, check_outputs, now, say, say_event, say_written
from identify.cli.progress import progress_bar
from identify.errors import UsageError

if TYPE_CHECKING:
    from collections.abc import Collection

    from identify.library.audit import AuditReport, EntryAudit
    from identify.library.store import Library
    from identify.records import EntryStatus

HEADING = (
    "accession", "name", "standing", "proposal", "evidence that it is wrong (log-odds)", "what may be wrong", "overruled",
    "grade", "finding", "reason", "observed", "expected",
)  # fmt: skip


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.option("--csv", "csv_path", type=FILE, help="Write one row per finding as CSV.")
@click.option(
    "--show", "shown", type=click.IntRange(0), default=20, show_default=True, help="Entries shown, worst first."
)
@click.option(
    "--quarantine", "is_applied", is_flag=True, help="Set aside what is proposed for quarantine (with --why)."
)
@WHO
@WHY
def audit(path: Path, csv_path: Path | None, shown: int, is_applied: bool, who: str, why: str) -> None:
    """Check every entry of LIB against its own metadata, its replicates and its neighbours, with a proposal for each."""
    from identify.library.audit import audit_library
    from identify.library.cache import load_index
    from identify.library.standing import quarantine_entries
    from identify.library.store import open_library
    from identify.settings import Settings

    check_outputs((csv_path,), (path,))
    with open_library(path, writable=is_applied) as library:
        with progress_bar("Checking") as progress:
            report = audit_library(library, load_index(library, Settings().weighting), progress=progress)
        entries = library.get_entries([item.entry_id for item in report.audits if item.findings])
        standing = {entry.accession: entry.status.value for entry in entries}
        _show(report, standing, shown)
        if csv_path:
            _write(csv_path, report, standing)
        if is_applied:
            reasons = {key: text for key, text in report.to_quarantine.items() if standing.get(key) != "quarantined"}
            if reasons:
                say_event(quarantine_entries(library, reasons, who=who, when=now(), reason=why))
            say(f"set aside: {len(reasons):,}")


def _show(report: AuditReport, standing: dict[str, str], shown: int) -> None:
    from identify.library.audit import USE

    doubtful = [item for item in report.audits if item.proposal != USE]
    doubtful.sort(key=lambda item: (_ORDER[item.proposal], -item.log_odds, item.entry_id))
    say(f"{report.path}: {len(report.audits):,} entries, fingerprint {report.fingerprint[:16]}")
    say("proposed: " + ", ".join(f"{name} {n:,}" for name, n in report.by_proposal.items()))
    for title, numbers in (("findings", report.by_finding), ("notes", report.by_note)):
        say(f"{title}: " + (", ".join(f"{kind} {n:,}" for kind, n in numbers.items()) or "none"))
    for item in doubtful[:shown]:
        say(
            f"{item.accession} {item.name} ({standing[item.accession]}): {item.proposal}, log-odds {item.log_odds:+.1f}"
        )
        if item.suspicion:
            say(f"  perhaps: {item.suspicion}")
        if item.overruled:
            say(f"  overruled by {item.overruled}")
        for finding in item.findings:
            say(f"  {finding.grade.value}, {finding.kind}: {finding.reason}")
    if len(doubtful) > shown:
        say(f"and {len(doubtful) - shown:,} more entries not proposed for use without caution")


_ORDER = {"quarantine": 0, "use with caution": 1}


def _write(path: Path, report: AuditReport, standing: dict[str, str]) -> None:
    from identify.writers.rows_csv import write_rows

    rows = [row for item in report.audits if item.findings for row in _rows(item, standing[item.accession])]
    write_rows(path, HEADING, rows)
    say_written(path)


def _rows(item: EntryAudit, standing: str) -> list[tuple[str, ...]]:
    entry = (
        item.accession, item.name, standing, item.proposal, f"{item.log_odds:.2f}", item.suspicion, item.overruled
    )  # fmt: skip
    return [(*entry, f.grade.value, f.kind, f.reason, f.observed, f.expected) for f in item.findings]


def _under(
    library: Library, accessions: tuple[str, ...], statuses: Collection[EntryStatus], licences: tuple[str, ...]
) -> tuple[str, ...]:
    """Accessions of the entries under one of the licences."""
    from identify.library.licences import normalise_licence

    wanted = {normalise_licence(name) for name in licences}
    held = [entry for entry in library.iter_entries(statuses) if normalise_licence(entry.licence) in wanted]
    found = tuple(entry.accession for entry in held if not accessions or entry.accession in accessions)
    if not found:
        raise UsageError(
            "export", where=str(library.path), found=f"no entry under {', '.join(licences)}", expected="one"
        )
    return found


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("target", metavar="FILE", type=FILE)
@click.option(
    "--format", "file_format", required=True,
    type=click.Choice(["massbank", "jcamp", "msp", "mzspeclib", "mzml", "csv"]), help="Open format to write.",
)  # fmt: skip
@click.option("--accession", "accessions", multiple=True, help="Entry to export (default: all in use); repeatable.")
@click.option("--own-standards", is_flag=True, help="Export own standards only.")
@click.option("--licence", "licences", multiple=True, help="Export entries under this licence only; repeatable.")
@click.option("--contributor", default="", help="Contributor's code, for MassBank records.")
@click.option(
    "--i-have-the-right", is_flag=True, help="Write licences into one file that may not be passed on together."
)
def export(
    path: Path,
    target: Path,
    file_format: str,
    accessions: tuple[str, ...],
    own_standards: bool,
    licences: tuple[str, ...],
    contributor: str,
    i_have_the_right: bool,
) -> None:
    """Write entries of LIB to FILE in an open format; licences and authors travel with them."""
    from identify.library.export import export_entries
    from identify.library.store import SEARCHABLE, open_library
    from identify.records import EntryStatus
    from identify.report.words import counted

    check_outputs((target,), (path,))
    statuses = frozenset({EntryStatus.OWN_STANDARD}) if own_standards else SEARCHABLE
    with open_library(path) as library:
        if licences:
            accessions = _under(library, accessions, statuses, licences)
        report = export_entries(
            library, target, file_format, accessions=accessions, statuses=statuses, i_have_the_right=i_have_the_right,
            contributor=contributor, when=now(),
        )  # fmt: skip
    say(f"{report.path}: {counted(report.n_written, 'spectrum', 'spectra')} ({report.file_format})")
    say("licences: " + ", ".join(f"{name} {n:,}" for name, n in report.licences.items()))
