"""Every reference checked against its own metadata, its replicates and its neighbours, with a proposal what to do.

Two kinds of findings: statements that contradict each other (a SPLASH, a formula and a structure), which stand by
themselves, and observations on the spectrum, whose log-odds (how much more often wrong entries show them than right ones)
add up. The sum decides between use, use with caution and quarantine; a person decides whether to follow.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, replace

from identify.evidence.facts import FormulaFacts, formula_facts, spectrum_facts
from identify.index import SearchIndex, search_index
from identify.library.audit_cells import (
    ABOVE,
    DEPTH,
    LEAST_COSINE,
    NEAR_COSINE,
    REPLICATES,
    SHIFT,
    Cell,
    Neighbour,
    may_be_shifted,
    observe_entry,
    top_of_cluster,
)
from identify.library.audit_metadata import AuditFinding, Grade, check_statements
from identify.library.audit_weights import BASE_LOG_ODDS, CAUTION_FROM, QUARANTINE_FROM, WEIGHTS
from identify.library.replicates import are_replicates, find_replicates
from identify.library.store import Library
from identify.records import CleanSpectrum, Entry, EntryStatus, Peaks
from identify.retention import find_suspect_indices
from identify.similarity.scores import cosine_score
from identify.spectra.align import align

Progress = Callable[[int, str], None]

USE, CAUTION, QUARANTINE = "use", "use with caution", "quarantine"
SHOWN_FROM = 0.5
"""Observations with less evidence against the entry are not findings."""
SILENT = frozenset(
    {"no similar spectrum", "usual loss", "wide, excess explainable", "even N, few even", "odd N, few even"}
)
"""Observations that lack support rather than contradict: they count, but are never more than a note."""
SERIOUS_FROM = 2.0
MANY_ENTRIES = 2000
"""From here on the compiled search is loaded: below it would take longer than it saves."""
NEAR_DUPLICATE = 0.9999
IDENTICAL_TO_OTHER = 0.995


@dataclass(frozen=True, slots=True)
class EntryAudit:
    """Findings on one entry, weightiest first."""

    entry_id: int
    accession: str
    name: str
    findings: tuple[AuditFinding, ...]
    log_odds: float
    """Evidence from the spectrum that the entry is wrong (natural logarithm), all observations and the base rate."""
    suspicion: str
    """What the error may be; empty when there is no idea."""
    proposal: str
    """`use`, `use with caution` or `quarantine`."""
    overruled: str = ""
    """Reason of the reviewer who put the entry back into use; empty when nobody did."""


@dataclass(frozen=True, slots=True)
class AuditReport:
    """Audits of all entries in use or in quarantine."""

    path: str
    fingerprint: str
    audits: tuple[EntryAudit, ...]
    """By entry id."""

    @property
    def by_proposal(self) -> Mapping[str, int]:
        """Number of entries by proposal, most frequent first."""
        return dict(Counter(audit.proposal for audit in self.audits).most_common())

    @property
    def by_finding(self) -> Mapping[str, int]:
        """Number of entries by kind of finding, most frequent first; notes are not counted."""
        return self._count(lambda finding: finding.grade is not Grade.NOTE)

    @property
    def by_note(self) -> Mapping[str, int]:
        """Number of entries by kind of note, most frequent first."""
        return self._count(lambda finding: finding.grade is Grade.NOTE)

    def _count(self, is_wanted: Callable[[AuditFinding], bool]) -> dict[str, int]:
        kinds = (
            kind for audit in self.audits for kind in {finding.kind for finding in audit.findings if is_wanted(finding)}
        )
        return dict(Counter(kinds).most_common())

    @property
    def to_quarantine(self) -> Mapping[str, str]:
        """Reasons by accession for entries proposed for quarantine, as `quarantine_entries` takes them."""
        return {
            audit.accession: "; ".join(finding.kind for finding in audit.findings if finding.grade is not Grade.NOTE)
            for audit in self.audits
            if audit.proposal == QUARANTINE
        }


def audit_library(library: Library, index: SearchIndex, *, progress: Progress | None = None) -> AuditReport:
    """Audits of every entry that is in use or in quarantine.

    Parameters
    ----------
    library : Library
    index : SearchIndex
        Of the library.
    progress : callable, optional
        Called with the number of entries done, every 50.

    Returns
    -------
    AuditReport

    Raises
    ------
    LibraryError, LibraryDamaged
        If it cannot be read.
    """
    audited = frozenset(EntryStatus) - {EntryStatus.WITHDRAWN, EntryStatus.REFUSED, EntryStatus.PROPOSED}
    ids = library.entry_ids(audited)
    overruled = read_overruled(library)
    doubts = find_suspect_indices(library.iter_entries(audited))
    many, audits = len(ids) >= MANY_ENTRIES, []
    for number, entry_id in enumerate(ids):
        if progress and number % 50 == 0:
            progress(number, "entries")
        (entry,) = library.get_entries([entry_id])
        audits.append(
            audit_entry(
                library, index, entry, overruled=overruled.get(entry_id, ""), doubt=doubts.get(entry_id, ""), many=many
            )
        )
    return AuditReport(str(library.path), library.fingerprint, tuple(audits))


def read_overruled(library: Library) -> dict[int, str]:
    """Reasons why reviewers put quarantined entries back into use, by entry id."""
    out: dict[int, str] = {}
    for event in library.events():
        for entry_id, _ in event.details.get("standing", ()):
            if event.kind == "reinstated":
                out[entry_id] = f"{event.who}: {event.reason}"
            else:
                out.pop(entry_id, None)
    return out


def audit_entry(
    library: Library, index: SearchIndex, entry: Entry, *, overruled: str = "", doubt: str = "", many: bool = False
) -> EntryAudit:
    """Audit of one entry against the searchable entries of the library.

    Parameters
    ----------
    library : Library
    index : SearchIndex
        Of the library.
    entry : Entry
        In the library; its standing does not matter.
    overruled : str
        Why a reviewer has put it back into use; the proposal is then at most `use with caution`.
    doubt : str
        What `identify.retention.find_suspect_indices` says of its retention index beside those of the whole library.
    many : bool
        Whether thousands of audits follow.

    Returns
    -------
    EntryAudit
    """
    cells, neighbours, replicates = observe_in_library(library, index, entry, leave_out={entry.id}, many=many)
    log_odds, observed = weigh_cells(cells)
    (record,) = library.get_records([entry.id])
    stated = check_statements(entry, record, [replicate.entry for replicate in replicates], doubt)
    proposal = propose(log_odds, stated)
    if proposal == USE or log_odds < CAUTION_FROM:  # the sum speaks for the entry: single signs are no findings
        observed = [replace(finding, grade=Grade.NOTE) for finding in observed]
    found = [*stated, *_find_twins(entry, neighbours), *observed]
    if proposal != USE and all(finding.grade is Grade.NOTE for finding in found):
        found.append(_sum_of_signs(log_odds))
    findings = sorted(found, key=lambda finding: (_ORDER[finding.grade], -finding.log_odds))
    if overruled and proposal == QUARANTINE:
        proposal = CAUTION
    suspicion = suspect(entry, neighbours, replicates, cells) if log_odds >= CAUTION_FROM else ""
    return EntryAudit(
        entry.id, entry.accession, entry.identity.name, tuple(findings), log_odds, suspicion, proposal, overruled
    )


def _sum_of_signs(log_odds: float) -> AuditFinding:
    """What there is to say where no single observation explains the proposal."""
    reason = "Nothing stands out by itself; small signs and missing support add up."
    return AuditFinding(
        "many small signs", Grade.CAUTION, reason, f"log-odds {log_odds:+.2f}", f"below {CAUTION_FROM:+.2f}"
    )


def observe_in_library(
    library: Library, index: SearchIndex, entry: Entry, *, leave_out: Collection[int], many: bool = False
) -> tuple[tuple[Cell, ...], list[Neighbour], list[Neighbour]]:
    """Cells of an entry, with the neighbours and replicates they come from.

    Parameters
    ----------
    library : Library
    index : SearchIndex
    entry : Entry
        Need not be in the library.
    leave_out : collection of int
        Entry ids that do not count as neighbours: its own.
    many : bool
        Whether thousands of entries follow.

    Returns
    -------
    cells : tuple of Cell
    neighbours, replicates : list of Neighbour
        Best first.
    """
    neighbours, replicates = look_around(library, index, entry, leave_out=leave_out, many=many)
    shifted = None
    if may_be_shifted(entry, neighbours, replicates):
        hits = search_index(index, _one_lower(entry.spectrum), 2 + len(leave_out), many=many)
        shifted = max((hit.cosine for hit in hits if hit.entry_id not in leave_out), default=0.0)
    return observe_entry(entry, neighbours, replicates, cosine_if_shifted=shifted), neighbours, replicates


def _one_lower(spectrum: CleanSpectrum) -> CleanSpectrum:
    peaks = spectrum.nominal
    kept = peaks.mz > 1.0
    return CleanSpectrum(Peaks(peaks.mz[kept] - 1.0, peaks.intensity[kept]), None, max(spectrum.lowest_mz - 1, 0))


_ORDER = {Grade.SERIOUS: 0, Grade.CAUTION: 1, Grade.NOTE: 2}


def look_around(
    library: Library, index: SearchIndex, entry: Entry, *, leave_out: Collection[int], many: bool = False
) -> tuple[list[Neighbour], list[Neighbour]]:
    """Most similar other entries, and the other entries of the same compound in the same form.

    Parameters
    ----------
    library : Library
    index : SearchIndex
    entry : Entry
        Need not be in the library.
    leave_out : collection of int
        Entry ids that do not count as neighbours: its own.
    many : bool
        Whether thousands of entries follow.

    Returns
    -------
    neighbours, replicates : list of Neighbour
        Best first.
    """
    found = search_index(index, entry.spectrum, DEPTH, many=many)
    hits = [hit for hit in found if hit.cosine >= LEAST_COSINE and hit.entry_id not in leave_out]
    entries = library.get_entries([hit.entry_id for hit in hits])
    neighbours = [Neighbour(other, hit.cosine) for other, hit in zip(entries, hits, strict=True)]
    replicates = [neighbour for neighbour in neighbours if are_replicates(entry, neighbour.entry)]
    seen = {neighbour.entry.id for neighbour in neighbours} | set(leave_out)
    for other in find_replicates(library, entry):
        if other.id not in seen:
            cosine = cosine_score(align(entry.spectrum, other.spectrum), index.weighting)
            replicates.append(Neighbour(other, cosine))
    return neighbours, sorted(replicates, key=lambda neighbour: -neighbour.cosine)


def weigh_cells(cells: Sequence[Cell]) -> tuple[float, list[AuditFinding]]:
    """Log-odds that an entry is wrong, and the observations that speak for it.

    Parameters
    ----------
    cells : sequence of Cell

    Returns
    -------
    log_odds : float
        Base rate of the training set and the weights of all cells. Replicates that agree count for nothing where there are
        ions above M: a derivative or label nobody declared is the same in all of them.
    findings : list of AuditFinding
    """
    total, findings = BASE_LOG_ODDS, []
    is_above = any(cell.kind == ABOVE and cell.cell in {"some", "strong"} for cell in cells)
    for cell in cells:
        weight = WEIGHTS.get(cell.kind, {}).get(cell.cell, 0.0)
        if is_above and cell.kind == REPLICATES:
            weight = max(weight, 0.0)
        total += weight
        if weight >= SHOWN_FROM:
            grade = Grade.SERIOUS if weight >= SERIOUS_FROM else Grade.CAUTION
            grade = Grade.NOTE if cell.cell in SILENT else grade
            findings.append(AuditFinding(cell.kind, grade, cell.reason, cell.observed, cell.expected, weight))
    return total, findings


def propose(log_odds: float, stated: Sequence[AuditFinding]) -> str:
    """What to do with an entry: `use`, `use with caution`, `quarantine`.

    Examples
    --------
    >>> propose(0.0, []), propose(3.0, [])
    ('use', 'quarantine')
    """
    grades = {finding.grade for finding in stated}
    if Grade.SERIOUS in grades or log_odds >= QUARANTINE_FROM:
        return QUARANTINE
    return CAUTION if Grade.CAUTION in grades or log_odds >= CAUTION_FROM else USE


def _find_twins(entry: Entry, neighbours: Sequence[Neighbour]) -> list[AuditFinding]:
    found = []
    for neighbour in neighbours[:5]:
        other = neighbour.entry
        seen = f"{other.accession}, {other.identity.name}, cosine {neighbour.cosine:.4f}"
        if other.compound_id == entry.compound_id and neighbour.cosine >= NEAR_DUPLICATE:
            reason = "Practically the same spectrum is in the library twice."
            found.append(AuditFinding("near-duplicate", Grade.NOTE, reason, seen))
        elif other.compound_id != entry.compound_id and neighbour.cosine >= IDENTICAL_TO_OTHER:
            reason = "The spectrum is practically that of another compound."
            found.append(AuditFinding("like another compound", Grade.NOTE, reason, seen))
    return found[:2]


def suspect(
    entry: Entry, neighbours: Sequence[Neighbour], replicates: Sequence[Neighbour], cells: Sequence[Cell] = ()
) -> str:
    """What the error in an entry may be, in words; empty when nothing fits.

    Parameters
    ----------
    entry : Entry
    neighbours, replicates : sequence of Neighbour
    cells : sequence of Cell

    Returns
    -------
    str
    """
    formula = formula_facts(entry.formula_as_measured)
    if any(cell.kind == SHIFT and cell.cell == "far better" for cell in cells):
        return "all m/z one too high"
    best = next((neighbour for neighbour in neighbours if neighbour.cosine >= NEAR_COSINE), None)
    if best is not None and best.entry.compound_id != entry.compound_id and not replicates:
        known = formula_facts(best.entry.formula_as_measured)
        if known is not None and formula is not None and known.nominal_mass != formula.nominal_mass:
            return f"the spectrum resembles that of {best.entry.identity.name} ({best.entry.accession})"
    if replicates and replicates[0].cosine < 0.5 and best is not None:
        return f"unlike the compound's other spectra, it resembles that of {best.entry.identity.name}"
    return "" if formula is None else _suspect_mass(entry, formula)


def _suspect_mass(entry: Entry, formula: FormulaFacts) -> str:
    """What the ions at and above M suggest."""
    facts = spectrum_facts(entry.spectrum, entry.acquisition)
    mass = formula.nominal_mass
    if formula.ratio(2) >= 0.3:
        from_isotope = facts.at(mass + 2) / formula.ratio(2)
        if from_isotope >= 5.0 and 6.0 <= from_isotope / max(facts.at(mass), 0.01) <= 16.0:
            return "the intensity of M is about ten times too low for its isotope peak: a typing error?"
    shift = top_of_cluster(facts, formula) - mass
    if shift > 0 and shift % 72 == 0 and not entry.measured_as:
        return f"{shift // 72} trimethylsilyl group(s) more than declared"
    if shift == 1:
        return "[M+H]+ instead of M, or M one too low"
    if 3 <= shift <= 12 and not entry.is_labelled and facts.at(mass) < 1.0:
        return f"an isotope-labelled compound ({shift} Da heavier) under the unlabelled formula"
    if shift > 12:
        return f"a molecule {shift} Da heavier than the formula"
    return ""
