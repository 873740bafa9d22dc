"""Isotope patterns against tables, brute force, molmass and IsoSpecPy."""

from __future__ import annotations

import itertools
import random
import warnings

import molmass
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.chem.elements import NATURAL_ISOTOPES
from identify.chem.formula import Formula, parse_formula
from identify.chem.isotopes import fine_isotope_pattern, isotope_pattern
from identify.errors import UsageError

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    import IsoSpecPy


def percent(text: str, *offsets: int) -> list[float]:
    pattern = isotope_pattern(parse_formula(text))
    return [100 * pattern.at(offset) for offset in offsets]


# standards.md 3.2 [C]: % of M per atom at M+1 and M+2
@pytest.mark.parametrize(
    ("element", "offset", "value"),
    [
        ("H", 1, 0.0115),
        ("C", 1, 1.0816),
        ("N", 1, 0.3653),
        ("O", 1, 0.0381),
        ("O", 2, 0.2055),
        ("F", 1, 0),
        ("P", 1, 0),
        ("I", 1, 0),
        ("Si", 1, 5.0801),
        ("Si", 2, 3.3527),
        ("S", 1, 0.7896),
        ("S", 2, 4.4742),
        ("S", 4, 0.0105),
        ("Cl", 2, 31.9958),
        ("Br", 2, 97.2776),
        ("B", -1, 24.84),
    ],
)
def test_one_atom_has_its_tabulated_ratio(element: str, offset: int, value: float) -> None:
    assert percent(element, offset)[0] == pytest.approx(value, abs=5.1e-5 if element != "B" else 5e-3)


# standards.md 3.3 [C*]: exact mass, M+1, M+2 in % of M
@pytest.mark.parametrize(
    ("text", "mass", "first", "second"),
    [
        ("C6H6", 78.0470, 6.558, 0.180),
        ("C7H8", 92.0626, 7.663, 0.253),
        ("C7H7NO", 121.0528, 8.055, 0.488),
        ("C8H8O", 120.0575, 8.783, 0.544),
        ("C10H8", 128.0626, 10.908, 0.536),
        ("C10H16", 136.1252, 11.000, 0.546),
        ("C10H14N2", 162.1157, 11.707, 0.625),
        ("C8H10N4O2", 194.0804, 10.305, 0.892),
        ("C16H34", 226.2661, 17.696, 1.472),
        ("C17H34O2", 270.2559, 18.854, 2.089),
        ("C20H42", 282.3287, 22.115, 2.328),
        ("C27H46O", 386.3549, 29.770, 4.479),
        ("C4H4S", 84.0034, 5.162, 4.581),
        ("C12H8S", 184.0347, 13.860, 5.361),
        ("C2H6S2", 93.9911, 3.811, 9.003),
        ("CS2", 75.9441, 2.661, 8.972),
        ("C3H9Si", 73.0474, 8.428, 3.561),
        ("C5H15OSi2", 147.0661, 15.779, 7.868),
        ("C5H15O3Si3", 207.0329, 20.935, 12.450),
        ("C7H21O4Si4", 281.0517, 28.285, 17.676),
        ("C9H27O5Si5", 355.0705, 35.636, 23.443),
        ("C11H33O6Si6", 429.0893, 42.986, 29.750),
        ("C8H5O3", 149.0239, 8.824, 0.959),
    ],
)
def test_worked_example_of_the_carbon_table(text: str, mass: float, first: float, second: float) -> None:
    assert parse_formula(text).monoisotopic_mass == pytest.approx(mass, abs=6e-5)
    assert percent(text, 1, 2) == pytest.approx([first, second], abs=6e-4)


# standards.md 3.4 [C*]: halogens alone, % of M at M, +2, +4 …
@pytest.mark.parametrize(
    ("text", "relative_to_m"),
    [
        ("Cl", [100, 32.0]),
        ("Cl2", [100, 64.0, 10.2]),
        ("Cl3", [100, 96.0, 30.7, 3.3]),
        ("Cl4", [100, 128.0, 61.4, 13.1, 1.0]),
        ("Cl5", [100, 160.0, 102.4, 32.8, 5.2, 0.3]),
        ("Cl6", [100, 192.0, 153.6, 65.5, 15.7, 2.0]),
        ("Cl7", [100, 224.0, 215.0, 114.6, 36.7, 7.0]),
        ("Cl8", [100, 256.0, 286.6, 183.4, 73.4, 18.8]),
        ("Br", [100, 97.3]),
        ("Br2", [100, 194.6, 94.6]),
        ("Br3", [100, 291.8, 283.9, 92.1]),
        ("Br4", [100, 389.1, 567.8, 368.2, 89.5]),
        ("ClBr", [100, 129.3, 31.1]),
        ("Cl2Br", [100, 161.3, 72.5, 10.0]),
        ("Cl3Br", [100, 193.3, 124.1, 33.2, 3.2]),
        ("ClBr2", [100, 226.6, 156.9, 30.3]),
        ("Cl2Br2", [100, 258.5, 229.4, 80.5, 9.7]),
        ("ClBr3", [100, 323.8, 377.3, 182.9, 29.5]),
    ],
)
def test_halogen_cluster(text: str, relative_to_m: list[float]) -> None:
    assert percent(text, *range(0, 2 * len(relative_to_m), 2)) == pytest.approx(relative_to_m, abs=0.06)


