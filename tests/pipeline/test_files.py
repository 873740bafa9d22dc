"""A result written query by query is the result, and what is kept of it in memory still says who answered."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import pytest

from identify.errors import UsageError
from identify.library.starter import build_starter, starter_records
from identify.pipeline import batch, files, search_files, search_to_json
from identify.settings import Settings
from identify.writers.results_json import report_to_json
from identify.writers.spectrum_files import write_spectra

TOP = Settings(top=3)


@pytest.fixture(scope="module")
def library(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("files") / "starter.ionlib"
    build_starter(path, "tester", datetime(2026, 1, 1, tzinfo=UTC))
    return path


@pytest.fixture
def queries(tmp_path: Path) -> list[Path]:
    good, bad = tmp_path / "queries.msp", tmp_path / "nothing.csv"
    write_spectra(good, starter_records()[:9], "msp")
    bad.write_text("mz,intensity\n", "utf-8")
    return [good, bad]


@pytest.mark.parametrize("worth_workers", [5, 1000])
def test_a_streamed_result_is_the_file_a_whole_report_gives(
    library: Path, queries: list[Path], tmp_path: Path, monkeypatch: pytest.MonkeyPatch, worth_workers: int
) -> None:
    monkeypatch.setattr(batch, "WORTH_WORKERS", worth_workers)
    monkeypatch.setattr(batch, "GROUP", 2)
    whole = search_files(queries, [library], TOP)
    streamed = search_to_json(queries, [library], TOP, tmp_path / "out.json")
    assert (tmp_path / "out.json").read_text("utf-8") == report_to_json(whole)
    assert len(whole.identifications) == 9
    assert streamed.rejected == whole.rejected != ()
    assert streamed.exit_code == whole.exit_code == 1


def test_an_outline_keeps_the_claim_and_who_answered_but_no_peaks(library: Path, queries: list[Path]) -> None:
    for found in search_files(queries, [library], TOP).identifications:
        kept = files.outline(found)
        assert (kept.query.id, kept.claim) == (found.query.id, found.claim)
        assert [(c.entry.id, c.library, c.rank, c.probability) for c in kept.candidates] == [
            (c.entry.id, c.library, c.rank, c.probability) for c in found.candidates
        ]
        assert not any(len(c.entry.spectrum.nominal) or c.evidence or c.explanation.parts for c in kept.candidates)


def test_a_streamed_result_that_fails_leaves_the_old_file_and_nothing_else(
    library: Path, queries: list[Path], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = tmp_path / "out" / "result.json"
    target.parent.mkdir()
    target.write_text("old", "utf-8")

    def fail(found: object) -> str:
        raise ValueError("invented")

    monkeypatch.setattr(files, "identification_to_json", fail)
    with pytest.raises(ValueError, match="invented"):
        search_to_json(queries, [library], TOP, target)
    assert target.read_text("utf-8") == "old"
    assert list(target.parent.iterdir()) == [target]


def test_a_streamed_result_needs_a_folder(library: Path, queries: list[Path], tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="output file"):
        search_to_json(queries, [library], TOP, tmp_path / "missing" / "result.json")
