"""One candidate as the page shows it: table row, mirror plot, evidence, explanation."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from identify.records import Candidate, EvidenceItem, Explanation, Verdict
from identify.report.contexts import (
    CandidateDetail,
    CandidateRow,
    CandidateTable,
    EvidenceRow,
    ExplanationNode,
    Fact,
    Figure,
    Mark,
    SourceRow,
)
from identify.report.plots import contribution_bar_svg, mirror_svg
from identify.report.structures import StructureSheet
from identify.report.words import (
    LONG_TEXT,
    NONE,
    VERDICT_MARKS,
    compound_name,
    count_verdicts,
    counted,
    file_name,
    ions_text,
    probability_text,
    score_text,
    sentence,
    signed_text,
    visible_text,
)
from identify.writers.explanation_json import round_explanation

MAX_UNMATCHED_NAMED = 6


class SourceList:
    """Sources named so far; each is stated once for the page and referred to by number."""

    def __init__(self) -> None:
        self._numbers: dict[str, str] = {}

    def number_of(self, source: str) -> str:
        """Number of a source, from 1; empty for no source.

        Parameters
        ----------
        source : str

        Returns
        -------
        str
        """
        text = sentence(source)
        return self._numbers.setdefault(text, str(len(self._numbers) + 1)) if text else ""

    def rows(self) -> tuple[SourceRow, ...]:
        """All sources in the order of their numbers."""
        return tuple(SourceRow(number, f"source-{number}", text) for text, number in self._numbers.items())


def build_candidate_table(
    candidates: Sequence[Candidate], anchor: str, sheet: StructureSheet | None, caption: str
) -> CandidateTable:
    """Table of candidates; a standing that all entries share is said once, in the caption.

    Parameters
    ----------
    candidates : sequence of Candidate
    anchor : str
        Id of the query on the page.
    sheet : StructureSheet or None
        Collects the drawings; None for rows without drawing and link.
    caption : str

    Returns
    -------
    CandidateTable
    """
    rows = tuple(_row(candidate, anchor, sheet) for candidate in candidates)
    standings = {row.standing for row in rows}
    if len(rows) > 1 and len(standings) == 1 and "" not in standings:
        caption += f"; standing of every entry: {rows[0].standing}"
        rows = tuple(replace(row, standing="") for row in rows)
    return CandidateTable(caption, any(row.measured_as for row in rows), rows)


def _row(candidate: Candidate, anchor: str, sheet: StructureSheet | None) -> CandidateRow:
    entry, identity = candidate.entry, candidate.entry.identity
    marks = tuple(build_mark(verdict, number) for verdict, number in count_verdicts(candidate.evidence) if number)
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
        marks=marks,
        verdicts="evidence: " + ", ".join(f"{item.number} {item.word}" for item in marks),
        structure=sheet.symbol_for(identity.smiles) if sheet else "",
        smiles=visible_text(identity.smiles),
        standing="" if entry.status.value == "reference" else entry.status.value,
    )


def build_candidate_detail(
    candidate: Candidate, row: CandidateRow, query_name: str, sources: SourceList
) -> CandidateDetail:
    """Everything on one candidate.

    Parameters
    ----------
    candidate : Candidate
    row : CandidateRow
        Its row, made with a structure sheet.
    query_name : str
    sources : SourceList
        Collects the sources of the evidence.

    Returns
    -------
    CandidateDetail
    """
    return CandidateDetail(
        anchor=row.anchor,
        row=row,
        is_first=candidate.rank == 1,
        facts=_candidate_facts(candidate),
        mirror=_mirror(candidate, row, query_name),
        evidence=tuple(_evidence(item, sources) for item in candidate.evidence),
        explanation=_explanation(candidate),
        notes=tuple(sentence(note) for note in candidate.notes),
    )


def _candidate_facts(candidate: Candidate) -> tuple[Fact, ...]:
    entry = candidate.entry
    facts = [
        Fact("formula", visible_text(entry.identity.formula, 60) or NONE),
        Fact("InChIKey", visible_text(entry.identity.inchikey, 60) or NONE),
        Fact("entry", f"{visible_text(entry.accession) or NONE}, {entry.status.value}"),
        Fact("library", file_name(candidate.library)),
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
    only_query = ions_text(((mz, query) for mz, query, entry in rows if entry <= 0), MAX_UNMATCHED_NAMED)
    only_entry = ions_text(((mz, entry) for mz, query, entry in rows if query <= 0), MAX_UNMATCHED_NAMED)
    caption = (
        f"{aligned.n_matched} of {counted(len(rows), 'ion')} match, compared from m/z {aligned.lowest_mz}. "
        f"Only in the query: {only_query}. Only in the entry: {only_entry}."
    )
    drawn = mirror_svg(
        aligned, name=f"{row.anchor}-mirror", title=f"Mirror plot: {query_name} and {row.name}", description=caption
    )
    return Figure(drawn, caption)


def _evidence(item: EvidenceItem, sources: SourceList) -> EvidenceRow:
    expected = visible_text(item.expected, LONG_TEXT)
    uncertainty = visible_text(item.uncertainty, LONG_TEXT)
    return EvidenceRow(
        kind=visible_text(item.kind),
        mark=build_mark(item.verdict),
        reason=sentence(item.reason),
        observed=visible_text(item.observed, LONG_TEXT),
        expected=" · ".join(part for part in (expected, uncertainty) if part),
        log_odds=signed_text(item.log_odds) if item.log_odds else "",
        source=sources.number_of(item.source),
    )


def build_mark(verdict: Verdict, number: int = 0) -> Mark:
    """Sign, word and style of a verdict.

    Parameters
    ----------
    verdict : Verdict
    number : int
        How often it was given, where that is counted.

    Returns
    -------
    Mark
    """
    return Mark(VERDICT_MARKS[verdict], verdict.value, verdict.value.replace(" ", "-"), number)


def _explanation(candidate: Candidate) -> ExplanationNode:
    rounded = round_explanation(candidate.explanation, 2)
    # The evidence table has said these sentences already.
    told = frozenset(item.reason for item in candidate.evidence)
    return _node(rounded, max(_magnitudes(rounded)), told)


def _magnitudes(tree: Explanation) -> Iterator[float]:
    yield abs(tree.value)
    for part in tree.parts:
        yield from _magnitudes(part)


def _node(tree: Explanation, largest: float, told: frozenset[str]) -> ExplanationNode:
    return ExplanationNode(
        label=visible_text(tree.label),
        value=signed_text(tree.value),
        detail="" if tree.detail in told else visible_text(tree.detail, LONG_TEXT),
        bar_svg=contribution_bar_svg(tree.value, largest),
        parts=tuple(_node(part, largest, told) for part in tree.parts),
    )
