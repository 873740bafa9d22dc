"""Fixtures shared by all tests."""

from __future__ import annotations

from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(scope="session")
def shared_data() -> Path:
    """Folder of the open data beside the repository; skips where it is missing."""
    folder = ROOT.parent / "shared" / "data"
    if not folder.is_dir():
        pytest.skip(f"open data not found at {folder}: this check runs where that folder is present")
    return folder
