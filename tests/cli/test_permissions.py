"""Folders and files without permission: each command says which, and changes nothing.

Where the tests run as root, who may do everything, the commands run without that privilege (Linux capabilities).
"""

from __future__ import annotations

import ctypes
import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest

PR_CAPBSET_DROP, CAP_DAC_OVERRIDE, CAP_DAC_READ_SEARCH = 24, 1, 2  # linux/prctl.h, linux/capability.h
ACETONE = "m/z,intensity\n15,20\n27,8\n42,7\n43,100\n58,30\n59,1\n"


pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="permissions of other systems are another matter")


@pytest.fixture
def room(built_starter: Path) -> Iterator[Path]:
    """A folder every user may enter: a library and a query that may be read but not written, and a home to write to."""
    folder = Path(tempfile.mkdtemp(prefix="ionwitness test ä "))
    folder.chmod(0o755)
    (folder / "home").mkdir()
    (folder / "home").chmod(0o777)
    shared = folder / "nur lesen"
    shared.mkdir()
    shutil.copyfile(built_starter, shared / "lab.ionlib")
    (shared / "unknown.csv").write_text(ACETONE)
    (shared / "secret.csv").write_text(ACETONE)
    (shared / "secret.csv").chmod(0)
    (shared / "lab.ionlib").chmod(0o444)
    shared.chmod(0o555)
    yield folder
    shared.chmod(0o755)
    shutil.rmtree(folder)


def _give_up_privilege() -> None:
    """Run between fork and exec: root then has only the permissions that the files grant."""
    library = ctypes.CDLL(None)
    for capability in (CAP_DAC_OVERRIDE, CAP_DAC_READ_SEARCH):
        if library.prctl(PR_CAPBSET_DROP, capability, 0, 0, 0):
            raise OSError("the privilege cannot be given up")


def ionwitness(room: Path, *arguments: object) -> subprocess.CompletedProcess[str]:
    home = room / "home"
    environment = {
        **os.environ, "HOME": str(home), "XDG_CACHE_HOME": str(home), "NUMBA_CACHE_DIR": str(home), "PYTHONUTF8": "1",
        "PYTHONPATH": str(Path(__file__).resolve().parents[2]), "COLUMNS": "300",
    }  # fmt: skip
    return subprocess.run(
        [sys.executable, "-c", "from identify.cli import main; main()", *map(str, arguments)],
        capture_output=True, text=True, check=False, timeout=120, cwd=home, env=environment,
        preexec_fn=_give_up_privilege if os.geteuid() == 0 else None,
    )  # fmt: skip


def test_a_library_on_read_only_media_answers_and_says_that_it_does_not_remember(room: Path) -> None:
    library, out = room / "nur lesen" / "lab.ionlib", room / "home" / "r.json"
    done = ionwitness(room, "search", room / "nur lesen" / "unknown.csv", "--library", library, "--json", out)
    assert done.returncode == 0, done.stderr
    assert "acetone" in done.stdout
    assert (
        f"Not recorded in the library: library in {library}: found a read-only file or folder, expected write access. "
        "Copy the library to a folder you may write to." in done.stderr
    )
    assert sorted(path.name for path in library.parent.iterdir()) == ["lab.ionlib", "secret.csv", "unknown.csv"]


@pytest.mark.parametrize(
    "command",
    [
        ("library", "quarantine", "LIB", "x", "--why", "x"),
        ("standard", "propose", "unknown.csv", "--library", "LIB", "--name", "x"),
        ("library", "migrate", "LIB"),
    ],
)
def test_a_command_that_writes_says_that_it_may_not(room: Path, command: tuple[str, ...]) -> None:
    shared = room / "nur lesen"
    library = shared / "lab.ionlib"
    words = {"LIB": library, "unknown.csv": shared / "unknown.csv"}
    done = ionwitness(room, *(words.get(word, word) for word in command))
    assert done.returncode == 4
    assert done.stderr == (
        f"ionwitness: library in {library}: found a read-only file or folder, expected write access. "
        "Copy the library to a folder you may write to.\n"
    )


def test_reading_commands_work_on_read_only_media(room: Path) -> None:
    library = room / "nur lesen" / "lab.ionlib"
    for command in (("info",), ("audit",)):
        done = ionwitness(room, "library", *command, library)
        assert done.returncode == 0, (command, done.stderr)
    copy = room / "home" / "copy.ionlib"
    assert ionwitness(room, "library", "backup", library, copy).returncode == 0
    assert copy.exists()


@pytest.mark.parametrize(
    ("command", "what"),
    [
        (("search", "unknown.csv", "--library", "LIB", "--csv", "OUT"), "output file"),
        (("library", "export", "LIB", "OUT", "--format", "msp"), "output file"),
    ],
)
def test_a_folder_that_may_not_be_written_is_named_before_the_work(
    room: Path, command: tuple[str, ...], what: str
) -> None:
    shared = room / "nur lesen"
    out = shared / "out.txt"
    words = {"LIB": shared / "lab.ionlib", "unknown.csv": shared / "unknown.csv", "OUT": out}
    done = ionwitness(room, *(words.get(word, word) for word in command))
    assert done.returncode == 2
    assert done.stdout == ""
    assert done.stderr == (
        f"ionwitness: {what} in {out}: found a folder without permission to write, expected a new file in a folder to write to.\n"
    )


@pytest.mark.parametrize(
    "command",
    [
        ("library", "build", "OUT", "unknown.csv"),
        ("library", "backup", "LIB", "OUT"),
        ("library", "create-key", "OUT"),
        ("demo", "--out", "OUT"),
    ],
)
def test_nothing_is_made_where_nothing_may_be_made(room: Path, command: tuple[str, ...]) -> None:
    shared = room / "nur lesen"
    words = {"LIB": shared / "lab.ionlib", "unknown.csv": shared / "unknown.csv", "OUT": shared / "out"}
    done = ionwitness(room, *(words.get(word, word) for word in command))
    assert done.returncode in (2, 4), done.stderr
    assert done.stderr.startswith("ionwitness: ")
    assert done.stderr.count("\n") == 1, done.stderr
    assert not (shared / "out").exists()


def test_a_query_that_may_not_be_read_is_listed(room: Path) -> None:
    shared = room / "nur lesen"
    done = ionwitness(room, "search", shared / "secret.csv", shared / "unknown.csv", "--library", shared / "lab.ionlib")
    assert done.returncode == 1
    assert "secret.csv: input: found permission denied, expected a readable file." in done.stdout
    assert "acetone" in done.stdout


def test_a_library_that_may_not_be_read_is_said(room: Path) -> None:
    secret = room / "nur lesen" / "secret.csv"
    done = ionwitness(room, "library", "info", secret)
    assert done.returncode == 4
    assert done.stderr == (
        f"ionwitness: library in {secret}: found no permission to read it, expected a readable file.\n"
    )


def test_settings_and_results_that_may_not_be_read_are_said(room: Path) -> None:
    shared = room / "nur lesen"
    secret = shared / "secret.csv"
    settings = ionwitness(
        room, "search", shared / "unknown.csv", "--library", shared / "lab.ionlib", "--settings", secret
    )
    assert settings.returncode == 2
    assert settings.stderr == f"ionwitness: settings in {secret}: found no permission, expected a readable text file.\n"
    results = ionwitness(room, "compare", secret, secret)
    assert results.returncode == 3
    assert results.stderr == f"ionwitness: result in {secret}: found no permission, expected a readable JSON file.\n"
