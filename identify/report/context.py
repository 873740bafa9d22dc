"""What the page shows, as typed contexts: built here by pure functions, so that templates only loop and print.

Every text that came from a file passes `visible_text`; every number is already words. Fields ending in ``_svg`` hold markup made
by this package and are the only ones a template may print unescaped.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from identify.ranking.claim import PUBLISHED_LEVELS
from identify.records import (
    Candidate,
    Claim,
    ClaimLevel,
    CleaningStep,
    EvidenceItem,
    Explanation,
    FollowUp,
    Identification,
    LibraryState,
    MolecularIonEstimate,
    Report,
    Verdict,
)
from identify.report.plots import (
    MassMark,
    contribution_bar_svg,
    mirror_svg,
    probability_bar_svg,
    spectrum_svg,
)
from identify.report.structures import StructureSheet
from identify.report.words import (
    CAUTIONS,
    LEVEL_MEANINGS,
    NONE,
    VERDICT_MARKS,
    compound_name,
    count_verdicts,
    counted,
    minutes_text,
    mz_text,
    probability_text,
    relative_text,
    score_text,
    signed_text,
    source_text,
    visible_text,
)
from identify.writers.results_json import round_explanation

DETAILED = 5
"""Candidates shown with mirror plot, evidence and explanation; the rest are table rows."""
MAX_IONS_NAMED = 12
MAX_REMOVED_SHOWN = 40
LONG = 2000


@dataclass(frozen=True, slots=True)
class Fact:
    """A name and a value."""

    name: str
    value: str


@dataclass(frozen=True, slots=True)
class Mark:
    """A verdict as sign, word and style, or how often it was given."""

    sign: str
    word: str
    style: str
    number: int = 0


@dataclass(frozen=True, slots=True)
class LevelChance:
    """Probability at one level, with its bar."""

    name: str
    probability: str
    bar_svg: str


@dataclass(frozen=True, slots=True)
class ClaimContext:
    """The claim: sentence, level, published levels, chances, members."""

    statement: str
    level: str
    style: str
    meaning: str
    published: str
    chances: tuple[LevelChance, ...]
    members: tuple[str, ...]
    unlisted: str


@dataclass(frozen=True, slots=True)
class Figure:
    """A drawing with its caption."""

    plot_svg: str
    caption: str


@dataclass(frozen=True, slots=True)
class MassRow:
    """One estimate of the molecular mass."""

    mass: str
    probability: str
    basis: str


@dataclass(frozen=True, slots=True)
class EvidenceRow:
    """One evidence item in words and numbers."""

    kind: str
    mark: Mark
    reason: str
    observed: str
    expected: str
    log_odds: str
    source: str


@dataclass(frozen=True, slots=True)
class ExplanationNode:
    """A value, its bar and the parts it is the sum of."""

    label: str
    value: str
    detail: str
    bar_svg: str
    parts: tuple[ExplanationNode, ...]


@dataclass(frozen=True, slots=True)
class CandidateRow:
    """One line of the candidates table."""

    rank: str
    name: str
    anchor: str
    formula: str
    measured_as: str
    cosine: str
    reverse: str
    matched: str
    probability: str
    marks: tuple[Mark, ...]
    structure: str
    """Id of the structure symbol; empty for none."""
    smiles: str
    standing: str
    """Standing of the entry where it is not an ordinary reference."""


@dataclass(frozen=True, slots=True)
class CandidateDetail:
    """Everything on one candidate."""

    anchor: str
    row: CandidateRow
    is_first: bool
    facts: tuple[Fact, ...]
    mirror: Figure
    evidence: tuple[EvidenceRow, ...]
    explanation: ExplanationNode
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class FollowUpRow:
    """A proposed measurement."""

    action: str
    reason: str
    decides: str
    candidates: str


@dataclass(frozen=True, slots=True)
class CleaningRow:
    """One cleaning step."""

    step: str
    reason: str
    before: str
    after: str
    removed: str


@dataclass(frozen=True, slots=True)
class QueryContext:
    """One query, ready to print."""

    number: int
    anchor: str
    name: str
    facts: tuple[Fact, ...]
    claim: ClaimContext
    spectrum: Figure
    masses: tuple[MassRow, ...]
    mass_agreement: str
    candidates: tuple[CandidateRow, ...]
    has_derivatives: bool
    details: tuple[CandidateDetail, ...]
    follow_up: tuple[FollowUpRow, ...]
    cleaning: tuple[CleaningRow, ...]
    cleaning_summary: str
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class SummaryRow:
    """One line of the table at the top."""

    number: int
    anchor: str
    name: str
    time: str
    statement: str
    level: str
    style: str
    probability: str
    next_step: str


@dataclass(frozen=True, slots=True)
class LevelRow:
    """One step of the claim ladder with its counterparts."""

    level: str
    meaning: str
    msi: str
    schymanski: str


@dataclass(frozen=True, slots=True)
class CreditRow:
    """Entries shown that share licence and authors."""

    licence: str
    authors: str
    entries: str


@dataclass(frozen=True, slots=True)
class RejectionRow:
    """An input that was left out."""

    source: str
    reason: str
    detail: str


@dataclass(frozen=True, slots=True)
class PageContext:
    """The whole page."""

    title: str
    subtitle: str
    date: str
    program: str
    summary: tuple[SummaryRow, ...]
    counts: tuple[Fact, ...]
    queries: tuple[QueryContext, ...]
    ladder: tuple[LevelRow, ...]
    verdicts: tuple[Mark, ...]
    cautions: tuple[str, ...]
    libraries: tuple[Fact, ...]
    credits: tuple[CreditRow, ...]
    settings: tuple[Fact, ...]
    rejected: tuple[RejectionRow, ...]
    structures_svg: str


def build_page(report: Report, *, date: str = "") -> PageContext:
    """Context of the whole page.

    Parameters
    ----------
    report : Report
    date : str
        Shown in the head; the report itself knows no clock.

    Returns
    -------
    PageContext
    """
    sheet = StructureSheet()
    threshold = float(report.settings.get("claim_threshold", 0.95))
    queries = tuple(
        _query(number, found, threshold, sheet) for number, found in enumerate(report.identifications, start=1)
    )
    libraries = ", ".join(visible_text(state.path) for state in report.libraries) or "no library"
    return PageContext(
        title="Identification of unknown spectra",
        subtitle=f"{counted(len(queries), 'query', 'queries')} against {libraries}",
        date=visible_text(date),
        program=f"{visible_text(report.program)} {visible_text(report.version)}",
        summary=tuple(_summary(found, query) for found, query in zip(report.identifications, queries, strict=True)),
        counts=_counts(report),
        queries=queries,
        ladder=tuple(LevelRow(level.value, LEVEL_MEANINGS[level], *PUBLISHED_LEVELS[level]) for level in ClaimLevel),
        verdicts=tuple(_mark(verdict) for verdict in Verdict),
        cautions=CAUTIONS,
        libraries=tuple(_library(state) for state in report.libraries),
        credits=_credits(report),
        settings=tuple(_settings(report.settings)),
        rejected=tuple(
            RejectionRow(
                visible_text(item.source) + (f", line {item.line}" if item.line is not None else ""),
                visible_text(item.reason),
                _rejection_detail(item.found, item.expected, item.hint),
            )
            for item in report.rejected
        ),
        structures_svg=sheet.symbols_svg(),
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
        probability=probability_text(found.claim.probability),
        next_step=query.follow_up[0].action if query.follow_up else "",
    )


def _query(number: int, found: Identification, threshold: float, sheet: StructureSheet) -> QueryContext:
    anchor = f"query-{number}"
    record = found.query.record
    name = visible_text(record.identity.name or record.title) or f"Query {number}"
    rows = tuple(
        _candidate_row(candidate, anchor, sheet if place < DETAILED else None)
        for place, candidate in enumerate(found.candidates)
    )
    details = tuple(
        _candidate_detail(candidate, row, name)
        for candidate, row in zip(found.candidates[:DETAILED], rows, strict=False)
    )
    return QueryContext(
        number=number,
        anchor=anchor,
        name=name,
        facts=_query_facts(found),
        claim=_claim(found.claim, found.in_library_probability, threshold),
        spectrum=_spectrum(found, name, anchor),
        masses=_masses(found.molecular_ion),
        mass_agreement=visible_text(found.molecular_ion.agreement, LONG),
        candidates=rows,
        has_derivatives=any(row.measured_as for row in rows),
        details=details,
        follow_up=tuple(_follow_up(plan) for plan in found.follow_up),
        cleaning=tuple(_cleaning(step) for step in found.query.spectrum.steps),
        cleaning_summary=_cleaning_summary(found.query.spectrum.steps),
        notes=tuple(visible_text(note, LONG) for note in found.notes),
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
        ("best candidate", claim.compound_probability),
        ("its isomer group", claim.group_probability),
        ("its class", claim.class_probability),
        ("compound is in the library", in_library_probability),
    )
    unlisted = ""
    if claim.unlisted_isomers is not None:
        unlisted = f"{counted(claim.unlisted_isomers, 'isomer')} without an entry could give the same spectrum."
    return ClaimContext(
        statement=visible_text(claim.statement, LONG),
        level=claim.level.value,
        style=claim.level.value.replace(" ", "-"),
        meaning=LEVEL_MEANINGS[claim.level],
        published=_published(claim),
        chances=tuple(
            LevelChance(name, probability_text(value), probability_bar_svg(value, threshold)) for name, value in chances
        ),
        members=tuple(visible_text(name) for name in claim.members),
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
    order = sorted(zip(peaks.relative.tolist(), peaks.mz.tolist(), strict=True), key=lambda pair: (-pair[0], pair[1]))
    ions = ", ".join(f"{mz_text(mz)} ({relative_text(value)})" for value, mz in order[:MAX_IONS_NAMED])
    rest = len(order) - MAX_IONS_NAMED
    caption = f"Principal ions, m/z (relative intensity): {ions}" + (f" and {rest} smaller." if rest > 0 else ".")
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


def _candidate_row(candidate: Candidate, anchor: str, sheet: StructureSheet | None) -> CandidateRow:
    entry, identity = candidate.entry, candidate.entry.identity
    return CandidateRow(
        rank=str(candidate.rank),
        name=compound_name(identity.name, entry.accession),
        anchor=f"{anchor}-candidate-{candidate.rank}" if sheet else "",
        formula=visible_text(identity.formula, 60) or NONE,
        measured_as=visible_text(entry.measured_as, 40),
        cosine=score_text(candidate.cosine),
        reverse=score_text(candidate.reverse),
        matched=f"{candidate.aligned.n_matched} of {candidate.aligned.mz.size}",
        probability=probability_text(candidate.probability),
        marks=tuple(_mark(verdict, number) for verdict, number in count_verdicts(candidate.evidence))
        if candidate.evidence
        else (),
        structure=sheet.symbol_for(identity.smiles) if sheet else "",
        smiles=visible_text(identity.smiles),
        standing="" if entry.status.value == "reference" else entry.status.value,
    )


def _candidate_detail(candidate: Candidate, row: CandidateRow, query_name: str) -> CandidateDetail:
    return CandidateDetail(
        anchor=row.anchor,
        row=row,
        is_first=candidate.rank == 1,
        facts=_candidate_facts(candidate),
        mirror=_mirror(candidate, row, query_name),
        evidence=tuple(_evidence(item) for item in candidate.evidence),
        explanation=_explanation(candidate.explanation),
        notes=tuple(visible_text(note, LONG) for note in candidate.notes),
    )


def _candidate_facts(candidate: Candidate) -> tuple[Fact, ...]:
    entry = candidate.entry
    facts = [
        Fact("formula", visible_text(entry.identity.formula, 60) or NONE),
        Fact("InChIKey", visible_text(entry.identity.inchikey, 60) or NONE),
        Fact("entry", f"{visible_text(entry.accession) or NONE}, {entry.status.value}"),
        Fact("library", visible_text(candidate.library)),
        Fact("licence", visible_text(entry.licence) or "not stated"),
        Fact("authors", visible_text(entry.authors) or "not stated"),
    ]
    if entry.measured_as:
        measured = visible_text(entry.measured_as, 40)
        formula = visible_text(entry.formula_as_measured, 60)
        facts.insert(1, Fact("measured as", f"{measured}, {formula}" if formula else measured))
    if entry.retention.index is not None:
        phase = f" ({visible_text(entry.retention.phase)} phase)" if entry.retention.phase else ""
        facts.append(Fact("retention index", f"{entry.retention.index:.0f}{phase}"))
    if candidate.n_entries > 1:
        facts.append(Fact("entries among the hits", str(candidate.n_entries)))
    return tuple(facts)


def _mirror(candidate: Candidate, row: CandidateRow, query_name: str) -> Figure:
    aligned = candidate.aligned
    rows = list(zip(aligned.mz.tolist(), aligned.query.tolist(), aligned.entry.tolist(), strict=True))
    only_query = _largest([(mz, query) for mz, query, entry in rows if entry <= 0])
    only_entry = _largest([(mz, entry) for mz, query, entry in rows if query <= 0])
    caption = (
        f"{aligned.n_matched} of {counted(len(rows), 'ion')} match, compared from m/z {aligned.lowest_mz}. "
        f"Only in the query: {only_query}. Only in the entry: {only_entry}."
    )
    drawn = mirror_svg(
        aligned, name=f"{row.anchor}-mirror", title=f"Mirror plot: {query_name} and {row.name}", description=caption
    )
    return Figure(drawn, caption)


def _largest(ions: Sequence[tuple[float, float]], limit: int = 6) -> str:
    if not ions:
        return "none"
    order = sorted(ions, key=lambda ion: (-ion[1], ion[0]))
    text = ", ".join(f"{mz_text(mz)} ({relative_text(value)})" for mz, value in order[:limit])
    return text + (f" and {len(order) - limit} smaller" if len(order) > limit else "")


def _evidence(item: EvidenceItem) -> EvidenceRow:
    expected = visible_text(item.expected, LONG)
    uncertainty = visible_text(item.uncertainty, LONG)
    return EvidenceRow(
        kind=visible_text(item.kind),
        mark=_mark(item.verdict),
        reason=visible_text(item.reason, LONG),
        observed=visible_text(item.observed, LONG) or NONE,
        expected=" · ".join(part for part in (expected, uncertainty) if part) or NONE,
        log_odds=signed_text(item.log_odds) if item.log_odds else NONE,
        source=visible_text(item.source, LONG),
    )


def _mark(verdict: Verdict, number: int = 0) -> Mark:
    return Mark(VERDICT_MARKS[verdict], verdict.value, verdict.value.replace(" ", "-"), number)


def _explanation(tree: Explanation) -> ExplanationNode:
    rounded = round_explanation(tree, 2)
    return _node(rounded, max(_magnitudes(rounded)))


def _magnitudes(tree: Explanation) -> list[float]:
    return [abs(tree.value)] + [value for part in tree.parts for value in _magnitudes(part)]


def _node(tree: Explanation, largest: float) -> ExplanationNode:
    return ExplanationNode(
        label=visible_text(tree.label),
        value=signed_text(tree.value),
        detail=visible_text(tree.detail, LONG),
        bar_svg=contribution_bar_svg(tree.value, largest),
        parts=tuple(_node(part, largest) for part in tree.parts),
    )


def _follow_up(plan: FollowUp) -> FollowUpRow:
    return FollowUpRow(
        action=visible_text(plan.action, LONG),
        reason=visible_text(plan.reason, LONG),
        decides=visible_text(plan.decides, LONG),
        candidates=", ".join(visible_text(name) for name in plan.candidates),
    )


def _cleaning(step: CleaningStep) -> CleaningRow:
    removed = ", ".join(f"{mz_text(mz)} ({intensity:g})" for mz, intensity in step.removed[:MAX_REMOVED_SHOWN])
    rest = len(step.removed) - MAX_REMOVED_SHOWN
    return CleaningRow(
        step=visible_text(step.step),
        reason=visible_text(step.reason, LONG),
        before=str(step.peaks_before),
        after=str(step.peaks_after),
        removed=(removed + (f" and {rest} more" if rest > 0 else "")) or "none",
    )


def _cleaning_summary(steps: Sequence[CleaningStep]) -> str:
    n_removed = sum(len(step.removed) for step in steps)
    return f"{counted(len(steps), 'step')}, {counted(n_removed, 'peak')} removed"


def _library(state: LibraryState) -> Fact:
    size = f"{counted(state.entries, 'entry', 'entries')} of {counted(state.compounds, 'compound')}"
    return Fact(visible_text(state.path), f"{size}, fingerprint {visible_text(state.fingerprint)}")


def _credits(report: Report) -> tuple[CreditRow, ...]:
    groups: dict[tuple[str, str], dict[str, None]] = {}
    for found in report.identifications:
        for candidate in found.candidates:
            entry = candidate.entry
            key = (visible_text(entry.licence) or "not stated", visible_text(entry.authors) or "not stated")
            groups.setdefault(key, {})[visible_text(entry.accession) or NONE] = None
    return tuple(
        CreditRow(licence, authors, ", ".join(sorted(names))) for (licence, authors), names in sorted(groups.items())
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


def _rejection_detail(found: str, expected: str, hint: str) -> str:
    facts = [f"found {visible_text(found)}"] if found else []
    facts += [f"expected {visible_text(expected)}"] if expected else []
    sentence = f"{', '.join(facts)}." if facts else ""
    return " ".join(part for part in (sentence, visible_text(hint)) if part)
