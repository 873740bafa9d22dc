"""What the page shows: typed contexts, the only things a template sees.

All text is ready to print and all numbers are words. Fields ending in ``_svg`` hold markup made by this package and are
the only ones a template may print unescaped.
"""

from __future__ import annotations

from dataclasses import dataclass


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
    threshold: str
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
    """Number in the list of sources; empty when the item names none."""


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
    verdicts: str
    """The marks in words, for a screen reader."""
    structure: str
    """Id of the structure symbol; empty for none."""
    smiles: str
    standing: str
    """Standing of the entry where it is not an ordinary reference."""


@dataclass(frozen=True, slots=True)
class CandidateTable:
    """Candidates in a table; no rows for no table."""

    caption: str
    has_derivatives: bool
    rows: tuple[CandidateRow, ...]


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
    purity: tuple[str, ...]
    """Whether it is one compound, in sentences."""
    nature: tuple[str, ...]
    """Classes and analogues, in sentences."""
    candidates: CandidateTable
    details: tuple[CandidateDetail, ...]
    further: CandidateTable
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
class SourceRow:
    """Where the rule of an evidence check comes from, stated once for the page."""

    number: str
    anchor: str
    text: str


@dataclass(frozen=True, slots=True)
class RejectionRow:
    """An input that was left out."""

    source: str
    reason: str
    detail: str


@dataclass(frozen=True, slots=True)
class BatchRow:
    """One threshold: accepted answers and the expected share of wrong ones by both estimates, as shown."""

    threshold: str
    accepted: str
    by_model: str
    by_second: str


@dataclass(frozen=True, slots=True)
class BatchTable:
    """One level: its rows and its curve."""

    level: str
    rows: tuple[BatchRow, ...]
    curve_svg: str


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
    is_long: bool
    ladder: tuple[LevelRow, ...]
    verdicts: tuple[Mark, ...]
    cautions: tuple[str, ...]
    libraries: tuple[Fact, ...]
    credits: tuple[CreditRow, ...]
    sources: tuple[SourceRow, ...]
    settings: tuple[Fact, ...]
    rejected: tuple[RejectionRow, ...]
    structures_svg: str
    batch: tuple[BatchTable, ...] = ()
    """Expected wrong answers among those accepted; empty when the queries are too few."""
