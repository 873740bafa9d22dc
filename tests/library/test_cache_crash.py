"""Whatever dies or runs beside it, the next search is right: kill -9 during write, merge and add; searches during adds."""

from __future__ import annotations

import multiprocessing
import os
import random
import signal
import time
from collections.abc import Callable
from multiprocessing.connection import Connection
from pathlib import Path

import numpy as np
import pytest
from library_builders import TOLUENE, build_random_records, build_records, build_test_library, move

from identify.index import SearchIndex, build_index, score_all
from identify.library import cache
from identify.library.cache import cache_paths, load_index
from identify.library.store import open_library
from identify.records import CleanSpectrum, EntryStatus, Peaks
from identify.settings import Weighting

WEIGHTING = Weighting()
QUERY = CleanSpectrum(Peaks(np.array(list(TOLUENE)), np.array(list(TOLUENE.values()))), None, 30)
N_KILLS = 6
PROCESSES = multiprocessing.get_context("fork")


def scores(index: SearchIndex) -> list[list[float]]:
    return [column.tolist() for column in score_all(index, QUERY)]


def write_again_and_again(path: Path, ready: Connection) -> None:
    with open_library(path) as library:
        ready.send("ready")
        while True:
            cache_paths(library, WEIGHTING)[0].unlink(missing_ok=True)
            load_index(library, WEIGHTING)


def add_and_merge_again_and_again(path: Path, ready: Connection) -> None:
    cache.MERGE_AT = 1
    with open_library(path) as library:
        ready.send("ready")
        while True:
            for status in (EntryStatus.WITHDRAWN, EntryStatus.REFERENCE):
                for entry_id in (2, 3):
                    move(path, entry_id, status)
                load_index(library, WEIGHTING)


def add_now_and_then(path: Path, ready: Connection) -> None:
    ready.send("ready")
    pause_s = 0.1
    while True:
        for status in (EntryStatus.WITHDRAWN, EntryStatus.REFERENCE):
            move(path, 2, status)
            time.sleep(pause_s)
            pause_s *= 1.05  # on a slow machine, too, states come that last longer than a search


def start(work: Callable[[Path, Connection], None], path: Path) -> multiprocessing.process.BaseProcess:
    here, there = PROCESSES.Pipe(duplex=False)
    process = PROCESSES.Process(target=work, args=(path, there), daemon=True)
    process.start()
    assert here.recv() == "ready"
    return process


@pytest.mark.parametrize("work", [write_again_and_again, add_and_merge_again_and_again])
def test_the_search_after_a_kill_is_right(tmp_path: Path, work: Callable[[Path, Connection], None]) -> None:
    path = tmp_path / "lab.ionlib"
    build_test_library(path, [*build_records(), *build_random_records(300)])
    moments = random.Random(5)
    for _ in range(N_KILLS):
        process = start(work, path)
        time.sleep(moments.uniform(0.0, 0.12))
        assert process.pid is not None
        os.kill(process.pid, signal.SIGKILL)
        process.join()
        with open_library(path) as library:
            expected = scores(build_index(library.iter_peaks(), WEIGHTING))
            assert scores(load_index(library, WEIGHTING, save=False)) == expected
            assert scores(load_index(library, WEIGHTING)) == expected


def search_and_compare(path: Path) -> int:
    """Number of states of the library, at most 12, in which the index answered as a fresh one."""
    states: set[str] = set()
    deadline = time.monotonic() + 120
    while len(states) < 12 and time.monotonic() < deadline:
        with open_library(path) as library:
            before = library.search_fingerprint
            found, expected = load_index(library, WEIGHTING), build_index(library.iter_peaks(), WEIGHTING)
            if library.search_fingerprint == before:  # nothing was added between the two
                assert scores(found) == scores(expected)
                states.add(before)
    return len(states)


def search_and_report(path: Path, ready: Connection) -> None:
    ready.send("ready")
    ready.send(search_and_compare(path))


def test_two_processes_that_search_while_a_third_adds_are_right(library_path: Path) -> None:
    adder = start(add_now_and_then, library_path)
    here, there = PROCESSES.Pipe(duplex=False)
    second = PROCESSES.Process(target=search_and_report, args=(library_path, there), daemon=True)
    second.start()
    try:
        assert search_and_compare(library_path) == 12
        assert (here.recv(), here.recv()) == ("ready", 12)
    finally:
        for process in (adder, second):
            assert process.pid is not None
            if process.is_alive():
                os.kill(process.pid, signal.SIGKILL)
            process.join()


def test_what_killed_writers_left_is_removed_by_the_next_and_nothing_else(library_path: Path) -> None:
    with open_library(library_path) as library:
        index_path = cache_paths(library, WEIGHTING)[0]
        mark = f".{index_path.name}."
        old, fresh, foreign = mark + "0123456789ab", mark + "ba9876543210", mark + "not-of-ours"
        for name in (old, fresh, foreign):
            index_path.with_name(name).write_bytes(b"half an index")
        long_ago = time.time() - 2 * cache.LEFT_BEHIND_S
        for name in (old, foreign):
            os.utime(index_path.with_name(name), (long_ago, long_ago))
        load_index(library, WEIGHTING)
    left = {path.name for path in index_path.parent.iterdir()}
    assert index_path.name in left
    assert {fresh, foreign} <= left
    assert old not in left


def test_an_entry_that_comes_while_the_index_is_built_is_not_lost(
    library_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    move(library_path, 1, EntryStatus.QUARANTINED)

    def build_slowly(*arguments: object) -> SearchIndex:
        index = build_index(*arguments)  # type: ignore[arg-type]
        move(library_path, 1, EntryStatus.REFERENCE)
        return index

    with monkeypatch.context() as patched, open_library(library_path) as library:
        patched.setattr(cache, "build_index", build_slowly)
        load_index(library, WEIGHTING)
    with open_library(library_path) as library:
        assert load_index(library, WEIGHTING).n_entries == 5
        assert scores(load_index(library, WEIGHTING)) == scores(build_index(library.iter_peaks(), WEIGHTING))


def test_an_entry_that_comes_while_segments_are_merged_is_not_lost(
    library_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    for entry_id in (1, 2):
        move(library_path, entry_id, EntryStatus.QUARANTINED)
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
    move(library_path, 1, EntryStatus.REFERENCE)
    monkeypatch.setattr(cache, "MERGE_AT", 1)
    merge = cache.merge_index

    def merge_slowly(index: SearchIndex) -> SearchIndex:
        move(library_path, 2, EntryStatus.REFERENCE)
        return merge(index)

    with monkeypatch.context() as patched, open_library(library_path) as library:
        patched.setattr(cache, "merge_index", merge_slowly)
        load_index(library, WEIGHTING)
    with open_library(library_path) as library:
        assert scores(load_index(library, WEIGHTING)) == scores(build_index(library.iter_peaks(), WEIGHTING))
