"""A GC-MS run in, its components named: run → components → queries → the same search as for any spectrum."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from identify import __version__
from identify.errors import SpectrumError
from identify.pipeline.search import Progress, SearchableLibrary, identify_query, make_query, open_libraries
from identify.readers.runs import read_run
from identify.records import Acquisition, Identification, Rejection, Report, Retention, SpectrumRecord
from identify.retention import Ladder, linear_index
from identify.runs.components import find_components
from identify.runs.model import Component, Run
from identify.settings import Settings


@dataclass(frozen=True, slots=True, eq=False)
class RunReport:
    """A run, its components, and what each was identified as.

    Attributes
    ----------
    components : tuple of Component
        In the order of elution.
    report : Report
        Identifications by component: query ``c<number>`` belongs to component `number`. Components whose spectrum cannot
        be searched stand in `report.rejected`.
    """

    run: Run
    components: tuple[Component, ...]
    report: Report


def run_file(
    path: Path,
    library_paths: Sequence[Path],
    settings: Settings,
    *,
    blank: Path | None = None,
    ladder: Ladder | None = None,
    progress: Progress | None = None,
) -> RunReport:
    """Everything that eluted in a run, with names.

    Parameters
    ----------
    path : Path
        ANDI-MS netCDF or mzML.
    library_paths : sequence of Path
    settings : Settings
    blank : Path, optional
        A blank run: what it holds too is marked.
    ladder : Ladder, optional
        Retention times of n-alkanes, in minutes.
    progress : callable, optional

    Returns
    -------
    RunReport

    Raises
    ------
    InputError, LibraryError, UsageError
        If the run, the blank or a library cannot be used.
    """
    run = read_run(path)
    known = find_components(read_run(blank)) if blank else ()
    components = find_components(run, blank=known)
    rejected: list[Rejection] = []
    found: list[Identification] = []
    with open_libraries(library_paths, settings) as libraries:
        for done, component in enumerate(components):
            if progress:
                progress(done, f"component {component.number}")
            identification = _identify(component, run, libraries, settings, ladder, rejected)
            if identification:
                found.append(identification)
        states = tuple(searchable.state for searchable in libraries)
    report = Report("ionwitness", __version__, settings.as_dict(), states, tuple(found), tuple(rejected))
    return RunReport(run, components, report)


def _identify(
    component: Component,
    run: Run,
    libraries: Sequence[SearchableLibrary],
    settings: Settings,
    ladder: Ladder | None,
    rejected: list[Rejection],
) -> Identification | None:
    record = component_record(component, run, ladder)
    try:
        query = make_query(record, component.number, settings)
    except SpectrumError as error:
        rejected.append(Rejection(record.title, None, "unusable spectrum", error.found, error.expected, error.hint))
        return None
    return identify_query(query, libraries, settings)


def component_record(component: Component, run: Run, ladder: Ladder | None) -> SpectrumRecord:
    """The component's spectrum as a record, as if it had been read from a file.

    Parameters
    ----------
    component : Component
    run : Run
    ladder : Ladder or None
        In minutes; None gives no retention index.

    Returns
    -------
    SpectrumRecord
    """
    minutes = component.time_s / 60.0
    index = linear_index(minutes, ladder) if ladder else None
    return SpectrumRecord(
        source=run.source,
        mz=component.peaks.mz,
        intensity=component.peaks.intensity,
        title=f"component {component.number} at {minutes:.3f} min",
        acquisition=Acquisition(
            instrument=run.instrument,
            ionization="EI",
            inlet="GC",
            ms_level=1,
            polarity="positive",
            lowest_mz=float(run.mz.min()) if run.mz.size else None,
        ),
        retention=Retention(time_s=component.time_s, index=index, index_kind="linear" if index else ""),
    )
