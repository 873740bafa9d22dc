"""What is in a library, counted."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass

from identify.library.events import Event
from identify.library.schema import SCHEMA_VERSION
from identify.library.store import SEARCHABLE, Library
from identify.records import LibraryState


@dataclass(frozen=True, slots=True)
class LibraryInfo:
    """Counts of a library's entries; every mapping is most frequent first."""

    state: LibraryState
    schema_version: int
    by_status: Mapping[str, int]
    by_licence: Mapping[str, int]
    by_instrument_type: Mapping[str, int]
    by_energy: Mapping[str, int]
    """Electron energies as stated (`70 eV`), `not stated` for the rest."""
    by_derivative: Mapping[str, int]
    """Entries by derivative measured; only derivatives."""
    n_labelled: int
    n_accurate: int
    """Entries with accurate m/z."""
    n_with_retention_index: int
    n_without_structure: int
    events: tuple[Event, ...]


def describe_library(library: Library) -> LibraryInfo:
    """Counts of everything in a library that a user decides by.

    Parameters
    ----------
    library : Library

    Returns
    -------
    LibraryInfo
        Entries of every standing are counted in `by_status`, the other counts are of searchable entries.

    Raises
    ------
    LibraryDamaged, LibraryError
        If it cannot be read.
    """
    columns = (
        "id, initial_status, licence, instrument_type, energy_ev, measured_as, is_labelled,"
        " accurate_mz IS NOT NULL, retention_index IS NOT NULL, inchikey = '' AND smiles = ''"
    )
    status, licence, instrument, energy, derivative = (Counter[str]() for _ in range(5))
    labelled = accurate = indexed = without_structure = 0
    with library.reading() as connection:
        standings, state, events = library.standings(), library.state(), tuple(library.events())
        rows = connection.execute(f"SELECT {columns} FROM entry WHERE event_seq <= ?", (library.last_event,))  # noqa: S608
        for entry_id, initial, held, kind, energy_ev, measured_as, *marks in rows:
            standing = standings.get(entry_id, initial)
            status[str(standing)] += 1
            if standing not in SEARCHABLE:
                continue
            licence[held] += 1
            instrument[kind or "not stated"] += 1
            energy["not stated" if energy_ev is None else f"{energy_ev:g} eV"] += 1
            if measured_as:
                derivative[measured_as] += 1
            labelled, accurate = labelled + marks[0], accurate + marks[1]
            indexed, without_structure = indexed + marks[2], without_structure + marks[3]
    return LibraryInfo(
        state, SCHEMA_VERSION, _sorted(status), _sorted(licence), _sorted(instrument), _sorted(energy),
        _sorted(derivative), labelled, accurate, indexed, without_structure, events,
    )  # fmt: skip


def _sorted(counts: Counter[str]) -> dict[str, int]:
    return dict(sorted(counts.items(), key=lambda item: (-item[1], item[0])))
