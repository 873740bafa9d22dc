"""``ionwitness library …`` as a user meets it: what is said, written and refused."""

from __future__ import annotations

import csv
import importlib.util
import json
import shutil
import sqlite3
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import Result

from identify.errors import InputError, LibraryConflict, LibraryError, LibraryMissing, LibraryVersionError, UsageError
from identify.library.store import open_library

Run = Callable[..., Result]
OLD = Path(__file__).resolve().parents[2] / "fixtures" / "library_format" / "schema-1.sqlite"
RECORD = """ACCESSION: INVENTED-{number}
RECORD_TITLE: {name}; GC-EI-Q; MS
LICENSE: CC BY
CH$NAME: {name}
CH$FORMULA: C3H6O
CH$SMILES: CC(C)=O
AC$INSTRUMENT_TYPE: GC-EI-Q
AC$MASS_SPECTROMETRY: MS_TYPE MS
AC$MASS_SPECTROMETRY: ION_MODE POSITIVE
PK$NUM_PEAK: 3
PK$PEAK: m/z int. rel.int.
  {base} 100 999
  57 20 199
  58 60 599
//
"""


def first_accession(path: Path) -> str:
    with open_library(path) as library:
        return library.get_entries(library.entry_ids()[:1])[0].accession


def test_a_library_is_built_of_a_folder_and_says_what_it_left_out(run: Run, tmp_path: Path) -> None:
    folder, out = tmp_path / "unsere Spektren", tmp_path / "weggelassen.csv"
    folder.mkdir()
    (folder / "1.txt").write_text(RECORD.format(number=1, name="Acetone", base=43))
    (folder / "2.txt").write_text(RECORD.format(number=1, name="Acetone", base=43))
    (folder / "3.txt").write_text(RECORD.format(number=3, name="Acetone", base="x"))
    result = run("library", "build", tmp_path / "lab.ionlib", folder, "--who", "tester", "--rejected", out)
    assert result.return_value == 1, "two records could not be used"
    assert result.output.splitlines()[0] == "1 of 3 records accepted, 1 compounds"
    assert "rejected 1 × duplicate accession" in result.output
    assert (
        f"the first: duplicate accession in {folder}/2.txt:1: found 'INVENTED-1' again, "
        "expected each accession once. The first record with it was kept." in result.output
    )
    with out.open(encoding="utf-8", newline="") as stream:
        assert {Path(row["source"]).name for row in csv.DictReader(stream)} == {"2.txt", "3.txt"}


def test_records_of_another_method_or_licence_are_left_out_by_choice_with_exit_code_0(run: Run, tmp_path: Path) -> None:
    text = RECORD.format(number=2, name="Acetone", base=43)
    others = (
        text.replace("GC-EI-Q", "LC-ESI-QTOF").replace("INVENTED-2", "INVENTED-3"),
        text.replace("CC BY", "CC BY-NC").replace("INVENTED-2", "INVENTED-4"),
    )
    for number, record in enumerate((text, *others)):
        (tmp_path / f"{number}.txt").write_text(record)
    (tmp_path / "README.md").write_text("About these records.")
    result = run("library", "build", tmp_path / "lab.ionlib", tmp_path, "--who", "tester")
    assert result.return_value == 0
    assert "left out 1 × another kind of file" in result.output
    assert "left out 1 × not electron ionization" in result.output
    assert "left out 1 × licence not accepted" in result.output


def test_a_second_build_of_the_same_name_is_refused(run: Run, lab: Path, tmp_path: Path) -> None:
    source = tmp_path / "1.txt"
    source.write_text(RECORD.format(number=1, name="Acetone", base=43))
    before = lab.read_bytes()
    with pytest.raises(LibraryConflict) as error:
        run("library", "build", lab, source, "--who", "tester")
    assert str(lab) in str(error.value)
    assert lab.read_bytes() == before


def test_records_are_added_to_a_library_and_found(run: Run, lab: Path, tmp_path: Path) -> None:
    (tmp_path / "1.txt").write_text(RECORD.format(number=1, name="Acetone", base=43))
    said = run("library", "add", lab, tmp_path / "1.txt", "--who", "anna", "--why", "new release").output.splitlines()
    assert said[0] == "1 of 1 records accepted, 420 compounds"
    assert run("library", "info", lab).output.splitlines()[0] == f"{lab}: 432 entries of 420 compounds"
    assert "by anna: new release" in run("library", "info", lab).output
    with pytest.raises(InputError) as error:
        run("library", "add", lab, tmp_path / "no.txt", "--who", "anna")
    assert "no.txt" in str(error.value)
    assert run("library", "info", lab).output.splitlines()[0] == f"{lab}: 432 entries of 420 compounds"


