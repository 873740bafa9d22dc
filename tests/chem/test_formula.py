"""Formulas: reading, arithmetic, masses, parity and unsaturation."""

from __future__ import annotations

import random

import molmass
import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.chem.formula import (
    MAX_NOMINAL_MASS,
    Formula,
    doubled_unsaturation,
    parse_formula,
    rings_plus_double_bonds,
)
from identify.errors import FormulaError

SYMBOLS = ("C", "H", "N", "O", "S", "P", "Si", "F", "Cl", "Br", "I", "B", "Sn", "[13C]", "[2H]", "[15N]", "[18O]")
formulas = st.builds(
    Formula.from_counts,
    st.dictionaries(st.sampled_from(SYMBOLS), st.integers(0, 12), min_size=1),
    st.integers(-3, 3),
)


@pytest.mark.parametrize(
    ("text", "hill"),
    [
        ("C8H8O", "C8H8O"),
        ("C 8 H 8 O", "C8H8O"),
        (" O H8\tC8 ", "C8H8O"),
        ("C₆H₅OH", "C6H6O"),
        ("CH3(CH2)14COOH", "C16H32O2"),
        ("((CH3)3Si)2O", "C6H18OSi2"),
        ("K4[Fe(CN)6]", "C6FeK4N6"),
        ("CO", "CO"),
        ("Co", "Co"),
        ("HCl", "ClH"),
        ("Sn", "Sn"),
        ("C10H15N.HCl", "C10H16ClN"),
        ("C10H15N·HCl", "C10H16ClN"),
        ("CuSO4.5H2O", "CuH10O9S"),
        ("CuSO4 . 5 H2O", "CuH10O9S"),
        ("C6D6", "C6[2H]6"),
        ("T2O", "[3H]2O"),
        ("[13C]C6H8", "C6[13C]H8"),
        ("[13C6]H6", "[13C]6H6"),
        ("[13C]6H6", "[13C]6H6"),
        ("[2H3]CO[2H]", "C[2H]4O"),
        ("C7H7+", "C7H7+"),
        ("C7H7++", "C7H7^2+"),
        ("C7H7+2", "C7H7^2+"),
        ("C7H7^2+", "C7H7^2+"),
        ("[C7H7]2+", "C7H7^2+"),
        ("C7H7 2+", "C7H7^2+"),
        ("C7H72+", "C7H72+"),
        ("[C9H18NO4]+", "C9H18NO4+"),
        ("C2H3O2-", "C2H3O2-"),
        ("C2H3O2^2-", "C2H3O2^2-"),
        ("C6H6+•", "C6H6+"),
        ("C6H6•+", "C6H6+"),
        ("[C6H6]+*", "C6H6+"),
        ("C15H11•", "C15H11"),
        ("Na+.Cl-", "ClNa"),
        ("Ca+2.2Cl-", "CaCl2"),
    ],
)
def test_text_is_read_as_its_hill_formula(text: str, hill: str) -> None:
    formula = parse_formula(text)
    assert formula.hill == hill
    assert parse_formula(hill) == formula


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "formula: found the end of '', expected an element symbol."),
        ("C8Hx", "formula: found 'x' at character 4 of 'C8Hx', expected an element symbol."),
        ("CL", "formula: found 'L' at character 2 of 'CL', expected an element symbol."),
        ("c6h6", "formula: found 'c' at character 1 of 'c6h6', expected an element symbol."),
        ("[M+H]+", "formula: found 'M' at character 2 of '[M+H]+', expected an element symbol."),
        (
            "13C6H6",
            "formula: found '1' at character 1 of '13C6H6', expected an element symbol. Isotopes are written [13C].",
        ),
        ("[99C]", "formula: found '9' at character 2 of '[99C]', expected an isotope such as 13C."),
        ("C6H5(", "formula: found the end of 'C6H5(', expected an element symbol."),
        ("(C6H5", "formula: found the end of '(C6H5', expected ')' for the '(' at character 1."),
        (
            "(C6H5]",
            "formula: found ']' at character 6 of '(C6H5]', expected an element symbol or ')' for the '(' at character 1.",
        ),
        ("C6H5)", "formula: found ')' at character 5 of 'C6H5)', expected an element symbol."),
        ("C0", "formula: found '0' at character 2 of 'C0', expected a count of at least 1."),
        ("C99999999", "formula: found '9' at character 2 of 'C99999999', expected a count of at most 10000."),
        ("C6H6.0.5H2O", "formula: found '.' at character 7 of 'C6H6.0.5H2O', expected an element symbol."),
        ("(C2H4)n", "formula: found 'n' at character 7 of '(C2H4)n', expected an element symbol."),
        ("C{5+3*n}", "formula: found '{' at character 2 of 'C{5+3*n}', expected an element symbol."),
        ("C2^", "formula: found the end of 'C2^', expected the sign of a charge."),
        ("C٣", "formula: found '٣' at character 2 of 'C٣', expected a count in the digits 0 to 9."),
        ("N/A", "formula: found '/' at character 2 of 'N/A', expected an element symbol."),
        ("C\x00", "formula: found '\\x00' at character 2 of 'C\\x00', expected an element symbol."),
        ("(" * 20 + "C" + ")" * 20, "at most 8 nested brackets"),
        ("C" * 401, "formula: found 401 characters, expected at most 400."),
        ("C9999", "formula: found 119988 Da, expected at most 10000 Da."),
        ("C^50+", "formula: found charge 50, expected at most 20 charges."),
    ],
)
def test_refusal_names_the_character(text: str, message: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert message in str(caught.value)


def test_refusal_names_the_file_when_told() -> None:
    with pytest.raises(FormulaError, match=r"^formula in a\.txt:7: found 'x' at character 2 of 'Cx'"):
        parse_formula("Cx", where="a.txt:7")


@given(st.text(alphabet="CHNOSiClBrD[](){}0123456789+-^.·*• x\x00٣", max_size=60))
def test_any_text_gives_a_formula_or_a_formula_error(text: str) -> None:
    try:
        formula = parse_formula(text)
    except FormulaError:
        return
    assert parse_formula(formula.hill) == formula
    assert 0 < formula.nominal_mass <= MAX_NOMINAL_MASS


@given(formulas.filter(lambda formula: bool(formula.counts)))
def test_hill_text_reads_back_as_the_same_formula(formula: Formula) -> None:
    assert parse_formula(formula.hill) == formula


@given(formulas, formulas)
def test_masses_counts_and_charges_add_up(one: Formula, two: Formula) -> None:
    total = one + two
    assert total == two + one
    assert total.nominal_mass == one.nominal_mass + two.nominal_mass
    assert total.monoisotopic_mass == pytest.approx(one.monoisotopic_mass + two.monoisotopic_mass, abs=1e-9)
    assert total.charge == one.charge + two.charge
    assert total.contains(one)
    assert total - two == one
    assert rings_plus_double_bonds(total) == rings_plus_double_bonds(one) + rings_plus_double_bonds(two) - 1


@given(formulas)
def test_order_of_atoms_does_not_matter(formula: Formula) -> None:
    shuffled = list(formula.counts)
    random.Random(1).shuffle(shuffled)
    assert Formula.from_counts(shuffled, formula.charge) == formula


def test_more_than_there_is_cannot_be_subtracted() -> None:
    with pytest.raises(FormulaError, match="found CH4 − C2H4, expected a subformula to subtract"):
        parse_formula("CH4") - parse_formula("C2H4")
    assert not parse_formula("CH4").contains(parse_formula("C2H4"))


def test_labelled_atoms_are_their_own_kind() -> None:
    toluene = parse_formula("C6[13C]H5D3")
    assert (toluene.count("C"), toluene.count("[13C]"), toluene.count("H"), toluene.count("D")) == (6, 1, 5, 3)
    assert toluene.nominal_mass == 96
    assert toluene.is_labelled
    assert toluene.n_atoms == 15


@pytest.mark.parametrize(
    "counts",
    [
        (("H", 6), ("C", 6)),
        (("C", 1), ("C", 1)),
        (("Xx", 1),),
        (("C", 0),),
        (("C", -1),),
        (("C", 900),),
        (("[2H]", 1), ("H", 1)),
    ],
)
def test_a_formula_that_breaks_its_invariants_is_not_made(counts: tuple[tuple[str, int], ...]) -> None:
    with pytest.raises(FormulaError):
        Formula(counts)


def test_masses_agree_with_molmass_on_600_random_formulas() -> None:
    chance = random.Random(11)
    limits = {"C": 30, "H": 50, "N": 5, "O": 8, "S": 3, "P": 2, "Si": 5, "F": 6, "Cl": 5, "Br": 4, "I": 2, "Se": 1}
    for _ in range(600):
        chosen = {symbol: chance.randint(0, most) for symbol, most in limits.items()}
        formula = Formula.from_counts({**chosen, "C": chosen["C"] + 1})
        theirs = molmass.Formula(formula.hill)
        assert formula.monoisotopic_mass == pytest.approx(theirs.monoisotopic_mass, abs=3e-5)  # AME2020 against AME2012
        assert formula.nominal_mass == theirs.nominal_mass


# standards.md 2.3 [C]: m/z with the electron mass removed
@pytest.mark.parametrize(
    ("ion", "mz"),
    [
        ("CF3+", 68.99466),
        ("C2F4+", 99.99306),
        ("C2F4N+", 113.99614),
        ("C2F5+", 118.99147),
        ("C3F5+", 130.99147),
        ("C3F6N+", 163.99294),
        ("C3F7+", 168.98827),
        ("C4F6N+", 175.99294),
        ("C4F7+", 180.98827),
        ("C4F8N+", 213.98975),
        ("C4F9+", 218.98508),
        ("C5F8N+", 225.98975),
        ("C5F10N+", 263.98656),
        ("C6F12N+", 313.98336),
        ("C7F12N+", 325.98336),
        ("C8F14N+", 375.98017),
        ("C8F16N+", 413.97698),
        ("C9F16N+", 425.97698),
        ("C9F18N+", 463.97378),
        ("C9F20N+", 501.97059),
        ("C12F22N+", 575.96740),
        ("C12F24N+", 613.96420),
    ],
)
def test_pftba_ions_have_their_tabulated_masses(ion: str, mz: float) -> None:
    assert parse_formula(ion).monoisotopic_mass == pytest.approx(mz, abs=6e-6)


# standards.md 3.8: exact masses of common losses [C]
@pytest.mark.parametrize(
    ("loss", "mass"),
    [
        ("CH3", 15.0235),
        ("H2O", 18.0106),
        ("HCN", 27.0109),
        ("CO", 27.9949),
        ("C2H4", 28.0313),
        ("CHO", 29.0027),
        ("NO", 29.9980),
        ("CO2", 43.9898),
        ("SO2", 63.9619),
        ("CF3", 68.9952),
        ("C3H9Si", 73.0474),
        ("HBr", 79.9262),
        ("C3H10OSi", 90.0501),
    ],
)
def test_common_losses_have_their_tabulated_masses(loss: str, mass: float) -> None:
    assert parse_formula(loss).monoisotopic_mass == pytest.approx(mass, abs=6e-5)


# standards.md 3.5 [F]
@pytest.mark.parametrize(
    ("text", "is_odd"),
    [
        ("C3H8", False),
        ("C6H12O2", False),
        ("C6H11NO", True),
        ("C32H25N3O2S", True),
        ("C8H20N2", False),
        ("C7H9N", True),
        ("C3H6BrN", True),
        ("C9H11ClN4O2", False),
        ("C17H32Cl2", False),
    ],
)
def test_nitrogen_rule_table(text: str, is_odd: bool) -> None:
    formula = parse_formula(text)
    assert formula.nominal_mass % 2 == is_odd
    assert formula.count("N") % 2 == is_odd


# standards.md 3.6 [C]
@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("C6H6", 4),
        ("C10H8", 7),
        ("C8H8O", 5),
        ("C7H7NO", 5),
        ("C8H10N4O2", 6),
        ("C10H14N2", 5),
        ("C10H16", 3),
        ("C27H46O", 5),
        ("C12H8S", 9),
        ("C14H9Cl5", 8),
        ("C17H34O2", 1),
        ("C16H34", 0),
        ("C7H5O+", 5.5),
        ("C9F20N+", 0.5),
        ("C3H9Si+", 0.5),
        ("C6D6", 4),
        ("[13C]6H6", 4),
        ("NH4+", -0.5),
        ("C6H7BO2", 4),
    ],
)
def test_rings_plus_double_bonds(text: str, value: float) -> None:
    assert rings_plus_double_bonds(parse_formula(text)) == value


# standards.md 3.7 [C]: exchanging an element for its CH equivalent of the same mass changes u by this
@pytest.mark.parametrize(
    ("element", "equivalent", "change"),
    [
        ("C", "H12", 7),
        ("O", "CH4", 1),
        ("N", "CH2", 0.5),
        ("S", "C2H8", 2),
        ("O2", "C2H8", 2),
        ("N2", "C2H4", 1),
        ("F", "CH7", 2),
        ("Cl", "C2H11", 3),
        ("Br", "C6H7", -3),
        ("Si", "C2H4", 1),
        ("P", "C2H7", 2),
        ("I", "C9H19", 0),
        ("I", "C10H7", -7),
    ],
)
def test_ch_equivalents_of_the_rule_of_13(element: str, equivalent: str, change: float) -> None:
    one, other = parse_formula(element), parse_formula(equivalent)
    assert one.nominal_mass == other.nominal_mass
    assert rings_plus_double_bonds(one) - rings_plus_double_bonds(other) == change


def test_unsaturation_of_unknown_metals_is_that_of_a_divalent_atom() -> None:
    assert doubled_unsaturation("Fe") == 0
