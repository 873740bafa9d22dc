"""Rows of text come back from a CSV file as they went in, and no spreadsheet runs them."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

from identify.errors import UsageError
from identify.writers.rows_csv import write_rows


def test_rows_come_back(tmp_path: Path) -> None:
    path = tmp_path / "zeilen ä.csv"
    rows = [("a, b", 'quote "'), ("two\nlines", "µ")]
    assert write_rows(path, ("one", "two"), rows) == 2
    with path.open(encoding="utf-8", newline="") as stream:
        assert list(csv.reader(stream)) == [["one", "two"], ["a, b", 'quote "'], ["two\nlines", "µ"]]


def test_a_formula_is_made_harmless(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    write_rows(path, ("name",), [("=cmd()",)])
    assert not path.read_text(encoding="utf-8").splitlines()[1].startswith("=")


def test_no_rows_leave_the_heading(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    assert write_rows(path, ("name",), []) == 0
    assert path.read_bytes() == b"name\r\n"


def test_a_missing_folder_is_said(tmp_path: Path) -> None:
    path = tmp_path / "no" / "a.csv"
    with pytest.raises(UsageError) as error:
        write_rows(path, ("name",), [])
    assert str(error.value) == (
        f"output file in {path}: found No such file or directory, expected a writable file in an existing folder."
    )
