"""``ionwitness search`` as a user meets it."""

from __future__ import annotations

import csv
import json
import sqlite3
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import Result

from identify.errors import LibraryBusy, LibraryMissing, UsageError
from identify.library.store import open_library

Run = Callable[..., Result]


def test_acetone_is_the_best_candidate_and_all_files_are_written(
    run: Run, starter: Path, unknown: Path, tmp_path: Path
) -> None:
    out = [tmp_path / name for name in ("r.json", "r.csv", "r.html")]
    result = run("search", unknown, "--library", starter, "--json", out[0], "--csv", out[1], "--report", out[2])
    assert result.return_value == 0
    assert "acetone" in result.output
    (query,) = json.loads(out[0].read_text(encoding="utf-8"))["queries"]
    assert query["hits"][0]["name"] == "acetone"
    with out[1].open(encoding="utf-8", newline="") as stream:
        assert len(list(csv.DictReader(stream))) == len(query["hits"])
    assert out[2].read_text(encoding="utf-8").lower().startswith("<!doctype html>")


def test_pasted_peaks_are_identified(run: Run, starter: Path) -> None:
    result = run("search", "-", "--library", starter, text="43 100\n58 30\n15 20\n27 8\n42 7\n")
    assert result.return_value == 0
    assert "acetone" in result.output


def test_pasted_peaks_stand_alone(run: Run, starter: Path, unknown: Path) -> None:
    with pytest.raises(UsageError, match="found - with other inputs, expected files, or - alone"):
        run("search", "-", unknown, "--library", starter, text="43 100\n")


def test_an_unreadable_file_is_listed_and_the_rest_goes_on(
    run: Run, starter: Path, unknown: Path, tmp_path: Path
) -> None:
    broken = tmp_path / "broken.txt"
    broken.write_bytes(b"\x00\x01\x02\x03" * 50)
    result = run("search", broken, unknown, "--library", starter)
    assert result.return_value == 1
    assert "broken.txt" in result.output
    assert "acetone" in result.output


def test_nothing_readable_is_exit_code_3(run: Run, starter: Path, tmp_path: Path) -> None:
    empty = tmp_path / "empty.csv"
    empty.write_text("", encoding="utf-8")
    assert run("search", empty, "--library", starter).return_value == 3


def test_a_missing_library_says_what_to_do(run: Run, unknown: Path, tmp_path: Path) -> None:
    with pytest.raises(LibraryMissing) as error:
        run("search", unknown, "--library", tmp_path / "no.ionlib")
    assert "no.ionlib" in str(error.value)
    assert error.value.hint


def test_settings_are_checked_by_name_and_range(run: Run, starter: Path, unknown: Path, tmp_path: Path) -> None:
    settings = tmp_path / "s.toml"
    settings.write_text("[weighting]\nmass_power = 1.0\n", encoding="utf-8")
    with pytest.raises(UsageError, match=r"found 'weighting.mass_power', expected one of intensity_power, mz_power"):
        run("search", unknown, "--library", starter, "--settings", settings)
    with pytest.raises(UsageError, match=r"setting 'top': found 0, expected a value from 1 to 200"):
        run("search", unknown, "--library", starter, "--top", 0)


def test_the_same_library_twice_is_refused(run: Run, starter: Path, unknown: Path) -> None:
    with pytest.raises(UsageError, match="the same library twice"):
        run("search", unknown, "--library", starter, "--library", starter)


def test_the_result_is_the_same_on_every_run(run: Run, starter: Path, unknown: Path, tmp_path: Path) -> None:
    first, second = tmp_path / "1.json", tmp_path / "2.json"
    run("search", unknown, "--library", starter, "--json", first)
    run("search", unknown, "--library", starter, "--json", second)
    assert first.read_bytes() == second.read_bytes()


def acetone_entries(path: Path) -> list[str]:
    with open_library(path) as library:
        return [e.accession for e in library.find_entries(name="acetone") if e.identity.name == "acetone"]


def test_the_library_answers_as_it_stood_at_an_event(run: Run, lab: Path, unknown: Path, tmp_path: Path) -> None:
    before, later, then = (tmp_path / f"{name}.json" for name in ("before", "later", "then"))
    run("search", unknown, "--library", lab, "--json", before)
    run("library", "quarantine", lab, *acetone_entries(lab), "--why", "x", "--who", "anna")
    run("search", unknown, "--library", lab, "--json", later)
    run("search", unknown, "--library", lab, "--json", then, "--as-of", 2)
    names = [json.loads(p.read_text(encoding="utf-8"))["queries"][0]["hits"][0]["name"] for p in (before, later, then)]
    assert names == ["acetone", names[1], "acetone"]
    assert names[1] != "acetone"
    assert then.read_bytes() == before.read_bytes()


