"""Starter library: chemistry of every entry, honesty of every record, exact messages for bad files.

Base peaks, molecular masses and the presence of molecular ions below are common practice of the trade (what any analyst
knows of these compounds), from memory; none is taken from a record.
"""

from __future__ import annotations

import importlib.util
import re
import tomllib
from collections import Counter
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from identify.chem.formula import parse_formula, rings_plus_double_bonds
from identify.chem.structures import connectivity_block, formula_of, inchikey_of
from identify.errors import FormatError, LibraryMissing, UsageError
from identify.library import shipped
from identify.library.shipped import find_shipped
from identify.library.starter import (
    LABEL,
    StarterEntry,
    build_starter,
    computed_peaks,
    record_of,
    starter_entries,
    starter_records,
)
from identify.library.store import open_library
from identify.records import EntryStatus, SpectrumRecord

ROOT = Path(__file__).resolve().parent.parent.parent
FOLDER = ROOT / "libraries" / "starter"
ENTRIES = starter_entries()
RECORDS = {record.accession.removeprefix("starter: "): record for record in starter_records()}
BY_NAME = {entry.accession.removeprefix("starter: "): entry for entry in ENTRIES}

CLASSES = {
    "aromatics", "pah", "phenols", "alcohols", "aldehydes", "ketones", "esters", "fame", "alkanes", "terpenes",
    "halogenated", "heterocycles_nitrogen", "heterocycles_sulfur", "phthalates", "siloxanes", "drugs", "pesticides",
    "tms_derivatives",
}  # fmt: skip
SOLVENTS = {
    "methanol", "ethanol", "2-propanol", "acetone", "2-butanone", "acetonitrile", "dichloromethane", "chloroform",
    "carbon tetrachloride", "tetrahydrofuran", "1,4-dioxane", "diethyl ether", "ethyl acetate", "hexane", "cyclohexane",
    "toluene", "pyridine", "N,N-dimethylformamide", "dimethyl sulfoxide", "carbon disulfide", "N-methyl-2-pyrrolidone",
}  # fmt: skip
SHOWS_M = {"aromatics", "pah", "phenols", "heterocycles_nitrogen", "heterocycles_sulfur", "heterocycles_oxygen",
           "nitrogen_compounds", "sulfur_compounds", "fame", "aldehydes"}  # fmt: skip
