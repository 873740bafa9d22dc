"""What was found in runs, as nouns: components with their identifications, the retention scale, shares, shared unknowns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from identify.records import ClaimLevel, Identification, Report
from identify.retention import Ladder
from identify.runs.model import Component, ComponentKind, Decomposition, Run

BACKGROUND_KINDS = (ComponentKind.AIR, ComponentKind.BLEED, ComponentKind.BLANK, ComponentKind.SOLVENT)


@dataclass(frozen=True, slots=True, eq=False)
class Finding:
    """A component and what it was identified as.

    Attributes
    ----------
    identification : Identification or None
        None where no search made sense (residual gas, bleed) or the spectrum is unusable; `reason` says why.
    unknown : int or None
        Number of the shared unknown this component belongs to; None when only one run was read.
    """

    component: Component
    identification: Identification | None
    reason: str = ""
    unknown: int | None = None

    @property
    def is_background(self) -> bool:
        """Whether the component is solvent, residual gas, bleed, or in the blank too."""
        return self.component.kind in BACKGROUND_KINDS

    @property
    def is_explained(self) -> bool:
        """Whether a claim at class level or better stands."""
        return self.identification is not None and self.identification.claim.level is not ClaimLevel.NO_CLAIM

    @property
    def retention_index(self) -> float | None:
        """Retention index of the component, where a scale gave one."""
        return self.identification.query.record.retention.index if self.identification else None


@dataclass(frozen=True, slots=True)
class RetentionScale:
    """How retention times became indices.

    Attributes
    ----------
    ladder : Ladder
        Times in minutes.
    origin : str
        In words: which file, run or peaks.
    uncertainty : float
        Standard uncertainty of an index on this scale, in index units.
    phase : str
        Phase class of the column; empty when not stated, and always for a self-calibrated scale, whose indices decide nothing.
    """

    ladder: Ladder
    origin: str
    uncertainty: float
    phase: str = ""


@dataclass(frozen=True, slots=True)
class Shares:
    """Where the signal of a run went; areas in intensity units × seconds.

    Attributes
    ----------
    solvent, background : float
        Solvent front; residual gas, bleed and what the blank shows too.
    explained : dict
        Area of all other components by claim level.
    unassigned : float
        Signal above background and noise that belongs to no component, outside the solvent front.
    """

    solvent: float
    background: float
    explained: dict[ClaimLevel, float]
    unassigned: float

    @property
    def compounds(self) -> float:
        """All signal outside solvent and background."""
        return sum(self.explained.values()) + self.unassigned

    def at_least(self, level: ClaimLevel) -> float:
        """Share of the signal outside solvent and background explained at `level` or better, in [0, 1].

        Parameters
        ----------
        level : ClaimLevel

        Returns
        -------
        float
        """
        order = list(ClaimLevel)
        inside = sum(area for own, area in self.explained.items() if order.index(own) <= order.index(level))
        return inside / self.compounds if self.compounds > 0 else 0.0


@dataclass(frozen=True, slots=True, eq=False)
class RunFindings:
    """One run and everything found in it, in the order of elution."""

    number: int
    run: Run
    decomposition: Decomposition
    findings: tuple[Finding, ...]
    scale: RetentionScale | None = None
    notes: tuple[str, ...] = ()

    @property
    def components(self) -> tuple[Component, ...]:
        """The components alone."""
        return tuple(finding.component for finding in self.findings)

    @property
    def shares(self) -> Shares:
        """Where the signal went."""
        return measure_shares(self.findings, self.decomposition)

    @property
    def unexplained(self) -> tuple[Finding, ...]:
        """Components outside solvent and background without a claim, largest first."""
        left = [finding for finding in self.findings if not finding.is_background and not finding.is_explained]
        return tuple(sorted(left, key=lambda finding: -finding.component.area))


def measure_shares(findings: Sequence[Finding], decomposition: Decomposition) -> Shares:
    """Areas by what explains them.

    Parameters
    ----------
    findings : sequence of Finding
    decomposition : Decomposition

    Returns
    -------
    Shares
    """
    solvent = sum(f.component.area for f in findings if f.component.kind is ComponentKind.SOLVENT)
    background = sum(f.component.area for f in findings if f.is_background) - solvent
    explained: dict[ClaimLevel, float] = {}
    for finding in findings:
        if not finding.is_background:
            level = finding.identification.claim.level if finding.identification else ClaimLevel.NO_CLAIM
            explained[level] = explained.get(level, 0.0) + finding.component.area
    outside = decomposition.unassigned.copy()
    for finding in findings:
        if finding.component.kind is ComponentKind.SOLVENT:
            c = finding.component
            outside[(decomposition.time_s >= c.start_s) & (decomposition.time_s <= c.end_s)] = 0.0
    return Shares(solvent, background, explained, float(outside.sum()) * decomposition.scan_time_s)


@dataclass(frozen=True, slots=True)
class Unknown:
    """The same component in several runs: one unknown.

    Attributes
    ----------
    members : tuple of (int, int)
        Run number and component number.
    """

    number: int
    members: tuple[tuple[int, int], ...]


@dataclass(frozen=True, slots=True, eq=False)
class RunsReport:
    """Results of one command on one or several runs.

    Attributes
    ----------
    report : Report
        All identifications, settings, libraries and rejections, as for any search.
    unknowns : tuple of Unknown
        Only with several runs: components that more than one run shows.
    """

    runs: tuple[RunFindings, ...]
    report: Report
    unknowns: tuple[Unknown, ...] = ()

    @property
    def run(self) -> Run:
        """The first run."""
        return self.runs[0].run

    @property
    def components(self) -> tuple[Component, ...]:
        """Components of the first run."""
        return self.runs[0].components
