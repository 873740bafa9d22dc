"""Spectrum files or pasted peaks in, `Report` out."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path

from identify import __version__
from identify.errors import IonwitnessError
from identify.pipeline.batch import identify_many
from identify.pipeline.search import Progress, open_libraries
from identify.readers import read_pasted, read_spectra
from identify.records import Rejection, Report, SpectrumRecord
from identify.settings import Settings


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
        states = tuple(searchable.state for searchable in libraries)
    return Report("ionwitness", __version__, settings.as_dict(), states, found, tuple(rejected))


def _read_all(paths: Sequence[Path], rejected: list[Rejection]) -> Iterator[SpectrumRecord]:
    for path in paths:
        try:
            yield from read_spectra(path, rejected.append)
        except IonwitnessError as error:
            rejected.append(Rejection(str(path), None, error.what, error.found, error.expected, error.hint))
