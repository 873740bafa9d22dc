"""GC-MS runs in, their components named: run → components → queries → the same search as for any spectrum → seen together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from identify import __version__
from identify.errors import InputError, SpectrumError, UsageError
from identify.pipeline.elution import weigh_by_elution
from identify.pipeline.joint import settle_jointly
from identify.pipeline.run_classes import name_classes
from identify.pipeline.search import Progress, SearchableLibrary, identify_query, make_query, open_libraries
from identify.pipeline.shared_unknowns import share_unknowns
from identify.readers.runs import read_run
from identify.records import Acquisition, Identification, Rejection, Report, Retention, SpectrumRecord
from identify.retention import Ladder, linear_index, phase_class
from identify.runs.alkanes import alkane_share, find_alkane_ladder
from identify.runs.components import decompose, find_components
from identify.runs.findings import Finding, RetentionScale, RunFindings, RunsReport
from identify.runs.model import Component, ComponentKind, Decomposition, Run
from identify.settings import Settings

NOT_SEARCHED = {
    ComponentKind.AIR: "residual gas is not searched",
    ComponentKind.BLEED: "bleed is not searched",
}
LADDER_UNCERTAINTY, RUN_LADDER_UNCERTAINTY, OWN_UNCERTAINTY = 3.0, 3.0, 30.0
"""Index units. ± 2–5 on the same column and method is common practice; a scale from the sample's own alkanes rests on their
identification and is not used as evidence."""


ALKANES_ONLY_SHARE = 0.8
"""A run whose alkanes make this share of all compounds' area is an alkane run."""


@dataclass(frozen=True, slots=True)
class RunOptions:
    """What is given beside the runs.

    Attributes
    ----------
    blank : Path or None
        Blank run: what it holds too is marked.
    ladder : Ladder or None
        n-Alkane times in minutes.
    ladder_run : Path or None
        Run of an n-alkane mixture; its ladder is found by spectra and spacing.
    column : str
        Name of the column phase, so that indices can be compared.
    self_calibrate : bool
        Whether a sample's own n-alkanes give an approximate scale where no ladder is given.
    """

    blank: Path | None = None
    ladder: Ladder | None = None
    ladder_run: Path | None = None
    column: str = ""
    self_calibrate: bool = True


def run_files(
    paths: Sequence[Path],
    library_paths: Sequence[Path],
    settings: Settings,
    options: RunOptions,
    progress: Progress | None = None,
) -> RunsReport:
    """Everything that eluted in several runs, with names; what several of them show is one unknown.

    Parameters
    ----------
    paths : sequence of Path
        ANDI-MS netCDF or mzML.
    library_paths : sequence of Path
    settings : Settings
    options : RunOptions
    progress : callable, optional

    Returns
    -------
    RunsReport
        A run that cannot be read among several is a rejection.

    Raises
    ------
    InputError, LibraryError, UsageError
        If no run, the blank, the ladder or a library cannot be used.
    """
    if options.ladder and options.ladder_run:
        raise UsageError("ladder", found="a table and a run", expected="one of them")
    known = find_components(read_run(options.blank)) if options.blank else ()
    given = _given_scale(options)
    rejected: list[Rejection] = []
    taken_apart = _take_apart(paths, known, rejected)
    given = given or _scale_among(taken_apart, options)
    runs: list[RunFindings] = []
    with open_libraries(library_paths, settings) as libraries:
        analysis = _Analysis(libraries, settings, options, given, rejected, progress)
        for number, (run, decomposition) in enumerate(taken_apart, start=1):
            first_query = 1 + sum(len(earlier.findings) for earlier in runs)
            runs.append(analysis.run(run, decomposition, number, first_query))
        states = tuple(searchable.state for searchable in libraries)
    shared, unknowns = share_unknowns(runs)
    found = tuple(f.identification for run in shared for f in run.findings if f.identification)
    report = Report("ionwitness", __version__, settings.as_dict(), states, found, tuple(rejected))
    return RunsReport(tuple(shared), report, unknowns)


def _take_apart(
    paths: Sequence[Path], blank: Sequence[Component], rejected: list[Rejection]
) -> list[tuple[Run, Decomposition]]:
    """Every run that can be read, with its components; the others are rejections, unless there is no other."""
    found = []
    for path in paths:
        try:
            run = read_run(path)
            found.append((run, decompose(run, blank)))
        except InputError as error:
            if len(paths) == 1:
                raise
            rejected.append(Rejection(str(path), None, error.what, error.found, error.expected, error.hint))
    if not found:
        raise InputError("runs", found=f"none of {len(paths)} readable", expected="at least one")
    return found


def _scale_among(taken_apart: Sequence[tuple[Run, Decomposition]], options: RunOptions) -> RetentionScale | None:
    """Scale of an alkane run that is one of several runs; None with one run only, or where no run is of alkanes alone."""
    if len(taken_apart) < 2:
        return None
    phase = phase_class(options.column) if options.column else ""
    for run, decomposition in taken_apart:
        if alkane_share(decomposition.components) < ALKANES_ONLY_SHARE:
            continue
        ladder = find_alkane_ladder(decomposition.components, alkanes_only=True)
        if ladder is not None:
            name = Path(run.source.path).name
            return RetentionScale(ladder, f"the alkane run {name}, found among the runs", RUN_LADDER_UNCERTAINTY, phase)
    return None