def test_an_event_that_is_none_is_refused(run: Run, lab: Path, unknown: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("search", unknown, "--library", lab, "--as-of", 77)
    assert str(error.value) == (
        f"event in {lab}: found 0 events for '77', expected the number of an event, or 8 or more first digits of its hash. "
        "`ionwitness library info` lists the events."
    )


def test_each_library_needs_its_own_event(run: Run, starter: Path, lab: Path, unknown: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("search", unknown, "--library", starter, "--library", lab, "--as-of", 1)
    assert str(error.value) == (
        "--as-of: found 1 events for 2 libraries, expected one event for each library, in their order."
    )


def test_an_own_standard_stands_before_an_entry_of_equal_scores(
    run: Run, starter: Path, lab: Path, unknown: Path, tmp_path: Path
) -> None:
    (accession,) = acetone_entries(lab)
    with open_library(lab, writable=True) as library, library.writing() as connection:
        from datetime import UTC, datetime

        from identify.library.standing import move_entries
        from identify.records import EntryStatus

        (entry,) = library.find_entries(accession=accession)
        move_entries(
            connection, {entry.id: EntryStatus.OWN_STANDARD}, kind="accepted", who="ben",
            when=datetime(2026, 1, 3, tzinfo=UTC), reason="test",
        )  # fmt: skip
    out = tmp_path / "r.json"

    def best_status(*options: str) -> str:
        run("search", unknown, "--library", starter, "--library", lab, "--json", out, *options)
        return str(json.loads(out.read_text(encoding="utf-8"))["queries"][0]["hits"][0]["status"])

    assert best_status() == "own standard"
    assert best_status("--no-prefer-own") == "demonstration"


def test_a_written_result_is_remembered_and_a_shown_one_is_not(
    run: Run, lab: Path, unknown: Path, tmp_path: Path
) -> None:
    (accession,) = acetone_entries(lab)
    out, none = tmp_path / "r.json", f"recorded queries answered with {accession}: 0"
    run("search", unknown, "--library", lab)
    run("search", unknown, "--library", lab, "--json", out, "--no-record")
    assert run("library", "affected", lab, accession).output.splitlines() == [none]
    run("search", unknown, "--library", lab, "--json", out, "--who", "anna")
    lines = run("library", "affected", lab, accession).output.splitlines()
    assert lines[0] == f"recorded queries answered with {accession}: 1"
    assert f"anna  {out}" in lines[2]
    assert run("library", "affected", lab).output.endswith("set aside: 0\n")
    run("library", "quarantine", lab, accession, "--why", "x", "--who", "anna")
    assert "set aside: 1" in run("library", "affected", lab).output
    assert run("library", "verify", lab).return_value == 0


def test_a_busy_library_answers_and_says_that_it_does_not_remember(
    run: Run, lab: Path, unknown: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("identify.pipeline.remember.BUSY_TIMEOUT_S", 0.05)
    with open_library(lab, writable=True):
        pass  # a writer has used it before: its log is there
    holder = sqlite3.connect(lab, isolation_level=None)
    holder.execute("BEGIN IMMEDIATE")
    out = tmp_path / "r.json"
    try:
        result = run("search", unknown, "--library", lab, "--json", out)
        assert result.return_value == 0
        assert (
            f"Not recorded in the library: library in {lab}: found another process writing to it, expected a free library. "
            "Wait until the other process has finished, then try again." in result.output
        )
        with pytest.raises(LibraryBusy):
            run("search", unknown, "--library", lab, "--json", out, "--record")
    finally:
        holder.execute("ROLLBACK")
        holder.close()


def test_recording_needs_a_result_file(run: Run, lab: Path, unknown: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("search", unknown, "--library", lab, "--record")
    assert str(error.value) == "--record: found no result file, expected --json, --csv or --report with it."


def test_a_result_has_a_place_to_go_before_anything_is_searched(
    run: Run, lab: Path, unknown: Path, tmp_path: Path
) -> None:
    folder = tmp_path / "folder"
    folder.mkdir()
    for options, path, found in (
        (("--json", tmp_path / "no" / "r.json"), tmp_path / "no" / "r.json", "no such folder"),
        (("--csv", folder), folder, "a folder of that name"),
        (("--json", unknown), unknown, "a file that this command reads"),
        (("--report", lab), lab, "a file that this command reads"),
        (("--json", tmp_path / "r", "--csv", tmp_path / "r"), tmp_path / "r", "the same file twice"),
    ):
        with pytest.raises(UsageError) as error:
            run("search", unknown, "--library", lab, *options)
        assert str(error.value) == f"output file in {path}: found {found}, expected a new file in a folder to write to."


def test_a_settings_file_that_is_none_is_said(run: Run, lab: Path, unknown: Path, tmp_path: Path) -> None:
    with pytest.raises(UsageError) as error:
        run("search", unknown, "--library", lab, "--settings", tmp_path)
    assert str(error.value) == f"settings in {tmp_path}: found a folder, expected a readable text file."
    bad = tmp_path / "s.toml"
    bad.write_text("top = = 3", encoding="utf-8")
    with pytest.raises(
        UsageError, match=r"^settings in .*s\.toml: found .* \(at line 1, column 7\), expected valid TOML\.$"
    ):
        run("search", unknown, "--library", lab, "--settings", bad)


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("leer.csv", b"", "leer.csv: "),
        ("text.txt", b"Dear colleague,\nplease find enclosed.\n", "text.txt: "),
        ("binary.jdx", b"\x00\x01\x02" * 99, "binary.jdx: "),
        ("zip.zip", b"PK\x03\x04broken", "zip.zip: "),
    ],
)
def test_an_unusable_query_is_listed_with_its_name(
    run: Run, lab: Path, tmp_path: Path, name: str, content: bytes, message: str
) -> None:
    path = tmp_path / f"Ordner mit Leerzeichen ä {name}"
    path.write_bytes(content)
    result = run("search", path, tmp_path / "gibt es nicht.jdx", "--library", lab)
    assert result.return_value == 3
    told = " ".join(result.output.split())
    assert message in told
    assert f"{tmp_path}/gibt es nicht.jdx: input: found nothing there, expected a file or folder." in told