"""Classes whose molecular ion is seen at 70 eV, aromatic rings above all: common practice."""
STRONG_M = {"pah": 78, "heterocycles_sulfur": 50}
"""Classes whose molecular ion is at or near the base peak (fused aromatic rings): common practice."""
NO_M = {
    "tert-butanol", "2,2,4-trimethylpentane", "1-octanol", "1-hexadecanol", "glycerol", "carbon tetrachloride",
    "hexachloroethane", "bis(2-ethylhexyl) phthalate", "triacetin", "butyl acetate", "hexamethyldisiloxane",
    "octamethylcyclotetrasiloxane", "decamethylcyclopentasiloxane", "lactic acid, 2 TMS", "citric acid, 4 TMS",
}  # fmt: skip
"""Compounds known for a molecular ion too weak to be listed: common practice."""
BASE_PEAKS = {
    "benzene": 78, "toluene": 91, "ethylbenzene": 91, "o-xylene": 91, "styrene": 104, "cumene": 105, "p-cymene": 119,
    "naphthalene": 128, "phenanthrene": 178, "pyrene": 202, "fluorene": 166, "biphenyl": 154, "hexane": 57,
    "phenol": 94, "guaiacol": 109, "vanillin": 151, "thymol": 135, "butylated hydroxytoluene": 205, "methanol": 31,
    "ethanol": 31, "2-propanol": 45, "tert-butanol": 59, "2-phenylethanol": 91, "diethyl ether": 31, "acetone": 43,
    "methyl tert-butyl ether": 73, "hexanal": 44, "acetophenone": 105, "benzophenone": 105, "isophorone": 82,
    "butanoic acid": 60, "ethyl acetate": 43, "ethyl hexanoate": 88, "methyl salicylate": 120, "methyl palmitate": 74,
    "methyl stearate": 74, "limonene": 68, "alpha-pinene": 93, "linalool": 71, "camphor": 95, "carvone": 82,
    "alpha-terpineol": 59, "menthone": 112, "pulegone": 81, "squalene": 69, "dichloromethane": 49, "chloroform": 83,
    "carbon tetrachloride": 117, "trichloroethene": 130, "chlorobenzene": 112, "bromoform": 173, "iodomethane": 142,
    "hexachlorobenzene": 284, "pyridine": 79, "quinoline": 129, "indole": 117, "3-methylindole": 130,
    "benzothiazole": 135, "aniline": 93, "nitrobenzene": 77, "2,4-dinitrotoluene": 165, "thiophene": 84,
    "dibenzothiophene": 184, "dimethyl disulfide": 94, "dimethyl sulfoxide": 63, "elemental sulfur": 64,
    "furfural": 96, "dimethyl phthalate": 163, "diethyl phthalate": 149, "dibutyl phthalate": 149,
    "bis(2-ethylhexyl) phthalate": 149, "bis(2-ethylhexyl) adipate": 129, "tributyl phosphate": 99,
    "hexamethyldisiloxane": 147, "hexamethylcyclotrisiloxane": 207, "octamethylcyclotetrasiloxane": 281,
    "dodecamethylcyclohexasiloxane": 73, "caffeine": 194, "nicotine": 84, "cocaine": 82, "amphetamine": 44,
    "methamphetamine": 58, "lidocaine": 86, "cannabidiol": 231, "ketamine": 180, "p,p'-DDE": 246, "p,p'-DDT": 235,
    "atrazine": 200, "DEET": 119, "metolachlor": 162, "carbaryl": 144, "permethrin": 183, "piperonyl butoxide": 176,
    "alanine, 2 TMS": 116, "valine, 2 TMS": 144, "glycine, 3 TMS": 174, "phosphoric acid, 3 TMS": 299,
    "benzoic acid, 1 TMS": 179, "succinic acid, 2 TMS": 147, "proline, 2 TMS": 142,
}  # fmt: skip
MASSES = {
    "benzene": 78, "limonene": 136, "camphor": 152, "caffeine": 194, "nicotine": 162, "cocaine": 303, "diazepam": 284,
    "cholesterol": 386, "squalene": 410, "atrazine": 215, "simazine": 201, "chlorpyrifos": 349, "malathion": 330,
    "diazinon": 304, "parathion-methyl": 263, "lindane": 288, "p,p'-DDT": 352, "heptachlor": 370, "permethrin": 390,
    "bifenthrin": 422, "trifluralin": 335, "metolachlor": 283, "alachlor": 269, "PCB 153": 358, "BDE-47": 482,
    "bis(2-ethylhexyl) phthalate": 390, "triphenyl phosphate": 326, "methyl oleate": 296, "methyl linoleate": 294,
    "fentanyl": 336, "ketamine": 237, "delta-9-tetrahydrocannabinol": 314, "lidocaine": 234, "ibuprofen": 206,
    "palmitic acid, 1 TMS": 328, "cholesterol, 1 TMS": 458, "citric acid, 4 TMS": 480, "glucose, 1 MEOX 5 TMS": 569,
    "myo-inositol, 6 TMS": 612, "glycerol, 3 TMS": 308, "beta-caryophyllene": 204, "eugenol": 164, "vanillin": 152,
    "retene": 234, "benzo[a]pyrene": 252, "benzo[ghi]perylene": 276, "dibenz[a,h]anthracene": 278,
}  # fmt: skip


def toml_entries() -> list[tuple[str, dict[str, Any]]]:
    """The files as they stand, read without the reader under test."""
    return [
        (path.stem, entry)
        for path in sorted(FOLDER.glob("*.toml"))
        for entry in tomllib.loads(path.read_text(encoding="utf-8"))["compound"]
    ]


def has_m(entry: StarterEntry) -> bool:
    return entry.formula_as_measured in dict(entry.ions)


def peaks_of(name: str) -> dict[int, float]:
    record = RECORDS[name]
    return {int(mz): float(intensity) for mz, intensity in zip(record.mz, record.intensity, strict=True)}


def test_there_are_at_least_150_compounds() -> None:
    assert len({connectivity_block(inchikey_of(entry.smiles)) for entry in ENTRIES}) >= 150


def test_all_classes_and_solvents_are_covered() -> None:
    sizes = Counter(Path(entry.file).stem for entry in ENTRIES)
    assert set(sizes) >= CLASSES
    assert all(sizes[name] >= 4 for name in CLASSES)
    assert {entry.name for entry in ENTRIES} >= SOLVENTS


