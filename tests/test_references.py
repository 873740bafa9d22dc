"""What pages and docstrings point at is there: files, modules, functions."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PAGES = sorted(
    path
    for pattern in ("*.md", "identify/**/*.py", "identify/**/*.md", "fixtures/**/*.md", "libraries/**/*.md")
    for path in ROOT.glob(pattern)
    if path.name != "CHANGELOG.md"  # says what was
)
FILE = re.compile(r"(?<![\w/.])(?:tests|identify|fixtures|libraries)/[\w/-]+\.(?:py|md|toml|json|npz|sqlite)\b")
NAME = re.compile(r"`(identify(?:\.\w+)+)`")


def find_source(name: str) -> tuple[Path | None, list[str]]:
    """File of the longest part of a dotted name that is a module, and what is left of the name."""
    parts = name.split(".")
    for length in range(len(parts), 0, -1):
        place = ROOT.joinpath(*parts[:length])
        for path in (place.with_suffix(".py"), place / "__init__.py"):
            if path.is_file():
                return path, parts[length:]
    return None, parts


@pytest.mark.parametrize("page", PAGES, ids=lambda page: str(page.relative_to(ROOT)))
def test_files_and_names_mentioned_exist(page: Path) -> None:
    text = page.read_text(encoding="utf-8")
    missing = [path for path in FILE.findall(text) if not (ROOT / path).is_file()]
    for name in NAME.findall(text):
        source, rest = find_source(name)
        assert source is not None
        if rest and not re.search(rf"\b{rest[0]}\b", source.read_text(encoding="utf-8")):
            missing.append(name)
    assert not missing
