"""Formulas with one constitution. Isomer counts: common knowledge of organic chemistry."""

from __future__ import annotations

import pytest

from identify.chem.constitution import has_one_constitution, is_only_isomer
from identify.chem.formula import parse_formula

ONE = ("CH4", "CH2Cl2", "CHCl3", "CCl4", "CHBrClF", "SiH4", "H2O", "NH3", "CH4O", "CH5N", "CH4S", "H2O2", "C2H6")
ONE_MORE = ("C2H5Cl", "C2HCl5", "C2Cl6", "C2H4", "C2Cl4", "C2HCl3", "C2H2", "C2HCl", "C3H8", "C3F8", "C[2H]Cl3")
SEVERAL = (
    "C2H4Cl2",
    "C2H2Cl2",
    "C2H6O",
    "C3H6",
    "C4H10",
    "C3H7Cl",
    "C2H7N",
    "CH2O",
    "C6H6",
    "C8H10",
    "CH3ClO",
    "C2H3N",
)
NOT_KNOWN = ("C2", "Hg", "CH3HgCl", "SF6", "CO", "SO2")


@pytest.mark.parametrize("text", [*ONE, *ONE_MORE])
def test_these_formulas_have_one_constitution(text: str) -> None:
    assert has_one_constitution(parse_formula(text))
    assert is_only_isomer(text)


@pytest.mark.parametrize("text", [*SEVERAL, *NOT_KNOWN])
def test_these_have_several_or_it_is_not_known(text: str) -> None:
    assert not has_one_constitution(parse_formula(text))


def test_text_that_is_no_formula_has_none() -> None:
    assert not is_only_isomer("")
    assert not is_only_isomer("C?")
