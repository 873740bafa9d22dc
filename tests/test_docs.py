"""Documents that fail when they are stale: commands run, references compared, paths and names checked."""

from __future__ import annotations

import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

from identify import __version__
from tests.command_reference import replace_reference
from tests.readme_example import PASTED

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def test_the_command_reference_is_what_the_commands_say() -> None:
    assert replace_reference(README) == README, "run: python -m tests.command_reference"


@pytest.mark.parametrize(
    "path", sorted(set(re.findall(r"`((?:identify|tests|fixtures|libraries)/[\w./-]*)`", DEVELOPERS + README)))
)
def test_every_path_named_exists(path: str) -> None:
    assert (ROOT / path).exists()


def test_every_dotted_name_of_the_main_path_exists() -> None:
    block = DEVELOPERS.split("## Main path")[1].split("```")[1]
    for name in set(
        re.findall(r"\b((?:settings|readers|library|spectra|index|ranking|evidence|report|writers)(?:\.\w+)+)", block)
    ):
        parts = name.split(".")
        module = ROOT.joinpath("identify", *parts)
        parent = ROOT.joinpath("identify", *parts[:-1])
        assert (
            module.with_suffix(".py").is_file()
            or _mentions(parent.with_suffix(".py"), parts[-1])
            or _mentions(parent / "__init__.py", parts[-1])
            or any(_mentions(file, parts[-1]) for file in parent.glob("*.py"))
        ), name


def _mentions(path: Path, name: str) -> bool:
    return (
        path.is_file()
        and re.search(rf"\b(def|class) {name}\b|\"{name}\"", path.read_text(encoding="utf-8")) is not None
    )


def readme_commands() -> list[str]:
    """Commands of README's worked examples: lines that start with ``$ ionwitness`` in console blocks."""
    blocks = re.findall(r"```console\n(.*?)```", README, flags=re.DOTALL)
    return [line[2:] for block in blocks for line in block.splitlines() if line.startswith("$ ionwitness")]


def test_the_commands_of_readme_run_in_their_order(tmp_path: Path) -> None:
    commands = readme_commands()
    assert len(commands) >= 3
    for command in commands:
        arguments = shlex.split(command)[1:]
        done = subprocess.run(
            [sys.executable, "-c", "from identify.cli import main; main()", *arguments],
            cwd=tmp_path, capture_output=True, text=True, check=False, timeout=300, input=PASTED,
        )  # fmt: skip
        assert done.returncode == 0, f"{command}\n{done.stdout}\n{done.stderr}"


def test_the_changelog_knows_this_version() -> None:
    text = (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
    assert "## Unreleased" in text or f"## {__version__}" in text


def test_no_whole_open_record_is_in_the_tree() -> None:
    listed = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False)
    if listed.returncode:
        pytest.skip("not a git checkout")
    for name in listed.stdout.split():
        path = ROOT / name
        if path.suffix in {".txt", ".toml", ".msp", ".jdx", ".csv"} and path.is_file():
            text = path.read_text(encoding="utf-8", errors="replace")
            assert not re.search(r"^ACCESSION: MSBNK-", text, flags=re.MULTILINE), name
