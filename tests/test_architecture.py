"""Layers, owners, sizes and names of the package hold (design: a room imports lower layers and itself only)."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "identify"

LAYERS: dict[str, float] = {
    "errors": 0,
    "peaks": 0.5,  # the lowest nouns, offered by records
    "explanations": 0.5,
    "records": 1,
    "settings": 1,
    "chem": 2,
    "spectra": 3,
    "similarity": 4,
    "index": 4,
    "retention": 4,
    "runs": 4.2,  # its findings carry a retention ladder
    "evidence": 5,
    "ranking": 6,
    "readers": 7,
    "writers": 7,
    "library": 7.5,  # builds from what readers read, exports through writers
    "pipeline": 8,
    "report": 8,
    "cli": 9.5,
    "workbench": 8.5,  # served by a command
}
OWNERS = {
    "sqlite3": ("library", "workbench"),
    "rdkit": ("chem",),
    "matchms": ("readers",),
    "pandas": ("writers",),
    "fastapi": ("workbench",),
    "uvicorn": ("workbench",),
    "click": ("cli",),
    "requests": ("library",),
    "pyteomics": ("readers", "writers"),
}
IO_FREE_UP_TO = 6
IO_MODULES = {
    "os",
    "pathlib",
    "io",
    "socket",
    "subprocess",
    "sqlite3",
    "requests",
    "tempfile",
    "shutil",
    "time",
    "random",
}
LIGHT_START = {"numpy", "scipy", "rdkit", "pandas", "matchms", "numba", "jinja2", "sqlite3", "requests", "pyteomics"}
MAX_MODULE_LINES = 480
MAX_FUNCTION_LINES = 60
BANNED_NAMES = {"utils", "util", "helpers", "helper", "common", "misc", "tools"}

MODULES = sorted(PACKAGE.rglob("*.py"))


@cache
def tree(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"))


def module_name(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def room(name: str) -> str:
    return name.split(".")[1] if "." in name else ""


def imports(path: Path, *, top_level_only: bool = False) -> Iterator[str]:
    """Full names of the modules imported (for ``from a import b`` both ``a`` and ``a.b``)."""
    nodes = ast.walk(tree(path)) if not top_level_only else iter(tree(path).body)
    for node in nodes:
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            assert node.level == 0, f"{path}: relative import"
            yield node.module
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def known(name: str) -> bool:
    path = PACKAGE.parent.joinpath(*name.split("."))
    return path.with_suffix(".py").is_file() or path.is_dir()


@pytest.mark.parametrize("path", MODULES, ids=module_name)
def test_a_room_imports_lower_layers_and_itself_only(path: Path) -> None:
    here = room(module_name(path))
    if not here:
        return
    assert here in LAYERS, f"{here} is not a room of design"
    for name in imports(path):
        if name.startswith("identify.") and known(name) and (there := room(name)) != here:
            assert LAYERS[there] < LAYERS[here], f"{module_name(path)} imports {name}"


@pytest.mark.parametrize("path", MODULES, ids=module_name)
def test_foreign_packages_are_imported_by_their_owner_only(path: Path) -> None:
    for name in imports(path):
        owner = OWNERS.get(name.split(".")[0])
        assert owner is None or room(module_name(path)) in owner, f"{module_name(path)} imports {name}"


@pytest.mark.parametrize("path", MODULES, ids=module_name)
def test_rooms_that_compute_do_no_io(path: Path) -> None:
    if LAYERS.get(room(module_name(path)), 99) > IO_FREE_UP_TO:
        return
    touched = {name.split(".")[0] for name in imports(path)} & IO_MODULES
    assert not touched, f"{module_name(path)} imports {touched}"
    calls = {n.func.id for n in ast.walk(tree(path)) if isinstance(n, ast.Call) and isinstance(n.func, ast.Name)}
    assert not calls & {"open", "print", "input", "exec", "eval"}, module_name(path)


@pytest.mark.parametrize("path", MODULES, ids=module_name)
def test_modules_and_functions_stay_readable(path: Path) -> None:
    n_lines = len(path.read_text(encoding="utf-8").splitlines())
    assert n_lines <= MAX_MODULE_LINES, f"{module_name(path)} has {n_lines} lines"
    assert path.stem not in BANNED_NAMES
    for node in ast.walk(tree(path)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            body = node.body[1:] if ast.get_docstring(node) else node.body
            length = (body[-1].end_lineno or 0) - body[0].lineno + 1 if body else 0
            assert length <= MAX_FUNCTION_LINES, f"{module_name(path)}.{node.name}: {length} lines"


@pytest.mark.parametrize("path", MODULES, ids=module_name)
def test_every_module_says_what_it_is_for(path: Path) -> None:
    assert ast.get_docstring(tree(path)), module_name(path)


def public_functions(path: Path) -> Iterator[ast.FunctionDef]:
    for node in tree(path).body:
        if isinstance(node, ast.FunctionDef) and not node.name.startswith("_"):
            yield node
        if isinstance(node, ast.ClassDef) and not node.name.startswith("_"):
            yield from (n for n in node.body if isinstance(n, ast.FunctionDef) and not n.name.startswith("_"))


@pytest.mark.parametrize("path", MODULES, ids=module_name)
def test_public_functions_are_documented_and_say_what_they_raise(path: Path) -> None:
    for node in public_functions(path):
        text = ast.get_docstring(node)
        assert text, f"{module_name(path)}.{node.name} has no docstring"
        raised = {
            child.exc.func.id
            for child in ast.walk(node)
            if isinstance(child, ast.Raise) and isinstance(child.exc, ast.Call) and isinstance(child.exc.func, ast.Name)
        }
        classes = {
            name for name in raised if name[:1].isupper()
        }  # a lower-case name makes an error: its doc names the class
        for error in classes - {"NotImplementedError", "Exit", "SystemExit"}:
            assert error in text, f"{module_name(path)}.{node.name} raises {error} without saying so"


def test_no_import_cycles_between_modules() -> None:
    graph = {
        module_name(p): {n for n in imports(p, top_level_only=True) if n.startswith("identify") and known(n)}
        for p in MODULES
    }
    done: set[str] = set()

    def visit(name: str, trail: tuple[str, ...]) -> None:
        assert name not in trail, f"cycle: {' -> '.join((*trail, name))}"
        if name in done:
            return
        for other in graph.get(name, set()) - {name}:
            if not trail or other != trail[-1] or other in graph:
                visit(other, (*trail, name))
        done.add(name)

    for name in graph:
        visit(name, ())


def test_the_command_starts_light() -> None:
    for path in (PACKAGE / "cli").rglob("*.py"):
        heavy = {name.split(".")[0] for name in imports(path, top_level_only=True)} & LIGHT_START
        assert not heavy, f"{module_name(path)} imports {heavy} at start-up"