def test_no_compound_comes_twice_in_the_same_form() -> None:
    keys = Counter((connectivity_block(inchikey_of(entry.smiles)), entry.derivative) for entry in ENTRIES)
    assert [key for key, count in keys.items() if count > 1] == []
    assert len(RECORDS) == len(ENTRIES)


def test_no_two_entries_are_copies_of_each_other() -> None:
    texts = Counter(" ".join(sorted(entry["ions"].split())) for _, entry in toml_entries())
    assert max(texts.values()) == 1


def test_every_file_says_that_it_is_from_memory_and_no_reference_data() -> None:
    for path in FOLDER.glob("*.toml"):
        head = path.read_text(encoding="utf-8")[:600].lower()
        assert "principal ions from memory, rounded, for demonstration; not reference data" in head


@pytest.mark.parametrize("stem", sorted({stem for stem, _ in toml_entries()}))
def test_each_ion_is_a_charge_feasible_part_of_what_is_measured(stem: str) -> None:
    """Counted here from the text with a regular expression, not with the reader's own check."""
    for _, table in (pair for pair in toml_entries() if pair[0] == stem):
        atoms = Counter(dict(formula_of(table["smiles"]).counts))
        for group, number in (word[::-1] for word in re.findall(r"(\d+) (TMS|MEOX)", table.get("derivative", ""))):
            change = {"TMS": {"C": 3, "H": 8, "Si": 1}, "MEOX": {"C": 1, "H": 3, "N": 1}}[group]
            for symbol, count in change.items():
                atoms[symbol] += int(number) * count
        values = []
        for token in table["ions"].split():
            ion, value = token.split("=")
            parts = Counter[str]()
            for symbol, count in re.findall(r"([A-Z][a-z]?)(\d*)", ion.removesuffix("^2+")):
                parts[symbol] += int(count or 1)
            assert all(atoms[symbol] >= count for symbol, count in parts.items()), (table["name"], token)
            assert rings_plus_double_bonds(parse_formula(ion)) >= -0.5, (table["name"], token)
            values.append(int(value))
        assert max(values) == 100 and min(values) >= 1, table["name"]


def test_entries_have_enough_ions() -> None:
    """Molecules of five or more carbon atoms have at least 14 ions, smaller ones what there is."""
    large = [entry for entry in ENTRIES if entry.formula.count("C") >= 5]
    assert len(large) >= 350
    assert [entry.name for entry in large if len(entry.ions) < 14] == []
    assert min(len(entry.ions) for entry in ENTRIES) >= 5


@pytest.mark.parametrize("stem", sorted(SHOWS_M))
def test_molecular_ion_is_there_where_common_knowledge_says_so(stem: str) -> None:
    assert [entry.name for entry in ENTRIES if entry.file == f"{stem}.toml" and not has_m(entry)] == []


@pytest.mark.parametrize("stem", sorted(STRONG_M))
def test_molecular_ion_of_fused_rings_is_strong(stem: str) -> None:
    weak = {
        entry.name: dict(entry.ions)[entry.formula_as_measured]
        for entry in ENTRIES
        if entry.file == f"{stem}.toml" and dict(entry.ions)[entry.formula_as_measured] < STRONG_M[stem]
    }
    assert weak == {"retene": 60} if stem == "pah" else weak == {}


def test_molecular_ion_is_not_listed_where_it_is_known_to_be_absent() -> None:
    assert [name for name in sorted(NO_M) if has_m(BY_NAME[name])] == []


@pytest.mark.parametrize("name", sorted(BASE_PEAKS))
def test_base_peak_is_the_one_every_analyst_knows(name: str) -> None:
    peaks = peaks_of(name)
    assert max(peaks, key=lambda mz: peaks[mz]) == BASE_PEAKS[name]


def test_structures_have_the_molecular_masses_an_analyst_knows() -> None:
    assert {name: BY_NAME[name].formula_as_measured.nominal_mass for name in MASSES} == MASSES


def test_n_alkanes_have_the_retention_index_of_their_definition() -> None:
    """Kovats: 100 times the number of carbon atoms, by definition."""
    alkanes = [entry for entry in ENTRIES if entry.file == "alkanes.toml" and re.fullmatch("C+", entry.smiles)]
    assert len(alkanes) >= 20
    assert [e.name for e in alkanes if e.retention_index != 100 * e.formula.count("C")] == []


