"""``ionwitness library audit`` and ``export``: findings told and written, licences kept apart."""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import Result

from identify.errors import LibraryConflict, UsageError
from identify.readers import read_spectra

Run = Callable[..., Result]
RECORD = """ACCESSION: INVENTED-{number}
RECORD_TITLE: {name}; GC-EI-Q; MS
AUTHORS: Invented Person
LICENSE: {licence}
CH$NAME: {name}
CH$FORMULA: {formula}
CH$SMILES: {smiles}
AC$INSTRUMENT: Invented 1
AC$INSTRUMENT_TYPE: GC-EI-Q
AC$MASS_SPECTROMETRY: MS_TYPE MS
AC$MASS_SPECTROMETRY: ION_MODE POSITIVE
AC$MASS_SPECTROMETRY: IONIZATION_ENERGY 70 eV
PK$NUM_PEAK: 5
PK$PEAK: m/z int. rel.int.
  15 20 199
  27 10 99
  43 100 999
  57 20 199
  58 60 599
//
"""


@pytest.fixture
def own(run: Run, tmp_path: Path) -> Path:
    """A library with two good records and one whose formula is not that of its structure."""
    cases = (
        (1, "Acetone", "C3H6O", "CC(C)=O", "CC BY-SA"),
        (2, "Benzene", "C3H6O", "c1ccccc1", "CC BY-NC-SA"),
        (3, "Acetone", "C3H6O", "CC(C)=O", "CC0"),
    )
    for number, name, formula, smiles, licence in cases:
        text = RECORD.format(number=number, name=name, formula=formula, smiles=smiles, licence=licence)
        (tmp_path / f"{number}.txt").write_text(text)
    path = tmp_path / "eigene ä.ionlib"
    run("library", "build", path, *(tmp_path / f"{n}.txt" for n in (1, 2, 3)), "--licence", "all", "--who", "tester")
    return path


def test_a_contradiction_is_found_written_and_set_aside(run: Run, own: Path, tmp_path: Path) -> None:
    out = tmp_path / "Befunde ä.csv"
    before = own.read_bytes()
    said = run("library", "audit", own, "--csv", out).output
    assert "  serious, formula and structure: Formula and structure are not of the same compound." in said.splitlines()
    assert own.read_bytes() == before, "an audit changes nothing by itself"
    assert said.splitlines()[0].startswith(f"{own}: 3 entries, fingerprint ")
    with out.open(encoding="utf-8", newline="") as stream:
        proposals = {row["accession"]: row["proposal"] for row in csv.DictReader(stream)}
    assert proposals["INVENTED-2"] == "quarantine", "formula and structure contradict each other"
    assert proposals.get("INVENTED-1") != "quarantine"
    said = run("library", "audit", own, "--quarantine", "--why", "audit of March", "--who", "anna").output
    assert "quarantined by anna: audit of March" in said
    assert "set aside: 1" in said.splitlines()
    again = run("library", "audit", own, "--quarantine", "--why", "again", "--who", "anna").output
    assert again.splitlines()[-1] == "set aside: 0"


def test_setting_aside_needs_a_reason(run: Run, own: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("library", "audit", own, "--quarantine", "--who", "anna")
    assert str(error.value) == "reason: found none, expected why the standing of an entry changes."


@pytest.mark.parametrize(
    ("file_format", "name"),
    [("massbank", "a.txt"), ("jcamp", "a.jdx"), ("msp", "a.msp"), ("mzspeclib", "a.mzSpecLib.txt"), ("mzml", "a.mzML")],
)
def test_entries_go_out_and_come_back(run: Run, own: Path, tmp_path: Path, file_format: str, name: str) -> None:
    out = tmp_path / f"Ausgabe {name}"
    said = run(
        "library", "export", own, out, "--format", file_format, "--accession", "INVENTED-1", "--contributor", "LAB"
    )
    assert said.output.splitlines()[0] == f"{out}: 1 spectrum ({file_format})"
    assert said.output.splitlines()[1] == "licences: CC BY-SA 1"
    rejected: list[object] = []
    (record,) = read_spectra(out, rejected.append)
    assert record.mz.tolist() == [15.0, 27.0, 43.0, 57.0, 58.0]
    assert not rejected


def test_licences_that_exclude_each_other_are_kept_apart(run: Run, own: Path, tmp_path: Path) -> None:
    out = tmp_path / "a.msp"
    with pytest.raises(LibraryConflict) as error:
        run("library", "export", own, out, "--format", "msp")
    assert str(error.value) == (
        f"export in {own}: found CC BY-NC-SA together with CC BY-SA, expected licences that may be passed on together. "
        "Export them into separate files, or say --i-have-the-right."
    )
    assert not out.exists()
    said = run("library", "export", own, out, "--format", "msp", "--i-have-the-right").output
    assert said.splitlines()[0] == f"{out}: 3 spectra (msp)"


def test_one_licence_goes_into_one_file(run: Run, own: Path, tmp_path: Path) -> None:
    out = tmp_path / "a.msp"
    said = run("library", "export", own, out, "--format", "msp", "--licence", "cc by-sa 4.0", "--licence", "CC0").output
    assert said.splitlines() == [f"{out}: 2 spectra (msp)", "licences: CC BY-SA 1, CC0 1"]
    with pytest.raises(UsageError) as error:
        run("library", "export", own, out, "--format", "msp", "--licence", "CC BY")
    assert str(error.value) == f"export in {own}: found no entry under CC BY, expected one."


def test_an_export_never_overwrites_the_library(run: Run, own: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("library", "export", own, own, "--format", "msp")
    assert str(error.value) == (
        f"output file in {own}: found a file that this command reads, expected a new file in a folder to write to."
    )


def test_there_may_be_no_own_standard(run: Run, own: Path, tmp_path: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("library", "export", own, tmp_path / "a.msp", "--format", "msp", "--own-standards")
    assert str(error.value) == f"export in {own}: found no entry, expected at least one."
