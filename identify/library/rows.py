"""An entry as a table row, and the hash of what it says.

The content hash covers every column that came with the entry, its source peaks and the key of its compound, so that a
single changed bit shows. Columns at their default (empty text, NULL, `[]`) are left out of the hashed JSON: a column added
by a later schema version does not change the hash of older entries.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from identify.errors import LibraryDamaged, SpectrumError
from identify.library.blobs import FLOAT32, FLOAT64, UINT16, unpack
from identify.library.events import canonical_json, sha256_of
from identify.records import (
    Acquisition,
    CleaningStep,
    CleanSpectrum,
    Entry,
    EntryStatus,
    Identity,
    Peaks,
    Retention,
    Source,
    SpectrumRecord,
)

Value = str | int | float | bytes | None

CONTENT_COLUMNS = (
    "initial_status", "accession", "title", "name", "other_names", "formula", "smiles", "inchi", "inchikey", "cas",
    "instrument", "instrument_type", "ionization", "energy_ev", "inlet", "ms_level", "polarity", "scan_low_mz",
    "scan_high_mz", "retention_time_s", "retention_index", "retention_index_kind", "column_name", "phase",
    "derivative_stated", "measured_as", "formula_as_measured", "nominal_mass", "is_labelled", "licence", "authors",
    "source", "splash", "comments", "extra", "cleaning", "lowest_mz", "nominal_mz", "nominal_intensity", "accurate_mz",
    "accurate_intensity",
)  # fmt: skip
"""Columns of `entry` that the content hash covers."""

ENTRY_COLUMNS = (
    "id", "compound_id", "accession", "name", "formula", "smiles", "inchi", "inchikey", "cas", "other_names",
    "nominal_mz", "nominal_intensity", "accurate_mz", "accurate_intensity", "lowest_mz", "cleaning",
    "instrument", "instrument_type", "ionization", "energy_ev", "inlet", "ms_level", "polarity", "scan_low_mz",
    "scan_high_mz", "retention_time_s", "retention_index", "retention_index_kind", "column_name", "phase",
    "measured_as", "formula_as_measured", "is_labelled", "licence", "authors", "source", "comments", "initial_status",
)  # fmt: skip
"""Columns `entry_of` takes, in its order."""
_INTEGERS = frozenset({"id", "compound_id", "lowest_mz", "ms_level", "is_labelled"})
_REALS = frozenset({"energy_ev", "scan_low_mz", "scan_high_mz", "retention_time_s", "retention_index"})
_BLOBS = frozenset({"nominal_mz", "nominal_intensity", "accurate_mz", "accurate_intensity"})
_MAY_LACK = _REALS | {"ms_level", "accurate_mz", "accurate_intensity"}

RECORD_COLUMNS = (
    "accession", "title", "name", "formula", "smiles", "inchi", "inchikey", "cas", "other_names",
    "instrument", "instrument_type", "ionization", "energy_ev", "inlet", "ms_level", "polarity", "scan_low_mz",
    "scan_high_mz", "retention_time_s", "retention_index", "retention_index_kind", "column_name", "phase",
    "derivative_stated", "licence", "authors", "source", "splash", "comments", "extra",
)  # fmt: skip
"""Columns `record_of` takes, in its order."""


@dataclass(frozen=True, slots=True)
class CompoundKey:
    """What entries are grouped by, and what the compound is called."""

    key: str
    name: str
    formula: str
    smiles: str
    is_labelled: bool


@dataclass(frozen=True, slots=True)
class Draft:
    """An entry ready to be inserted: columns as SQLite takes them."""

    compound: CompoundKey
    columns: Mapping[str, Value]
    source_mz: bytes
    source_intensity: bytes
    notes: tuple[str, ...] = ()
    """Countable remarks for the build report ("70 eV assumed")."""

    @property
    def content_hash(self) -> str:
        """Hash over everything the draft says."""
        return content_hash(self.columns, self.compound.key, self.source_mz, self.source_intensity)


def content_hash(columns: Mapping[str, Value], compound_key: str, source_mz: bytes, source_intensity: bytes) -> str:
    """SHA-256 of the canonical JSON of an entry's content.

    Parameters
    ----------
    columns : mapping
        Values of `CONTENT_COLUMNS`.
    compound_key : str
    source_mz, source_intensity : bytes
        Packed source peaks.

    Returns
    -------
    str
        64 hexadecimal digits.
    """
    content: dict[str, Any] = {"compound": compound_key}
    for name in CONTENT_COLUMNS:
        value = columns[name]
        if value is None or value in ("", "[]", "{}"):
            continue
        content[name] = hashlib.sha256(value).hexdigest() if isinstance(value, bytes) else value
    content["source_mz"] = hashlib.sha256(source_mz).hexdigest()
    content["source_intensity"] = hashlib.sha256(source_intensity).hexdigest()
    return sha256_of(canonical_json(content))


def entry_of(row: Sequence[Any], status: EntryStatus, where: str) -> Entry:
    """Entry of a row with `ENTRY_COLUMNS`.

    Parameters
    ----------
    row : sequence
    status : EntryStatus
        Present standing.
    where : str
        Library, for messages.

    Returns
    -------
    Entry

    Raises
    ------
    LibraryDamaged
        If the row cannot be what was written.
    """
    fault = _find_odd_type(tuple(map(type, row)))
    if fault:
        raise LibraryDamaged(
            "entry", where=f"{where}, entry {row[0]!r}", found=fault, expected="values as they were written"
        )
    (
        entry_id, compound_id, accession, name, formula, smiles, inchi, inchikey, cas, other_names,
        nominal_mz, nominal_intensity, accurate_mz, accurate_intensity, lowest_mz, cleaning,
        instrument, instrument_type, ionization, energy_ev, inlet, ms_level, polarity, scan_low_mz,
        scan_high_mz, retention_time_s, retention_index, retention_index_kind, column_name, phase,
        measured_as, formula_as_measured, is_labelled, licence, authors, source, comments, _,
    ) = row  # fmt: skip
    place = f"{where}, entry {entry_id}"
    nominal = peaks_of(nominal_mz, nominal_intensity, place, UINT16)
    accurate = None if accurate_mz is None else peaks_of(accurate_mz, accurate_intensity, place, FLOAT64)
    return Entry(
        entry_id,
        compound_id,
        accession,
        Identity(name, formula, smiles, inchi, inchikey, cas, texts_of(other_names, place)),
        CleanSpectrum(nominal, accurate, lowest_mz, steps_of(cleaning, place)),
        Acquisition(
            instrument, instrument_type, ionization, energy_ev, inlet, ms_level, polarity, scan_low_mz, scan_high_mz
        ),
        Retention(retention_time_s, retention_index, retention_index_kind, column_name, phase),
        measured_as,
        formula_as_measured,
        bool(is_labelled),
        status,
        licence,
        authors,
        source,
        texts_of(comments, place),
    )


@lru_cache(maxsize=256)
def _find_odd_type(types: tuple[type, ...]) -> str:
    """What is wrong with the types of a row of `ENTRY_COLUMNS`; empty if nothing is.

    SQLite checks types when a row is written, not when it is read: one flipped bit in a file can make a number of a text.
    """
    for name, found in zip(ENTRY_COLUMNS, types, strict=True):
        wanted: type = int if name in _INTEGERS else float if name in _REALS else bytes if name in _BLOBS else str
        if found is not wanted and not (found is type(None) and name in _MAY_LACK):
            return f"{found.__name__} as {name}"
    return ""


def peaks_of(mz: bytes, intensity: bytes, where: str, mz_type: str = UINT16) -> Peaks:
    """Peaks of two packed columns.

    Raises
    ------
    LibraryDamaged
        If the lengths differ or the values cannot be peaks.
    """
    try:
        return Peaks(unpack(mz, mz_type, where), unpack(intensity, FLOAT32, where))
    except SpectrumError as error:
        raise LibraryDamaged("peaks", where=where, found=error.found, expected=error.expected) from None


def texts_of(text: str, where: str) -> tuple[str, ...]:
    """Texts of a JSON list column.

    Raises
    ------
    LibraryDamaged
        If it is not a JSON list of texts.
    """
    return () if text == "[]" else tuple(str(value) for value in _json(text, list, where))


def steps_of(text: str, where: str) -> tuple[CleaningStep, ...]:
    """Cleaning log of a JSON column.

    Raises
    ------
    LibraryDamaged
        If it is not a cleaning log.
    """
    try:
        return _parse_steps(text)
    except (TypeError, ValueError) as error:
        raise LibraryDamaged("cleaning log", where=where, found=str(error), expected="a list of steps") from None


@lru_cache(maxsize=4096)
def _parse_steps(text: str) -> tuple[CleaningStep, ...]:
    # Most entries share a handful of logs: nothing removed, a few peaks merged.
    return tuple(
        CleaningStep(step, reason, before, after, tuple((float(m), float(i)) for m, i in removed))
        for step, reason, before, after, removed in json.loads(text)
    )


def steps_text(steps: Sequence[CleaningStep]) -> str:
    """JSON column of a cleaning log."""
    return canonical_json([[s.step, s.reason, s.peaks_before, s.peaks_after, s.removed] for s in steps])


def _json(text: str, kind: type, where: str) -> Any:
    try:
        value = json.loads(text)
    except ValueError as error:
        raise LibraryDamaged("JSON column", where=where, found=str(error), expected="valid JSON") from None
    if not isinstance(value, kind):
        raise LibraryDamaged("JSON column", where=where, found=type(value).__name__, expected=kind.__name__)
    return value


def record_of(row: Sequence[Any], source_mz: bytes, source_intensity: bytes, where: str) -> SpectrumRecord:
    """The record an entry was made of: peaks and metadata as the source had them.

    Parameters
    ----------
    row : sequence
        Values of `RECORD_COLUMNS`.
    source_mz, source_intensity : bytes
    where : str
        Library and entry, for messages.

    Returns
    -------
    SpectrumRecord

    Raises
    ------
    LibraryDamaged
        If the row cannot be what was written.
    """
    (
        accession, title, name, formula, smiles, inchi, inchikey, cas, other_names,
        instrument, instrument_type, ionization, energy_ev, inlet, ms_level, polarity, scan_low_mz,
        scan_high_mz, retention_time_s, retention_index, retention_index_kind, column_name, phase,
        derivative_stated, licence, authors, source, splash, comments, extra,
    ) = row  # fmt: skip
    return SpectrumRecord(
        Source(source),
        unpack(source_mz, FLOAT64, where),
        unpack(source_intensity, FLOAT64, where),
        accession=accession,
        title=title,
        identity=Identity(name, formula, smiles, inchi, inchikey, cas, texts_of(other_names, where)),
        acquisition=Acquisition(
            instrument, instrument_type, ionization, energy_ev, inlet, ms_level, polarity, scan_low_mz, scan_high_mz
        ),
        retention=Retention(retention_time_s, retention_index, retention_index_kind, column_name, phase),
        derivative=derivative_stated,
        licence=licence,
        authors=authors,
        splash=splash,
        comments=texts_of(comments, where),
        extra={str(key): str(value) for key, value in _json(extra, dict, where).items()},
    )