def _given_scale(options: RunOptions) -> RetentionScale | None:
    phase = phase_class(options.column) if options.column else ""
    if options.ladder:
        return RetentionScale(options.ladder, "alkane table", LADDER_UNCERTAINTY, phase)
    if options.ladder_run:
        ladder = find_alkane_ladder(find_components(read_run(options.ladder_run)), alkanes_only=True)
        if ladder is None:
            raise InputError(
                "alkane run", where=str(options.ladder_run), found="no series of n-alkanes",
                expected="at least three n-alkanes in evenly changing distances",
                hint="Give their times in a table instead: one line per alkane, like 'C10 8.00'.",
            )  # fmt: skip
        return RetentionScale(ladder, f"alkane run {options.ladder_run.name}", RUN_LADDER_UNCERTAINTY, phase)
    return None


@dataclass(frozen=True, slots=True)
class _Analysis:
    """One command's means, the same for every run."""

    libraries: Sequence[SearchableLibrary]
    settings: Settings
    options: RunOptions
    given: RetentionScale | None
    rejected: list[Rejection]
    progress: Progress | None

    def run(self, run: Run, decomposition: Decomposition, number: int, first_query: int) -> RunFindings:
        """Findings of one run."""
        scale = self.given or self._own_scale(decomposition.components)
        findings = []
        for component in decomposition.components:
            if self.progress:
                self.progress(first_query + component.number - 2, f"component {component.number}")
            findings.append(self._identify(component, run, scale, first_query + component.number - 1))
        width_s = decomposition.width_scans * decomposition.scan_time_s
        possible = weigh_by_elution(findings, scale, self.settings)
        settled = settle_jointly(possible, width_s, self.settings)
        named = name_classes(settled, self.settings, scale)
        return RunFindings(number, run, decomposition, named, scale, (*run.notes, *decomposition.notes))

    def _own_scale(self, components: Sequence[Component]) -> RetentionScale | None:
        ladder = find_alkane_ladder(components, alkanes_only=False) if self.options.self_calibrate else None
        if ladder is None:
            return None
        names = ", ".join(f"C{n} at {time:.2f} min" for n, time in zip(ladder.carbons, ladder.times, strict=True))
        return RetentionScale(ladder, f"this run's own n-alkanes ({names}), approximate", OWN_UNCERTAINTY)

    def _identify(self, component: Component, run: Run, scale: RetentionScale | None, number: int) -> Finding:
        if component.kind in NOT_SEARCHED:
            return Finding(component, None, NOT_SEARCHED[component.kind])
        record = component_record(component, run, scale)
        try:
            query = make_query(record, number, self.settings)
        except SpectrumError as error:
            source = f"{run.source}, {record.title}"
            self.rejected.append(Rejection(source, None, "unusable spectrum", error.found, error.expected, error.hint))
            return Finding(component, None, "unusable spectrum")
        return Finding(component, identify_query(query, self.libraries, self.settings))


def component_record(component: Component, run: Run, scale: RetentionScale | None) -> SpectrumRecord:
    """The component's spectrum as a record, as if it had been read from a file.

    Parameters
    ----------
    component : Component
    run : Run
    scale : RetentionScale or None
        None gives no retention index.

    Returns
    -------
    SpectrumRecord
    """
    minutes = component.time_s / 60.0
    index = linear_index(minutes, scale.ladder) if scale else None
    retention = Retention(
        time_s=component.time_s, index=index, index_kind="linear" if index else "", phase=scale.phase if scale else ""
    )
    return SpectrumRecord(
        source=run.source,
        mz=component.peaks.mz,
        intensity=component.peaks.intensity,
        title=f"component {component.number} at {minutes:.3f} min",
        acquisition=run_acquisition(run),
        retention=retention,
        extra={"purity": f"{component.purity:.3f}", "signal to noise": f"{component.signal_to_noise:.0f}"},
    )


def run_acquisition(run: Run) -> Acquisition:
    """How the scans of a run were measured, as far as the file says.

    Parameters
    ----------
    run : Run

    Returns
    -------
    Acquisition
    """
    return Acquisition(
        instrument=run.instrument, ionization="EI", inlet="GC", ms_level=1, polarity="positive",
        lowest_mz=float(run.mz.min()) if run.mz.size else None,
    )  # fmt: skip


def identify_scans(
    path: Path,
    at_min: Sequence[float],
    background_min: Sequence[float],
    library_paths: Sequence[Path],
    settings: Settings,
) -> Report:
    """Report on a spectrum averaged and subtracted by hand: one query.

    Parameters
    ----------
    path : Path
        The run.
    at_min : sequence of float
        Minutes: one (its nearest scan) or two (mean of the scans between them).
    background_min : sequence of float
        Minutes whose nearest scans, averaged, are subtracted; may be empty.
    library_paths : sequence of Path
    settings : Settings

    Returns
    -------
    Report

    Raises
    ------
    InputError, LibraryError, UsageError
        If the run, a time or a library cannot be used.
    """
    from identify.runs.averages import average_scans

    run = read_run(path)
    averaged = average_scans(run, at_min, background_min)
    record = SpectrumRecord(
        source=run.source, mz=averaged.peaks.mz, intensity=averaged.peaks.intensity, title=averaged.title,
        acquisition=run_acquisition(run), retention=Retention(time_s=averaged.time_s),
    )  # fmt: skip
    with open_libraries(library_paths, settings) as libraries:
        found: Identification = identify_query(make_query(record, 1, settings), libraries, settings)
        states = tuple(searchable.state for searchable in libraries)
    return Report("ionwitness", __version__, settings.as_dict(), states, (found,))