# standards.md 3.4 [C*], second form: % of the largest peak
@pytest.mark.parametrize(
    ("text", "relative_to_largest"),
    [
        ("Cl4", [78.1, 100, 48.0, 10.2, 0.8]),
        ("Cl8", [34.9, 89.3, 100, 64.0, 25.6, 6.6]),
        ("Br2", [51.4, 100, 48.6]),
        ("Br4", [17.6, 68.5, 100, 64.9, 15.8]),
        ("ClBr", [77.4, 100, 24.1]),
        ("ClBr3", [26.5, 85.8, 100, 48.5, 7.8]),
    ],
)
def test_tallest_peak_of_a_cluster_need_not_be_m(text: str, relative_to_largest: list[float]) -> None:
    pattern = isotope_pattern(parse_formula(text))
    tallest = float(pattern.ratios.max())
    found = [100 * pattern.at(offset) / tallest for offset in range(0, 2 * len(relative_to_largest), 2)]
    assert found == pytest.approx(relative_to_largest, abs=0.06)
    assert pattern.at(2 * relative_to_largest.index(100)) == tallest
    assert pattern.at(0) == 1.0


# standards.md 3.4 [C*]: whole molecules, % of M at M, M+1 … M+6
@pytest.mark.parametrize(
    ("text", "values"),
    [
        ("C6H5Cl", [100, 6.55, 32.18, 2.10]),
        ("C6H4Cl2", [100, 6.54, 64.17, 4.19, 10.35, 0.67]),
        ("C6H3Cl3", [100, 6.52, 96.17, 6.27, 30.88, 2.01, 3.33]),
        ("C6Cl6", [100, 6.49, 192.15, 12.46, 153.90, 9.97, 65.78]),
        ("C6H5Br", [100, 6.55, 97.46, 6.37]),
        ("C6H4Br2", [100, 6.54, 194.73, 12.72, 94.98, 6.19]),
        ("C6H4BrCl", [100, 6.54, 129.45, 8.45, 31.36]),
        ("C14H9Cl5", [100, 15.25, 161.06, 24.44, 104.10, 15.68, 33.86]),
        ("C12H6Br4O", [100, 13.09, 390.10, 50.97, 571.64, 74.52, 373.85]),
    ],
)
def test_whole_halogenated_molecule(text: str, values: list[float]) -> None:
    assert percent(text, *range(len(values))) == pytest.approx(values, abs=6e-3)


# standards.md 2.2 [C*]: isotope-governed ratios of the two tuning compounds, one peak in % of another
@pytest.mark.parametrize(
    ("text", "upper", "lower", "value"),
    [
        ("C18H5F10P", 1, 0, 19.53),
        ("C6F5P", 1, 0, 6.49),
        ("C6H4F", 1, 0, 6.54),
        ("C6H4BrF", 1, 0, 6.54),
        ("C6H4BrF", 2, 0, 97.46),
        ("C6H4BrF", 3, 2, 6.53),
    ],
)
def test_tuning_compound_ratio(text: str, upper: int, lower: int, value: float) -> None:
    above, below = percent(text, upper, lower)
    assert 100 * above / below == pytest.approx(value, abs=5.1e-3)


