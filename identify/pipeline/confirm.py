"""An unknown against a standard of the same laboratory, and a tune spectrum against its method.

Both are judged as measured: nothing is taken out as background or noise, because the documents speak of what the instrument
recorded.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from identify.chem.derivatives import find_derivative, formula_as_measured
from identify.chem.formula import parse_formula
from identify.errors import IonwitnessError
from identify.evidence.confirmation import Confirmation, RetentionTimes, check_confirmation
from identify.evidence.criteria_files import InstrumentCheck, load_criteria, load_instrument_check
from identify.evidence.instrument import TuneVerdict, check_instrument
from identify.records import SpectrumRecord
from identify.settings import REFERENCE_CLEANING
from identify.spectra.cleaning import clean_spectrum


@dataclass(frozen=True, slots=True)
class KnownTimes:
    """Retention times in seconds that are known beside those in the files; None where they are not."""

    unknown_s: float | None = None
    standard_s: float | None = None
    internal_in_unknown_s: float | None = None
    internal_in_standard_s: float | None = None


def confirm_record(
    unknown: SpectrumRecord,
    standard: SpectrumRecord,
    criteria: str,
    *,
    times: KnownTimes | None = None,
    molecular_mz: int | None = None,
    ions: Sequence[int] = (),
) -> Confirmation:
    """Whether an unknown meets a document's criteria against a standard.

    Parameters
    ----------
    unknown, standard : SpectrumRecord
    criteria : str
        One of `identify.evidence.criteria_files.ION_CRITERIA`.
    times : KnownTimes, optional
        Win over those of the records.
    molecular_mz : int, optional
        By default that of the standard's formula as measured, where it has one.
    ions : sequence of int
        Diagnostic ions chosen beforehand; empty: those the document considers.

    Returns
    -------
    Confirmation

    Raises
    ------
    UsageError
        For criteria that do not ship.
    SpectrumError
        If one of the spectra has no usable peak.
    """
    rule = load_criteria(criteria)
    given = times or KnownTimes()
    unknown_s = unknown.retention.time_s if given.unknown_s is None else given.unknown_s
    standard_s = standard.retention.time_s if given.standard_s is None else given.standard_s
    known = None
    if unknown_s is not None and standard_s is not None:
        known = RetentionTimes(unknown_s, standard_s, given.internal_in_unknown_s, given.internal_in_standard_s)
    return check_confirmation(
        clean_spectrum(unknown, REFERENCE_CLEANING),
        clean_spectrum(standard, REFERENCE_CLEANING),
        rule,
        times=known,
        molecular_mz=nominal_mass_as_measured(standard) if molecular_mz is None else molecular_mz,
        chosen_ions=ions,
    )


def nominal_mass_as_measured(record: SpectrumRecord) -> int | None:
    """Nominal mass of what a record was measured on, derivative included; None where it does not tell.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    int or None
    """
    if not record.identity.formula:
        return None
    try:
        parent = parse_formula(record.identity.formula)
        derivative = find_derivative(record.derivative) if record.derivative else None
        if record.derivative and derivative is None:
            return None
        measured = parent if derivative is None else formula_as_measured(parent, derivative)
    except IonwitnessError:  # a formula nobody can read tells nothing; reading the file was the place to say so
        return None
    return None if measured is None else measured.nominal_mass


def check_tune(record: SpectrumRecord, tune: str, edition: str = "") -> tuple[InstrumentCheck, tuple[TuneVerdict, ...]]:
    """The limits for a tune compound, and the verdict of each.

    Parameters
    ----------
    record : SpectrumRecord
    tune : str
        One of `identify.evidence.criteria_files.INSTRUMENT_CHECKS`.
    edition : str
        Of the method; empty for the default.

    Returns
    -------
    check : InstrumentCheck
    verdicts : tuple of TuneVerdict

    Raises
    ------
    UsageError
        For a tune compound or edition that does not ship.
    SpectrumError
        If the spectrum has no usable peak.
    """
    check = load_instrument_check(tune, edition)
    return check, check_instrument(clean_spectrum(record, REFERENCE_CLEANING), check)
