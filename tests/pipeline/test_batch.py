"""Many queries on several processes give what one process gives, in the same order."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import pytest

from identify.library.starter import build_starter, starter_records
from identify.pipeline import batch
from identify.pipeline.search import identify_records, open_libraries
from identify.records import Rejection, Source, SpectrumRecord
from identify.settings import Settings
from identify.writers.results_json import report_to_dict
from tests.builders import build_report


@pytest.fixture(scope="module")
def library(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("batch") / "starter.ionlib"
    build_starter(path, "tester", datetime(2026, 1, 1, tzinfo=UTC))
    return path


def test_workers_change_nothing(library: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(batch, "WORTH_WORKERS", 10)
    monkeypatch.setattr(batch, "GROUP", 3)
    records: list[SpectrumRecord] = list(starter_records()[:14])
    records.insert(5, SpectrumRecord(Source("empty.csv", 1), [], []))  # type: ignore[arg-type]
    settings = Settings(top=5)
    with open_libraries([library], settings) as libraries:
        alone_rejected: list[Rejection] = []
        many_rejected: list[Rejection] = []
        alone = list(identify_records(records, libraries, settings, alone_rejected))
        many = list(batch.identify_many(records, libraries, settings, many_rejected))
    assert [found.query.id for found in many] == [found.query.id for found in alone]
    assert many_rejected == alone_rejected
    assert len(many_rejected) == 1
    frame = build_report()
    assert _shown(frame, many) == _shown(frame, alone)


def _shown(frame: object, found: list[object]) -> object:
    from dataclasses import replace

    return report_to_dict(replace(frame, identifications=tuple(found)))["queries"]  # type: ignore[type-var, arg-type]
