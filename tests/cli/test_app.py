"""The command as a process: start-up, exit codes, messages."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from tests.test_architecture import LIGHT_START


def ionwitness(*arguments: object) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-c", "from identify.cli import main; main()", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, check=False, timeout=120)


def test_help_loads_nothing_heavy() -> None:
    code = f"import sys, identify.cli; sys.exit(','.join({LIGHT_START!r} & set(sys.modules)) or None)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


@pytest.mark.parametrize(
    ("arguments", "code", "message"),
    [
        (("--help",), 0, ""),
        (("search",), 2, "Missing argument"),
        (("no-such-command",), 2, "No such command"),
        (("search", "x.csv", "--library", "missing.ionlib"), 4, "ionwitness: library in missing.ionlib"),
        (("search", "x.csv", "--library", "a", "--library", "a"), 2, "the same library twice"),
        (("library", "verify", "missing.ionlib"), 4, "missing.ionlib"),
    ],
)
def test_exit_codes_tell_the_kind_of_failure(arguments: tuple[str, ...], code: int, message: str) -> None:
    done = ionwitness(*arguments)
    assert done.returncode == code, done.stderr
    assert message in done.stderr
    assert "Traceback" not in done.stderr


def test_help_of_every_command_is_there() -> None:
    from identify.cli.app import ionwitness as root

    for name, command in root.commands.items():
        assert command.help, name


def test_a_bug_keeps_its_traceback_and_leaves_with_70(tmp_path: Path) -> None:
    code = (
        "import identify.cli.app as app\n"
        "import click\n"
        "@click.command()\n"
        "def broken(): raise ZeroDivisionError('boom')\n"
        "app.ionwitness.add_command(broken)\n"
        "import sys; sys.argv = ['ionwitness', 'broken']\n"
        "app.main()\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 70
    assert "ZeroDivisionError: boom" in done.stderr
    assert "this is a bug" in done.stderr
