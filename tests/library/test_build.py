"""Records are judged one by one; what stays out is counted with its reason; a library appears whole or not at all."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from datetime import datetime
from pathlib import Path

import pytest
from library_builders import ETHANOL, TOLUENE, WHEN, WHO, build_record, build_records, build_test_library

from identify.errors import InputError, LibraryConflict, LibraryError, UsageError
from identify.library.build import add_spectra, build_from_records, build_library
from identify.library.connection import connect
from identify.library.drafts import Policy, judge_record
from identify.library.rows import Draft
from identify.library.store import open_library
from identify.records import Acquisition, EntryStatus, Rejection
from identify.spectra.splash import compute_splash


def judge(record, licences=None) -> Draft | Rejection:
    return judge_record(record, Policy(licences))


@pytest.mark.parametrize(
    ("acquisition", "reason"),
    [
        (Acquisition(ionization="CI"), "not electron ionization"),
        (Acquisition(ionization="EI", ms_level=2), "not a full-scan spectrum (MS1)"),
        (Acquisition(ionization="EI", polarity="negative"), "not positive ions"),
    ],
)
def test_only_positive_full_scan_electron_ionization_is_accepted(acquisition: Acquisition, reason: str) -> None:
    verdict = judge(build_record("X", "Toluene", TOLUENE, acquisition=acquisition))
    assert isinstance(verdict, Rejection)
    assert verdict.reason == reason


def test_a_splash_that_does_not_fit_the_peaks_is_refused() -> None:
    right = build_record("X", "Toluene", TOLUENE)
    splash = compute_splash(right.mz, right.intensity)
    assert isinstance(judge(build_record("X", "Toluene", TOLUENE, splash=splash)), Draft)
    wrong = judge(build_record("X", "Toluene", TOLUENE | {92: 90.0}, splash=splash))
    assert isinstance(wrong, Rejection)
    assert wrong.reason == "splash mismatch"


def test_a_record_without_any_identity_is_refused() -> None:
    verdict = judge(build_record("X", "", TOLUENE))
    assert isinstance(verdict, Rejection)
    assert verdict.reason == "no name, formula or structure"


def test_unstated_energy_stays_unstated_and_is_noted() -> None:
    draft = judge(build_record("X", "Toluene", TOLUENE, energy_ev=None))
    assert isinstance(draft, Draft)
    assert draft.columns["energy_ev"] is None
    assert "energy not stated: taken as 70 eV" in draft.notes


def test_reference_spectra_keep_air_and_weak_peaks() -> None:
    peaks = {18: 3.0, 28: 40.0, 32: 10.0, 91: 100.0, 92: 0.004}
    draft = judge(build_record("X", "Toluene", peaks))
    assert isinstance(draft, Draft)
    assert len(draft.columns["nominal_mz"]) == 2 * len(peaks)  # type: ignore[arg-type]


def test_a_derivative_is_recorded_as_measured(library_path: Path) -> None:
    with open_library(library_path) as library:
        (entry,) = library.find_entries(accession="TEST-5")
    # Alanine C3H7NO2 + 2 × C3H8Si, counted by hand.
    assert (entry.measured_as, entry.formula_as_measured, entry.identity.formula) == ("2 TMS", "C9H23NO2Si2", "C3H7NO2")


def test_zero_groups_are_no_derivative_and_unknown_words_are_kept() -> None:
    plain = judge(build_record("X", "Alanine", TOLUENE, formula="C3H7NO2", derivative="0 TMS"))
    odd = judge(build_record("X", "Alanine", TOLUENE, formula="C3H7NO2", derivative="house reagent"))
    unknown = judge(build_record("X", "Alanine", TOLUENE, formula="C3H7NO2", derivative="n TMS"))
    assert isinstance(plain, Draft) and isinstance(odd, Draft) and isinstance(unknown, Draft)
    assert (plain.columns["measured_as"], plain.columns["formula_as_measured"]) == ("", "C3H7NO2")
    assert (odd.columns["measured_as"], odd.columns["formula_as_measured"]) == ("house reagent", "")
    assert (unknown.columns["measured_as"], unknown.columns["formula_as_measured"]) == ("n TMS", "")


@pytest.mark.parametrize(
    ("name", "smiles", "formula"),
    [
        ("TOLUENE (METHYL-D3)", "Cc1ccccc1", "C7H5[2H]3"),
        ("Toluene-d8", "Cc1ccccc1", "C7[2H]8"),
        ("Toluene", "[2H]C([2H])([2H])c1ccccc1", "C7H5[2H]3"),
    ],
)
def test_a_labelled_compound_is_never_the_unlabelled_one(name: str, smiles: str, formula: str) -> None:
    key = "YXFVVABEGXRONW-UHFFFAOYSA-N"  # of toluene: records of labelled compounds often state it
    plain = judge(build_record("X", "Toluene", TOLUENE, formula="C7H8", smiles="Cc1ccccc1", inchikey=key))
    labelled = judge(build_record("X", name, TOLUENE, formula="C7H8", smiles=smiles, inchikey=key))
    assert isinstance(plain, Draft) and isinstance(labelled, Draft)
    assert labelled.compound.key != plain.compound.key
    assert (labelled.compound.is_labelled, labelled.compound.smiles) == (True, "")
    assert (labelled.columns["is_labelled"], labelled.columns["formula_as_measured"]) == (1, formula)


def test_labels_of_unknown_number_leave_the_formula_open() -> None:
    draft = judge(build_record("X", "deuterated toluene", TOLUENE, formula="C7H8"))
    assert isinstance(draft, Draft)
    assert (draft.columns["is_labelled"], draft.columns["formula_as_measured"]) == (1, "")


def test_a_formula_that_cannot_be_read_is_kept_as_stated_beside() -> None:
    draft = judge(build_record("X", "Thing", TOLUENE, formula="C7Qq8"))
    assert isinstance(draft, Draft)
    assert draft.columns["formula"] == ""
    assert '"formula as stated":"C7Qq8"' in str(draft.columns["extra"])


def test_the_inchikey_is_computed_where_the_record_lacks_it() -> None:
    draft = judge(build_record("X", "Ethanol", ETHANOL, smiles="CCO"))
    assert isinstance(draft, Draft)
    # InChIKey of ethanol, from memory and agreeing with rdkit.
    assert draft.columns["inchikey"] == "LFQSCWFLJHTTHZ-UHFFFAOYSA-N"


def test_counts_add_up_and_duplicates_are_refused(tmp_path: Path) -> None:
    records = [
        *build_records(),
        build_record("TEST-1", "Other", ETHANOL),
        build_record("NC", "X", ETHANOL, licence="CC BY-NC"),
    ]
    report = build_from_records(tmp_path / "a.ionlib", records, origin="invented", licences="free", who=WHO, when=WHEN)
    assert report.n_read == 7
    assert report.n_accepted == 5
    assert report.n_rejected == {"duplicate accession": 1, "licence not accepted": 1}
    assert (report.n_faulty, report.exit_code) == (1, 1), "another licence is a choice, a duplicate a fault"
    assert {rejection.reason for rejection in report.rejected} == set(report.n_rejected)
    assert report.n_compounds == 4


def test_records_without_accession_are_named_after_file_and_position(tmp_path: Path) -> None:
    report = build_test_library(tmp_path / "a.ionlib", [build_record("", "Toluene", TOLUENE)])
    assert report.n_accepted == 1
    with open_library(tmp_path / "a.ionlib") as library:
        assert library.find_entries(accession="invented.txt#1")


def test_the_import_event_says_what_came_in(library_path: Path) -> None:
    with open_library(library_path) as library:
        created, imported = library.events()
    assert (created.kind, imported.kind, imported.who, imported.at) == (
        "created", "imported", WHO, "2025-05-02T09:30:00.000000Z",
    )  # fmt: skip
    assert imported.details["entries"] == 5
    assert imported.details["rejected"] == {}


def test_an_existing_file_is_replaced_on_demand_only(library_path: Path) -> None:
    before = library_path.read_bytes()
    with pytest.raises(LibraryConflict, match="found a file that already exists, expected a new name"):
        build_test_library(library_path)
    assert library_path.read_bytes() == before
    report = build_from_records(
        library_path, build_records()[:2], origin="invented", replace=True, who=WHO, when=WHEN
    )  # fmt: skip
    with open_library(library_path) as library:
        assert library.state().entries == report.n_accepted == 2


def test_replacing_never_overwrites_what_is_no_library(tmp_path: Path) -> None:
    target = tmp_path / "thesis.docx"
    target.write_bytes(b"years of work")
    with pytest.raises(LibraryConflict, match="a file of another kind"):
        build_from_records(target, build_records(), origin="x", replace=True, who=WHO, when=WHEN)
    assert target.read_bytes() == b"years of work"


def test_a_failing_build_leaves_nothing(tmp_path: Path) -> None:
    def records():
        yield from build_records()
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        build_from_records(tmp_path / "a.ionlib", records(), origin="x", who=WHO, when=WHEN)
    assert list(tmp_path.iterdir()) == []


def test_nothing_accepted_is_an_error_with_the_reasons(tmp_path: Path) -> None:
    record = build_record("X", "Toluene", TOLUENE, licence="")
    with pytest.raises(InputError, match=r"nothing accepted \(1 × licence not accepted\)"):
        build_from_records(tmp_path / "a.ionlib", [record], origin="x", licences="free", who=WHO, when=WHEN)
    assert list(tmp_path.iterdir()) == []


def test_a_missing_folder_and_a_nameless_builder_are_refused(tmp_path: Path) -> None:
    with pytest.raises(LibraryError, match="found no folder"):
        build_test_library(tmp_path / "none" / "a.ionlib")
    with pytest.raises(UsageError, match="printable name"):
        build_from_records(tmp_path / "a.ionlib", build_records(), origin="x", who=" ", when=WHEN)
    with pytest.raises(UsageError, match="without a time zone"):
        build_from_records(tmp_path / "a.ionlib", build_records(), origin="x", who=WHO, when=datetime(2025, 1, 1))


def test_paths_with_spaces_and_other_alphabets_work(tmp_path: Path) -> None:
    folder = tmp_path / "质谱 über #%?"
    folder.mkdir()
    path = folder / "мой lab.ionlib"
    build_test_library(path)
    with open_library(path, writable=True) as library:
        assert library.state().entries == 5
    assert [found.name for found in folder.iterdir()] == [path.name]


def test_sources_are_read_from_files_and_name_the_file(tmp_path: Path) -> None:
    text = "\n".join(
        [
            "ACCESSION: INVENTED-0001",
            "RECORD_TITLE: Toluene; GC-EI-Q; MS",
            "LICENSE: CC BY",
            "CH$NAME: Toluene",
            "CH$FORMULA: C7H8",
            "AC$INSTRUMENT_TYPE: GC-EI-Q",
            "AC$MASS_SPECTROMETRY: MS_TYPE MS",
            "AC$MASS_SPECTROMETRY: ION_MODE POSITIVE",
            "PK$NUM_PEAK: 2",
            "PK$PEAK: m/z int. rel.int.",
            "  91 100 999",
            "  92 60 599",
            "//",
            "",
        ]
    )
    source = tmp_path / "one.txt"
    source.write_text(text)
    seen = []
    report = build_library(
        tmp_path / "a.ionlib", [source], who=WHO, when=WHEN, progress=lambda n, name: seen.append((n, name))
    )
    assert (report.n_accepted, seen[0]) == (1, (0, "one.txt"))
    with open_library(tmp_path / "a.ionlib") as library:
        assert library.get_entries([1])[0].source == "one.txt:1"
        assert len(library.events()[1].details["sha256"]) == 64


def test_demonstration_entries_are_marked(tmp_path: Path) -> None:
    build_test_library(tmp_path / "a.ionlib", status=EntryStatus.DEMONSTRATION)
    with open_library(tmp_path / "a.ionlib") as library:
        assert {entry.status for entry in library.iter_entries()} == {EntryStatus.DEMONSTRATION}


def test_leftovers_of_a_dead_build_are_removed_and_those_of_a_living_one_kept(tmp_path: Path) -> None:
    target = tmp_path / "a.ionlib"
    script = (
        "import sys, time; from pathlib import Path\n"
        "from identify.library.new_file import new_library_file\n"
        "with new_library_file(Path(sys.argv[1]), False):\n"
        "    print('ready', flush=True); time.sleep(60)\n"
    )
    process = subprocess.Popen([sys.executable, "-c", script, str(target)], stdout=subprocess.PIPE, text=True)
    try:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
        (living,) = tmp_path.glob(".a.ionlib.building-*")
        build_test_library(target)
        assert living.exists()
    finally:
        os.kill(process.pid, signal.SIGKILL)
        process.wait()
        process.stdout.close()  # type: ignore[union-attr]
    assert living.exists()
    build_from_records(target, build_records(), origin="x", replace=True, who=WHO, when=WHEN)
    assert sorted(found.name for found in tmp_path.iterdir()) == ["a.ionlib"]


def test_a_library_in_use_is_not_replaced_under_its_writer(library_path: Path) -> None:
    writer = connect(library_path, writable=True)
    writer.execute("BEGIN IMMEDIATE")
    try:
        start = time.monotonic()
        with pytest.raises(LibraryError, match="another process that has it open"):
            build_from_records(library_path, build_records()[:1], origin="x", replace=True, who=WHO, when=WHEN)
        assert time.monotonic() - start < 20
    finally:
        writer.close()
    with open_library(library_path) as library:
        assert library.state().entries == 5


def test_more_spectra_come_in_whole_or_not_at_all(library_path: Path, tmp_path: Path) -> None:
    text = "Name: Butane\nFormula: C4H10\nNum Peaks: 2\n43 100\n58 12\n\n"
    source = tmp_path / "own.msp"
    source.write_text(text)
    with open_library(library_path, writable=True) as library:
        with pytest.raises(InputError, match="licence not accepted"):
            add_spectra(library, [source], who=WHO, when=WHEN)
        assert library.state().entries == 5
        assert len(library.events()) == 2
        report = add_spectra(library, [source], licences="all", who=WHO, when=WHEN, reason="own spectra")
        assert (report.n_accepted, report.n_compounds, report.fingerprint) == (1, 5, library.fingerprint)
        assert library.find_entries(name="Butane")[0].source == "own.msp:1"
        with pytest.raises(InputError, match="duplicate accession"):
            add_spectra(library, [source], licences="all", who=WHO, when=WHEN)
        assert library.events()[-1].reason == "own spectra"
