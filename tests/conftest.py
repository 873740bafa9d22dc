"""Fixtures shared by all tests."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, settings

# A commit passes or fails, whatever the day and the load: the same examples every time, and no clock on the wall. New examples
# are looked for with `--hypothesis-profile=explore`, and by `tests/benchmarks/fuzz.py`.
RELAXED = {"deadline": None, "suppress_health_check": [HealthCheck.too_slow, HealthCheck.function_scoped_fixture]}
settings.register_profile("same", **RELAXED, derandomize=True)
settings.register_profile("explore", **RELAXED, print_blob=True)
settings.load_profile("same")

TOGETHER = {
    "tests/test_open_library.py": "open library", "tests/library/test_export.py": "open export",
    "tests/writers/test_foreign_opinions.py": "open records", "tests/workbench/test_pages.py": "used bench",
    "tests/workbench/test_security.py": "used bench",
}  # fmt: skip
"""Files whose tests share something that takes long to make: each group runs on one worker."""

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(scope="session")
def shared_data() -> Path:
    """Folder of the open data beside the repository; skips where it is missing."""
    folder = ROOT.parent / "shared" / "data"
    if not folder.is_dir():
        pytest.skip(f"open data not found at {folder}: this check runs where that folder is present")
    return folder


@pytest.hookimpl(optionalhook=True)
def pytest_xdist_make_scheduler(config: pytest.Config, log: Any) -> Any:
    """Groups by file: the marks of xdist 3.8 do not reach its scheduler under pytest 9.2, whose node ids cannot be renamed."""
    from xdist.scheduler import LoadScopeScheduling

    class ByGroup(LoadScopeScheduling):
        def _split_scope(self, nodeid: str) -> str:
            return TOGETHER.get(nodeid.partition("::")[0], nodeid)

    return ByGroup(config, log) if config.getvalue("dist") == "loadgroup" else None
