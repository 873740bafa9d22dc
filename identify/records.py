"""The nouns, as frozen dataclasses: one type per stage, none born half empty.

A spectrum's way through the program::

    file ──readers──► SpectrumRecord ──spectra.clean──► Query ──index──► Hit (all entries, fast scores)
    Hit + Entry ──align, evidence──► Candidate (one per compound) ──ranking──► Identification ──► Report

Everything here holds data and invariants only: no I/O, no clock, no arithmetic beyond what an invariant needs.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from types import MappingProxyType
from typing import Any

import numpy as np

from identify.errors import InputError
from identify.explanations import Explanation as Explanation
from identify.explanations import Terms as Terms
from identify.peaks import FloatArray as FloatArray
from identify.peaks import Peaks as Peaks
from identify.peaks import read_only as read_only

EMPTY: Mapping[str, str] = MappingProxyType({})


@dataclass(frozen=True, slots=True)
class Source:
    """Where something was read: file (or ``archive::member``), first line, running number in the file."""

    path: str
    line: int | None = None
    number: int | None = None

    def __str__(self) -> str:
        return self.path if self.line is None else f"{self.path}:{self.line}"


@dataclass(frozen=True, slots=True)
class Rejection:
    """An input that was left out: counted, listed, never silent."""

    source: str
    line: int | None
    reason: str
    """Short and countable ("not electron ionization"); the same words for the same reason."""
    found: str
    expected: str
    hint: str = ""

    @property
    def message(self) -> str:
        """The whole sentence, in the form that all errors share."""
        where = str(Source(self.source, self.line)) if self.source else ""
        return InputError(self.reason, where=where, found=self.found, expected=self.expected, hint=self.hint).message


@dataclass(frozen=True, slots=True)
class Identity:
    """Which compound a record says it is; every field as the source states it, empty when it does not."""

    name: str = ""
    formula: str = ""
    """Formula of the compound itself, Hill order, no derivative groups."""
    smiles: str = ""
    inchi: str = ""
    inchikey: str = ""
    cas: str = ""
    other_names: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Acquisition:
    """How a spectrum was measured; empty or None where the source is silent."""

    instrument: str = ""
    instrument_type: str = ""
    """Separation-ionization-analyser code of the open record format (`GC-EI-TOF`, `EI-B`)."""
    ionization: str = ""
    """`EI`, `CI`, `ESI` …; empty when not stated."""
    energy_ev: float | None = None
    inlet: str = ""
    ms_level: int | None = None
    polarity: str = ""
    lowest_mz: float | None = None
    """Stated lower limit of the scan range."""
    highest_mz: float | None = None


@dataclass(frozen=True, slots=True)
class Retention:
    """Retention data as the source states it."""

    time_s: float | None = None
    index: float | None = None
    index_kind: str = ""
    """`kovats`, `linear`, `lee` or empty."""
    column: str = ""
    phase: str = ""
    """Column phase class: `non-polar`, `semi-polar`, `polar` or empty (see `identify.retention`)."""


@dataclass(frozen=True, slots=True, eq=False)
class SpectrumRecord:
    """One spectrum exactly as a reader found it: peaks unsorted and uncleaned, metadata typed.

    `mz` and `intensity` have shape ``(n_peaks,)`` in file order and hold finite numbers of any sign. `extra` keeps what
    has no field of its own: shown, never used.
    """

    source: Source
    mz: FloatArray
    intensity: FloatArray
    accession: str = ""
    title: str = ""
    identity: Identity = Identity()
    acquisition: Acquisition = Acquisition()
    retention: Retention = Retention()
    derivative: str = ""
    """Derivative measured, in the words of the source (`3 TMS`, `n TMS`, `1MEOX 5TMS`); empty for none stated."""
    licence: str = ""
    authors: str = ""
    splash: str = ""
    comments: tuple[str, ...] = ()
    is_profile: bool = False
    extra: Mapping[str, str] = field(default_factory=lambda: EMPTY)

    def __post_init__(self) -> None:
        object.__setattr__(self, "mz", read_only(self.mz))
        object.__setattr__(self, "intensity", read_only(self.intensity))
        object.__setattr__(self, "extra", dict(self.extra))  # a plain dict crosses process boundaries


@dataclass(frozen=True, slots=True)
class CleaningStep:
    """What one cleaning step did, so that it can be read and undone."""

    step: str
    reason: str
    peaks_before: int
    peaks_after: int
    removed: tuple[tuple[float, float], ...] = ()
    """Removed ``(m/z, intensity)`` pairs, in the units of the input."""


@dataclass(frozen=True, slots=True, eq=False)
class CleanSpectrum:
    """A cleaned spectrum: integer-m/z peaks for searching, accurate ones where the source had them."""

    nominal: Peaks
    accurate: Peaks | None
    lowest_mz: int
    """Lowest m/z the measurement covers: the stated scan limit, else the lowest peak."""
    steps: tuple[CleaningStep, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Query:
    """A spectrum to identify: the record, and what cleaning made of it."""

    id: str
    record: SpectrumRecord
    spectrum: CleanSpectrum


class EntryStatus(StrEnum):
    """Standing of a library entry."""

    REFERENCE = "reference"
    OWN_STANDARD = "own standard"
    DEMONSTRATION = "demonstration"
    QUARANTINED = "quarantined"
    WITHDRAWN = "withdrawn"
    PROPOSED = "proposed"
    """A standard that waits for its review."""
    REFUSED = "refused"
    """A proposed standard that its reviewer did not accept."""


@dataclass(frozen=True, slots=True, eq=False)
class Entry:
    """One library spectrum with its provenance."""

    id: int
    """Row id: unique and stable within one library."""
    compound_id: int
    accession: str
    identity: Identity
    spectrum: CleanSpectrum
    acquisition: Acquisition
    retention: Retention
    measured_as: str
    """Derivative measured in normal form (`3 TMS`, `n TMS`, `1 MEOX 5 TMS`); empty for the compound itself."""
    formula_as_measured: str
    """Hill formula including the derivative and isotope labels; empty when not knowable (`n TMS`, no formula)."""
    is_labelled: bool
    status: EntryStatus
    licence: str
    authors: str
    source: str
    comments: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Hit:
    """Fast scores of one entry for one query."""

    entry_id: int
    cosine: float
    reverse: float


@dataclass(frozen=True, slots=True, eq=False)
class AlignedPeaks:
    """Two spectra on one m/z axis over the range both cover; 0 where one of them has no peak.

    All arrays have shape ``(n,)``; intensities are relative (base peak of each whole spectrum = 100).
    """

    mz: FloatArray
    query: FloatArray
    entry: FloatArray
    lowest_mz: int

    @property
    def n_matched(self) -> int:
        """Number of m/z values at which both spectra have a peak."""
        return int(np.count_nonzero((self.query > 0) & (self.entry > 0)))


class Verdict(StrEnum):
    """What an evidence check says about a candidate."""

    AGREES = "agrees"
    CONFLICTS = "conflicts"
    INCONCLUSIVE = "inconclusive"
    NOT_ASSESSED = "not assessed"


@dataclass(frozen=True, slots=True)
class EvidenceItem:
    """One independent check of one candidate.

    `log_odds` is natural-log evidence for (+) or against (−) the candidate; exactly 0 unless the verdict is `agrees` or
    `conflicts`. `source` names where the rule and its numbers come from.
    """

    kind: str
    verdict: Verdict
    reason: str
    observed: str = ""
    expected: str = ""
    uncertainty: str = ""
    log_odds: float = 0.0
    source: str = ""

    def __post_init__(self) -> None:
        if not self.reason:
            raise ValueError("an evidence item needs its reason")
        silent = self.verdict in (Verdict.INCONCLUSIVE, Verdict.NOT_ASSESSED)
        if silent and self.log_odds != 0.0:
            raise ValueError(f"{self.kind}: a verdict '{self.verdict}' carries no log-odds")


@dataclass(frozen=True, slots=True)
class MassEstimate:
    """One nominal mass the molecular ion may have, with probability in [0, 1] and what it rests on."""

    nominal_mass: int
    probability: float
    basis: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class MolecularIonEstimate:
    """Distribution over nominal molecular masses from the query alone."""

    estimates: tuple[MassEstimate, ...]
    not_observed_probability: float
    """Probability that the spectrum shows no peak at the molecular mass."""
    agreement: str = ""
    """Which estimators agree, in words."""


@dataclass(frozen=True, slots=True)
class Part:
    """One entry's part in the explanation of a query: its share of the explained ion current, in [0, 1]."""

    name: str
    accession: str
    share: float
    formula: str = ""
    """As measured; empty where not known."""


