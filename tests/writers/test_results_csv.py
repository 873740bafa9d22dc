"""Results as CSV: one row per candidate, RFC 4180, and no cell that a spreadsheet would run."""

from __future__ import annotations

import csv
import io
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from identify.records import Report
from identify.writers.results_csv import COLUMNS, report_to_csv, write_csv
from identify.writers.rows_csv import make_harmless
from tests.builders import build_candidate, build_identification, build_report


def _read(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text, newline=""), strict=True))


def _with_name(name: str) -> Report:
    return build_report(replace(build_identification(), candidates=(build_candidate(name=name),)))


def test_one_row_per_candidate_in_order() -> None:
    rows = _read(report_to_csv(build_report()))
    assert [(row["query_id"], row["rank"]) for row in rows] == [
        *(("q1", str(place)) for place in range(1, 5)),
        *(("q2", str(place)) for place in range(1, 7)),
        *(("q3", str(place)) for place in range(1, 3)),
    ]
    assert tuple(rows[0]) == COLUMNS
    assert rows[0]["name"] == "Acetophenone" and rows[0]["cosine"] == "0.981" and rows[0]["evidence_agrees"] == "5"
    assert rows[0]["library_fingerprint"] == "5f0c9a7e41d28b63" * 4


def test_whole_numbers_stay_whole_and_unknown_is_empty() -> None:
    rows = _read(report_to_csv(build_report()))
    assert rows[0]["matched_peaks"].isdigit() and rows[0]["rank"] == "1"
    assert rows[-1]["retention_time_s"] == "" and "nan" not in report_to_csv(build_report()).lower()


def test_query_without_candidates_keeps_a_row() -> None:
    rows = _read(report_to_csv(build_report(replace(build_identification(), candidates=()))))
    assert len(rows) == 1 and rows[0]["claim_level"] == "supported" and rows[0]["rank"] == "" == rows[0]["name"]


def test_report_without_queries_is_a_header() -> None:
    assert report_to_csv(replace(build_report(), identifications=())) == ",".join(COLUMNS) + "\r\n"


@pytest.mark.parametrize("name", ['a,"b"\r\nc', "two\nlines", 'quote " inside', "semi;colon", "ünïcode 二酸化"])
def test_any_text_survives_a_strict_reader(name: str) -> None:
    text = report_to_csv(_with_name(name))
    assert _read(text)[0]["name"] == name
    assert text.endswith("\r\n")


@pytest.mark.parametrize("name", ["=HYPERLINK(1)", "+1", "-1+cmd", "@SUM(A1)", "\t=1", "\r=1", "  =1", "\n@x"])
def test_no_cell_starts_a_formula(name: str) -> None:
    cell = _read(report_to_csv(_with_name(name)))[0]["name"]
    assert cell == "'" + name


def test_no_text_cell_of_a_whole_report_starts_a_formula() -> None:
    hostile = build_identification()
    candidate = build_candidate(name="=a", authors="+b", licence="@c", smiles="=O", inchikey="-d", library="=lib")
    report = build_report(replace(hostile, candidates=(candidate,)))
    cells = [cell for row in _read(report_to_csv(report)) for cell in row.values()]
    assert not [cell for cell in cells if cell.lstrip().startswith(("=", "+", "-", "@"))]


def test_harmless_text_is_unchanged() -> None:
    assert make_harmless("2,4-D") == "2,4-D" and make_harmless("") == ""


def test_file_is_written_whole(tmp_path: Path) -> None:
    write_csv(tmp_path / "out.csv", build_report())
    assert (tmp_path / "out.csv").read_bytes().decode("utf-8") == report_to_csv(build_report())


def test_pandas_is_loaded_only_when_a_table_is_written() -> None:
    code = "import sys, identify.writers.results_csv; sys.exit('pandas' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
