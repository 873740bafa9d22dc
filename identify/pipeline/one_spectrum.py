"""One spectrum out of a file or a run: which one is meant, said by the user, never guessed."""

from __future__ import annotations

from itertools import islice
from pathlib import Path

from identify.errors import InputError, quote
from identify.library.standing import get_entry
from identify.library.store import open_library
from identify.pipeline.runs import component_record
from identify.readers import read_spectra
from identify.readers.runs import read_run
from identify.records import Rejection, SpectrumRecord
from identify.runs.components import find_components

LISTED = 8


def read_one_spectrum(path: Path, which: str = "") -> SpectrumRecord:
    """The spectrum of a file that is meant.

    Parameters
    ----------
    path : Path
        Spectrum file of any readable format, folder or archive.
    which : str
        Its running number in the file from 1, its accession, title or name; may be empty when there is only one.

    Returns
    -------
    SpectrumRecord

    Raises
    ------
    InputError
        If the file cannot be read, holds no usable spectrum, none or several that are meant, or several and none is named.
    """
    rejected: list[Rejection] = []
    records = read_spectra(path, rejected.append)
    wanted = which.strip()
    if not wanted:
        found = list(islice(records, LISTED + 1))
        if len(found) == 1 and not rejected:
            return found[0]
        if not found:
            _refuse_empty(path, rejected)
        raise InputError(
            "spectrum", where=str(path), found=_list(found, len(rejected)), expected="one",
            hint="Say which one is meant, by its number, accession or title.",
        )  # fmt: skip
    if wanted.isdecimal():
        for number, record in enumerate(records, start=1):
            if number == int(wanted):
                return record
        raise InputError("spectrum", where=str(path), found=f"no number {wanted}", expected="one of its spectra")
    same = [record for record in records if wanted.casefold() in _names(record)]
    if len(same) != 1:
        found_text = f"{len(same)} called {quote(wanted)}"
        raise InputError("spectrum", where=str(path), found=found_text, expected="one", hint="Give its number instead.")
    return same[0]


def _refuse_empty(path: Path, rejected: list[Rejection]) -> None:
    if rejected:
        first = rejected[0]
        where = first.source if first.line is None else f"{first.source}:{first.line}"
        raise InputError(first.reason, where=where, found=first.found, expected=first.expected, hint=first.hint)
    raise InputError("spectrum", where=str(path), found="none", expected="one")


def _names(record: SpectrumRecord) -> set[str]:
    return {name.casefold() for name in (record.accession, record.title, record.identity.name) if name}


def _list(found: list[SpectrumRecord], n_rejected: int) -> str:
    names = [f"{number} {record.title or record.identity.name}".strip() for number, record in enumerate(found, 1)]
    more = len(names) > LISTED
    text = f"{'more than ' if more else ''}{min(len(names), LISTED)} ({'; '.join(names[:LISTED])})"
    return text + (f" and {n_rejected} that cannot be used" if n_rejected else "")


def read_component(path: Path, number: int) -> SpectrumRecord:
    """Spectrum of a component of a run, as a record.

    Parameters
    ----------
    path : Path
        A run.
    number : int
        As `ionwitness run` numbers it, from 1.

    Returns
    -------
    SpectrumRecord

    Raises
    ------
    InputError
        If the run cannot be read or has no such component.
    """
    run = read_run(path)
    components = find_components(run)
    for component in components:
        if component.number == number:
            return component_record(component, run, None)
    raise InputError("run", where=str(path), found=f"{len(components)} components", expected=f"a component {number}")


def read_entry(library: Path, accession: str) -> SpectrumRecord:
    """Record that an entry of a library was made of.

    Parameters
    ----------
    library : Path
    accession : str
        Of an entry of any standing.

    Returns
    -------
    SpectrumRecord

    Raises
    ------
    LibraryError
        If the library cannot be opened or has no such entry.
    """
    with open_library(library) as opened:
        return opened.get_records([get_entry(opened, accession).id])[0]
