"""A process that dies, a disk that fills and two writers at once leave the last committed state, whole."""

from __future__ import annotations

import os
import random
import resource
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from library_builders import WHEN, WHO, build_random_records, build_test_library

from identify.errors import LibraryError
from identify.index import build_index, score_all
from identify.library.build import build_from_records
from identify.library.cache import load_index
from identify.library.new_file import remove_leftovers
from identify.library.store import open_library
from identify.library.verify import verify_library
from identify.records import CleanSpectrum, EntryStatus, Peaks
from identify.settings import Weighting

WORK = Path(__file__).with_name("faulty_work.py")
ROOT = Path(__file__).resolve().parents[2]
MOMENTS = [3, pytest.param(70, marks=pytest.mark.long)]
"""Kills per test: three tests of 70 are the 200 random moments."""


def start(*arguments: str | Path) -> subprocess.Popen[str]:
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "OMP_NUM_THREADS": "1"}
    process = subprocess.Popen(
        [sys.executable, str(WORK), *map(str, arguments)], stdout=subprocess.PIPE, text=True, env=environment
    )
    assert process.stdout is not None
    assert process.stdout.readline() == "ready\n"
    return process


def kill_after(process: subprocess.Popen[str], seconds: float, *, lines: int = 0) -> list[str]:
    """What it had said when it was killed, some time after so many lines; whole lines only."""
    assert process.stdout is not None
    said = [process.stdout.readline() for _ in range(lines)]
    time.sleep(seconds)
    os.kill(process.pid, signal.SIGKILL)
    said += process.stdout.readlines()
    process.wait()
    process.stdout.close()
    return [line.strip() for line in said if line.endswith("\n")]


@pytest.mark.parametrize("n_moments", MOMENTS)
def test_a_killed_build_leaves_whole_libraries_or_none(tmp_path: Path, n_moments: int) -> None:
    chance = random.Random(n_moments)
    for number in range(n_moments):
        folder = tmp_path / str(number)
        folder.mkdir()
        said = kill_after(start("build", folder / "lab"), chance.uniform(0.0, 0.25), lines=number % 2)
        complete = [found for found in folder.iterdir() if not found.name.startswith(".")]
        assert {found.name for found in complete} >= set(said)
        for found in complete:
            report = verify_library(found)
            assert report.is_intact, report.problems
            assert report.n_entries == 40
        for left in folder.glob(".lab-*"):
            name = left.name[1:].partition(".building-")[0]
            remove_leftovers(folder / name)
        assert not list(folder.glob(".*"))


@pytest.mark.parametrize("n_moments", MOMENTS)
def test_no_accepted_standard_is_lost_and_none_is_half_there(library_path: Path, n_moments: int) -> None:
    chance = random.Random(n_moments)
    accepted: set[str] = set()
    proposed: set[str] = set()
    for number in range(n_moments):
        # Every other time one standard has been accepted by then, however slow the machine is.
        said = kill_after(start("propose", library_path, "Anna"), chance.uniform(0.0, 0.2), lines=2 * (number % 2))
        proposed |= {line.split()[1] for line in said}
        accepted |= {line.split()[1] for line in said if line.startswith("accepted")}
        report = verify_library(library_path)
        assert report.is_intact, report.problems
        with open_library(library_path) as library:
            standards = {entry.accession for entry in library.iter_entries({EntryStatus.OWN_STANDARD})}
            waiting = {entry.accession for entry in library.iter_entries({EntryStatus.PROPOSED})}
            assert accepted <= standards
            assert proposed <= standards | waiting
            assert len(library.get_records(library.entry_ids(frozenset(EntryStatus)))) == report.n_entries
    assert accepted, "the test must have seen something happen"