@dataclass(frozen=True, slots=True, eq=False)
class Purity:
    """Is the query one compound? What it is made of, as far as library entries explain it.

    `agrees`: one entry explains it; `conflicts`: a second one is needed; `inconclusive`: the entries explain too little.
    """

    verdict: Verdict
    reason: str
    parts: tuple[Part, ...] = ()
    """Largest first."""
    explained_share: float = 0.0
    """Share of the query's intensity that the parts explain, in [0, 1]."""
    misfit: tuple[float, ...] = ()
    """Relative misfit with the best one, two and three entries."""
    residual: Peaks | None = None
    """What is left, in percent of the query's base peak, fit to be searched as a query; None when nothing notable is."""
    background: tuple[str, ...] = ()
    """Known background named among the residual ions."""


@dataclass(frozen=True, slots=True)
class ClassEvidence:
    """A class or substructure the query may have, with probability in [0, 1], calibrated with the compound removed."""

    name: str
    probability: float
    neighbours: tuple[str, ...] = ()
    """Nearest entries of this class that voted for it."""
    ions: tuple[str, ...] = ()
    """Characteristic ions met, with their source."""


@dataclass(frozen=True, slots=True)
class Analogue:
    """An entry whose spectrum becomes the query's when its fragments are shifted by a mass difference."""

    name: str
    accession: str
    shift: int
    """Query minus analogue, in Da."""
    text: str
    """The difference in words, such as "plus CH2"."""
    score: float


