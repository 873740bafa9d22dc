"""Isomer counts against known numbers."""

from __future__ import annotations

import pytest

from identify.chem.formula import parse_formula
from identify.chem.isomers import MAX_LIMIT, IsomerCount, count_isomers
from identify.chem.structures import canonical_smiles, formula_of
from identify.errors import StructureError, UsageError

# Numbers of constitutional isomers from memory (textbook counts; congener numbers of chlorinated biphenyls and dioxins)
KNOWN = [
    ("CCCC", 2),
    ("CCCCCC", 5),
    ("CCCCCCC", 9),
    ("CCCCCCCC", 18),
    ("CCCCCCCCC", 35),
    ("CCC=C", 3),
    ("CCCC=C", 5),
    ("CCCCC=C", 13),
    ("CCCCO", 4),
    ("CCCCCO", 8),
    ("CCOCC", 3),
    ("CCCC=O", 2),
    ("CCCCC(C)=O", 6),
    ("CCCCC(=O)O", 4),
    ("CCOC(C)=O", 4),
    ("ClCCCCl", 4),
    ("CCNCC", 3),
    ("CCCCN", 4),
    ("CC1CCCCC1C", 5),
    ("Cc1ccccc1", 1),
    ("Cc1ccccc1C", 4),
    ("CCc1ccccc1", 4),
    ("Cc1cc(C)cc(C)c1", 8),
    ("CCCCc1ccccc1", 22),
    ("Clc1ccccc1Cl", 3),
    ("Clc1cccc(Cl)c1Cl", 3),
    ("Brc1ccccc1Cl", 3),
    ("Cc1ccccc1O", 3),
    ("Nc1ccccc1C", 3),
    ("Oc1ccc(O)cc1", 3),
    ("c1ccc2ccccc2c1", 1),
    ("Cc1cccc2ccccc12", 2),
    ("Cc1cccc2c(C)cccc12", 12),
    ("Clc1ccccc1-c1ccccc1", 3),
    ("Clc1ccccc1-c1ccccc1Cl", 12),
    ("Clc1cc(Cl)ccc1-c1ccccc1Cl", 24),
    ("Clc1cc(Cl)ccc1-c1ccc(Cl)cc1Cl", 42),
    ("Clc1cc2Oc3cc(Cl)c(Cl)cc3Oc2cc1Cl", 22),
    ("C", 1),
    ("O", 1),
    ("OC(=O)C(F)(F)F", 1),
]


@pytest.mark.parametrize(("smiles", "count"), KNOWN)
def test_known_number_of_isomers(smiles: str, count: int) -> None:
    found = count_isomers(smiles)
    assert found.is_complete
    assert found.count == count
    assert str(found) == str(count)


@pytest.mark.parametrize("smiles", [smiles for smiles, _ in KNOWN[::4]])
def test_isomers_are_distinct_canonical_and_of_the_same_formula(smiles: str) -> None:
    found = count_isomers(smiles)
    assert len(set(found.isomers)) == found.count
    assert found.isomers[0] == canonical_smiles(smiles)
    assert all(canonical_smiles(isomer) == isomer for isomer in found.isomers)
    assert {formula_of(isomer) for isomer in found.isomers} == {formula_of(smiles)}


@pytest.mark.parametrize(
    "smiles", ["CCCCc1ccccc1", "CCCCCO", "CCCCC=C", "Clc1ccccc1-c1ccccc1Cl", "CCCCC(C)=O", "CC1CCCCC1C"]
)
def test_every_isomer_gives_the_same_set(smiles: str) -> None:
    found = count_isomers(smiles)
    assert all(set(count_isomers(isomer).isomers) == set(found.isomers) for isomer in found.isomers[1::3])


def test_xylenes_are_named() -> None:
    expected = {canonical_smiles(s) for s in ("Cc1ccccc1C", "Cc1cccc(C)c1", "Cc1ccc(C)cc1", "CCc1ccccc1")}
    assert set(count_isomers("CCc1ccccc1").isomers) == expected


def test_functional_groups_stay_what_they_are() -> None:
    cresols = count_isomers("Cc1ccccc1O").isomers
    assert canonical_smiles("COc1ccccc1") not in cresols
    assert canonical_smiles("OCc1ccccc1") not in cresols
    assert canonical_smiles("CC(C)=O") not in count_isomers("CCC=O").isomers
    assert canonical_smiles("CCNC") not in count_isomers("CCCN").isomers
    assert canonical_smiles("CC(O)N(C)C") not in count_isomers("OCCN(C)C").isomers


def test_stereochemistry_isotopes_and_azole_tautomers_do_not_count() -> None:
    assert count_isomers("F/C=C/Cl") == count_isomers("F/C=C\\Cl")
    assert count_isomers("[2H]c1ccccc1C").count == 1
    assert count_isomers("Cc1c[nH]cn1").count == count_isomers("Cc1cnc[nH]1").count == 2


def test_bound_is_said_and_exact() -> None:
    bounded = count_isomers("CCCCCCCCCCCC", 30)
    assert (bounded.count, bounded.is_complete, str(bounded)) == (30, False, "at least 30")
    assert str(count_isomers("CCCCCC", 5)) == "5"
    assert str(count_isomers("CCCCCC", 4)) == "at least 4"


@pytest.mark.parametrize("smiles", ["[Na+].[Cl-]", "CC.CC", "C" * 61])
def test_what_is_not_enumerated_says_at_least_one(smiles: str) -> None:
    assert str(count_isomers(smiles)) == "at least 1"


@pytest.mark.parametrize("limit", [0, -1, MAX_LIMIT + 1])
def test_limit_out_of_range_is_refused(limit: int) -> None:
    with pytest.raises(UsageError, match="limit of isomers"):
        count_isomers("CC", limit)


def test_bad_structure_is_refused() -> None:
    with pytest.raises(StructureError):
        count_isomers("C1CC")


def test_formula_of_all_isomers_is_that_of_the_table() -> None:
    assert formula_of(count_isomers("CCCCc1ccccc1").isomers[-1]) == parse_formula("C10H14")
    assert isinstance(count_isomers("CC"), IsomerCount)