# standards.md 2.3 [C]: PFTBA, M+1 and M+2 in %
@pytest.mark.parametrize(
    ("ion", "first", "second"),
    [
        ("CF3+", 1.08, 0.00),
        ("C2F4+", 2.16, 0.01),
        ("C2F4N+", 2.53, 0.02),
        ("C2F5+", 2.16, 0.01),
        ("C3F5+", 3.24, 0.04),
        ("C3F6N+", 3.61, 0.05),
        ("C3F7+", 3.24, 0.04),
        ("C4F6N+", 4.69, 0.09),
        ("C4F7+", 4.33, 0.07),
        ("C4F8N+", 4.69, 0.09),
        ("C4F9+", 4.33, 0.07),
        ("C5F8N+", 5.77, 0.14),
        ("C5F10N+", 5.77, 0.14),
        ("C6F12N+", 6.85, 0.20),
        ("C7F12N+", 7.94, 0.27),
        ("C8F14N+", 9.02, 0.36),
        ("C8F16N+", 9.02, 0.36),
        ("C9F16N+", 10.10, 0.46),
        ("C9F18N+", 10.10, 0.46),
        ("C9F20N+", 10.10, 0.46),
        ("C12F22N+", 13.34, 0.82),
        ("C12F24N+", 13.34, 0.82),
    ],
)
def test_pftba_ion_ratios(ion: str, first: float, second: float) -> None:
    assert percent(ion, 1, 2) == pytest.approx([first, second], abs=6e-3)


def test_boron_puts_the_lighter_isotopologue_below_the_nominal_peak() -> None:
    # standards.md 3.4, traps: phenylboronic acid, m/z 121 is 24 % of 122
    pattern = isotope_pattern(parse_formula("C6H7BO2"))
    assert (pattern.nominal_mass, pattern.first_mass) == (122, 121)
    assert 100 * pattern.at(-1) == pytest.approx(24.4, abs=0.1)
    assert pattern.at(0) == 1.0
    assert pattern.ratios.max() == 1.0


def test_pattern_starts_at_the_lightest_isotopologue_and_is_zero_outside() -> None:
    tin = isotope_pattern(parse_formula("C4H12Sn"))
    assert tin.nominal_mass == 180
    assert tin.first_mass == 172  # 112Sn
    assert tin.at(-9) == 0.0
    assert tin.at(500) == 0.0
    assert 1 / tin.ratios.sum() == pytest.approx(0.3258 * 0.9893**4 * 0.999885**12, rel=0.02)


def test_labelled_atoms_are_pure() -> None:
    assert percent("[13C]6H6", 1, 2) == pytest.approx([6 * 0.0115, 0], abs=1e-3)
    assert percent("C6D6", 1)[0] == pytest.approx(6 * 1.0816, abs=1e-3)
    assert isotope_pattern(parse_formula("C6D6")).nominal_mass == 84


def brute_force(formula: Formula) -> dict[int, float]:
    """Unit-mass distribution by going through every isotopologue, atom by atom."""
    atoms = [NATURAL_ISOTOPES[symbol] for symbol, count in formula.counts for _ in range(count)]
    sums: dict[int, float] = {}
    for choice in itertools.product(*atoms):
        number = sum(isotope.mass_number for isotope in choice)
        sums[number] = sums.get(number, 0.0) + float(np.prod([isotope.fraction for isotope in choice]))
    return sums


@pytest.mark.parametrize(
    "text", ["CHBrCl", "CH3Si2S", "B2H3Cl2", "SnCl2", "C4H4O2", "SeBr2", "GeS2", "Br3Cl2", "HgCl", "O4Si"]
)
def test_convolution_equals_brute_force(text: str) -> None:
    formula = parse_formula(text)
    sums = brute_force(formula)
    pattern = isotope_pattern(formula)
    assert pattern.first_mass == min(sums)
    for number, fraction in sums.items():
        expected = fraction / sums[formula.nominal_mass]
        assert pattern.at(number - formula.nominal_mass) == pytest.approx(expected, rel=1e-9, abs=1e-9)
    assert 1 / pattern.ratios.sum() == pytest.approx(sums[formula.nominal_mass], rel=1e-6)


def random_formulas(count: int) -> list[Formula]:
    chance = random.Random(7)
    limits = {"C": 25, "H": 40, "N": 5, "O": 7, "S": 3, "P": 2, "Si": 4, "F": 6, "Cl": 5, "Br": 3, "I": 1}
    picked = []
    for _ in range(count):
        chosen = {symbol: chance.randint(0, most) if chance.random() < 0.6 else 0 for symbol, most in limits.items()}
        picked.append(Formula.from_counts({**chosen, "C": chosen["C"] + 1}))
    return picked


def test_patterns_agree_with_molmass_on_500_random_formulas() -> None:
    for formula in random_formulas(500):
        spectrum = molmass.Formula(formula.hill).spectrum(min_fraction=1e-9)
        pattern = isotope_pattern(formula)
        nominal = spectrum[formula.nominal_mass].fraction
        for number, entry in spectrum.items():
            ratio = entry.fraction / nominal
            assert pattern.at(number - formula.nominal_mass) == pytest.approx(ratio, rel=1e-5, abs=1e-6), formula.hill


