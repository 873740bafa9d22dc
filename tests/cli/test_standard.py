"""``ionwitness standard …`` end to end: proposed by one, accepted by another, found, withdrawn, gone, and all of it told."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import Result

from identify.errors import InputError, LibraryConflict, LibraryError, StructureError, UsageError
from identify.library.store import open_library
from tests.readers.run_files import write_andi
from tests.runs.synthetic_runs import Eluting, make_run

Run = Callable[..., Result]


def propose(run: Run, lab: Path, spectrum: Path, *more: object, who: str = "anna") -> Result:
    return run(
        "standard", "propose", spectrum, "--library", lab, "--smiles", "CC(C)=O", "--name", "acetone, new lot",
        "--supplier", "Chemiehaus ä", "--lot", "7", "--purity", "99.8 %", "--date", "2026-03-14", "--analyst", "anna",
        "--instrument", "Q1", "--column", "DB-5", "--method", "M 12", "--rt", 1.62, "--ri", 500, "--note", "fresh",
        "--who", who, "--why", "new lot", *more,
    )  # fmt: skip


def found_standing(run: Run, lab: Path, spectrum: Path, tmp_path: Path) -> list[str]:
    """Standing of the best entry of each candidate."""
    out = tmp_path / "found.json"
    run("search", spectrum, "--library", lab, "--json", out, "--no-record")
    return [hit["status"] for hit in json.loads(out.read_text(encoding="utf-8"))["queries"][0]["hits"]]


def test_from_proposal_to_withdrawal(run: Run, lab: Path, unknown: Path, tmp_path: Path) -> None:
    said = propose(run, lab, unknown).output.splitlines()
    assert said[0] == "OWN-000001: acetone, new lot C3H6O"
    assert re.match(r"event 3 · \d{4}-\d\d-\d\d \d\d:\d\d:\d\d UTC · proposed by ", said[1])
    assert "proposed by anna: new lot" in said[1]
    assert "own standard" not in found_standing(run, lab, unknown, tmp_path)
    waiting = run("standard", "waiting", "--library", lab).output.splitlines()
    assert waiting[0] == "standards that wait for review: 1"
    assert waiting[2].split()[0] == "OWN-000001"

    with pytest.raises(LibraryConflict) as error:
        run("standard", "review", "OWN-000001", "--library", lab, "--accept", "--who", "Anna ", "--why", "fine")
    assert str(error.value) == (
        f"review in {lab}, OWN-000001: found 'Anna ', who proposed it, expected a second person."
    )
    review = run("standard", "review", "OWN-000001", "--library", lab, "--accept", "--who", "ben", "--why", "fits")
    assert review.output.splitlines()[0] == "OWN-000001: acetone, new lot is now 'own standard'"
    assert found_standing(run, lab, unknown, tmp_path)[0] == "own standard"

    run("standard", "withdraw", "OWN-000001", "--library", lab, "--who", "anna", "--why", "lot recalled")
    assert "own standard" not in found_standing(run, lab, unknown, tmp_path)
    history = run("standard", "history", "OWN-000001", "--library", lab).output
    assert [line for line in history.splitlines() if line.startswith("  then: ")] == [
        "  then: proposed", "  then: own standard", "  then: withdrawn",
    ]  # fmt: skip
    for text in (
        "supplier: Chemiehaus ä",
        "lot: 7",
        "purity: 99.8 %",
        "measured on: 2026-03-14",
        "method: M 12",
        "note: fresh",
    ):
        assert f"  {text}" in history.splitlines()
    assert run("library", "verify", lab).return_value == 0


def test_what_the_user_states_is_kept(run: Run, lab: Path, unknown: Path) -> None:
    propose(run, lab, unknown)
    with open_library(lab) as library:
        from identify.library.standing import get_entry

        entry = get_entry(library, "OWN-000001")
    assert entry.retention.time_s == pytest.approx(97.2)
    assert (entry.retention.index, entry.retention.column) == (500.0, "DB-5")
    assert entry.acquisition.instrument == "Q1"
    assert entry.identity.inchikey.startswith("CSCPPACGZOOCGX"), "acetone (InChIKey from memory)"


def test_a_refused_standard_is_never_found(run: Run, lab: Path, unknown: Path, tmp_path: Path) -> None:
    propose(run, lab, unknown)
    run("standard", "review", "OWN-000001", "--library", lab, "--refuse", "--who", "ben", "--why", "background")
    assert "own standard" not in found_standing(run, lab, unknown, tmp_path)
    with pytest.raises(LibraryConflict, match="found standing 'refused', expected a standard that waits for review"):
        run(
            "standard", "review", "OWN-000001", "--library", lab, "--accept", "--who", "ben", "--why", "changed my mind"
        )


def test_a_review_without_decision_changes_nothing(run: Run, lab: Path, unknown: Path) -> None:
    propose(run, lab, unknown)
    with pytest.raises(UsageError) as error:
        run("standard", "review", "OWN-000001", "--library", lab, "--who", "ben", "--why", "?")
    assert str(error.value) == "review: found no decision, expected --accept or --refuse."
    assert run("standard", "waiting", "--library", lab).output.startswith("standards that wait for review: 1")


def test_a_better_standard_replaces_one(run: Run, lab: Path, unknown: Path) -> None:
    for number in (1, 2):
        propose(run, lab, unknown)
        name = f"OWN-00000{number}"
        run("standard", "review", name, "--library", lab, "--accept", "--who", "ben", "--why", "fits")
    said = run(
        "standard", "supersede", "OWN-000001", "--by", "OWN-000002", "--library", lab, "--who", "ben", "--why", "purer"
    ).output
    assert said.splitlines()[0] == "OWN-000001: acetone, new lot is now 'withdrawn'"
    with pytest.raises(LibraryConflict) as error:
        run("standard", "supersede", "OWN-000002", "--by", "OWN-000002", "--library", lab, "--who", "b", "--why", "x")
    assert str(error.value) == f"replacement in {lab}: found the same entry twice, expected two entries."


def test_a_spectrum_of_another_compound_shows_its_conflict(run: Run, lab: Path, unknown: Path) -> None:
    said = run(
        "standard", "propose", unknown, "--library", lab, "--smiles", "CCC=O", "--name", "propanal", "--who", "anna"
    ).output
    assert "conflict, other compound matches as well: acetone (starter: acetone), cosine" in said


def test_identities_that_cannot_be_are_refused_and_nothing_is_proposed(run: Run, lab: Path, unknown: Path) -> None:
    wrong_digit = "CAS number: found '67-64-2', expected digits with a right check digit, like 67-64-1."
    wrong_formula = "formula: found 'C3H8O', expected C3H6O, that of the structure."
    for options, kind, message in (
        ((), UsageError, "identity of a standard: found nothing, expected a name, SMILES, InChI or CAS number."),
        (("--cas", "67-64-2"), UsageError, wrong_digit),
        (("--smiles", "CC(C)=O", "--formula", "C3H8O"), StructureError, wrong_formula),
    ):
        with pytest.raises(kind) as error:
            run("standard", "propose", unknown, "--library", lab, "--who", "anna", *options)
        assert str(error.value) == message
    with pytest.raises(StructureError):
        run("standard", "propose", unknown, "--library", lab, "--who", "anna", "--smiles", "C(C")
    with pytest.raises(UsageError) as error:
        propose(run, lab, unknown, "--date", "yesterday")
    assert str(error.value) == "date of the measurement: found 'yesterday', expected a date like 2025-05-02."
    assert run("standard", "waiting", "--library", lab).output.startswith("standards that wait for review: 0")
    assert "events: 2" in run("library", "info", lab).output.splitlines()


def test_which_spectrum_is_meant_must_be_clear(run: Run, lab: Path, tmp_path: Path) -> None:
    two = tmp_path / "zwei ä.msp"
    two.write_text("NAME: a\nNUM PEAKS: 2\n43 100\n58 30\n\nNAME: b\nNUM PEAKS: 2\n43 100\n72 30\n", encoding="utf-8")
    with pytest.raises(InputError) as error:
        propose(run, lab, two)
    assert str(error.value) == (
        f"spectrum in {two}: found 2 (1 a; 2 b), expected one. Say which one is meant, by its number, accession or title."
    )
    propose(run, lab, two, "--which", "b")
    with open_library(lab) as library:
        from identify.library.standing import get_entry

        assert get_entry(library, "OWN-000001").spectrum.nominal.mz.tolist() == [43.0, 72.0]


def test_files_that_are_none_leave_the_library_alone(run: Run, lab: Path, tmp_path: Path) -> None:
    missing = tmp_path / "gibt es nicht.jdx"
    with pytest.raises(InputError) as error:
        propose(run, lab, missing)
    assert str(error.value) == f"input in {missing}: found nothing there, expected a file or folder."
    with pytest.raises(InputError) as error:
        propose(run, lab, missing, "--component", 1)
    assert str(error.value).startswith(f"run in {missing}: found No such file or directory")
    assert "events: 2" in run("library", "info", lab).output.splitlines()


@pytest.mark.parametrize("command", ["review", "withdraw", "supersede", "history"])
def test_an_unknown_accession_is_named(run: Run, lab: Path, command: str) -> None:
    options = {
        "review": ("--accept", "--why", "x"),
        "withdraw": ("--why", "x"),
        "supersede": ("--by", "OWN-2", "--why", "x"),
        "history": (),
    }[command]
    with pytest.raises(LibraryError) as error:
        run("standard", command, "OWN-9", "--library", lab, *options)
    assert str(error.value) == f"entry in {lab}: found no 'OWN-9', expected a known accession."


def test_a_component_of_a_run_is_proposed(run: Run, lab: Path, tmp_path: Path) -> None:
    peaks = {43: 100.0, 58: 40.0, 42: 7.0}
    made = make_run([Eluting(peaks, 150.0, 40_000.0)], 300, seed=1, mz_range=(35, 100))
    edges = zip(made.first_point[:-1], made.first_point[1:], strict=True)
    scans = [list(zip(made.mz[a:b].tolist(), made.intensity[a:b].tolist(), strict=True)) for a, b in edges]
    path = write_andi(tmp_path / "Lauf ä 1.cdf", scans, scan_acquisition_time=made.time_s)
    propose(run, lab, path, "--component", 1)
    with open_library(lab) as library:
        from identify.library.standing import get_entry

        found = get_entry(library, "OWN-000001").spectrum.nominal
    assert found.base_peak_mz == 43.0
    assert found.intensity_at(58) / found.intensity_at(43) == pytest.approx(0.4, abs=0.03)
    with pytest.raises(InputError) as error:
        propose(run, lab, path, "--component", 99)
    assert str(error.value).startswith(f"run in {path}: found ")
    assert str(error.value).endswith(" components, expected a component 99.")
    with pytest.raises(UsageError) as usage:
        propose(run, lab, path, "--component", 1, "--which", "x")
    assert str(usage.value) == "--which: found --component with it, expected one of the two."
