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
from numpy.typing import ArrayLike, NDArray

from identify.errors import InputError, SpectrumError

FloatArray = NDArray[np.float64]
EMPTY: Mapping[str, str] = MappingProxyType({})


def read_only(values: ArrayLike) -> FloatArray:
    """Float64 copy of `values`, shape ``(n,)``, that nobody can write to."""
    array = np.array(values, dtype=np.float64).reshape(-1)
    array.setflags(write=False)
    return array


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


@dataclass(frozen=True, slots=True, eq=False)
class Peaks:
    """A usable peak list.

    Parameters
    ----------
    mz : array_like of shape (n_peaks,)
        m/z, finite, positive, strictly increasing.
    intensity : array_like of shape (n_peaks,)
        Intensity in any linear unit, finite, positive.

    Raises
    ------
    SpectrumError
        If an invariant does not hold.
    """

    mz: FloatArray
    intensity: FloatArray

    def __post_init__(self) -> None:
        mz, intensity = read_only(self.mz), read_only(self.intensity)
        if mz.shape != intensity.shape:
            raise SpectrumError(
                "peak list", found=f"{mz.size} m/z and {intensity.size} intensities", expected="as many"
            )
        # Few, cheap reductions: thousands of entries pass here per second. NaN fails every comparison.
        if mz.size and not (
            mz[0] > 0
            and mz[-1] < np.inf
            and (mz[1:] > mz[:-1]).all()
            and intensity.min() > 0
            and intensity.max() < np.inf
        ):
            raise _bad_peaks(mz, intensity)
        object.__setattr__(self, "mz", mz)
        object.__setattr__(self, "intensity", intensity)

    def __len__(self) -> int:
        return int(self.mz.size)

    @property
    def base_peak_mz(self) -> float:
        """m/z of the most intense peak (the lowest one on a tie)."""
        return float(self.mz[int(np.argmax(self.intensity))])

    @property
    def relative(self) -> FloatArray:
        """Intensities with the base peak at 100."""
        return self.intensity * (100.0 / self.intensity.max()) if self.intensity.size else self.intensity

    def intensity_at(self, nominal_mz: int) -> float:
        """Intensity at an integer m/z of a nominal peak list; 0 where there is no peak."""
        position = int(np.searchsorted(self.mz, nominal_mz))
        found = position < self.mz.size and self.mz[position] == nominal_mz
        return float(self.intensity[position]) if found else 0.0


def _bad_peaks(mz: FloatArray, intensity: FloatArray) -> SpectrumError:
    if not (np.isfinite(mz).all() and np.isfinite(intensity).all()):
        return SpectrumError("peak list", found="a value that is not finite", expected="finite numbers")
    if (intensity <= 0).any():
        return SpectrumError("peak list", found="an intensity ≤ 0", expected="positive intensities")
    return SpectrumError("peak list", found="m/z out of order", expected="positive, increasing m/z")


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
class Explanation:
    """A number and the parts it is the sum of."""

    label: str
    value: float
    detail: str = ""
    parts: tuple[Explanation, ...] = ()

    def __post_init__(self) -> None:
        if self.parts and abs(sum(part.value for part in self.parts) - self.value) > 1e-9:
            raise ValueError(f"parts of '{self.label}' do not add up to {self.value}")


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


@dataclass(frozen=True, slots=True)
class LibraryState:
    """Which library, in which state, answered."""

    path: str
    fingerprint: str
    entries: int
    compounds: int


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