def test_patterns_agree_with_isospecpy_within_its_other_carbon_on_500_random_formulas() -> None:
    # standards.md 3.1, trap: IsoSpecPy uses 13C 0.010788 (1.0906 % per C instead of 1.0816 %), so about 1 % relative per step
    for formula in random_formulas(500):
        iso = IsoSpecPy.IsoTotalProb(formula=formula.hill, prob_to_cover=0.99999)
        masses, fractions = np.array(list(iso.masses)), np.array(list(iso.probs))
        offsets = np.rint(masses - formula.monoisotopic_mass).astype(int)
        nominal = fractions[offsets == 0].sum()
        pattern = isotope_pattern(formula)
        for offset in range(4):
            theirs = fractions[offsets == offset].sum() / nominal
            assert pattern.at(offset) == pytest.approx(theirs, rel=0.01 * max(offset, 1), abs=2e-3), formula.hill


def test_fine_pattern_agrees_with_isospecpy() -> None:
    for formula in random_formulas(60):
        masses, fractions = fine_isotope_pattern(formula, 1e-3)
        iso = IsoSpecPy.IsoThreshold(formula=formula.hill, threshold=5e-4, absolute=True)
        theirs = np.array(sorted(zip(iso.masses, iso.probs, strict=True)))
        for mass, fraction in zip(masses, fractions, strict=True):
            near = theirs[np.abs(theirs[:, 0] - mass) < 1e-5]
            assert near.size, (formula.hill, mass)
            assert np.min(np.abs(near[:, 1] / fraction - 1)) < 0.06, (formula.hill, mass)


def test_fine_pattern_is_brute_force_down_to_its_limit() -> None:
    formula = parse_formula("C2H2Cl2S")
    masses, fractions = fine_isotope_pattern(formula, 1e-4)
    atoms = [NATURAL_ISOTOPES[symbol] for symbol, count in formula.counts for _ in range(count)]
    sums: dict[float, float] = {}
    for choice in itertools.product(*atoms):
        mass = round(sum(isotope.mass for isotope in choice), 8)
        sums[mass] = sums.get(mass, 0.0) + float(np.prod([isotope.fraction for isotope in choice]))
    expected = sorted((mass, fraction) for mass, fraction in sums.items() if fraction >= 1e-4)
    assert masses == pytest.approx([mass for mass, _ in expected], abs=1e-7)
    assert fractions == pytest.approx([fraction for _, fraction in expected], rel=1e-9)


def test_fine_pattern_takes_the_electron_of_the_charge_off() -> None:
    neutral, _ = fine_isotope_pattern(parse_formula("CF3"), 0.01)
    ion, _ = fine_isotope_pattern(parse_formula("CF3+"), 0.01)
    assert (neutral - ion) == pytest.approx(0.00054858, abs=1e-8)


@pytest.mark.parametrize("limit", [0, 1e-6, 1.1, float("nan")])
def test_fine_pattern_refuses_an_unbounded_limit(limit: float) -> None:
    with pytest.raises(UsageError, match="expected a value from 1e-05 to 1"):
        fine_isotope_pattern(parse_formula("CH4"), limit)


@pytest.mark.parametrize("text", ["C833", "Br125", "Sn83", "B900", "Zn150", "C200H200Sn20Hg15", "Cl280"])
def test_heaviest_formulas_stay_finite_bounded_and_quick(text: str) -> None:
    formula = parse_formula(text)
    pattern = isotope_pattern(formula)
    assert np.isfinite(pattern.ratios).all()
    assert pattern.at(0) == 1.0
    assert pattern.ratios.size < 3000
    masses, fractions = fine_isotope_pattern(formula, 1e-5)
    assert masses.size <= 100_000
    assert fractions.sum() <= 1.0 + 1e-9


@settings(max_examples=40)
@given(st.dictionaries(st.sampled_from(["C", "H", "O", "Cl", "B", "Sn"]), st.integers(1, 6), min_size=1, max_size=4))
def test_unit_pattern_is_the_sum_of_the_fine_one(counts: dict[str, int]) -> None:
    formula = Formula.from_counts(counts)
    masses, fractions = fine_isotope_pattern(formula, 1e-4)
    offsets = np.rint(masses - formula.monoisotopic_mass).astype(int)
    pattern = isotope_pattern(formula)
    whole = pattern.ratios / pattern.ratios.sum()
    missing = 1 - fractions.sum()
    for offset in np.unique(offsets):
        unit = whole[offset + pattern.nominal_mass - pattern.first_mass]
        assert unit - missing - 1e-9 <= fractions[offsets == offset].sum() <= unit + 1e-9