def test_isotope_clusters_are_computed() -> None:
    """Standards table 3.1 (abundances): 37Cl/35Cl 0.3196, 81Br/79Br 0.9728; binomials of them."""
    dichloromethane = peaks_of("dichloromethane")
    assert dichloromethane[86] / dichloromethane[84] == pytest.approx(2 * 0.3196, abs=0.01)
    tribromo = computed_peaks(((parse_formula("CHBr3"), 100),))
    assert tribromo[252] == 100
    assert tribromo[250] == pytest.approx(100 / (3 * 0.9728), abs=0.5)
    assert tribromo[256] == pytest.approx(100 * 0.9728**2 / 3, abs=0.5)


def test_intensity_counts_for_the_tallest_peak_of_a_cluster() -> None:
    assert peaks_of("hexachlorobenzene")[284] == 100
    assert peaks_of("hexachlorobenzene")[282] < 60


def test_doubly_charged_ions_stand_at_half_their_mass() -> None:
    peaks = computed_peaks(((parse_formula("C14H10"), 100), (parse_formula("C14H10^2+"), 10)))
    assert peaks[89] == pytest.approx(10)
    assert 90 in peaks and peaks[90] < 0.2


def test_overlapping_ions_are_summed_and_the_base_peak_is_100() -> None:
    for record in RECORDS.values():
        assert max(record.intensity) == 100
        assert (record.mz == record.mz.round()).all() and (record.mz[1:] > record.mz[:-1]).all()


def test_records_say_what_they_are() -> None:
    for record in RECORDS.values():
        assert record.licence == "CC0" and record.authors == "ionwitness developers"
        assert record.comments[0] == LABEL and "not reference data" in LABEL
        assert record.acquisition.ionization == "EI" and record.acquisition.energy_ev == 70
        assert record.mz.min() >= (record.acquisition.lowest_mz or 0)


def test_library_takes_every_entry_as_demonstration(tmp_path: Path) -> None:
    path = tmp_path / "starter.ionlib"
    report = build_starter(path, "tests", datetime(2025, 1, 1, tzinfo=UTC))
    assert (report.n_accepted, dict(report.n_rejected)) == (len(ENTRIES), {})
    with open_library(path) as library:
        entries = list(library.iter_entries())
    assert {entry.status for entry in entries} == {EntryStatus.DEMONSTRATION}
    assert {entry.accession: entry.formula_as_measured for entry in entries} == {
        entry.accession: entry.formula_as_measured.hill for entry in ENTRIES
    }
    assert {entry.licence for entry in entries} == {"CC0"}


GOOD = 'class = "c"\n[[compound]]\nname = "toluene"\nsmiles = "Cc1ccccc1"\nions = "C7H7=100 C7H8=70"\n'
FAULTS = {
    "no toml": (
        "class = \n",
        "starter file in a.toml: found Invalid value (at line 1, column 9), expected TOML in UTF-8.",
    ),
    "no class": (
        GOOD.replace('class = "c"\n', ""),
        "starter entry in a.toml: found no 'class', expected the keys class, compound.",
    ),
    "unknown key": (
        GOOD + "mass = 92\n",
        "starter entry in a.toml (toluene): found key 'mass', expected one of name, smiles, cas, derivative, "
        "retention_index, ions.",
    ),
    "wrong type": (
        GOOD + 'retention_index = "765"\n',
        "starter entry in a.toml (toluene): found retention_index = '765', expected a value of type int.",
    ),
    "no ions": (
        GOOD.replace('ions = "C7H7=100 C7H8=70"\n', ""),
        "starter entry in a.toml (toluene): found no 'ions', expected the keys ions, name, smiles.",
    ),
    "bad ion": (
        GOOD.replace("C7H8=70", "C7H8:70"),
        "starter entry in a.toml (toluene): found 'C7H8:70', expected ions as formula=intensity, such as C7H7=100.",
    ),
    "unknown element": (
        GOOD.replace("C7H8=70", "C7Xx=70"),
        "starter entry in a.toml (toluene): found 'C7Xx=70' ('X' at character 3 of 'C7Xx'), expected a formula.",
    ),
    "not a part": (
        GOOD.replace("C7H8=70", "C8H8=70"),
        "starter entry in a.toml (toluene): found 'C8H8=70', expected a part of C7H8.",
    ),
    "too many hydrogens": (
        GOOD.replace("C7H8=70", "C2H8=70"),
        "starter entry in a.toml (toluene): found 'C2H8=70', expected an ion with at least -0.5 rings plus double bonds.",
    ),
    "below the range": (
        "lowest_mz = 45\n" + GOOD.replace("C7H8=70", "C3H5=7"),
        "starter entry in a.toml (toluene): found 'C3H5=7', expected no ion below m/z 45.",
    ),
    "out of range": (
        GOOD.replace("C7H8=70", "C7H8=700"),
        "starter entry in a.toml (toluene): found 'C7H8=700', expected an intensity from 1 to 100.",
    ),
    "ion twice": (
        GOOD.replace("C7H8=70", "C7H8=70 C7H7=3"),
        "starter entry in a.toml (toluene): found 'C7H7=3' again, expected each ion once.",
    ),
    "no 100": (
        GOOD.replace("C7H7=100", "C7H7=99"),
        "starter entry in a.toml (toluene): found a strongest ion of 99, expected 100.",
    ),
    "bad structure": (
        GOOD.replace("Cc1ccccc1", "Cc1ccccc"),
        None,
    ),
    "bad registry number": (
        GOOD + 'cas = "108-88-4"\n',
        "starter entry in a.toml (toluene): found cas '108-88-4', expected a registry number with a right check digit.",
    ),
    "bad derivative": (
        GOOD + 'derivative = "2TMS"\n',
        "starter entry in a.toml (toluene): found derivative '2TMS', expected the normal form, such as '2 TMS'.",
    ),
    "twice": (
        GOOD + GOOD.removeprefix('class = "c"\n'),
        "starter entry in a.toml (toluene): found the same name and derivative again, expected each compound once.",
    ),
}


