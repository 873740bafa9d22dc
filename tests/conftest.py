"""Fixtures shared by all tests."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

# A commit passes or fails, whatever the day and the load: the same examples every time, and no clock on the wall. New examples
# are looked for with `--hypothesis-profile=explore`, and by `tests/benchmarks/fuzz.py`.
RELAXED = {"deadline": None, "suppress_health_check": [HealthCheck.too_slow, HealthCheck.function_scoped_fixture]}
settings.register_profile("same", **RELAXED, derandomize=True)
settings.register_profile("explore", **RELAXED, print_blob=True)
settings.load_profile("same")

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(scope="session")
def shared_data() -> Path:
    """Folder of the open data beside the repository; skips where it is missing."""
    folder = ROOT.parent / "shared" / "data"
    if not folder.is_dir():
        pytest.skip(f"open data not found at {folder}: this check runs where that folder is present")
    return folder
