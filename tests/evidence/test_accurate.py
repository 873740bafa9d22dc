"""Accurate masses: recalibration, chosen ions, explanation by subformulas."""

from __future__ import annotations

import numpy as np
import pytest

from identify.chem.formula import parse_formula
from identify.evidence.accurate import REFERENCE_IONS, choose_ions, find_recalibration, mass_error_histogram
from identify.evidence.accurate_check import check_accurate_mass, tolerance_at
from identify.evidence.facts import formula_facts, spectrum_facts
from identify.records import Acquisition, CleanSpectrum, Peaks, Verdict
from identify.settings import Settings

CALIBRANT = {68.99466: "CF3+", 130.99147: "C3F5+", 218.98508: "C4F9+"}
"""PFTBA ions, electron mass removed (standards.md 2.3 [C])."""


def accurate(peaks: dict[float, float]) -> CleanSpectrum:
    mz = np.array(sorted(peaks))
    measured = Peaks(mz, np.array([peaks[value] for value in mz]))
    nominal: dict[int, float] = {}
    for value, intensity in peaks.items():
        nominal[round(value)] = nominal.get(round(value), 0.0) + intensity
    whole = sorted(nominal)
    return CleanSpectrum(Peaks(np.array(whole, float), np.array([nominal[m] for m in whole])), measured, whole[0])


def ions_of(*formulas: str, shift_ppm: float = 0.0) -> dict[float, float]:
    return {
        parse_formula(text).monoisotopic_mass * (1 + shift_ppm * 1e-6): 100.0 - 5 * place
        for place, text in enumerate(formulas)
    }


def test_reference_ions_have_the_published_masses() -> None:
    for mz, text in CALIBRANT.items():
        assert text in REFERENCE_IONS
        assert parse_formula(text).monoisotopic_mass == pytest.approx(mz, abs=6e-6)


@pytest.mark.parametrize("shift", [-15.0, -3.0, 0.0, 8.0])
def test_shift_on_calibrant_ions_is_found_and_taken_away(shift: float) -> None:
    peaks = ions_of("CF3+", "C3F5+", "C4F9+", shift_ppm=shift)
    found = find_recalibration(accurate(peaks).accurate)
    assert found.applied
    assert found.shift_ppm == pytest.approx(shift, abs=0.01)
    assert found.correct(100.0 * (1 + shift * 1e-6)) == pytest.approx(100.0, abs=1e-6)


def test_one_reference_ion_or_quarrelling_ones_are_shown_not_applied() -> None:
    one = find_recalibration(accurate(ions_of("C7H7+", "CF3+", shift_ppm=5.0)).accurate)
    assert not one.applied
    assert one.shift_ppm == pytest.approx(5.0, abs=0.01)
    assert one.correct(100.0) == 100.0
    quarrel = find_recalibration(
        accurate({**ions_of("CF3+", shift_ppm=25.0), **ions_of("C3F5+", shift_ppm=-25.0)}).accurate
    )
    assert not quarrel.applied
    none = find_recalibration(accurate(ions_of("C7H7+")).accurate)
    assert (none.ions, none.applied) == ((), False)


def test_isotope_peaks_are_not_judged() -> None:
    """81Br 1.99795 and 37Cl 1.99705 Da above, 13C 1.00335 above a taller peak (AME2020 differences)."""
    base = parse_formula("C6H5Br+").monoisotopic_mass
    peaks = accurate({base: 100.0, base + 1.00335: 6.5, base + 1.99795: 97.0}).accurate
    assert [mz for mz, _ in choose_ions(peaks)] == [pytest.approx(base)]


def check(peaks: dict[float, float], formula: str, **settings: float) -> Verdict:
    facts = spectrum_facts(accurate(peaks), Acquisition())
    return check_accurate_mass(facts, formula_facts(formula), Settings(**settings)).verdict


def test_mass_errors_are_shown_by_class() -> None:
    """Two ions 3 ppm too heavy and one exact: two between 2 and 4 ppm."""
    exact = ions_of("C7H5O+", "C6H5+", "C4H3+")
    shifts = (3.0, 3.0, 0.5)
    peaks = {mz * (1 + shift * 1e-6): value for (mz, value), shift in zip(exact.items(), shifts, strict=True)}
    facts = spectrum_facts(accurate(peaks), Acquisition())
    observed = check_accurate_mass(facts, formula_facts("C8H8O"), Settings()).observed
    assert observed.endswith("(ions by error in ppm: +0 to +2: 1, +2 to +4: 2)")


def test_isobars_are_told_apart() -> None:
    peaks = ions_of("C7H5O+", "C6H5+", "C8H8O+", "C4H3+")
    assert check(peaks, "C8H8O") is Verdict.AGREES
    assert check(peaks, "C9H12") is Verdict.CONFLICTS


def test_electron_mass_counts() -> None:
    """Without the electron (0.549 mDa) every ion would lie outside a tolerance of 0.3 mDa."""
    peaks = ions_of("C7H5O+", "C6H5+", "C8H8O+")
    assert check(peaks, "C8H8O", tolerance_da=0.0003, tolerance_ppm=0.01) is Verdict.AGREES
    neutral = {mz + 0.000549: value for mz, value in peaks.items()}
    assert check(neutral, "C8H8O", tolerance_da=0.0003, tolerance_ppm=0.01) is Verdict.CONFLICTS


def test_doubly_charged_aromatics_are_explained() -> None:
    half = (parse_formula("C12H3Cl5").monoisotopic_mass - 2 * 0.000548579909) / 2
    peaks = {**ions_of("C12H3Cl7+", "C12H3Cl5+"), half: 60.0}
    assert check(peaks, "C12H3Cl7") is Verdict.AGREES


def test_nominal_query_is_not_assessed(build) -> None:
    facts = spectrum_facts(build.spectrum({77: 100.0}), Acquisition())
    assert check_accurate_mass(facts, formula_facts("C8H8O"), Settings()).verdict is Verdict.NOT_ASSESSED


def test_larger_tolerance_applies() -> None:
    settings = Settings(tolerance_ppm=10.0, tolerance_da=0.002)
    assert tolerance_at(100.0, settings) == 0.002
    assert tolerance_at(500.0, settings) == pytest.approx(0.005)


def test_histogram_counts_every_ion_once() -> None:
    errors = [-7.0, -1.0, -0.5, 0.0, 1.99, 2.0, 5.5]
    assert sum(number for _, number in mass_error_histogram(errors)) == len(errors)
    assert mass_error_histogram([]) == ()
