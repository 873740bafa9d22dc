"""The index cache never changes an answer: stale, truncated, changed or foreign, it is rebuilt or brought up to date."""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from library_builders import TOLUENE, build_records, build_test_library, move

from identify.index import build_index, score_all
from identify.library import cache
from identify.library.cache import cache_paths, load_index, read_index
from identify.library.store import Library, open_library
from identify.records import CleanSpectrum, EntryStatus, Peaks
from identify.settings import Weighting

WEIGHTING = Weighting()
QUERY = CleanSpectrum(Peaks(np.array(list(TOLUENE)), np.array(list(TOLUENE.values()))), None, 30)


def scores(index):
    ids, cosine, reverse = score_all(index, QUERY)
    return ids.tolist(), cosine.tolist(), reverse.tolist()


def fresh(library: Library):
    return scores(build_index(library.iter_peaks(), WEIGHTING))


@pytest.fixture
def builds(monkeypatch: pytest.MonkeyPatch) -> list[int]:
    """Grows with every index built from scratch."""
    calls: list[int] = []

    def counted(rows, weighting):
        calls.append(1)
        return build_index(rows, weighting)

    monkeypatch.setattr(cache, "build_index", counted)
    return calls


def test_the_second_load_reads_the_file_and_answers_the_same(library_path: Path, builds: list[int]) -> None:
    with open_library(library_path) as library:
        first = load_index(library, WEIGHTING)
        second = load_index(library, WEIGHTING)
        assert len(builds) == 1
        assert scores(first) == scores(second) == fresh(library)
        assert not second.segments[0].mz.flags.writeable


@pytest.mark.parametrize("damage", ["truncate", "flip header", "flip array", "garbage", "empty", "append"])
def test_a_damaged_cache_is_rebuilt(library_path: Path, builds: list[int], damage: str) -> None:
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
        path = cache_paths(library, WEIGHTING)[0]
        data = bytearray(path.read_bytes())
        if damage == "truncate":
            data = data[:-20]
        elif damage == "flip header":
            data[40] ^= 1
        elif damage == "flip array":
            mapped, start = cache._read_header(memoryview(bytes(data)), path)
            arrays = {name: (kind, offset) for name, kind, _, offset, _ in mapped["segments"][0]}
            assert arrays["weight"][0] == "<f4"
            data[start + arrays["weight"][1] + 2] ^= 4
        elif damage == "garbage":
            data = bytearray(b"nonsense" * 50)
        elif damage == "empty":
            data = bytearray()
        else:
            data += b"x"
        path.write_bytes(data)
        assert scores(load_index(library, WEIGHTING)) == fresh(library)
        assert len(builds) == 2
        read_index(path, cache._library_id(library), WEIGHTING)


def test_withdrawn_and_added_entries_need_no_rebuild(library_path: Path, builds: list[int]) -> None:
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
        move(library_path, 1, EntryStatus.WITHDRAWN)
        index = load_index(library, WEIGHTING)
        assert scores(index) == fresh(library)
        assert index.n_entries == 4
        move(library_path, 1, EntryStatus.REFERENCE)
        assert load_index(library, WEIGHTING).n_entries == 5
    assert len(builds) == 1


def test_many_changes_are_merged_into_the_file(
    library_path: Path, builds: list[int], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(cache, "MERGE_AT", 1)
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
        move(library_path, 1, EntryStatus.WITHDRAWN)
        merged = load_index(library, WEIGHTING)
        assert scores(merged) == fresh(library)
        again, event = read_index(cache_paths(library, WEIGHTING)[0], cache._library_id(library), WEIGHTING)
        assert (len(again.segments), again.n_entries, event) == (1, 4, library.search_fingerprint)
    assert len(builds) == 1


def test_an_entry_missing_from_an_older_cache_is_found(library_path: Path, builds: list[int]) -> None:
    move(library_path, 1, EntryStatus.QUARANTINED)
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
        move(library_path, 1, EntryStatus.REFERENCE)
        index = load_index(library, WEIGHTING)
        assert len(index.segments) == 2
        assert scores(index) == fresh(library)
    assert len(builds) == 1


def test_as_of_uses_the_later_cache_and_answers_as_then(library_path: Path, builds: list[int]) -> None:
    with open_library(library_path) as library:
        then = fresh(library)
    move(library_path, 1, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
    with open_library(library_path, as_of=2) as library:
        assert scores(load_index(library, WEIGHTING)) == then
    assert len(builds) == 1


def test_another_library_s_cache_is_not_used(library_path: Path, tmp_path: Path, builds: list[int]) -> None:
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
        foreign = cache_paths(library, WEIGHTING)[0]
    other = tmp_path / "other.ionlib"
    build_test_library(other, build_records()[3:])
    with open_library(other) as library:
        shutil.copy(foreign, cache_paths(library, WEIGHTING)[0])
        assert scores(load_index(library, WEIGHTING)) == fresh(library)
    assert len(builds) == 2


def test_a_restored_backup_does_not_meet_the_cache_of_a_lost_future(library_path: Path, builds: list[int]) -> None:
    backup = library_path.read_bytes()
    move(library_path, 1, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        load_index(library, WEIGHTING)
    library_path.write_bytes(backup)
    with open_library(library_path) as library:
        assert scores(load_index(library, WEIGHTING)) == fresh(library)
    assert len(builds) == 2


def test_each_weighting_has_its_own_cache(library_path: Path, builds: list[int]) -> None:
    with open_library(library_path) as library:
        for weighting in (WEIGHTING, Weighting(0.0, 1.0), WEIGHTING, Weighting(0.0, 1.0)):
            assert load_index(library, weighting).weighting == weighting
    assert len(builds) == 2


def test_on_read_only_media_the_user_s_cache_folder_is_used(
    library_path: Path, tmp_path: Path, builds: list[int]
) -> None:
    point = tmp_path / "media"
    point.mkdir()
    mount = shutil.which("mount")
    if not mount or subprocess.run([mount, "-t", "tmpfs", "tmpfs", point], capture_output=True).returncode:
        pytest.skip("needs the right to mount a small file system")
    try:
        shutil.copy(library_path, point / "a.ionlib")
        subprocess.run([mount, "-o", "remount,ro", point], check=True)
        with open_library(point / "a.ionlib") as library:
            for _ in range(2):
                assert scores(load_index(library, WEIGHTING)) == fresh(library)
            assert cache_paths(library, WEIGHTING)[1].exists()
    finally:
        subprocess.run(["umount", point], check=True)
    assert len(builds) == 1
