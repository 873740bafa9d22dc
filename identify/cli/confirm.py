"""``ionwitness confirm`` and ``ionwitness instrument check``: rule sets of published documents, ion by ion."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.cli.options import FILE, say, say_table, show_and_exit

if TYPE_CHECKING:
    from identify.evidence.confirmation import Confirmation
    from identify.records import SpectrumRecord


MINUTES = click.FloatRange(0, min_open=True)


def list_criteria() -> None:
    """Nothing comes out; the rule sets for `confirm` are listed with edition, source and what they ask for."""
    from identify.evidence.criteria_files import ION_CRITERIA, load_criteria

    for name in ION_CRITERIA:
        rule = load_criteria(name)
        say(f"{name}: {rule.title}")
        say(f"  edition: {rule.edition}")
        say(f"  source: {rule.source}; {rule.provenance}")
        say(f"  {rule.paraphrase}")


def list_checks() -> None:
    """Nothing comes out; the tune compounds for `instrument check` are listed with their editions."""
    from identify.evidence.criteria_files import INSTRUMENT_CHECKS, list_editions, load_instrument_check

    for name in INSTRUMENT_CHECKS:
        for edition in list_editions(name):
            check = load_instrument_check(name, edition)
            default = " (default)" if edition == list_editions(name)[0] else ""
            say(f"{name} --edition {edition}{default}: {check.title}, {len(check.rules)} limits; {check.compound}")
        say(f"  source: {check.source}; {check.provenance}")


@click.command()
@click.argument("unknown", type=FILE)
@click.argument("standard")
@click.option("--criteria", required=True, metavar="NAME", help="Rule set; --list shows them.")
@click.option("--library", "library", type=FILE, metavar="LIB", help="Take STANDARD from LIB: an accession.")
@click.option("--unknown-spectrum", default="", metavar="WHICH", help="Number, accession or title in UNKNOWN.")
@click.option("--standard-spectrum", default="", metavar="WHICH", help="Number, accession or title in STANDARD.")
@click.option(
    "--ion", "ions", type=click.IntRange(1), multiple=True, help="Diagnostic m/z chosen beforehand; repeatable."
)
@click.option(
    "--molecular-mz", type=click.IntRange(1), help="m/z of the molecular ion (default: by the standard's formula)."
)
@click.option("--unknown-rt", type=MINUTES, metavar="MIN", help="Retention time of the unknown, in minutes.")
@click.option("--standard-rt", type=MINUTES, metavar="MIN", help="Retention time of the standard, in minutes.")
@click.option("--unknown-internal-rt", type=MINUTES, metavar="MIN", help="Internal standard in the run of the unknown.")
@click.option(
    "--standard-internal-rt", type=MINUTES, metavar="MIN", help="Internal standard in the run of the standard."
)
@click.option(
    "--list", is_flag=True, is_eager=True, expose_value=False, callback=show_and_exit(list_criteria),
    help="List the rule sets and end.",
)  # fmt: skip
def confirm(
    unknown: Path,
    standard: str,
    criteria: str,
    library: Path | None,
    unknown_spectrum: str,
    standard_spectrum: str,
    ions: tuple[int, ...],
    molecular_mz: int | None,
    unknown_rt: float | None,
    standard_rt: float | None,
    unknown_internal_rt: float | None,
    standard_internal_rt: float | None,
) -> None:
    """Judge UNKNOWN against STANDARD, measured on the same instrument, by a published rule set.

    Spectra are judged as measured. Meeting the criteria is no confirmation by itself: a person decides, under the
    document's own conditions.
    """
    from identify.evidence.criteria_files import load_criteria
    from identify.pipeline.confirm import KnownTimes, confirm_record
    from identify.pipeline.one_spectrum import read_one_spectrum

    load_criteria(criteria)
    known = _read_standard(standard, library, standard_spectrum)
    found = confirm_record(
        read_one_spectrum(unknown, unknown_spectrum),
        known,
        criteria,
        times=KnownTimes(*map(_seconds, (unknown_rt, standard_rt, unknown_internal_rt, standard_internal_rt))),
        molecular_mz=molecular_mz,
        ions=ions,
    )
    _show(found, known)


def _seconds(minutes: float | None) -> float | None:
    return None if minutes is None else 60.0 * minutes


def _read_standard(standard: str, library: Path | None, which: str) -> SpectrumRecord:
    from identify.pipeline.one_spectrum import read_entry, read_one_spectrum

    return read_one_spectrum(Path(standard), which) if library is None else read_entry(library, standard)


def _show(found: Confirmation, standard: SpectrumRecord) -> None:
    rule = found.criteria
    say(f"{rule.name}: {rule.title}")
    say(f"  edition: {rule.edition}; {rule.provenance}")
    say(f"  standard: {standard.identity.name or standard.title or standard.source}")
    say_table(
        ("m/z", "standard %", "window %", "unknown %", "verdict", "reason"),
        (
            (
                str(ion.mz), f"{ion.standard_percent:.1f}", f"{ion.low:.1f}–{ion.high:.1f}", f"{ion.unknown_percent:.1f}",
                ion.verdict.value, ion.reason,
            )
            for ion in found.ions
        ),
    )  # fmt: skip
    say(f"ions: {found.ions_verdict.value}. {found.ions_reason}")
    say(f"retention: {found.retention_verdict.value}. {found.retention_reason}")
    if found.points is not None:
        text = f" ({rule.points.needed_text})" if rule.points else ""
        say(f"points: {found.points:g} of {found.points_needed:g} needed{text}")
    if found.extra:
        shown = ", ".join(f"m/z {mz} ({percent:.0f} %)" for mz, percent in found.extra[:20])
        say(f"to review, in the unknown only: {shown}")
    say(f"verdict: {found.verdict.value}")
    for caution in found.cautions:
        say(f"Caution: {caution}")


@click.group()
def instrument() -> None:
    """Check the instrument itself."""


@instrument.command()
@click.argument("spectrum", type=FILE)
@click.option("--tune", required=True, metavar="NAME", help="dftpp, bfb or pftba.")
@click.option("--edition", default="", help="Edition of the method; --list shows them.")
@click.option("--which", default="", metavar="WHICH", help="Number, accession or title in SPECTRUM.")
@click.option(
    "--list", is_flag=True, is_eager=True, expose_value=False, callback=show_and_exit(list_checks),
    help="List the tune compounds with their editions and end.",
)  # fmt: skip
def check(spectrum: Path, tune: str, edition: str, which: str) -> None:
    """Judge the SPECTRUM of a tune compound by the limits of a method, ion by ion."""
    from identify.evidence.criteria_files import load_instrument_check
    from identify.evidence.instrument import passes
    from identify.pipeline.confirm import check_tune
    from identify.pipeline.one_spectrum import read_one_spectrum

    load_instrument_check(tune, edition)
    limits, verdicts = check_tune(read_one_spectrum(spectrum, which), tune, edition)
    say(f"{limits.name}, {limits.title}: {limits.compound}")
    say(f"  source: {limits.source}; {limits.provenance}")
    say_table(
        ("m/z", "observed", "expected", "verdict"),
        ((str(row.mz), row.observed, row.expected, row.verdict.value) for row in verdicts),
    )
    say("meets every limit" if passes(verdicts) else "does not meet every limit")
    if "memory" in limits.provenance:
        say("Caution: these limits are written from memory: check them against the method before relying on them.")