def test_info_counts_and_lists_the_events(run: Run, lab: Path) -> None:
    lines = run("library", "info", lab).output.splitlines()
    assert lines[0] == f"{lab}: 431 entries of 420 compounds"
    assert "standing: demonstration 431" in lines
    assert lines[-2].startswith("event 1 · ")
    assert lines[-1].startswith("event 2 · ")
    assert run("library", "info", lab, "--events", 0).output.splitlines()[-1] == "events: 2"


def test_an_entry_set_aside_is_not_found_and_comes_back(run: Run, lab: Path, unknown: Path, tmp_path: Path) -> None:
    out = tmp_path / "r.json"

    def found() -> list[str]:
        run("search", unknown, "--library", lab, "--json", out, "--no-record")
        return [hit["accession"] for hit in json.loads(out.read_text(encoding="utf-8"))["queries"][0]["hits"]]

    with open_library(lab) as library:
        (acetone,) = [e.accession for e in library.find_entries(name="acetone") if e.identity.name == "acetone"]
    assert acetone in found()
    run("library", "quarantine", lab, acetone, "--why", "background of the column", "--who", "anna")
    assert acetone not in found()
    result = run("library", "reinstate", lab, acetone, "--why", "checked again", "--who", "ben")
    assert "reinstated by ben: checked again" in result.output
    assert acetone in found()


def test_setting_aside_what_is_not_there_changes_nothing(run: Run, lab: Path) -> None:
    with pytest.raises(LibraryError) as error:
        run("library", "quarantine", lab, first_accession(lab), "NO-SUCH", "--why", "x", "--who", "anna")
    assert str(error.value) == f"entry in {lab}: found no 'NO-SUCH', expected a known accession."
    assert run("library", "info", lab).output.count("event 3") == 0


def test_a_blank_reason_is_refused(run: Run, lab: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("library", "quarantine", lab, first_accession(lab), "--why", " ", "--who", "anna")
    assert str(error.value) == "reason: found none, expected why the standing of an entry changes."


def test_a_backup_is_restored_and_the_library_before_is_kept(run: Run, lab: Path, tmp_path: Path) -> None:
    copy = tmp_path / "Sicherung 1.ionlib"
    assert "431 entries, all hashes agree" in run("library", "backup", lab, copy).output
    run("library", "quarantine", lab, first_accession(lab), "--why", "x", "--who", "anna")
    with pytest.raises(LibraryConflict) as error:
        run("library", "restore", copy, lab)
    assert str(error.value) == f"copy in {lab}: found a file that already exists, expected a new name."
    run("library", "restore", copy, lab, "--replace")
    assert run("library", "verify", lab).return_value == 0
    assert "event 3" not in run("library", "info", lab).output
    assert (lab.parent / f"{lab.name}.before-restore-1").exists()


def test_a_damaged_backup_is_not_restored(run: Run, lab: Path, tmp_path: Path) -> None:
    copy = tmp_path / "copy.ionlib"
    run("library", "backup", lab, copy)
    data = bytearray(copy.read_bytes())
    data[len(data) // 2] ^= 255
    copy.write_bytes(bytes(data))
    before = lab.read_bytes()
    with pytest.raises(LibraryError):
        run("library", "restore", copy, lab, "--replace")
    assert lab.read_bytes() == before


def test_an_old_library_is_refused_with_advice_then_migrated(run: Run, unknown: Path, tmp_path: Path) -> None:
    path = tmp_path / "old.ionlib"
    shutil.copyfile(OLD, path)
    with pytest.raises(LibraryVersionError) as error:
        run("search", unknown, "--library", path)
    assert str(error.value).startswith(f"library in {path}: found schema version 1, expected version ")
    assert "ionwitness library migrate" in error.value.hint
    lines = run("library", "migrate", path, "--who", "anna").output.splitlines()
    assert lines[0].startswith(f"{path}: schema 1 is now schema ")
    assert lines[1] == f"backup of what it was: {path}.schema-1-backup-1"
    assert run("library", "verify", path).return_value == 0
    assert run("library", "verify", f"{path}.schema-1-backup-1").return_value == 0


def test_a_newer_library_asks_for_an_update(run: Run, lab: Path) -> None:
    connection = sqlite3.connect(lab)
    connection.execute("PRAGMA user_version = 99")
    connection.close()
    with pytest.raises(LibraryVersionError) as error:
        run("library", "info", lab)
    assert "found schema version 99" in str(error.value)
    assert error.value.hint == "Update ionwitness to open it."


def test_a_changed_byte_is_found(run: Run, lab: Path) -> None:
    connection = sqlite3.connect(lab)
    (trigger,) = connection.execute(
        "SELECT name FROM sqlite_master WHERE type = 'trigger' AND tbl_name = 'event' LIMIT 1"
    ).fetchone()
    connection.execute(f"DROP TRIGGER {trigger}")
    connection.commit()
    connection.close()
    result = run("library", "verify", lab)
    assert result.return_value == 4
    assert f"{trigger} is missing" in result.output


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (None, "no file"),
        ("", "an empty file"),
        ("folder", "a folder"),
        ("m/z,intensity\n43,100\n58,30\n", "a file of another kind"),
        ("sqlite", "an SQLite file of another program"),
    ],
)
@pytest.mark.parametrize("command", ["info", "backup", "affected", "search", "quarantine"])
def test_what_is_no_library_is_named(
    run: Run, tmp_path: Path, unknown: Path, content: str | None, found: str, command: str
) -> None:
    path = tmp_path / "keine Bibliothek ä.ionlib"
    if content == "folder":
        path.mkdir()
    elif content == "sqlite":
        connection = sqlite3.connect(path)
        connection.execute("CREATE TABLE t (x)")
        connection.commit()
        connection.close()
    elif content is not None:
        path.write_text(content)
    arguments = {
        "backup": ("library", "backup", path, tmp_path / "copy"),
        "search": ("search", unknown, "--library", path),
        "quarantine": ("library", "quarantine", path, "A", "--why", "x"),
    }.get(command, ("library", command, path))
    with pytest.raises(LibraryMissing if content is None else LibraryError) as error:
        run(*arguments)
    assert str(error.value).startswith(f"library in {path}: found {found}, expected a library")
    assert not (tmp_path / "copy").exists()


