"""Spectrum files or pasted peaks in, `Report` out."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import replace
from pathlib import Path

from identify import __version__
from identify.errors import IonwitnessError
from identify.pipeline.batch import identify_many, map_identifications
from identify.pipeline.search import Progress, SearchableLibrary, open_libraries
from identify.readers import read_pasted, read_spectra
from identify.records import (
    AlignedPeaks,
    Candidate,
    CleanSpectrum,
    Explanation,
    Identification,
    Identity,
    Peaks,
    Rejection,
    Report,
    SpectrumRecord,
    read_only,
)
from identify.settings import Settings
from identify.writers.results_json import identification_to_json, write_json_stream

IN_FULL = 60
"""Queries of which a streamed result keeps everything in memory: some tens of megabytes, for a terminal that shows candidates."""
NO_PEAKS = Peaks(read_only(()), read_only(()))


def search_files(
    paths: Sequence[Path],
    library_paths: Sequence[Path],
    settings: Settings,
    progress: Progress | None = None,
    *,
    as_of: Sequence[int | str] = (),
) -> Report:
    """Report on every spectrum in the files.

    Parameters
    ----------
    paths : sequence of Path
        Spectrum files of any readable format, folders or archives.
    library_paths : sequence of Path
    settings : Settings
    progress : callable, optional
    as_of : sequence of int or str
        See `identify.pipeline.search.open_libraries`.

    Returns
    -------
    Report
        With what was rejected; a file that cannot be read at all is a rejection, not an error.

    Raises
    ------
    LibraryError, UsageError
        See `identify.pipeline.search.open_libraries`.
    """
    rejected: list[Rejection] = []
    return _report(_read_all(paths, rejected), library_paths, settings, rejected, progress, as_of)


def search_to_json(
    paths: Sequence[Path],
    library_paths: Sequence[Path],
    settings: Settings,
    json_path: Path,
    progress: Progress | None = None,
    *,
    as_of: Sequence[int | str] = (),
) -> Report:
    """As `search_files`, with the result written query by query, so that memory stays bounded whatever their number.

    Parameters
    ----------
    paths, library_paths, settings, progress, as_of
        As for `search_files`.
    json_path : Path
        Holds the whole result afterwards, or what it held before if anything goes wrong.

    Returns
    -------
    Report
        Its first identifications (`IN_FULL`) are whole; of the others only an outline is kept (see `outline`).

    Raises
    ------
    LibraryError, UsageError
        As `search_files`; `UsageError` also when the file cannot be written.
    """
    rejected: list[Rejection] = []
    kept: list[Identification] = []

    def lines(libraries: Sequence[SearchableLibrary]) -> Iterator[str]:
        records = _read_all(paths, rejected)
        found = map_identifications(_write_down, records, libraries, settings, rejected, progress, as_of=as_of)
        for line, identification in found:
            kept.append(identification)
            yield line

    with open_libraries(library_paths, settings, as_of) as libraries:
        frame = _frame(libraries, settings)
        write_json_stream(json_path, frame, lines(libraries), rejected)
    return replace(frame, identifications=tuple(kept), rejected=tuple(rejected))


def _write_down(found: Identification) -> tuple[str, Identification]:
    number = int(found.query.id.removeprefix("q"))
    return identification_to_json(found), found if number <= IN_FULL else outline(found)


def outline(found: Identification) -> Identification:
    """What a list of many queries shows of one: query, claim, and of the candidates who they are and how probable.

    Parameters
    ----------
    found : Identification

    Returns
    -------
    Identification
        Without peaks, evidence, explanations and cleaning steps.
    """
    bare = CleanSpectrum(NO_PEAKS, None, found.query.spectrum.lowest_mz)
    record = replace(found.query.record, mz=NO_PEAKS.mz, intensity=NO_PEAKS.intensity, comments=(), extra={})
    return replace(
        found,
        query=replace(found.query, record=record, spectrum=bare),
        candidates=tuple(_outline_candidate(candidate) for candidate in found.candidates),
        follow_up=(),
        purity=None,
        classes=(),
        analogues=(),
    )


def _outline_candidate(candidate: Candidate) -> Candidate:
    entry = candidate.entry
    identity = Identity(entry.identity.name, entry.identity.formula, inchikey=entry.identity.inchikey)
    bare = CleanSpectrum(NO_PEAKS, None, entry.spectrum.lowest_mz)
    return replace(
        candidate,
        entry=replace(entry, identity=identity, spectrum=bare, authors="", source="", comments=()),
        aligned=AlignedPeaks(NO_PEAKS.mz, NO_PEAKS.mz, NO_PEAKS.mz, candidate.aligned.lowest_mz),
        evidence=(),
        explanation=Explanation("log-odds", candidate.explanation.value),
        notes=(),
    )


def search_pasted(
    text: str,
    library_paths: Sequence[Path],
    settings: Settings,
    name: str = "pasted text",
    *,
    as_of: Sequence[int | str] = (),
) -> Report:
    """Report on peaks pasted as text.

    Parameters
    ----------
    text : str
        Any text format the readers know, or bare m/z–intensity pairs.
    library_paths : sequence of Path
    settings : Settings
    name : str
        Stands for the file name in the report.
    as_of : sequence of int or str
        See `identify.pipeline.search.open_libraries`.

    Returns
    -------
    Report

    Raises
    ------
    LibraryError, UsageError
        See `identify.pipeline.search.open_libraries`.
    """
    rejected: list[Rejection] = []
    return _report(read_pasted(text, name, rejected.append), library_paths, settings, rejected, None, as_of)


def _report(
    records: Iterable[SpectrumRecord],
    library_paths: Sequence[Path],
    settings: Settings,
    rejected: list[Rejection],
    progress: Progress | None,
    as_of: Sequence[int | str],
) -> Report:
    with open_libraries(library_paths, settings, as_of) as libraries:
        found = tuple(identify_many(records, libraries, settings, rejected, progress, as_of=as_of))
        return replace(_frame(libraries, settings), identifications=found, rejected=tuple(rejected))


def _frame(libraries: Sequence[SearchableLibrary], settings: Settings) -> Report:
    """Report without queries."""
    states = tuple(searchable.state for searchable in libraries)
    return Report("ionwitness", __version__, settings.as_dict(), states, ())


def _read_all(paths: Sequence[Path], rejected: list[Rejection]) -> Iterator[SpectrumRecord]:
    for path in paths:
        try:
            yield from read_spectra(path, rejected.append)
        except IonwitnessError as error:
            rejected.append(Rejection(str(path), None, error.what, error.found, error.expected, error.hint))
