"""``ionwitness confirm`` and ``instrument check``: verdicts ion by ion, and what cannot be judged."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import Result

from identify.errors import FormatError, InputError, LibraryError, UsageError
from identify.evidence.criteria_files import INSTRUMENT_CHECKS, ION_CRITERIA, list_editions

Run = Callable[..., Result]
STANDARD = "m/z,intensity\n43,100\n58,60\n27,20\n15,15\n"
TWO = """NAME: first
NUM PEAKS: 2
43 100
58 60

NAME: second one
NUM PEAKS: 4
43 100
58 60
27 20
15 15
"""


def write(path: Path, text: str) -> Path:
    path.write_text(text, encoding="utf-8")
    return path


@pytest.fixture
def standard(tmp_path: Path) -> Path:
    """A standard with a molecular ion at 58."""
    return write(tmp_path / "Standard ä 標準.csv", STANDARD)


def test_the_standard_against_itself_meets_the_criteria(run: Run, standard: Path) -> None:
    result = run(
        "confirm", standard, standard, "--criteria", "eu-2002-657", "--molecular-mz", 58, "--unknown-rt", 10,
        "--standard-rt", 10, "--unknown-internal-rt", 8, "--standard-internal-rt", 8,
    )  # fmt: skip
    lines = result.output.splitlines()
    assert lines[1].endswith("from memory")
    # 60 % in the standard: 10 % relative of it (eu-2002-657 above 50 %, standards.md 1.1) gives 54 to 66
    assert lines[5].split()[:6] == ["58", "60.0", "54.0–66.0", "60.0", "agrees", "Inside"]
    assert "retention: agrees. Differs by +0; the limit is 0.00625." in lines
    assert "points: 4 of 4 needed (4 for banned substances, 3 for others)" in lines
    assert "verdict: agrees" in lines
    assert any(line.startswith("Caution: These rules suppose a standard run on the same instrument") for line in lines)
    assert any(line.startswith("Caution: The windows of this document are written from memory") for line in lines)


def test_an_ion_outside_its_window_conflicts(run: Run, standard: Path, tmp_path: Path) -> None:
    unknown = write(tmp_path / "u.csv", STANDARD.replace("58,60", "58,30") + "91,40\n")
    result = run("confirm", unknown, standard, "--criteria", "sante-11312", "--ion", 58, "--ion", 27, "--ion", 15)
    assert "58   60.0        42.0–78.0  30.0       conflicts  Below the window of 42.0–78.0 %." in result.output
    assert "verdict: conflicts" in result.output
    assert "to review, in the unknown only: m/z 91 (40 %)" in result.output


def test_without_times_the_retention_is_not_assessed(run: Run, standard: Path) -> None:
    output = run("confirm", standard, standard, "--criteria", "sante-11312").output
    assert "retention: not assessed. No retention times are given." in output
    assert "verdict: inconclusive" in output


def test_the_spectrum_meant_is_chosen_by_number_or_name(run: Run, standard: Path, tmp_path: Path) -> None:
    two = write(tmp_path / "two.msp", TWO)
    for which in ("2", "second one", "SECOND ONE"):
        output = run("confirm", two, standard, "--criteria", "sante-11312", "--unknown-spectrum", which).output
        assert "ions: agrees. 4 of 4 ions lie inside their windows; 3 are needed." in output, which
    first = run("confirm", two, standard, "--criteria", "sante-11312", "--unknown-spectrum", "1").output
    assert "ions: conflicts" in first


@pytest.mark.parametrize(
    ("which", "message"),
    [
        (
            "",
            "found 2 (1 first; 2 second one), expected one. Say which one is meant, by its number, accession or title.",
        ),
        ("3", "found no number 3, expected one of its spectra."),
        ("third", "found 0 called 'third', expected one. Give its number instead."),
    ],
)
def test_a_choice_that_is_none_is_explained(run: Run, standard: Path, tmp_path: Path, which: str, message: str) -> None:
    two = write(tmp_path / "two.msp", TWO)
    with pytest.raises(InputError) as error:
        run("confirm", two, standard, "--criteria", "sante-11312", "--unknown-spectrum", which)
    assert str(error.value) == f"spectrum in {two}: {message}"


def test_a_standard_is_taken_from_the_library(run: Run, starter: Path, unknown: Path) -> None:
    from identify.library.store import open_library

    with open_library(starter) as library:
        entry = next(e for e in library.find_entries(name="acetone") if e.identity.name == "acetone")
    output = run("confirm", unknown, entry.accession, "--library", starter, "--criteria", "epa-tic").output
    assert "standard: acetone" in output
    with pytest.raises(LibraryError) as error:
        run("confirm", unknown, "NO-SUCH", "--library", starter, "--criteria", "epa-tic")
    assert str(error.value) == f"entry in {starter}: found no 'NO-SUCH', expected a known accession."


def test_unknown_criteria_are_refused_before_anything_is_read(run: Run, tmp_path: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("confirm", tmp_path / "no", tmp_path / "no", "--criteria", "eu")
    assert str(error.value) == f"criteria: found 'eu', expected one of {', '.join(ION_CRITERIA)}."


def test_files_that_cannot_be_read_are_named(run: Run, standard: Path, tmp_path: Path) -> None:
    missing = tmp_path / "gibt es nicht.jdx"
    with pytest.raises(InputError) as error:
        run("confirm", missing, standard, "--criteria", "epa-tic")
    assert str(error.value) == f"input in {missing}: found nothing there, expected a file or folder."
    with pytest.raises(FormatError):
        run("confirm", write(tmp_path / "empty.csv", ""), standard, "--criteria", "epa-tic")
    bad = write(tmp_path / "bad.msp", "NAME: x\nNUM PEAKS: 3\n43 100\n58 60\n")
    with pytest.raises(InputError) as error:
        run("confirm", bad, standard, "--criteria", "epa-tic")
    assert f"{bad}:" in str(error.value)


def test_the_rule_sets_are_listed_with_their_provenance(run: Run) -> None:
    output = run("confirm", "--list").output
    for name in ION_CRITERIA:
        assert f"{name}: " in output
    assert output.count("; from memory") == len(ION_CRITERIA) - 1
    assert output.count("; read in a copy") == 1


# PFTBA: 70/69, 220/219 and 503/502 by 13C of 1, 4 and 9 carbons, 1.08 % each (standards.md 1.9; windows from memory)
PFTBA = "m/z,intensity\n69,100\n70,1.08\n219,40\n220,1.73\n502,5\n503,0.49\n"


def test_a_tune_spectrum_is_judged_ion_by_ion(run: Run, tmp_path: Path) -> None:
    good = run("instrument", "check", write(tmp_path / "t.csv", PFTBA), "--tune", "pftba").output
    assert "meets every limit" in good.splitlines()
    bad_file = write(tmp_path / "b.csv", PFTBA.replace("220,1.73", "220,4"))
    bad = run("instrument", "check", bad_file, "--tune", "pftba").output
    assert "does not meet every limit" in bad.splitlines()
    assert "220  10.00 %   3.2–5.4 % of m/z 219   conflicts" in bad
    assert "written from memory" in bad.splitlines()[-1]


def test_unknown_tune_compounds_and_editions_are_refused(run: Run, tmp_path: Path) -> None:
    path = write(tmp_path / "t.csv", PFTBA)
    with pytest.raises(UsageError) as error:
        run("instrument", "check", path, "--tune", "water")
    assert str(error.value) == f"instrument check: found 'water', expected one of {', '.join(INSTRUMENT_CHECKS)}."
    with pytest.raises(UsageError) as error:
        run("instrument", "check", path, "--tune", "bfb", "--edition", "1")
    assert str(error.value) == f"edition of 'bfb': found '1', expected one of {', '.join(list_editions('bfb'))}."


def test_editions_are_listed(run: Run) -> None:
    output = run("instrument", "check", "--list").output
    for name in INSTRUMENT_CHECKS:
        for edition in list_editions(name):
            assert f"{name} --edition {edition}" in output
