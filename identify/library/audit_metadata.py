"""What is wrong with an entry's own statements, whatever its spectrum shows."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum
from statistics import median

from identify.errors import FormulaError, StructureError
from identify.library.audit_cells import is_salt
from identify.records import Entry, SpectrumRecord
from identify.retention import doubt_about_index
from identify.spectra.splash import verify_splash


class Grade(StrEnum):
    """How much a finding weighs."""

    NOTE = "note"
    CAUTION = "caution"
    SERIOUS = "serious"


@dataclass(frozen=True, slots=True)
class AuditFinding:
    """One thing a user of the entry should know."""

    kind: str
    grade: Grade
    reason: str
    observed: str = ""
    expected: str = ""
    log_odds: float = 0.0
    """Evidence that the entry is wrong, measured; 0 for a finding that stands by itself."""


USUAL_ENERGY_EV = (60.0, 80.0)
NEAR_ENERGY_EV = (20.0, 100.0)
"""On the open records spectra at 20–30 eV are nearly as like a 70 eV spectrum of their compound (median cosine 0.94, 1,407
pairs) as two 70 eV spectra are (0.96, 3,806 pairs); below 20 eV it is 0.88 (148 pairs). Above: judgement."""
FEW_PEAKS = 5
INDEX_TOLERANCE = 60.0
"""Retention index units between one value and the median of its compound on like columns (judgement)."""
_DERIVATIZED = re.compile(
    r"derivati[sz]ed|chemically modified|MSTFA|BSTFA|MTBSTFA|trimethylsilyla|silylated|methoximated", re.IGNORECASE
)


def check_statements(
    entry: Entry, record: SpectrumRecord, replicates: Sequence[Entry], index_doubt: str = ""
) -> tuple[AuditFinding, ...]:
    """Findings on an entry's metadata, in a fixed order.

    Parameters
    ----------
    entry : Entry
    record : SpectrumRecord
        The record it was made of.
    replicates : sequence of Entry
        Other entries of the compound in the same form.
    index_doubt : str
        Why its retention index is not believed beside those of the whole library; empty when nothing is known against it.

    Returns
    -------
    tuple of AuditFinding
        Empty when nothing is wrong.
    """
    found = (
        _splash(record),
        *_structure(entry),
        _formula_of_others(entry, replicates),
        _derivative(entry, record),
        _salt(entry),
        _energy(entry),
        _peaks(entry),
        _retention(entry, replicates, index_doubt),
    )
    return tuple(finding for finding in found if finding is not None)


def _splash(record: SpectrumRecord) -> AuditFinding | None:
    fault = verify_splash(record)
    if fault is None:
        return None
    return AuditFinding(
        "SPLASH", Grade.SERIOUS, "The peaks are not those the key was made of.", fault.found, fault.expected
    )


def _structure(entry: Entry) -> list[AuditFinding]:
    from identify.chem.formula import parse_formula
    from identify.chem.structures import connectivity_block, formula_of, inchikey_of

    identity, found = entry.identity, list[AuditFinding]()
    if not identity.smiles:
        return found
    try:
        computed, key = formula_of(identity.smiles), inchikey_of(identity.smiles)
    except StructureError as error:
        return [AuditFinding("structure", Grade.CAUTION, "The structure cannot be read.", error.found, error.expected)]
    try:
        stated = parse_formula(identity.formula) if identity.formula else None
    except FormulaError:
        stated = None
    if stated is not None and not entry.is_labelled and stated != computed:
        reason = "Formula and structure are not of the same compound."
        found.append(AuditFinding("formula and structure", Grade.SERIOUS, reason, stated.hill, computed.hill))
    if len(identity.inchikey) >= 14 and connectivity_block(identity.inchikey) != connectivity_block(key):
        reason = "InChIKey and structure are not of the same compound."
        found.append(AuditFinding("InChIKey and structure", Grade.CAUTION, reason, identity.inchikey, key))
    return found


def _formula_of_others(entry: Entry, replicates: Sequence[Entry]) -> AuditFinding | None:
    others = Counter(other.formula_as_measured for other in replicates if other.formula_as_measured)
    if not entry.formula_as_measured or not others or entry.formula_as_measured in others:
        return None
    reason = "The other entries of this compound in this form have another formula."
    usual = others.most_common(1)[0][0]
    return AuditFinding("formula of replicates", Grade.SERIOUS, reason, entry.formula_as_measured, usual)


def _derivative(entry: Entry, record: SpectrumRecord) -> AuditFinding | None:
    if entry.measured_as:
        return None
    for text in (*record.comments, *record.extra.values()):
        match = _DERIVATIZED.search(text)
        if match:
            reason = "The record speaks of derivatization but does not say what was measured."
            return AuditFinding("derivative not declared", Grade.CAUTION, reason, match.group(), "a derivative")
    return None


def _energy(entry: Entry) -> AuditFinding | None:
    stated, (low, high), (least, most) = entry.acquisition.energy_ev, USUAL_ENERGY_EV, NEAR_ENERGY_EV
    if stated is None:
        return AuditFinding("energy", Grade.NOTE, "No electron energy is stated; 70 eV is assumed.")
    if low <= stated <= high:
        return None
    seen, usual = f"{stated:g} eV", f"{low:g}–{high:g} eV"
    if least <= stated <= most:
        reason = "Measured at another electron energy: intensities differ a little from those of a 70 eV spectrum."
        return AuditFinding("energy", Grade.NOTE, reason, seen, usual)
    reason = "Measured at another electron energy: intensities are not those of a 70 eV spectrum."
    return AuditFinding("energy", Grade.CAUTION, reason, seen, usual)


def _salt(entry: Entry) -> AuditFinding | None:
    if not is_salt(entry):
        return None
    reason = "A salt evaporates as its parts: the spectrum is of one of them, not of the formula."
    return AuditFinding("salt", Grade.CAUTION, reason, entry.formula_as_measured, "the formula of what evaporates")


def _peaks(entry: Entry) -> AuditFinding | None:
    n_peaks = len(entry.spectrum.nominal)
    if n_peaks >= FEW_PEAKS:
        return None
    reason = "So few peaks fit many compounds by chance."
    return AuditFinding("few peaks", Grade.CAUTION, reason, f"{n_peaks} peaks", f"{FEW_PEAKS} or more")


def _retention(entry: Entry, replicates: Sequence[Entry], doubt: str) -> AuditFinding | None:
    mine = entry.retention
    others = [
        other.retention.index
        for other in replicates
        if other.retention.index is not None and other.retention.phase == mine.phase
    ]
    if mine.index is not None:
        doubt = doubt_about_index(mine.index, mine.time_s) or doubt
    if mine.index is not None and doubt:
        return AuditFinding(
            "retention index", Grade.CAUTION, f"The retention index is not used: {doubt}.", f"{mine.index:g}",
            "an index on an n-alkane scale",
        )  # fmt: skip
    if mine.index is None or len(others) < 2:
        return None
    middle = median(others)
    if abs(mine.index - middle) <= INDEX_TOLERANCE:
        return None
    reason = "The retention index is far from that of the compound's other entries on like columns."
    return AuditFinding(
        "retention index", Grade.CAUTION, reason, f"{mine.index:.0f}", f"{middle:.0f} ± {INDEX_TOLERANCE:g}"
    )
