"""A record judged for a library: either a draft of an entry, or the reason why it stays out.

Every function here is pure, so that records can be judged in several processes.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from identify.errors import FormulaError, SpectrumError, StructureError, quote
from identify.library.blobs import FLOAT32, FLOAT64, UINT16, pack
from identify.library.events import canonical_json
from identify.library.licences import normalise_licence
from identify.library.rows import CompoundKey, Draft, Value, steps_text
from identify.readers.fault_reports import NOT_EI, NOT_MS1
from identify.records import CleanSpectrum, EntryStatus, Identity, Rejection, SpectrumRecord
from identify.settings import REFERENCE_CLEANING
from identify.spectra.cleaning import clean_spectrum
from identify.spectra.splash import verify_splash

if TYPE_CHECKING:
    from identify.chem.formula import Formula

DEFAULT_ENERGY_EV = 70.0
"""What a record that states no electron energy is taken to be measured at: the standard energy of the trade."""
MAX_TEXT = 10_000
NOT_POSITIVE = "not positive ions"
LICENCE = "licence not accepted"
UNUSABLE = "unusable spectrum"
NAMELESS = "no name, formula or structure"
OTHER_FILE = "another kind of file"
EXCLUDED = frozenset({NOT_EI, NOT_POSITIVE, NOT_MS1, LICENCE, OTHER_FILE})
"""Reasons that are a choice of what the library is for; every other reason is a fault of the record or file."""
NOTE_ENERGY = "energy not stated: taken as 70 eV"
NOTE_IONIZATION = "ionization not stated: taken as EI"
NOTE_INCHIKEY = "InChIKey computed from the structure"
NOTE_STRUCTURE = "structure as stated could not be read"
NOTE_FORMULA = "formula as stated could not be read"
NOTE_DERIVATIVE = "derivative"
NOTE_DERIVATIVE_UNKNOWN = "derivative stated but not understood"
NOTE_LABELLED = "isotope-labelled"
NOTE_ACCURATE = "accurate m/z"
NOTE_NO_SPLASH = "no SPLASH to verify"
_ISOTOPE_IN_SMILES = re.compile(r"\[\d+[A-Za-z]")
_UNDERIVATIZED = re.compile(r"(?:\s*0\s?[A-Za-z-]+[;,]?)+")
"""`0 TMS`: measured without any group, which is no derivative."""


@dataclass(frozen=True, slots=True)
class Policy:
    """What a library takes, and how entries are marked."""

    licences: frozenset[str] | None
    """Accepted ones in normal form; None for all."""
    status: EntryStatus = EntryStatus.REFERENCE


def judge_record(record: SpectrumRecord, policy: Policy) -> Draft | Rejection:
    """Draft of an entry, or why the record stays out.

    Parameters
    ----------
    record : SpectrumRecord
    policy : Policy

    Returns
    -------
    Draft or Rejection
        Reasons are the constants of this module, of the readers and of `identify.spectra.splash`: the same words each time.
    """
    fault = _find_wrong_kind(record) or _find_wrong_licence(record, policy) or verify_splash(record)
    if fault:
        return fault
    identity = record.identity
    if not (identity.name or identity.formula or identity.smiles or identity.inchikey):
        return _reject(record, NAMELESS, "none of them", "a record that says which compound it is")
    try:
        spectrum = clean_spectrum(record, REFERENCE_CLEANING)
        return _draft(record, spectrum, policy)
    except SpectrumError as error:
        return _reject(record, UNUSABLE, error.found, error.expected, error.hint)


def _reject(record: SpectrumRecord, reason: str, found: str, expected: str, hint: str = "") -> Rejection:
    return Rejection(record.source.path, record.source.line, reason, found, expected, hint)


def _find_wrong_kind(record: SpectrumRecord) -> Rejection | None:
    how = record.acquisition
    if how.ionization not in ("", "EI"):
        return _reject(record, NOT_EI, quote(how.ionization), "EI")
    if how.ms_level not in (None, 1):
        return _reject(record, NOT_MS1, f"MS level {how.ms_level}", "MS1")
    if how.polarity not in ("", "positive"):
        return _reject(record, NOT_POSITIVE, quote(how.polarity), "positive")
    return None


def _find_wrong_licence(record: SpectrumRecord, policy: Policy) -> Rejection | None:
    licence = normalise_licence(record.licence)
    if policy.licences is None or licence in policy.licences:
        return None
    hint = "Choose with --licence; `--licence all` also takes spectra whose licence is not stated."
    return _reject(record, LICENCE, licence, "one of: " + ", ".join(sorted(policy.licences)), hint)


def _draft(record: SpectrumRecord, spectrum: CleanSpectrum, policy: Policy) -> Draft:
    how, retention, notes = record.acquisition, record.retention, []
    if how.energy_ev is None:
        notes.append(NOTE_ENERGY)
    if not how.ionization:
        notes.append(NOTE_IONIZATION)
    if not record.splash:
        notes.append(NOTE_NO_SPLASH)
    if spectrum.accurate is not None:
        notes.append(NOTE_ACCURATE)
    facts = read_chemistry(record)
    notes += facts.notes
    identity = facts.identity
    columns: dict[str, Value] = {
        "initial_status": policy.status.value,
        "accession": tidy(record.accession),
        "title": tidy(record.title),
        "name": identity.name,
        "other_names": canonical_json([tidy(name) for name in identity.other_names]),
        "formula": identity.formula,
        "smiles": identity.smiles,
        "inchi": identity.inchi,
        "inchikey": identity.inchikey,
        "cas": identity.cas,
        "instrument": tidy(how.instrument),
        "instrument_type": tidy(how.instrument_type),
        "ionization": how.ionization,
        "energy_ev": how.energy_ev,
        "inlet": tidy(how.inlet),
        "ms_level": how.ms_level,
        "polarity": how.polarity,
        "scan_low_mz": how.lowest_mz,
        "scan_high_mz": how.highest_mz,
        "retention_time_s": retention.time_s,
        "retention_index": retention.index,
        "retention_index_kind": tidy(retention.index_kind),
        "column_name": tidy(retention.column),
        "phase": tidy(retention.phase),
        "derivative_stated": tidy(record.derivative),
        "measured_as": facts.measured_as,
        "formula_as_measured": facts.formula_as_measured,
        "nominal_mass": facts.nominal_mass,
        "is_labelled": int(bool(facts.label)),
        "licence": normalise_licence(record.licence),
        "authors": tidy(record.authors),
        "source": tidy(str(record.source)),
        "splash": tidy(record.splash),
        "comments": canonical_json([tidy(comment) for comment in record.comments]),
        "extra": canonical_json({tidy(key): tidy(value) for key, value in {**record.extra, **facts.extra}.items()}),
        "cleaning": steps_text(spectrum.steps),
        "lowest_mz": spectrum.lowest_mz,
        "nominal_mz": pack(spectrum.nominal.mz, UINT16),
        "nominal_intensity": pack(spectrum.nominal.intensity, FLOAT32),
        "accurate_mz": None if spectrum.accurate is None else pack(spectrum.accurate.mz, FLOAT64),
        "accurate_intensity": None if spectrum.accurate is None else pack(spectrum.accurate.intensity, FLOAT32),
    }
    for name in ("energy_ev", "scan_low_mz", "scan_high_mz", "retention_time_s", "retention_index"):
        value = columns[name]
        columns[name] = None if value is None else float(value)
    return Draft(compound_key(facts), columns, pack(record.mz, FLOAT64), pack(record.intensity, FLOAT64), tuple(notes))


def tidy(text: str) -> str:
    """Text as the library stores it: no control characters but line feeds and tabs, valid Unicode, bounded length.

    Examples
    --------
    >>> tidy(" a\\x00b ")
    'a\\ufffdb'
    """
    text = text.strip()
    if not text.isprintable():
        text = "".join(c if c.isprintable() or c in "\n\t\u00a0\u3000" else "\ufffd" for c in text)
    return text[:MAX_TEXT]


@dataclass(frozen=True, slots=True)
class Chemistry:
    """What a record says was measured, read and completed."""

    identity: Identity
    label: str
    """What tells a labelled compound apart: its formula with labels, else the label; empty unless labelled."""
    measured_as: str
    formula_as_measured: str
    nominal_mass: int | None
    """Of the formula as measured; None when that is not knowable."""
    notes: tuple[str, ...]
    extra: Mapping[str, str]
    """Stated values that could not be read, under their names."""


def read_chemistry(record: SpectrumRecord) -> Chemistry:
    """Identity with formula in Hill order and InChIKey where they can be had, derivative and isotope labels read.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    Chemistry

    Examples
    --------
    >>> from identify.records import Source
    >>> import numpy as np
    >>> glycine = Identity("glycine", "C2H5NO2")
    >>> record = SpectrumRecord(Source("a"), np.array([73.0]), np.array([1.0]), identity=glycine, derivative="2TMS")
    >>> facts = read_chemistry(record)
    >>> facts.measured_as, facts.formula_as_measured, facts.nominal_mass
    ('2 TMS', 'C8H21NO2Si2', 219)
    """
    from identify.chem.derivatives import find_derivative, formula_as_measured
    from identify.chem.formula import parse_formula

    notes: list[str] = []
    extra: dict[str, str] = {}
    stated = record.identity
    formula: Formula | None = None
    if stated.formula:
        try:
            formula = parse_formula(stated.formula)
        except FormulaError:
            notes.append(NOTE_FORMULA)
            extra["formula as stated"] = stated.formula
    inchikey = stated.inchikey or _computed_inchikey(stated, notes)
    label, labelled = _read_label(record, formula)
    if label:
        notes.append(NOTE_LABELLED)
    measured_as, measured = "", labelled
    if record.derivative and not _UNDERIVATIZED.fullmatch(record.derivative):
        derivative = find_derivative(record.derivative)
        if derivative is None:
            measured_as, measured = tidy(record.derivative), None
            notes.append(NOTE_DERIVATIVE_UNKNOWN)
        else:
            measured_as = str(derivative)
            measured = None if labelled is None else formula_as_measured(labelled, derivative)
            notes.append(NOTE_DERIVATIVE)
    identity = Identity(
        tidy(stated.name) or tidy(stated.formula) or tidy(inchikey) or tidy(stated.smiles),
        "" if formula is None else formula.hill,
        tidy(stated.smiles),
        tidy(stated.inchi),
        tidy(inchikey),
        tidy(stated.cas),
        stated.other_names,
    )
    return Chemistry(
        identity,
        label,
        measured_as,
        "" if measured is None else measured.hill,
        None if measured is None else measured.nominal_mass,
        tuple(notes),
        extra,
    )


def _computed_inchikey(identity: Identity, notes: list[str]) -> str:
    if not identity.smiles:
        return ""
    from identify.chem.structures import inchikey_of

    try:
        key = inchikey_of(identity.smiles)
    except StructureError:
        notes.append(NOTE_STRUCTURE)
        return ""
    notes.append(NOTE_INCHIKEY)
    return key


def _read_label(record: SpectrumRecord, formula: Formula | None) -> tuple[str, Formula | None]:
    """What tells a labelled compound apart (empty for none), and the formula with its labels where it is knowable."""
    from identify.chem.labels import apply_label, find_label
    from identify.chem.structures import formula_of

    if formula is not None and formula.is_labelled:
        return formula.hill, formula
    if _ISOTOPE_IN_SMILES.search(record.identity.smiles):
        try:
            labelled = formula_of(record.identity.smiles)
        except StructureError:
            return record.identity.smiles, None
        return labelled.hill, labelled
    names = dict.fromkeys((record.identity.name, record.title.partition(";")[0], *record.identity.other_names))
    label = next(filter(None, map(find_label, names)), None)
    if label is None:
        return "", formula
    with_label = None if formula is None else apply_label(formula, label)
    return (str(label) if with_label is None else with_label.hill), with_label


def compound_key(facts: Chemistry) -> CompoundKey:
    """Group an entry belongs to.

    Parameters
    ----------
    facts : Chemistry

    Returns
    -------
    CompoundKey
        By the connectivity block of the InChIKey; without one by name and formula. A labelled compound has its own, with
        no structure: the structure in its record is nearly always that of the unlabelled compound.
    """
    identity = facts.identity
    block = identity.inchikey[:14] if len(identity.inchikey) >= 14 else ""
    name = normalised_name(identity.name)
    if facts.label:
        base = f"structure {block}" if block else f"name {name} {identity.formula}"
        return CompoundKey(f"labelled {facts.label} of {base}", identity.name, "", "", True)
    key = f"structure {block}" if block else f"name {name} {identity.formula}"
    return CompoundKey(key, identity.name, identity.formula, identity.smiles, False)


def normalised_name(name: str) -> str:
    """Name without differences of case, width or spacing.

    Examples
    --------
    >>> normalised_name("  Ethyl  ACETATE ")
    'ethyl acetate'
    """
    return " ".join(unicodedata.normalize("NFKC", name).casefold().split())
