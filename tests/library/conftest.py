"""Fixtures of the library tests."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

from library_builders import build_test_library


@pytest.fixture
def library_path(tmp_path: Path) -> Path:
    """A small library of invented spectra."""
    path = tmp_path / "lab.ionlib"
    build_test_library(path)
    return path


@pytest.fixture(autouse=True)
def _own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """No test touches the user's cache folder."""
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
