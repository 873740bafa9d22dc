"""Everything the package imports is declared, in the list its users install; nothing is declared that is not used."""

from __future__ import annotations

import ast
import re
import sys
import tomllib
from collections.abc import Iterator
from functools import cache
from importlib.metadata import packages_distributions
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]
EXTRA_ROOMS = {
    "workbench": ("identify/workbench/",),
    "sign": ("identify/library/sign.py",),
    "cluster": ("identify/library/shards.py",),
}
"""Where the packages of an optional list may be imported."""
COMES_WITH = {"cluster": {"distributed"}}
"""Packages that a bracket in a requirement asks for."""
WITHOUT_IMPORT = {
    "uvicorn": "imported by name and started by the server module",
    "python-multipart": "FastAPI reads uploads with it",
    "dask": "its part for several machines, distributed, is imported",
    "psims": "pyteomics reads the names of terms with it",
}  # fmt: skip


def distribution_name(requirement: str) -> str:
    match = re.match(r"[A-Za-z0-9._-]+", requirement)
    assert match, requirement
    return match.group().lower().replace("_", "-")


REQUIRED = {distribution_name(text) for text in PROJECT["dependencies"]}
OPTIONAL = {name: {distribution_name(text) for text in PROJECT["optional-dependencies"][name]} for name in EXTRA_ROOMS}


def imports_of(path: Path) -> Iterator[tuple[str, int]]:
    for node in ast.walk(ast.parse(path.read_text("utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((alias.name.partition(".")[0], node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module:
            yield node.module.partition(".")[0], node.lineno


@cache
def distributions() -> dict[str, set[str]]:
    return {name: {d.lower().replace("_", "-") for d in found} for name, found in packages_distributions().items()}


def foreign_imports() -> Iterator[tuple[str, str, int]]:
    for path in sorted((ROOT / "identify").rglob("*.py")):
        for name, line in imports_of(path):
            if name not in sys.stdlib_module_names and name not in ("identify", "__future__"):
                yield path.relative_to(ROOT).as_posix(), name, line


def test_every_import_is_declared_where_its_users_install_it() -> None:
    faults = []
    for place, name, line in foreign_imports():
        allowed = set(REQUIRED)
        for extra, rooms in EXTRA_ROOMS.items():
            if place.startswith(rooms):
                allowed |= OPTIONAL[extra] | COMES_WITH.get(extra, set())
        if not distributions().get(name, {name}) & allowed:
            faults.append(f"{place}:{line} imports {name}")
    assert not faults


def test_every_declared_package_is_used() -> None:
    used = {dist for _, name, _ in foreign_imports() for dist in distributions().get(name, {name})}
    declared = REQUIRED.union(*OPTIONAL.values())
    assert declared - used - set(WITHOUT_IMPORT) == set()


@pytest.mark.parametrize("requirement", [*PROJECT["dependencies"]])
def test_every_dependency_has_a_lowest_version(requirement: str) -> None:
    assert ">=" in requirement, requirement
