"""From a report to the contexts of the page: pure functions, so that templates only loop and print.

Every text that came from a file passes `visible_text`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from identify.ranking.claim import PUBLISHED_LEVELS
from identify.records import (
    Claim,
    ClaimLevel,
    CleaningStep,
    FollowUp,
    Identification,
    LibraryState,
    MolecularIonEstimate,
    Report,
    Verdict,
)
from identify.report.batch_section import build_batch_tables
from identify.report.candidates import SourceList, build_candidate_detail, build_candidate_table, build_mark
from identify.report.contexts import (
    ClaimContext,
    CleaningRow,
    CreditRow,
    Fact,
    Figure,
    FollowUpRow,
    LevelChance,
    LevelRow,
    MassRow,
    PageContext,
    QueryContext,
    RejectionRow,
    SummaryRow,
)
from identify.report.nature import nature_sentences, purity_sentences
from identify.report.plots import MassMark, probability_bar_svg, spectrum_svg
from identify.report.structures import StructureSheet
from identify.report.words import (
    CAUTIONS,
    LEVEL_MEANINGS,
    LONG_TEXT,
    NONE,
    claim_probability_text,
    counted,
    file_name,
    ions_text,
    minutes_text,
    mz_text,
    probability_text,
    rejection_text,
    sentence,
    source_text,
    visible_text,
)

LONG_REPORT = 40
"""Above this many queries the browser lays out only what is looked at."""
DETAILED = 5
"""Candidates shown with mirror plot, evidence and explanation, unless the caller wants fewer."""
MAX_IONS_NAMED = 12
MAX_REMOVED_SHOWN = 40


def build_page(report: Report, *, date: str = "", detailed: int = DETAILED) -> PageContext:
    """Context of the whole page.

    Parameters
    ----------
    report : Report
    date : str
        Shown in the head; the report itself knows no clock.
    detailed : int
        Candidates of each query shown with mirror plot, evidence and explanation; the rest are table rows.

    Returns
    -------
    PageContext
    """
    sheet, sources = StructureSheet(), SourceList()
    threshold = float(report.settings.get("claim_threshold", 0.95))
    queries = tuple(
        _query(number, found, threshold, detailed, sheet, sources)
        for number, found in enumerate(report.identifications, start=1)
    )
    libraries = ", ".join(file_name(state.path) for state in report.libraries) or "no library"
    return PageContext(
        title="Identification of unknown spectra",
        subtitle=f"{counted(len(queries), 'query', 'queries')} against {libraries}",
        date=visible_text(date),
        program=f"{visible_text(report.program)} {visible_text(report.version)}",
        summary=tuple(_summary(found, query) for found, query in zip(report.identifications, queries, strict=True)),
        counts=_counts(report),
        queries=queries,
        is_long=len(queries) > LONG_REPORT,
        ladder=tuple(LevelRow(level.value, LEVEL_MEANINGS[level], *PUBLISHED_LEVELS[level]) for level in ClaimLevel),
        verdicts=tuple(build_mark(verdict) for verdict in Verdict),
        cautions=CAUTIONS,
        libraries=tuple(_library(state) for state in report.libraries),
        credits=_credits(report),
        sources=sources.rows(),
        settings=tuple(_settings(report.settings)),
        rejected=tuple(
            RejectionRow(
                visible_text(item.source) + (f", line {item.line}" if item.line is not None else ""),
                visible_text(item.reason),
                rejection_text(item),
            )
            for item in report.rejected
        ),
        structures_svg=sheet.symbols_svg(),
        batch=build_batch_tables(report.identifications),
    )


def _counts(report: Report) -> tuple[Fact, ...]:
    levels = [found.claim.level for found in report.identifications]
    facts = [Fact(level.value, str(levels.count(level))) for level in ClaimLevel if level in levels]
    if report.rejected:
        facts.append(Fact("inputs not used", str(len(report.rejected))))
    return tuple(facts)


def _summary(found: Identification, query: QueryContext) -> SummaryRow:
    time_s = found.query.record.retention.time_s
    return SummaryRow(
        number=query.number,
        anchor=query.anchor,
        name=query.name,
        time="" if time_s is None else minutes_text(time_s),
        statement=query.claim.statement,
        level=query.claim.level,
        style=query.claim.style,
        probability=claim_probability_text(found.claim),
        next_step=query.follow_up[0].action if query.follow_up else "",
    )


def _query(
    number: int, found: Identification, threshold: float, detailed: int, sheet: StructureSheet, sources: SourceList
) -> QueryContext:
    anchor = f"query-{number}"
    record = found.query.record
    name = visible_text(record.identity.name or record.title) or f"Query {number}"
    shown, further = found.candidates[:detailed], found.candidates[detailed:]
    table = build_candidate_table(shown, anchor, sheet, f"Candidates for {name}, one for each compound, best first")
    rest = f"{counted(len(further), 'more candidate')} for {name}"
    return QueryContext(
        number=number,
        anchor=anchor,
        name=name,
        facts=_query_facts(found),
        claim=_claim(found.claim, found.in_library_probability, threshold),
        spectrum=_spectrum(found, name, anchor),
        masses=_masses(found.molecular_ion),
        mass_agreement=sentence(found.molecular_ion.agreement),
        purity=purity_sentences(found),
        nature=nature_sentences(found),
        candidates=table,
        details=tuple(
            build_candidate_detail(candidate, row, name, sources)
            for candidate, row in zip(shown, table.rows, strict=True)
        ),
        further=build_candidate_table(further, anchor, None, rest),
        follow_up=tuple(_follow_up(plan) for plan in found.follow_up),
        cleaning=tuple(_cleaning(step) for step in found.query.spectrum.steps),
        cleaning_summary=_cleaning_summary(found.query.spectrum.steps),
        notes=tuple(sentence(note) for note in found.notes),
    )


def _query_facts(found: Identification) -> tuple[Fact, ...]:
    record, spectrum = found.query.record, found.query.spectrum
    facts = [Fact("read from", source_text(record.source.path, record.source.line))]
    if record.retention.time_s is not None:
        facts.append(Fact("retention time", minutes_text(record.retention.time_s)))
    if record.retention.index is not None:
        phase = f" ({visible_text(record.retention.phase)} phase)" if record.retention.phase else ""
        facts.append(Fact("retention index", f"{record.retention.index:.0f}{phase}"))
    facts.append(Fact("peaks searched", f"{len(spectrum.nominal)}, from m/z {spectrum.lowest_mz}"))
    if record.acquisition.energy_ev is not None:
        facts.append(Fact("electron energy", f"{record.acquisition.energy_ev:g} eV"))
    instrument = record.acquisition.instrument_type or record.acquisition.instrument
    if instrument:
        facts.append(Fact("instrument", visible_text(instrument)))
    return tuple(facts)


def _claim(claim: Claim, in_library_probability: float, threshold: float) -> ClaimContext:
    chances = (
        ("best candidate", claim.compound_probability, threshold),
        ("its isomer group", claim.group_probability, threshold),
        ("its class", claim.class_probability, threshold),
        ("compound in the library", in_library_probability, None),
    )
    unlisted = ""
    if claim.unlisted_isomers:
        unlisted = f"{counted(claim.unlisted_isomers, 'isomer')} without an entry could give the same spectrum."
    return ClaimContext(
        statement=sentence(claim.statement),
        level=claim.level.value,
        style=claim.level.value.replace(" ", "-"),
        meaning=LEVEL_MEANINGS[claim.level],
        published=_published(claim),
        chances=tuple(
            LevelChance(name, probability_text(value), probability_bar_svg(value, limit))
            for name, value, limit in chances
        ),
        members=tuple(visible_text(name) for name in claim.members),
        threshold=f"The tick on a bar is the threshold of a claim, {probability_text(threshold)}.",
        unlisted=unlisted,
    )


def _published(claim: Claim) -> str:
    levels = []
    if claim.msi_2007:
        levels.append(f"MSI 2007 level {visible_text(claim.msi_2007)}")
    if claim.schymanski_2014:
        levels.append(f"Schymanski 2014 level {visible_text(claim.schymanski_2014)}")
    return ", ".join(levels) or "not mapped to a published scheme"


def _spectrum(found: Identification, name: str, anchor: str) -> Figure:
    peaks = found.query.spectrum.nominal
    ions = ions_text(zip(peaks.mz.tolist(), peaks.relative.tolist(), strict=True), MAX_IONS_NAMED)
    caption = f"Principal ions, m/z (relative intensity): {ions}."
    mark = None
    if found.molecular_ion.estimates:
        best = found.molecular_ion.estimates[0]
        mark = MassMark(best.nominal_mass, f"M {best.nominal_mass}? {probability_text(best.probability)}")
    drawn = spectrum_svg(
        peaks,
        name=f"{anchor}-spectrum",
        title=f"Spectrum of {name}",
        description=caption,
        lowest_mz=found.query.spectrum.lowest_mz,
        mark=mark,
    )
    return Figure(drawn, caption)


def _masses(found: MolecularIonEstimate) -> tuple[MassRow, ...]:
    rows = [
        MassRow(
            str(row.nominal_mass),
            probability_text(row.probability),
            "; ".join(visible_text(word) for word in row.basis),
        )
        for row in found.estimates[:4]
    ]
    rows.append(
        MassRow("not observed", probability_text(found.not_observed_probability), "no peak at the molecular mass")
    )
    return tuple(rows)


def _follow_up(plan: FollowUp) -> FollowUpRow:
    return FollowUpRow(
        action=visible_text(plan.action, LONG_TEXT),
        reason=sentence(plan.reason),
        decides=sentence(plan.decides),
        candidates=", ".join(visible_text(name) for name in plan.candidates),
    )


def _cleaning(step: CleaningStep) -> CleaningRow:
    removed = ", ".join(f"{mz_text(mz)} ({intensity:g})" for mz, intensity in step.removed[:MAX_REMOVED_SHOWN])
    rest = len(step.removed) - MAX_REMOVED_SHOWN
    return CleaningRow(
        step=visible_text(step.step),
        reason=visible_text(step.reason, LONG_TEXT),
        before=str(step.peaks_before),
        after=str(step.peaks_after),
        removed=(removed + (f" and {rest} more" if rest > 0 else "")) or "none",
    )


def _cleaning_summary(steps: Sequence[CleaningStep]) -> str:
    n_removed = sum(len(step.removed) for step in steps)
    return f"{counted(len(steps), 'step')}, {counted(n_removed, 'peak')} removed"


def _library(state: LibraryState) -> Fact:
    size = f"{counted(state.entries, 'entry', 'entries')} of {counted(state.compounds, 'compound')}"
    calibration = f"; probabilities calibrated by {visible_text(state.calibration)}" if state.calibration else ""
    return Fact(visible_text(state.path), f"{size}, fingerprint {visible_text(state.fingerprint)}{calibration}")


def _credits(report: Report) -> tuple[CreditRow, ...]:
    groups: dict[tuple[str, str], dict[str, None]] = {}
    for found in report.identifications:
        for candidate in found.candidates:
            entry = candidate.entry
            key = (visible_text(entry.licence) or "not stated", visible_text(entry.authors) or "not stated")
            groups.setdefault(key, {})[visible_text(entry.accession) or NONE] = None
    return tuple(
        CreditRow(licence, authors, "; ".join(sorted(names))) for (licence, authors), names in sorted(groups.items())
    )


def _settings(settings: Mapping[str, object], prefix: str = "") -> list[Fact]:
    facts: list[Fact] = []
    for name, value in settings.items():
        label = f"{prefix}{name}"
        if isinstance(value, Mapping):
            facts += _settings(value, f"{label}.")
        else:
            facts.append(Fact(visible_text(label), visible_text(value)))
    return facts