@pytest.mark.parametrize("fault", sorted(FAULTS))
def test_bad_file_is_refused_with_file_entry_and_reason(fault: str, tmp_path: Path) -> None:
    text, message = FAULTS[fault]
    (tmp_path / "a.toml").write_text(text, encoding="utf-8")
    with pytest.raises(FormatError) as caught:
        starter_entries(tmp_path)
    if message is None:
        assert "a.toml (toluene)" in str(caught.value) and "a SMILES that can be read" in str(caught.value)
    else:
        assert str(caught.value) == message


def test_good_file_is_read(tmp_path: Path) -> None:
    (tmp_path / "a.toml").write_text(GOOD, encoding="utf-8")
    (entry,) = starter_entries(tmp_path)
    record = record_of(entry)
    assert isinstance(record, SpectrumRecord)
    assert (entry.accession, entry.formula.hill, record.retention.index) == ("starter: toluene", "C7H8", None)
    assert dict(zip(record.mz, record.intensity, strict=True))[93.0] == pytest.approx(5.4 + 0.2, abs=0.3)


def test_shipped_data_is_found_in_an_installed_package_first(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    package = tmp_path / "site" / "identify"
    (package / "_libraries" / "starter").mkdir(parents=True)
    (tmp_path / "site" / "libraries" / "starter").mkdir(parents=True)
    monkeypatch.setattr(shipped, "files", lambda name: package)
    assert str(find_shipped("starter")) == str(package / "_libraries" / "starter")


def test_shipped_data_is_found_beside_the_package_in_a_source_tree(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    package = tmp_path / "identify"
    package.mkdir()
    monkeypatch.setattr(shipped, "files", lambda name: package)
    with pytest.raises(LibraryMissing, match="no such folder"):
        find_shipped("starter")
    (tmp_path / "libraries" / "starter").mkdir(parents=True)
    assert find_shipped("starter").joinpath("").is_dir()
    with pytest.raises(UsageError, match="one of demo, recipes, starter"):
        find_shipped("elsewhere")


def test_wheel_takes_the_shipped_folders_along() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    included = project["tool"]["hatch"]["build"]["targets"]["wheel"]["force-include"]
    assert included == {"libraries": "identify/_libraries", "fixtures/demo": "identify/_demo"}


@pytest.mark.slow
def test_entries_resemble_the_open_records_of_the_same_compounds(
    shared_data: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Goal of the project: median weighted cosine ≥ 0.75 (`tests/benchmarks/starter.py` exits 1 below it)."""
    spec = importlib.util.spec_from_file_location("starter_benchmark", ROOT / "tests" / "benchmarks" / "starter.py")
    assert spec is not None and spec.loader is not None
    benchmark = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(benchmark)
    monkeypatch.setattr("sys.argv", ["starter.py"])
    assert benchmark.main() == 0
    found = re.search(r"median over compounds: ([\d.]+)", capsys.readouterr().out)
    assert found and float(found[1]) >= 0.85
