"""Results are remembered in the libraries that gave them, so that a withdrawn entry can be followed to what it answered."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path

from identify.errors import LibraryError
from identify.library.reported import record_report
from identify.library.store import open_library
from identify.records import Report

BUSY_TIMEOUT_S = 2.0


def remember_report(report: Report, result: Path, *, who: str, when: datetime) -> tuple[LibraryError, ...]:
    """Why the report could not be remembered, one error for each library that could not take it.

    Parameters
    ----------
    report : Report
    result : Path
        File the report was written to; its full path is what is remembered.
    who : str
    when : datetime
        With time zone.

    Returns
    -------
    tuple of LibraryError
        Empty when every library of the report remembers it. Reading a library needs no permission to write it, so this
        is no error of the search.

    Raises
    ------
    UsageError
        If nobody is named.
    """
    faults = []
    for state in report.libraries:
        try:
            with open_library(state.path, writable=True, busy_timeout_s=BUSY_TIMEOUT_S) as library:
                record_report(library, report, result=str(result.absolute()), who=who, when=when)
        except LibraryError as error:
            faults.append(error)
    return tuple(faults)
