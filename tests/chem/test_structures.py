"""Structures: identifiers, formulas, drawings, classes, similarity, refusals."""

from __future__ import annotations

import re
import subprocess
import sys
import xml.etree.ElementTree as ET

import pytest

from identify.chem.class_table import PATTERNS, WHOLE
from identify.chem.formula import parse_formula
from identify.chem.structures import (
    active_hydrogens,
    canonical_smiles,
    compound_classes,
    connectivity_block,
    draw_svg,
    formula_of,
    has_diastereomers,
    inchikey_of,
    smiles_of_inchi,
    structure_similarity,
)
from identify.errors import StructureError

CAFFEINE = "CN1C=NC2=C1C(=O)N(C(=O)N2C)C"


def test_identifiers_of_caffeine() -> None:
    # InChIKey from memory (public identifier of caffeine)
    assert inchikey_of(CAFFEINE) == "RYYVLZVUVIJVGH-UHFFFAOYSA-N"
    assert canonical_smiles(CAFFEINE) == canonical_smiles("Cn1c(=O)c2c(ncn2C)n(C)c1=O")
    assert formula_of(CAFFEINE) == parse_formula("C8H10N4O2")
    assert connectivity_block(inchikey_of(CAFFEINE)) == "RYYVLZVUVIJVGH"


def test_stereoisomers_and_isotopologues_share_the_connectivity_block() -> None:
    blocks = {connectivity_block(inchikey_of(s)) for s in ("F/C=C/Cl", "F/C=C\\Cl", "FC=CCl", "F/C([2H])=C/Cl")}
    assert len(blocks) == 1


@pytest.mark.parametrize(
    ("smiles", "formula"),
    [
        ("[2H]C([2H])([2H])O", "C[2H]3HO"),
        ("[13CH3]O", "[13C]H4O"),
        ("[12CH4]", "CH4"),
        ("[NH4+].[Cl-]", "ClH4N"),
        ("C[N+](C)(C)C", "C4H12N+"),
        ("[O-]c1ccccc1", "C6H5O-"),
        ("C[Si](C)(C)O", "C3H10OSi"),
        ("[CH3]", "CH3"),
        ("[2H][2H]", "[2H]2"),
    ],
)
def test_formula_counts_hydrogens_isotopes_and_charges(smiles: str, formula: str) -> None:
    assert formula_of(smiles) == parse_formula(formula)


def test_inchi_gives_the_same_structure() -> None:
    assert smiles_of_inchi("InChI=1S/C6H6/c1-2-4-6-5-3-1/h1-6H") == "c1ccccc1"


@pytest.mark.parametrize(
    "function", [canonical_smiles, inchikey_of, formula_of, active_hydrogens, compound_classes, draw_svg]
)
@pytest.mark.parametrize(
    "smiles",
    [
        "",
        "   ",
        "not a smiles",
        "C1CC",
        "c1ccc1c",
        "C(C)(C)(C)(C)C",
        "*CC",
        "[Xx]",
        "C" * 301,
        "C" * 2000,
        "CC\x00C",
        "N/A",
    ],
)
def test_bad_structure_is_refused_by_every_function(function: object, smiles: str) -> None:
    assert callable(function)
    with pytest.raises(StructureError, match=r"^structure: found"):
        function(smiles)


def test_refusal_says_what_was_found() -> None:
    with pytest.raises(StructureError) as caught:
        canonical_smiles("C1CC")
    assert str(caught.value) == "structure: found 'C1CC', expected a valid SMILES or InChI."


