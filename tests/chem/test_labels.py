"""Isotope labels are found in names, look-alikes are not."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.chem.formula import parse_formula
from identify.chem.labels import Label, apply_label, find_label
from tests.builders import at_most


@pytest.mark.parametrize(
    ("name", "label"),
    [
        ("PROPANE (D8)", "[2H]8"),
        ("ACETONE (1,1,1,3,3,3-D6)", "[2H]6"),
        ("PROPYLSILANE (METHYL-D3)", "[2H]3"),
        ("2-METHYLCYCLOBUTANONE (D3-METHYL)", "[2H]3"),
        ("CYCLOHEXANE-1,1-D2", "[2H]2"),
        ("N-ACETYL(D3) GLYCINE", "[2H]3"),
        ("PHENYLACETIC ACID (2,5,6-D3,ALPHA,ALPHA-D2)", "[2H]5"),
        ("METHYL TETRA-O-[D3]METHYL-GLUCOSIDE-D12", "[2H]12"),
        ("INVENTINE (14-CD3)", "[2H]3"),
        ("(CD3)2CO", "[2H]6"),
        ("toluene-d8", "[2H]8"),
        ("benzene d6", "[2H]6"),
        ("d5-phenol", "[2H]5"),
        ("chloroform-d", "[2H]1"),
        ("ETHANOL (1-D)", "[2H]1"),
        ("PROPANE (2,2-D)", "[2H]2"),
        ("ETHANOL (OD)", "[2H]1"),
        ("D2O", "[2H]2"),
        ("[2H3]methanol", "[2H]3"),
        ("(2H6)benzene", "[2H]6"),
        ("[2H]water", "[2H]1"),
        ("(2',2',2'-2H(3))ethylbenzene", "[2H]3"),
        ("1,1,1,3,3,3-hexadeuteriopropan-2-one", "[2H]6"),
        ("N,N-bis(trideuteriomethyl)aniline", "[2H]6"),
        ("25-hydroxyvitamin D3-d6", "[2H]6"),
        ("CHOLECALCIFEROL-D6", "[2H]6"),
        ("prostaglandin E2-d4", "[2H]4"),
        ("prostaglandin D2-d9", "[2H]9"),
        ("succinic acid-[1,2,3,4-13C4]", "[13C]4"),
        ("succinic acid-[1,4-13C]", "[13C]2"),
        ("succinic acid-[1-13C]", "[13C]1"),
        ("BENZOIC ACID (ALPHA-13C)", "[13C]1"),
        ("glucose-13C6", "[13C]6"),
        ("U-13C6-glucose", "[13C]6"),
        ("urea (15N2)", "[15N]2"),
        ("[18O]water", "[18O]1"),
        ("glycine-13C2,15N", "[13C]2, [15N]"),
        ("[U-13C]glucose", "[13C]"),
        ("glucose, 13C-labelled", "[13C]"),
        ("deuterated toluene", "[2H]"),
        ("perdeuterobenzene", "[2H]"),
        ("CRESOL DEUTEROMETHYL ETHER", "[2H]"),
        ("ETHYLBENZENE (5D)", "[2H]"),
    ],
)
def test_label_is_found(name: str, label: str) -> None:
    assert str(find_label(name)) == label


@pytest.mark.parametrize(
    "name",
    [
        "",
        "VITAMIN D3",
        "25-Hydroxyvitamin D2",
        "Cholecalciferol (D3)",
        "Prostaglandin D2",
        "Octamethylcyclotetrasiloxane (D4)",
        "Decamethylcyclopentasiloxane (D5)",
        "D4-Ph3",
        "D-GLUCOSE",
        "D-(+)-Xylose",
        "DL-alanine",
        "L-DOPA",
        "DDD",
        "o,p'-DDE",
        "2,4-D",
        "2,4-D methyl ester",
        "(2,4-dichlorophenoxy)acetic acid (2,4-D)",
        "delta-cadinene",
        "2H-PYRAN",
        "4(1H)-QUINOLONE",
        "5,6-DIHYDRO-4(2H,8H)-DIONE",
        "3H,4H-PYRROLO(1,2-D)(1,2,4)TRIAZIN-4-ONE",
        "9H-fluorene",
        "9-cis,13-cis-retinoic acid",
        "9CIS,13CIS-RETINAL",
        "n-alkane C13",
        "alkane (14C)",
        "Sphingomyelin d18:1",
        "deuteroporphyrin",
        "Record moved to D01082",
        "dibenzo[b,d]furan",
        "naphtho[1,2-d]thiazole",
        "Disperse Red 13",
    ],
)
def test_look_alike_is_no_label(name: str) -> None:
    assert find_label(name) is None


@given(st.text(alphabet="DdHCNO0123456789-,()[] aeimnt'", max_size=60))
def test_any_name_is_read_without_failing(name: str) -> None:
    label = find_label(name)
    assert label is None or label.atoms


@pytest.mark.parametrize("piece", ["1", "1,", "(", "[1,", "deut", "di", "a,", "13C", "2H"])
def test_long_hostile_name_is_read_quickly(piece: str) -> None:
    with at_most(seconds=0.5):
        find_label(piece * 5000)


@pytest.mark.parametrize(
    ("formula", "name", "labelled"),
    [
        ("C7H8", "toluene-d8", "C7[2H]8"),
        ("C6H6", "perdeuterobenzene", "C6[2H]6"),
        ("C6H12O6", "[U-13C]glucose", "[13C]6H12O6"),
        ("C2H5NO2", "glycine-13C2,15N1", "[13C]2H5[15N]O2"),
    ],
)
def test_label_is_applied(formula: str, name: str, labelled: str) -> None:
    label = find_label(name)
    assert label is not None
    assert apply_label(parse_formula(formula), label) == parse_formula(labelled)


def test_label_that_does_not_fit_or_is_not_known_gives_no_formula() -> None:
    assert apply_label(parse_formula("CHCl3"), Label((("[2H]", 2),))) is None
    assert apply_label(parse_formula("CCl4"), Label((("[2H]", 1),))) is None
    assert apply_label(parse_formula("C7H8"), Label((("[2H]", None),))) is None
    assert apply_label(parse_formula("CCl4"), Label((("[2H]", None),), is_complete=True)) is None


def test_formula_that_is_labelled_already_is_left_alone() -> None:
    formula = parse_formula("C7D8")
    assert apply_label(formula, Label((("[2H]", 8),))) is formula


@pytest.mark.slow
def test_labels_in_names_agree_with_the_isotopes_of_the_open_structures(shared_data: Path) -> None:
    """At least 90 % of the labelled structures of the open records are recognised and at least 90 % of those exactly."""
    from zipfile import ZipFile

    from identify.chem.structures import formula_of

    found = exact = missed = invented = 0
    seen = set()
    with ZipFile(shared_data / "massbank-2025.05.1-ei.zip") as archive:
        for member in archive.namelist():
            if not member.endswith(".txt"):
                continue
            text = archive.read(member).decode("utf-8")
            title, smiles, formula = (
                ((match := re.search(rf"^{re.escape(tag)} (.*)$", text, re.MULTILINE)) and match[1]) or ""
                for tag in ("RECORD_TITLE:", "CH$SMILES:", "CH$FORMULA:")
            )
            key = (title.split(";")[0], smiles)
            if key in seen or smiles in ("", "N/A"):
                continue
            seen.add(key)
            label = find_label(key[0])
            is_labelled = re.search(r"\[\d+[A-Z]", smiles) is not None
            missed += is_labelled and label is None
            invented += label is not None and not is_labelled
            if label is not None and is_labelled:
                found += 1
                exact += apply_label(parse_formula(formula), label) == formula_of(smiles)
    assert found >= 150
    assert found >= 0.9 * (found + missed)
    assert exact >= 0.9 * found
    assert invented == 0
