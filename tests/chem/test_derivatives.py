"""Derivative notations are read, names are not; groups change formulas as their chemistry says."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.chem.derivatives import (
    GROUPS,
    OXIMES,
    Derivative,
    find_derivative,
    formula_as_measured,
    possible_formulas,
)
from identify.chem.formula import Formula, parse_formula


@pytest.mark.parametrize(
    ("text", "normal"),
    [
        ("3 TMS", "3 TMS"),
        ("3TMS", "3 TMS"),
        ("TMS", "1 TMS"),
        ("n TMS", "n TMS"),
        ("x TMS", "n TMS"),
        ("N TMS", "n TMS"),
        ("5 TMS; 1 MEOX", "1 MEOX 5 TMS"),
        ("1MEOX 5TMS", "1 MEOX 5 TMS"),
        ("MEOX,2TMS-derivative", "1 MEOX 2 TMS"),
        ("2 TBDMS, MEOX", "1 MEOX 2 TBDMS"),
        ("t-BDMS", "1 TBDMS"),
        ("TFA, TMS", "1 TFA 1 TMS"),
        ("2 PFP", "2 PFP"),
        ("1 HFB", "1 HFB"),
        ("PFB", "1 PFB"),
        ("1 PFBO", "1 PFBO"),
        ("1 EOX 2 TMS", "1 EOX 2 TMS"),
        ("2 Me", "2 Me"),
        ("1 acetyl", "1 Ac"),
        ("3 Ac 1 MO", "1 MEOX 3 Ac"),
        ("2 trifluoroacetyl", "2 TFA"),
        ("(2TMS)", "2 TMS"),
        ("bis-TMS", "2 TMS"),
        ("tris(TMS)", "3 TMS"),
        ("Glucose; GC-EI-TOF; MS; 5 TMS; 1 MEOX; BP:73", "1 MEOX 5 TMS"),
        ("Malonic acid-[1-13C]; GC-EI-QQ; MS2; 3 TBDMS-derivative; [M-57]+", "3 TBDMS"),
        ("alanine (2TMS)", "2 TMS"),
        ("alanine 2TMS", "2 TMS"),
        ("alanine_2TMS", "2 TMS"),
        ("alanine, 2TMS derivative", "2 TMS"),
        ("alanine, TMS derivative", "1 TMS"),
        ("glucose (1MEOX) (5TMS)", "1 MEOX 5 TMS"),
        ("glucose, 1MEOX, 5TMS", "1 MEOX 5 TMS"),
        ("fructose 1MEOX 5TMS main product", "1 MEOX 5 TMS"),
        ("serine; MS; 2 TMS; n TMS", "2 TMS"),
        ("1 TMS 2 TMS", "n TMS"),
        ("0 TMS 1 MEOX", "1 MEOX"),
    ],
)
def test_notation_is_read_into_its_normal_form(text: str, normal: str) -> None:
    found = find_derivative(text)
    assert str(found) == normal
    assert str(find_derivative(normal)) == normal


@pytest.mark.parametrize(
    "text",
    [
        "",
        "0 TMS",
        "methyl",
        "acetyl",
        "3-methylbutyl acetate",
        "diethyl ether",
        "DIETHYL ETHER; EI-B; MS",
        "dimethyl ether",
        "ethyl methyl ether",
        "N-METHYL",
        "trimethylsilyl palmitate",
        "TRIDECANOIC ACID TRIMETHYLSILYL ESTER",
        "HEXANEDIOIC ACID BIS(TRIMETHYLSILYL) ESTER",
        "3-(TRIMETHOXYSILYL)PROPYL METHACRYLATE",
        "TMS; EI-B; MS",
        "MSTFA",
        "BSTFA",
        "2-TMS-furan",
        "N-TFA-glycine",
        "1,2-di-TMS-benzene",
        "PFBHA",
        "MeOH",
        "2-acetylfuran",
        "methyl 2-oxopropanoate oxime",
        "99 TMS",
        "Co(acac)2",
        "4-Et-phenol",
        "TMSI",
        "vitamin B12",
    ],
)
def test_names_and_absence_are_no_derivative(text: str) -> None:
    assert find_derivative(text) is None


@given(st.text(alphabet="TMSBDEOXFAPHC nx0123456789;,()[]-+_ae\x00", max_size=80))
def test_any_text_is_read_without_failing(text: str) -> None:
    found = find_derivative(text)
    assert found is None or str(find_derivative(str(found))) == str(found)


def test_long_hostile_text_is_read_quickly() -> None:
    assert find_derivative("(" * 5000 + "2 TMS") is None
    assert find_derivative("1" * 100_000) is None


@pytest.mark.parametrize(
    ("parent", "notation", "measured"),
    [
        ("C3H7NO2", "2 TMS", "C9H23NO2Si2"),
        ("C6H12O6", "1 MEOX 5 TMS", "C22H55NO6Si5"),
        ("C4H6O5", "3 TBDMS", "C22H48O5Si3"),
        ("C4H9NO2", "1 TFA 1 TMS", "C9H16F3NO3Si"),
        ("C5H6O5", "1 MEOX 2 TBDMS", "C18H37NO5Si2"),
        ("C6H6O", "1 Ac", "C8H8O2"),
        ("C7H6O2", "1 Me", "C8H8O2"),
        ("C7H6O2", "1 Et", "C9H10O2"),
        ("C6H7N", "1 PFP", "C9H6F5NO"),
        ("C6H7N", "1 HFB", "C10H6F7NO"),
        ("C6H6O", "1 PFB", "C13H7F5O"),
        ("CH2O", "1 PFBO", "C8H4F5NO"),
        ("C3H6O", "1 EOX", "C5H11NO"),
        ("C3H6O", "1 MEOX", "C4H9NO"),
        ("C6[2H]6O", "1 MEOX", "C7H3[2H]6NO"),
    ],
)
def test_formula_as_measured(parent: str, notation: str, measured: str) -> None:
    derivative = find_derivative(notation)
    assert derivative is not None
    result = formula_as_measured(parse_formula(parent), derivative)
    assert result == parse_formula(measured)


# nominal shifts per group: common practice
@pytest.mark.parametrize(
    ("group", "shift"),
    [
        ("TMS", 72),
        ("TBDMS", 114),
        ("MEOX", 29),
        ("Ac", 42),
        ("Me", 14),
        ("TFA", 96),
        ("PFP", 146),
        ("HFB", 196),
        ("PFB", 180),
    ],
)
def test_nominal_shift_of_a_group(group: str, shift: int) -> None:
    parent = parse_formula("C6H12O6")
    measured = formula_as_measured(parent, Derivative(((group, 1),)))
    assert measured is not None
    assert measured.nominal_mass - parent.nominal_mass == shift


def test_groups_that_do_not_fit_give_no_formula() -> None:
    assert formula_as_measured(parse_formula("CCl4"), Derivative((("TMS", 1),))) is None
    assert formula_as_measured(parse_formula("CH4"), Derivative((("TMS", 5),))) is None
    assert formula_as_measured(parse_formula("C6H6"), Derivative((("MEOX", 1),))) is None
    assert formula_as_measured(parse_formula("C6D6"), Derivative((("TMS", 1),))) is None
    assert (
        formula_as_measured(parse_formula("C820H150"), Derivative((("TMS", 1),))) is None
    )  # heavier than a formula may be


def test_unknown_number_gives_no_single_formula_but_bounded_possible_ones() -> None:
    unknown = find_derivative("n TMS")
    assert unknown is not None
    assert not unknown.is_known
    citric = parse_formula("C6H8O7")
    assert formula_as_measured(citric, unknown) is None
    possible = possible_formulas(citric, unknown, 4)
    assert [(n, f.nominal_mass) for n, f in possible] == [(1, 264), (2, 336), (3, 408), (4, 480)]
    assert len(possible_formulas(parse_formula("C90H150"), unknown, 10**9)) == 40
    assert possible_formulas(parse_formula("CCl4"), unknown, 5) == ()


def test_known_derivative_has_one_possible_formula() -> None:
    assert possible_formulas(parse_formula("CH4O"), Derivative((("TMS", 1),)), 5) == ((0, parse_formula("C4H12OSi")),)


def test_more_than_two_unknown_numbers_are_not_tried() -> None:
    many = find_derivative("n TMS n MEOX n TFA n PFP n HFB n PFB n EOX n PFBO")
    assert many is not None
    assert possible_formulas(parse_formula("C30H60O20"), many, 40) == ()


def test_two_unknown_numbers_share_the_bound() -> None:
    both = Derivative((("MEOX", None), ("TMS", None)))
    totals = [n for n, _ in possible_formulas(parse_formula("C6H12O6"), both, 3)]
    assert totals == [2, 3, 3]


@given(st.sampled_from(sorted(GROUPS)), st.integers(1, 4))
def test_each_group_is_added_as_often_as_stated(group: str, number: int) -> None:
    parent = Formula.from_counts({"C": 20, "H": 40, "O": 10})
    once = formula_as_measured(parent, Derivative(((group, 1),)))
    often = formula_as_measured(parent, Derivative(((group, number),)))
    assert once is not None
    assert often is not None
    assert often.nominal_mass - parent.nominal_mass == number * (once.nominal_mass - parent.nominal_mass)


@pytest.mark.parametrize(
    "groups", [(), (("TMS", 0),), (("TMS", 41),), (("TMS", 1), ("MEOX", 1)), (("TMS", 1), ("TMS", 2)), (("xyz", 1),)]
)
def test_a_derivative_that_breaks_its_invariants_is_not_made(groups: tuple[tuple[str, int | None], ...]) -> None:
    with pytest.raises(ValueError, match=r"groups|number"):
        Derivative(groups)


def test_oximes_are_groups() -> None:
    assert GROUPS.keys() >= OXIMES
