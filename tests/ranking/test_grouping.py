from __future__ import annotations

from dataclasses import replace

from identify.ranking.grouping import compound_key, isomer_key
from identify.records import Identity
from tests.ranking.builders import XYLENE, build_entry


def with_identity(**fields: str) -> object:
    return replace(build_entry(1, XYLENE), identity=Identity(**fields))


def test_stereoisomers_are_one_candidate() -> None:
    one = with_identity(inchikey="AAAAAAAAAAAAAA-BBBBBBBBSA-N")
    other = with_identity(inchikey="AAAAAAAAAAAAAA-CCCCCCCCSA-N")
    assert compound_key(one) == compound_key(other) == "AAAAAAAAAAAAAA"


def test_derivatives_of_a_compound_are_one_candidate_and_not_isomers_of_each_other() -> None:
    one = replace(build_entry(1, XYLENE, measured_as="2 TMS"), formula_as_measured="C9H23NO2Si2")
    other = replace(build_entry(1, XYLENE, measured_as="3 TMS"), formula_as_measured="C12H31NO2Si3")
    assert compound_key(one) == compound_key(other)
    assert isomer_key(one) != isomer_key(other)


def test_a_labelled_compound_stands_apart_from_the_unlabelled_and_from_other_labels() -> None:
    plain = build_entry(1, XYLENE)
    d3 = replace(build_entry(1, XYLENE, labelled=True, name="xylene (methyl-D3)"), formula_as_measured="C8H7[2H]3")
    d6 = replace(build_entry(1, XYLENE, labelled=True, name="xylene (D6)"), formula_as_measured="C8H4[2H]6")
    assert len({compound_key(plain), compound_key(d3), compound_key(d6)}) == 3


def test_without_structure_key_the_smiles_then_the_name_and_formula_decide() -> None:
    assert compound_key(with_identity(smiles="CC")) == compound_key(with_identity(smiles="CC", name="ethane"))
    assert compound_key(with_identity(name="Oil  A", formula="C2H6")) == compound_key(
        with_identity(name="oil a", formula="C2H6")
    )
    assert compound_key(with_identity(name="oil a", formula="C3H8")) != compound_key(
        with_identity(name="oil a", formula="C2H6")
    )


def test_text_that_is_no_structure_key_is_not_taken_for_one() -> None:
    assert compound_key(with_identity(inchikey="not a key", smiles="CC")) == "smiles CC"


def test_isomers_of_unknown_formula_as_measured_share_parent_formula_and_derivative() -> None:
    entry = replace(build_entry(1, XYLENE, measured_as="n TMS", formula="C6H12O6"), formula_as_measured="")
    assert isomer_key(entry) == "C6H12O6 as n TMS"
    assert isomer_key(replace(entry, identity=Identity(name="x"), measured_as="")) == ""