def test_rdkit_says_nothing_on_the_terminal() -> None:
    code = (
        "from identify.chem.isomers import count_isomers\n"
        "from identify.chem.structures import *\n"
        "for f in (canonical_smiles, inchikey_of, draw_svg, compound_classes, count_isomers):\n"
        "    for s in ('C1CC', '[2H][2H]', '[2H]', 'C(C)(C)(C)(C)C'):\n"
        "        try: f(s)\n"
        "        except Exception: pass\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert (done.stdout, done.stderr) == ("", "")


def test_importing_the_module_does_not_import_rdkit() -> None:
    code = "import sys, identify.chem.structures, identify.chem.isomers; print('rdkit' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "False\n"


def test_unknown_isotope_and_too_heavy_molecule_are_refused() -> None:
    with pytest.raises(StructureError, match=r"isotope \[20C\]"):
        formula_of("[20CH4]")
    with pytest.raises(StructureError, match="element 'Pu'"):
        formula_of("C[Pu]")
    with pytest.raises(StructureError, match="at most 10000 Da"):
        formula_of("Br" + "C(Br)(Br)" * 90 + "Br")


@pytest.mark.parametrize("text", ["not an inchi", "InChI=1S/xyz", "InChI=" + "1" * 2000])
def test_bad_inchi_is_refused(text: str) -> None:
    with pytest.raises(StructureError):
        smiles_of_inchi(text)


@pytest.mark.parametrize(
    "key", ["", "LFQSCWFLJHTTHZ-UHFFFAOYSA", "lfqscwfljhtthz-uhfffaoysa-n", "LFQSCWFLJHTTHZ-UHFFFAOYSA-N\n"]
)
def test_text_that_is_no_inchikey_is_refused(key: str) -> None:
    with pytest.raises(StructureError, match="InChIKey"):
        connectivity_block(key)


@pytest.mark.parametrize("smiles", [CAFFEINE, "C[C@H](N)C(=O)[O-]", "[2H]C", "O", "[Na+].[Cl-]", "C" * 60, "F/C=C/Cl"])
def test_drawing_is_a_plain_fragment_that_is_safe_in_html(smiles: str) -> None:
    svg = draw_svg(smiles, 200, 150)
    root = ET.fromstring(svg)
    assert root.tag == "{http://www.w3.org/2000/svg}svg"
    assert (root.get("width"), root.get("height"), root.get("viewBox")) == ("200px", "150px", "0 0 200 150")
    assert {element.tag.split("}")[1] for element in root.iter()} <= {"svg", "path", "rect", "ellipse", "polygon"}
    assert not re.search(r"<\?xml|<!|script|href|url\(|style=|class=|id=|\son\w+=", svg)
    assert len(svg) < 40_000
    assert "#FFFFFF" not in svg.upper()


def test_drawing_size_is_bounded() -> None:
    with pytest.raises(StructureError, match="found 10 × 99999 pixels"):
        draw_svg("CC", 10, 99999)


@pytest.mark.parametrize(
    ("smiles", "count"),
    [("CCO", 1), ("NCC(=O)O", 3), ("CC(=O)C", 0), ("OCC(O)CO", 3), ("CCS", 1), ("[2H]OC", 1), ("OP(=O)(O)O", 3)],
)
def test_active_hydrogens(smiles: str, count: int) -> None:
    assert active_hydrogens(smiles) == count


@pytest.mark.parametrize(
    ("smiles", "first"),
    [
        ("CCCCCC", "n-alkane"),
        ("C", "n-alkane"),
        ("CC(C)CC", "branched alkane"),
        ("C1CCCCC1", "cycloalkane"),
        ("C=CCCCC", "alkene"),
        ("C#CCC", "alkyne"),
        ("Cc1ccccc1C", "alkylbenzene"),
        ("c1ccc2ccccc2c1", "polycyclic aromatic hydrocarbon"),
        ("c1ccc2c(c1)Cc1ccccc12", "polycyclic aromatic hydrocarbon"),
        ("c1ccccc1-c1ccccc1", "aromatic hydrocarbon"),
        ("C=Cc1ccccc1", "alkene"),
        ("CC1=CCC(CC1)C(=C)C", "terpene"),
        ("CC1CCC(C(C)C)C(=O)C1", "terpenoid"),
        ("Oc1ccccc1", "phenol"),
        ("CC(C)O", "alcohol"),
        ("CCCCCCCCO", "fatty alcohol"),
        ("CCC=O", "aldehyde"),
        ("CCC(C)=O", "ketone"),
        ("OC(=O)c1ccccc1", "carboxylic acid"),
        ("CCCCCCCCCCCC(=O)O", "fatty acid"),
        ("CCCCCCCC/C=C\\CCCCCCCC(=O)OC", "fatty acid methyl ester"),
        ("CCCCCCCCCCCC(=O)OCC", "fatty acid ethyl ester"),
        ("CCC(=O)OCC", "ester"),
        ("CCOC=O", "ester"),
        ("CC(=O)OCC", "acetate"),
        ("O=C1CCCO1", "lactone"),
        ("CCOCC", "ether"),
        ("COc1ccccc1", "methoxyarene"),
        ("CCN", "amine"),
        ("CN(C)C", "amine"),
        ("Nc1ccccc1", "aromatic amine"),
        ("CC(=O)N(C)C", "amide"),
        ("CCC#N", "nitrile"),
        ("O=[N+]([O-])c1ccccc1", "nitro compound"),
        ("ClC(Cl)Cl", "chlorinated"),
        ("Brc1ccccc1", "aryl halide"),
        ("Clc1ccccc1-c1ccc(Cl)cc1", "chlorinated biphenyl"),
        ("c1ccsc1", "thiophene"),
        ("CSSC", "disulfide"),
        ("CCS", "thiol"),
        ("c1ccncc1", "pyridine"),
        ("c1ccc2[nH]ccc2c1", "indole"),
        (CAFFEINE, "xanthine"),
        ("CCOC(=O)c1ccccc1C(=O)OCC", "phthalate"),
        ("C[Si]1(C)O[Si](C)(C)O[Si](C)(C)O1", "siloxane"),
        ("CCO[Si](C)(C)C", "TMS derivative"),
        ("CC(C)CCCC(C)C1CCC2C1(CCC3C2CC=C4C3(CCC(C4)O)C)C", "sterol"),
        ("CCOP(=S)(OCC)Oc1ccccc1", "thiophosphate"),
        ("[2H]C([2H])([2H])[2H]", "n-alkane"),
    ],
)
def test_first_class_of_well_known_compounds(smiles: str, first: str) -> None:
    assert compound_classes(smiles)[0] == first


@pytest.mark.parametrize(
    ("smiles", "absent"),
    [
        ("CC(C)CCCC(C)CC", "terpene"),
        ("Oc1ccccc1", "alcohol"),
        ("CC(=O)O", "ester"),
        ("COC(=O)CCCCCC(=O)OC", "fatty acid methyl ester"),
        ("NCCCCC(N)C(=O)O", "fatty acid"),
        ("NC(N)=O", "amide"),
        ("COC(N)=O", "ester"),
        ("COC(=O)OC", "ester"),
        ("C[Si](C)(C)O[Si](C)(C)C", "TMS derivative"),
        ("O=C1C=CC(=O)C=C1", "polycyclic aromatic hydrocarbon"),
        ("CC(N)=O", "amine"),
        ("c1ccccc1", "alkylbenzene"),
    ],
)
def test_look_alike_is_not_of_the_class(smiles: str, absent: str) -> None:
    assert absent not in compound_classes(smiles)


def test_more_telling_classes_come_first_and_once() -> None:
    order = [name for name, _ in PATTERNS]
    classes = compound_classes("COc1ccc(cc1)C(=O)OCCN(C)C")
    assert list(classes) == sorted(set(classes), key=order.index)
    assert {"ester", "amine", "aromatic"} <= set(classes)


def test_class_table_is_consistent() -> None:
    names = {name for name, _ in PATTERNS}
    assert names >= WHOLE
    assert not names & set(compound_classes("CC") + compound_classes("Cc1ccccc1") + compound_classes("C=CC#C"))


def test_similarity_is_one_for_the_same_and_less_for_others() -> None:
    assert structure_similarity("CCO", "OCC") == 1.0
    assert structure_similarity("[2H]C([2H])C", "CC") == 1.0
    near, far = structure_similarity("Cc1ccccc1", "CCc1ccccc1"), structure_similarity("Cc1ccccc1", "CCCCO")
    assert 0 <= far < near < 1


@pytest.mark.parametrize(
    ("smiles", "expected"),
    [
        ("ClC1C(Cl)C(Cl)C(Cl)C(Cl)C1Cl", True),  # the hexachlorocyclohexanes
        ("CC(C)C1CCC(C)CC1O", True),  # menthol, neomenthol, isomenthol …
        ("CC1(C)C2CCC1(C)C(O)C2", True),  # borneol, isoborneol
        ("CCCCCCCCC=CCCCCCCCC(=O)O", True),  # oleic, elaidic acid
        ("CC1=CCC2CC1C2(C)C", False),  # α-pinene: mirror images only
        ("CC1=CCC(CC1)C(C)=C", False),  # limonene: mirror images only
        ("C1C2CC3CC1CC(C2)C3", False),  # adamantane
        ("ClC(Cl)=C(c1ccc(Cl)cc1)c1ccc(Cl)cc1", False),
    ],
)
def test_diastereomers_of_textbook_compounds_are_known(smiles: str, expected: bool) -> None:
    """Common practice: organic chemistry as taught."""
    assert has_diastereomers(smiles) is expected
