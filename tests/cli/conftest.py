"""A library and unknowns for command-line tests, made once from the starter library's own text."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from identify.cli.app import ionwitness

WHEN = datetime(2026, 1, 2, 3, 4, 5, tzinfo=UTC)
ACETONE = "m/z,intensity\n15,20\n27,8\n42,7\n43,100\n58,30\n59,1\n"
"""Principal ions of acetone, from memory (common practice): base peak 43, molecular ion 58."""


@pytest.fixture(scope="session")
def built_starter(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The starter library, built once; nothing writes to it."""
    from identify.library.starter import build_starter

    path = tmp_path_factory.mktemp("library") / "starter.ionlib"
    build_starter(path, "tester", WHEN)
    return path


@pytest.fixture
def starter(built_starter: Path, tmp_path: Path) -> Path:
    """A starter library of this test's own, since searches are remembered in it."""
    path = tmp_path / "starter.ionlib"
    shutil.copyfile(built_starter, path)
    return path


@pytest.fixture
def lab(built_starter: Path, tmp_path: Path) -> Path:
    """A second copy, in a folder with blanks and letters of several scripts."""
    folder = tmp_path / "mein Labor ä 实验室"
    folder.mkdir()
    path = folder / "labor 1.ionlib"
    shutil.copyfile(built_starter, path)
    return path


@pytest.fixture(autouse=True)
def _own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """No test touches the cache folder of the user."""
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


@pytest.fixture
def unknown(tmp_path: Path) -> Path:
    """One unknown as a table."""
    path = tmp_path / "unbekannt ä 未知.csv"
    path.write_text(ACETONE, encoding="utf-8")
    return path


@pytest.fixture
def run() -> Callable[..., Result]:
    """The command, in this process: errors stay errors, so that a test can name them."""

    def invoke(*arguments: object, text: str | None = None) -> Result:
        return CliRunner().invoke(
            ionwitness, [str(a) for a in arguments], input=text, standalone_mode=False, catch_exceptions=False
        )

    return invoke
