"""``ionwitness search`` as a user meets it."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import Result

from identify.errors import LibraryMissing, UsageError

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
