"""``ionwitness standard …``: from a measured standard to an entry that two persons stand for, and back out of use."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from identify.cli.options import FILE, LIBRARY, WHO, WHY, WHY_REQUIRED, now, say, say_event, say_table
from identify.errors import UsageError

if TYPE_CHECKING:
    from collections.abc import Callable

    from identify.library.standards import ProposalReport
    from identify.records import SpectrumRecord

Command = TypeVar("Command", bound="Callable[..., Any]")


@click.group()
def standard() -> None:
    """Add a standard measured in this laboratory to the library: one person proposes, another reviews."""


def _text(*names: str, told: str) -> Callable[[Command], Command]:
    """An option that takes any text."""
    return click.option(*names, default="", metavar="TEXT", help=told)


@standard.command()
@click.argument("spectrum", type=FILE)
@LIBRARY
@click.option("--which", default="", help="Number, accession or title of the spectrum in a file of several.")
@click.option("--component", type=click.IntRange(1), help="SPECTRUM is a run; propose this component of it.")
@_text("--name", told="Name of the compound.")
@_text("--smiles", told="Structure as SMILES.")
@_text("--inchi", told="Structure as InChI.")
@_text("--cas", told="CAS registry number.")
@_text("--formula", told="Formula, if there is no structure.")
@click.option("--derivative", metavar="TEXT", help="Derivative measured, like '3 TMS' (default: as the file says).")
@_text("--supplier", told="Supplier of the material.")
@_text("--lot", told="Lot of the material.")
@_text("--purity", told="Purity of the material, as certified.")
@_text("--date", "measured_on", told="Date of the measurement, like 2026-03-14.")
@_text("--analyst", told="Who measured it.")
@_text("--instrument", told="Instrument (default: as the file says).")
@_text("--column", told="Column, with its phase (default: as the file says).")
@_text("--method", told="Method of measurement.")
@click.option("--rt", type=click.FloatRange(0, min_open=True), metavar="MIN", help="Retention time, in minutes.")
@click.option("--ri", type=click.FloatRange(0, min_open=True), metavar="INDEX", help="Retention index (linear).")
@_text("--note", told="Anything a reviewer should know.")
@WHO
@WHY
def propose(
    spectrum: Path,
    path: Path,
    which: str,
    component: int | None,
    name: str,
    smiles: str,
    inchi: str,
    cas: str,
    formula: str,
    derivative: str | None,
    instrument: str,
    column: str,
    rt: float | None,
    ri: float | None,
    who: str,
    why: str,
    **details: str,
) -> None:
    """Propose the standard in SPECTRUM, and show what in the library speaks against it.

    It is found by no search before another person accepts it.
    """
    from identify.library.identities import resolve_identity
    from identify.library.standards import StandardDetails, propose_standard
    from identify.library.store import open_library

    record = _completed(_read(spectrum, which, component), instrument, column, rt, ri)
    with open_library(path, writable=True) as library:
        identity = resolve_identity(library, name=name, smiles=smiles, inchi=inchi, cas=cas, formula=formula)
        report = propose_standard(
            library, record, identity=identity, details=StandardDetails(**details), derivative=derivative, who=who,
            when=now(), reason=why,
        )  # fmt: skip
    _show(report)


def _read(spectrum: Path, which: str, component: int | None) -> SpectrumRecord:
    from identify.pipeline.one_spectrum import read_component, read_one_spectrum

    if component is None:
        return read_one_spectrum(spectrum, which)
    if which:
        raise UsageError("--which", found="--component with it", expected="one of the two")
    return read_component(spectrum, component)


def _completed(
    record: SpectrumRecord, instrument: str, column: str, rt: float | None, ri: float | None
) -> SpectrumRecord:
    """The record with what the user states, which wins over what the file says."""
    from dataclasses import replace

    from identify.retention import phase_class

    acquisition, retention = record.acquisition, record.retention
    if instrument:
        acquisition = replace(acquisition, instrument=instrument)
    if column:
        retention = replace(retention, column=column, phase=phase_class(column))
    if rt is not None:
        retention = replace(retention, time_s=60.0 * rt)
    if ri is not None:
        retention = replace(retention, index=ri, index_kind="linear")
    return replace(record, acquisition=acquisition, retention=retention)


def _show(report: ProposalReport) -> None:
    entry, audit = report.entry, report.audit
    measured = f", measured as {entry.measured_as}" if entry.measured_as else ""
    say(f"{entry.accession}: {entry.identity.name} {entry.identity.formula or 'without formula'}{measured}")
    say_event(report.event)
    say(f"audit: {audit.proposal}")
    for finding in audit.findings:
        say(f"  {finding.grade.value}, {finding.kind}: {finding.reason}")
    for conflict in report.conflicts:
        say(f"conflict, {conflict.kind}: {conflict.name} ({conflict.accession}), cosine {conflict.cosine:.3f}")
    if not report.conflicts:
        say("no entry of the library contradicts it")
    say(f"It waits for review by a second person: ionwitness standard review {entry.accession} --accept …")


@standard.command()
@click.argument("accession")
@LIBRARY
@click.option("--accept/--refuse", "is_accepted", default=None, help="The decision.")
@WHO
@WHY_REQUIRED
def review(accession: str, path: Path, is_accepted: bool | None, who: str, why: str) -> None:
    """Accept or refuse the proposed standard ACCESSION; not by the person who proposed it."""
    from identify.library.standards import review_standard
    from identify.library.store import open_library

    with open_library(path, writable=True) as library:
        report = review_standard(library, accession, accept=_decided(is_accepted), who=who, when=now(), reason=why)
    say(f"{report.entry.accession}: {report.entry.identity.name} is now '{report.entry.status}'")
    say_event(report.event)


def _decided(is_accepted: bool | None) -> bool:
    if is_accepted is None:
        raise UsageError("review", found="no decision", expected="--accept or --refuse")
    return is_accepted


@standard.command()
@click.argument("accession")
@LIBRARY
@WHO
@WHY_REQUIRED
def withdraw(accession: str, path: Path, who: str, why: str) -> None:
    """Take the entry ACCESSION out of use; it stays in the library with its history."""
    from identify.library.standing import withdraw_entry
    from identify.library.store import open_library

    with open_library(path, writable=True) as library:
        event = withdraw_entry(library, accession, who=who, when=now(), reason=why)
    say_event(event)
    say(f"What it answered before: ionwitness library affected {path} {accession}")


@standard.command()
@click.argument("accession")
@LIBRARY
@click.option(
    "--by", required=True, metavar="ACCESSION", help="Accepted standard of the same compound that replaces it."
)
@WHO
@WHY_REQUIRED
def supersede(accession: str, path: Path, by: str, who: str, why: str) -> None:
    """Replace the entry ACCESSION by a better standard of the same compound."""
    from identify.library.standards import supersede_standard
    from identify.library.store import open_library

    with open_library(path, writable=True) as library:
        report = supersede_standard(library, accession, by, who=who, when=now(), reason=why)
    say(f"{report.entry.accession}: {report.entry.identity.name} is now '{report.entry.status}'")
    say_event(report.event)


@standard.command()
@click.argument("accession")
@LIBRARY
def history(accession: str, path: Path) -> None:
    """List every event that concerns the entry ACCESSION, first to last."""
    from dataclasses import fields

    from identify.library.standards import read_standard_details
    from identify.library.standing import entry_history, get_entry
    from identify.library.store import open_library

    with open_library(path) as library:
        entry = get_entry(library, accession)
        items = entry_history(library, accession)
        details = read_standard_details(library, accession)
    say(f"{entry.accession}: {entry.identity.name} is '{entry.status}'")
    for field in fields(details):
        text = getattr(details, field.name)
        if text:
            say(f"  {field.name.replace('_', ' ')}: {text}")
    for item in items:
        say_event(item.event)
        say(f"  then: {item.status}")


@standard.command()
@LIBRARY
def waiting(path: Path) -> None:
    """List the proposed standards that wait for review."""
    from identify.library.standards import list_proposals
    from identify.library.standing import entry_history
    from identify.library.store import open_library

    with open_library(path) as library:
        entries = list_proposals(library)
        proposed = [entry_history(library, entry.accession)[0].event for entry in entries]
    say(f"standards that wait for review: {len(entries):,}")
    if entries:
        say_table(
            ("accession", "name", "formula", "measured as", "proposed by", "at"),
            (
                (e.accession, e.identity.name, e.identity.formula, e.measured_as, event.who, event.at[:10])
                for e, event in zip(entries, proposed, strict=True)
            ),
        )