@dataclass(frozen=True, slots=True, eq=False)
class Candidate:
    """A compound proposed for a query: its best entry, exact scores, evidence, probability and the reason for each."""

    rank: int
    entry: Entry
    library: str
    """Path of the library the entry came from."""
    aligned: AlignedPeaks
    cosine: float
    reverse: float
    evidence: tuple[EvidenceItem, ...]
    probability: float
    explanation: Explanation
    n_entries: int = 1
    """Entries of this compound among the hits (shown, never used as a feature)."""
    notes: tuple[str, ...] = ()


class ClaimLevel(StrEnum):
    """The claim ladder, strongest first; `confirmed` is set by a person only."""

    CONFIRMED = "confirmed"
    SUPPORTED = "supported"
    TENTATIVE = "tentative"
    ISOMER_GROUP = "isomer group"
    CLASS = "class"
    NO_CLAIM = "no claim"


@dataclass(frozen=True, slots=True)
class Claim:
    """The strongest statement the identification supports."""

    level: ClaimLevel
    statement: str
    probability: float
    members: tuple[str, ...] = ()
    compound_probability: float = 0.0
    group_probability: float = 0.0
    class_probability: float = 0.0
    unlisted_isomers: int | None = None
    """Isomers without an entry, counted or bounded; None when not assessed."""
    msi_2007: str = ""
    schymanski_2014: str = ""


@dataclass(frozen=True, slots=True)
class FollowUp:
    """A next measurement: what, why, which candidates it separates, and what result would decide."""

    action: str
    reason: str
    candidates: tuple[str, ...] = ()
    decides: str = ""
    priority: float = 0.0
    """Expected information in nats; orders the work list."""


@dataclass(frozen=True, slots=True, eq=False)
class Identification:
    """Everything found for one query."""

    query: Query
    molecular_ion: MolecularIonEstimate
    in_library_probability: float
    claim: Claim
    candidates: tuple[Candidate, ...]
    follow_up: tuple[FollowUp, ...] = ()
    notes: tuple[str, ...] = ()
    purity: Purity | None = None
    """None when not assessed, for a result of an older version."""
    classes: tuple[ClassEvidence, ...] = ()
    """Most probable first; looked for where no compound or isomer group can be claimed."""
    analogues: tuple[Analogue, ...] = ()
    """Best first; looked for where no compound or isomer group can be claimed."""


@dataclass(frozen=True, slots=True)
class LibraryState:
    """Which library, in which state, answered."""

    path: str
    fingerprint: str
    entries: int
    compounds: int
    calibration: str = ""
    """Calibration of the probabilities that the library carries; empty for the shipped one."""


@dataclass(frozen=True, slots=True, eq=False)
class Report:
    """Results of one command: what every writer and page shows. It owns the exit code."""

    program: str
    version: str
    settings: Mapping[str, Any]
    libraries: tuple[LibraryState, ...]
    identifications: tuple[Identification, ...]
    rejected: tuple[Rejection, ...] = ()

    @property
    def exit_code(self) -> int:
        """0 all inputs used, 1 some rejected, 3 none could be used."""
        if not self.rejected:
            return 0
        return 1 if self.identifications else 3
