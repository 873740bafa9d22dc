"""Many queries on a terminal: a row each, readable in any encoding."""

from __future__ import annotations

import io
from dataclasses import replace

import pytest
from rich.console import Console

from identify.records import Report
from identify.report.overview import render_overview
from tests.builders import build_identification, build_report


def _print(report: Report, encoding: str = "utf-8") -> str:
    raw = io.BytesIO()
    stream = io.TextIOWrapper(raw, encoding=encoding, newline="\n")
    render_overview(report, Console(file=stream, width=140))
    stream.flush()
    return raw.getvalue().decode(encoding)


def test_the_unit_stands_in_the_heading_only() -> None:
    found = build_identification()
    record = replace(found.query.record, retention=replace(found.query.record.retention, time_s=399.0))
    heading, row = _print(build_report(replace(found, query=replace(found.query, record=record)))).splitlines()[:2]
    assert " min " in heading
    assert " 6.65 " in row and "min" not in row


def test_a_query_without_a_name_is_called_by_its_file() -> None:
    found = build_identification()
    identity = replace(found.query.record.identity, name="")
    record = replace(found.query.record, identity=identity, title="")
    row = _print(build_report(replace(found, query=replace(found.query, record=record)))).splitlines()[1]
    assert row.startswith(record.source.path.rpartition("/")[2])


@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "utf-8"])
def test_every_encoding_can_show_it(encoding: str) -> None:
    text = _print(build_report(), encoding)
    assert "Acetophenone" in text
    assert "\u00a0" not in text