@pytest.mark.parametrize("n_moments", MOMENTS)
def test_a_killed_index_merge_never_changes_an_answer(library_path: Path, n_moments: int) -> None:
    chance = random.Random(n_moments)
    query = CleanSpectrum(Peaks(np.array([78.0, 91.0]), np.array([50.0, 100.0])), None, 30)
    for number in range(n_moments):
        kill_after(start("merge", library_path), chance.uniform(0.0, 0.15), lines=number % 2)
        assert verify_library(library_path).is_intact
        with open_library(library_path) as library:
            found = score_all(load_index(library, Weighting()), query)
            right = score_all(build_index(library.iter_peaks(), Weighting()), query)
        assert all(np.array_equal(one, other) for one, other in zip(found, right, strict=True))


def test_two_writers_lose_nothing(library_path: Path) -> None:
    processes = [start("propose", library_path, name) for name in ("Anna", "Ben")]
    said = [kill_after(process, 0.2, lines=2) for process in processes]
    accessions = [line.split()[1] for lines in said for line in lines if line.startswith("accepted")]
    assert all(any(line.startswith("accepted") for line in lines) for lines in said), said
    assert len(accessions) == len(set(accessions))
    assert verify_library(library_path).is_intact
    with open_library(library_path) as library:
        standards = {entry.accession: entry for entry in library.iter_entries({EntryStatus.OWN_STANDARD})}
        assert set(accessions) <= set(standards)
        proposers = {event.who for event in library.events() if event.kind == "proposed"}
    assert proposers == {"Anna", "Ben"}


def test_readers_see_a_consistent_library_while_it_is_written(library_path: Path) -> None:
    process = start("propose", library_path, "Anna")
    counts: list[int] = []
    try:
        with open_library(library_path) as library:
            end = time.monotonic() + 60.0
            while (not counts or counts[-1] < counts[0] + 5) and time.monotonic() < end:
                counts.append(len(list(library.iter_entries())))
    finally:
        kill_after(process, 0.0)
    assert counts == sorted(counts)
    assert counts[-1] > counts[0]


@pytest.fixture
def small_disk(tmp_path: Path):
    """A file system of 1 MB."""
    point = tmp_path / "small"
    point.mkdir()
    mount = shutil.which("mount")
    if (
        not mount
        or subprocess.run([mount, "-t", "tmpfs", "-o", "size=1m", "tmpfs", point], capture_output=True).returncode
    ):
        pytest.skip("needs the right to mount a small file system")
    yield point
    subprocess.run(["umount", point], check=True)


def test_a_full_disk_leaves_no_library_behind(small_disk: Path) -> None:
    with pytest.raises(LibraryError) as caught:
        build_test_library(small_disk / "a.ionlib", build_random_records(600))
    assert "found no space left on the disk, expected room to write. Nothing was changed" in str(caught.value)
    assert list(small_disk.iterdir()) == []
    build_test_library(small_disk / "a.ionlib", build_random_records(40))
    assert verify_library(small_disk / "a.ionlib").is_intact


def test_a_disk_that_fills_during_a_change_keeps_the_state_before(small_disk: Path) -> None:
    from library_builders import move

    path = small_disk / "a.ionlib"
    build_test_library(path, build_random_records(40))
    before = verify_library(path).fingerprint
    filler = small_disk / "filler"
    with pytest.raises(OSError, match="No space left"), filler.open("wb", buffering=0) as stream:
        while True:
            stream.write(b"x" * 4096)
    with pytest.raises(LibraryError, match=r"no space left on the disk|disk I/O error"):
        move(path, 1, EntryStatus.WITHDRAWN)
    filler.unlink()
    report = verify_library(path)
    assert report.is_intact
    assert report.fingerprint == before
    move(path, 1, EntryStatus.WITHDRAWN)
    assert verify_library(path).is_intact


def test_a_file_size_limit_is_reported_and_leaves_nothing(tmp_path: Path) -> None:
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    ignored = signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_FSIZE, (100_000, hard))
    try:
        with pytest.raises(LibraryError, match=r"no space left on the disk|disk I/O error"):
            build_from_records(
                tmp_path / "a.ionlib", build_random_records(600), origin="x", who=WHO, when=WHEN
            )  # fmt: skip
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
        signal.signal(signal.SIGXFSZ, ignored)
    assert [found.name for found in tmp_path.iterdir()] == []
