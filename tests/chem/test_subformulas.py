"""Possible fragments against brute force."""

from __future__ import annotations

import itertools
import random

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.chem.elements import element_of
from identify.chem.formula import Formula, parse_formula, rings_plus_double_bonds
from identify.chem.subformulas import explain_mz, reachable_nominal
from identify.errors import FormulaError, UsageError
from tests.builders import at_most


def fragments(formula: Formula) -> list[Formula]:
    """Every subset of the atoms that may be a fragment, one by one."""
    found = []
    for numbers in itertools.product(*(range(count + 1) for _, count in formula.counts)):
        pairs = zip((symbol for symbol, _ in formula.counts), numbers, strict=True)
        part = Formula.from_counts(list(pairs), 1)
        if any(element_of(symbol) != "H" for symbol, _ in part.counts) and rings_plus_double_bonds(part) >= -0.5:
            found.append(part)
    return found


small = st.builds(
    Formula.from_counts,
    st.dictionaries(st.sampled_from(["C", "H", "N", "O", "Cl", "Si", "[2H]", "[13C]"]), st.integers(1, 4), max_size=5),
)


@settings(max_examples=30)
@given(small)
def test_reachable_masses_are_those_of_all_fragments(formula: Formula) -> None:
    expected = np.zeros(formula.nominal_mass + 1, dtype=bool)
    for part in fragments(formula):
        expected[part.nominal_mass] = True
    assert (reachable_nominal(formula) == expected).all()


def test_molecule_and_its_common_fragments_are_reachable() -> None:
    reachable = reachable_nominal(parse_formula("C8H8O"))
    assert reachable.size == 121
    assert reachable[[120, 105, 77, 51, 43]].all()
    assert reachable[33]  # CH5O+, protonated methanol: possible by valence
    assert not reachable[[0, 1, 2, 3, 11, 20, 21, 34]].any()


def test_an_ion_with_too_many_hydrogens_is_not_reachable() -> None:
    reachable = reachable_nominal(parse_formula("C16H34"))
    assert reachable[17]  # CH5+, rings plus double bonds −0.5
    assert not reachable[18:24].any()
    assert not reachable[34]


def test_labelled_atoms_shift_the_fragments() -> None:
    assert not reachable_nominal(parse_formula("CCl4"))[36]
    assert reachable_nominal(parse_formula("C7D8"))[98]
    assert not reachable_nominal(parse_formula("C7D8"))[91]


def test_answer_cannot_be_written_to() -> None:
    with pytest.raises(ValueError, match="read-only"):
        reachable_nominal(parse_formula("CH4"))[0] = True


def test_heaviest_formula_is_done_in_bounded_time() -> None:
    formula = parse_formula("C300H600O150N100S30")
    with at_most(seconds=0.5):
        assert reachable_nominal(formula)[formula.nominal_mass]


def test_explanations_are_those_of_all_fragments() -> None:
    chance = random.Random(3)
    for text in ("C6H7NO", "C4H10O2S", "C3H4Cl2N2", "C5[13C]H5[2H]3O"):
        formula = parse_formula(text)
        parts = fragments(formula)
        for part in chance.sample(parts, 12):
            for tolerance in (0.0005, 0.02, 0.3):
                mz = part.monoisotopic_mass + chance.uniform(-0.9, 0.9) * tolerance
                expected = {other for other in parts if abs(other.monoisotopic_mass - mz) <= tolerance}
                found = explain_mz(formula, mz, tolerance)
                assert set(found) == expected
                deviations = [abs(ion.monoisotopic_mass - mz) for ion in found]
                assert deviations == sorted(deviations)


def test_accurate_mass_separates_isobaric_fragments() -> None:
    # 43.0178 C2H3O+ and 43.0542 C3H7+ (masses computed from the pinned table)
    formula = parse_formula("C6H12O")
    assert [str(ion) for ion in explain_mz(formula, 43.0178, 0.001)] == ["C2H3O+"]
    assert [str(ion) for ion in explain_mz(formula, 43.0542, 0.001)] == ["C3H7+"]
    assert [str(ion) for ion in explain_mz(formula, 43.03, 0.1)] == ["C2H3O+", "C3H7+"]


@pytest.mark.parametrize("tolerance", [0, -1, 0.6, float("nan"), float("inf")])
def test_tolerance_out_of_range_is_refused(tolerance: float) -> None:
    with pytest.raises(UsageError, match="mass tolerance"):
        explain_mz(parse_formula("CH4"), 16.0, tolerance)


def test_composition_with_too_many_subsets_is_refused() -> None:
    with pytest.raises(FormulaError, match="more than 100000 subsets"):
        explain_mz(parse_formula("C100H200N50O50S10"), 100.0, 0.01)


@pytest.mark.parametrize("mz", [0.0, -5.0, 1e9, float("nan"), float("inf")])
def test_senseless_mz_has_no_explanation(mz: float) -> None:
    assert explain_mz(parse_formula("C2H6O"), mz, 0.1) == ()


def test_hydrogen_alone_explains_nothing() -> None:
    assert explain_mz(parse_formula("H4"), 2.0151, 0.1) == ()
    assert not reachable_nominal(parse_formula("H4")).any()