def test_no_query_is_affected_before_any_is_recorded(run: Run, lab: Path, tmp_path: Path) -> None:
    out = tmp_path / "betroffen.csv"
    result = run("library", "affected", lab, first_accession(lab), "--csv", out)
    assert result.output.splitlines()[-1] == f"recorded queries answered with {first_accession(lab)}: 0"
    with out.open(encoding="utf-8", newline="") as stream:
        assert next(csv.reader(stream))[0] == "entry"


def test_the_consensus_of_replicates_is_shown(run: Run, tmp_path: Path) -> None:
    for number in (1, 2):
        text = RECORD.format(number=number, name="Acetone", base=43)
        (tmp_path / f"{number}.txt").write_text(text.replace("57 20 199", f"57 {20 * number} {199 * number}"))
    lab = tmp_path / "lab.ionlib"
    run("library", "build", lab, tmp_path / "1.txt", tmp_path / "2.txt", "--who", "tester")
    lines = run("library", "consensus", lab, "INVENTED-1").output.splitlines()
    assert lines[0] == "Acetone: 2 replicates: INVENTED-1, INVENTED-2"
    # relative to the base peak 20 % and 40 %: median 30, half the range 10 (by hand)
    assert [line.split() for line in lines[2:]] == [
        ["43", "100.0", "0.0", "2", "of", "2"],
        ["57", "30.0", "10.0", "2", "of", "2"],
        ["58", "60.0", "0.0", "2", "of", "2"],
    ]


@pytest.mark.skipif(importlib.util.find_spec("cryptography") is None, reason="the extra `sign` is not installed")
def test_a_signed_state_is_recognised_and_a_set_back_library_is_not(run: Run, lab: Path, tmp_path: Path) -> None:
    key, signed, copy = (tmp_path / name for name in ("schlüssel.pem", "stand.json", "copy.ionlib"))
    run("library", "backup", lab, copy)
    run("library", "create-key", key)
    assert key.stat().st_mode & 0o077 == 0
    run("library", "quarantine", lab, first_accession(lab), "--why", "x", "--who", "anna")
    said = run("library", "sign", lab, signed, "--key", key, "--who", "anna").output
    public = said.split("public key ")[1].split()[0]
    good = run("library", "check-signed", lab, signed, "--public-key", public)
    assert good.return_value == 0
    assert good.output.splitlines()[0] == "agrees: event 3 is the one that was signed"
    bad = run("library", "check-signed", copy, signed)
    assert bad.return_value == 4
    assert bad.output.splitlines()[0] == ("DOES NOT AGREE: the library has only 2 events: it was set back or replaced")


@pytest.mark.skipif(importlib.util.find_spec("cryptography") is None, reason="the extra `sign` is not installed")
def test_a_key_with_a_passphrase_needs_it(run: Run, lab: Path, tmp_path: Path) -> None:
    key = tmp_path / "key.pem"
    run("library", "create-key", key, "--passphrase", text="lang genug\nlang genug\n")
    with pytest.raises(UsageError, match=r"^signing key in .*key\.pem: found "):
        run("library", "sign", lab, tmp_path / "a.json", "--key", key)
    run("library", "sign", lab, tmp_path / "a.json", "--key", key, "--passphrase", text="lang genug\n")
    assert (tmp_path / "a.json").exists()


def test_an_unknown_recipe_is_named(run: Run, tmp_path: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("library", "fetch", tmp_path / "a.ionlib", "no-such")
    assert str(error.value) == "recipe: found no file 'no-such', expected a TOML file, or open-ei."
    assert not (tmp_path / "a.ionlib").exists()
