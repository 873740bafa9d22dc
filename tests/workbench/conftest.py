"""A running workbench for tests: a real server on a free loopback port, with a starter library of its own."""

from __future__ import annotations

import shutil
import sys
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

pytest.importorskip("fastapi", reason="the workbench's packages are not installed")
pytest.importorskip("uvicorn", reason="the workbench's packages are not installed")

from bench import Bench, running_bench


@pytest.fixture(scope="session")
def starter(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The starter library with its search index, built once."""
    from identify.library.cache import load_index
    from identify.library.starter import build_starter
    from identify.library.store import open_library
    from identify.settings import Weighting

    path = tmp_path_factory.mktemp("starter") / "lab.ionlib"
    build_starter(path, "tests", datetime(2026, 1, 5, tzinfo=UTC), replace=True)
    with open_library(path) as library:
        load_index(library, Weighting())
    return path


@pytest.fixture(autouse=True)
def _own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """No test touches the user's cache folder."""
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


@pytest.fixture
def folder(starter: Path, tmp_path: Path) -> Path:
    """A folder with a library that a test may change."""
    for path in starter.parent.iterdir():
        shutil.copy(path, tmp_path / path.name)
    return tmp_path


@pytest.fixture
def bench(folder: Path) -> Iterator[Bench]:
    """A running workbench nobody has used yet."""
    with running_bench(folder) as running:
        yield running


@pytest.fixture(scope="session")
def used_bench(starter: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Bench]:
    """A running workbench with the demo's unknowns identified; for tests that only read."""
    folder = tmp_path_factory.mktemp("used")
    for path in starter.parent.iterdir():
        shutil.copy(path, folder / path.name)
    with running_bench(folder) as running:
        running.upload_demo(6)
        yield running
