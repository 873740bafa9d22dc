"""Shards answer as one index does: here, on a cluster, and on a cluster that loses a worker."""

from __future__ import annotations

import json
import os
import signal
import warnings
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from identify.errors import IndexDamaged, UsageError
from identify.index import build_index, search_index
from identify.library import shards as shards_module
from identify.library.shards import LIST_NAME, open_shards, search_on_cluster, search_shards, write_shards
from identify.records import CleanSpectrum, Hit, Peaks
from identify.settings import Weighting

WEIGHTING = Weighting()
K = 9


def spectra(n: int, seed: int) -> list[CleanSpectrum]:
    rng = np.random.default_rng(seed)
    made = []
    for _ in range(n):
        mz = np.sort(rng.choice(np.arange(30, 90), 12, replace=False))
        made.append(CleanSpectrum(Peaks(mz, rng.random(12) + 0.01), None, int(rng.integers(20, mz[0] + 1))))
    return made


LIBRARY = [(i, s.nominal, s.lowest_mz) for i, s in enumerate(spectra(700, 1))]
QUERIES = spectra(150, 2)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = tmp_path_factory.mktemp("predicted")
    write_shards(made, iter(LIBRARY), WEIGHTING, entries_per_shard=150)
    return made


@pytest.fixture(scope="module")
def expected() -> list[tuple[Hit, ...]]:
    whole = build_index(LIBRARY, WEIGHTING)
    return [search_index(whole, query, K) for query in QUERIES]


def test_shards_answer_as_one_index(folder: Path, expected: list[tuple[Hit, ...]]) -> None:
    shards = open_shards(folder)
    assert [shard.n_entries for shard in shards] == [150, 150, 150, 150, 100]
    assert list(search_shards(shards, iter(QUERIES), K)) == expected
    assert list(search_shards(shards, [], K)) == []


def test_queries_are_read_a_task_at_a_time(folder: Path) -> None:
    n_read = 0

    def counted() -> Iterator[CleanSpectrum]:
        nonlocal n_read
        for query in QUERIES:
            n_read += 1
            yield query

    next(search_shards(open_shards(folder), counted(), K))
    assert n_read == shards_module.QUERIES_PER_TASK


def test_a_folder_that_holds_shards_is_not_written_over(folder: Path) -> None:
    with pytest.raises(UsageError, match=r"folder of shards in .*: found shards\.json"):
        write_shards(folder, LIBRARY, WEIGHTING)
    with pytest.raises(UsageError, match="entries per shard: found 0"):
        write_shards(folder, LIBRARY, WEIGHTING, entries_per_shard=0)


def test_an_interrupted_writing_is_no_folder_of_shards(tmp_path: Path) -> None:
    def dies() -> Iterator[tuple[int, Peaks, int]]:
        yield from LIBRARY[:20]
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_shards(tmp_path, dies(), WEIGHTING, entries_per_shard=10)
    with pytest.raises(IndexDamaged, match="list of shards"):
        open_shards(tmp_path)


def test_damaged_missing_and_foreign_shards_are_refused(tmp_path: Path) -> None:
    one, other = tmp_path / "one", tmp_path / "other"
    shards = write_shards(one, LIBRARY[:40], WEIGHTING, entries_per_shard=20)
    write_shards(other, LIBRARY[40:80], WEIGHTING, entries_per_shard=20)
    whole = shards[1].path.read_bytes()
    for content in (whole[:-64], (other / shards[1].path.name).read_bytes()):
        shards[1].path.write_bytes(content)
        with pytest.raises(IndexDamaged):
            list(search_shards(open_shards(one), QUERIES[:1], K))
    shards[1].path.unlink()
    with pytest.raises(IndexDamaged, match="found no file"):
        open_shards(one)


@pytest.mark.parametrize(
    "change",
    [
        lambda listed: listed.update(format=99),
        lambda listed: listed.pop("token"),
        lambda listed: listed.update(shards=[["a"]]),
        lambda listed: listed.update(weighting=["x", 1]),
        lambda listed: listed.update(shards=7),
        lambda listed: listed.update(weighting=[10**400, 1]),
    ],
)
def test_a_list_that_makes_no_sense_is_refused(tmp_path: Path, change: Any) -> None:
    write_shards(tmp_path, LIBRARY[:5], WEIGHTING)
    listed = json.loads((tmp_path / LIST_NAME).read_text())
    change(listed)
    (tmp_path / LIST_NAME).write_text(json.dumps(listed))
    with pytest.raises(IndexDamaged, match="list of shards"):
        open_shards(tmp_path)


def test_a_list_cannot_lead_out_of_its_folder(tmp_path: Path) -> None:
    write_shards(tmp_path / "in", LIBRARY[:5], WEIGHTING)
    listed = json.loads((tmp_path / "in" / LIST_NAME).read_text())
    listed["shards"][0][0] = "../elsewhere.index"
    (tmp_path / "elsewhere.index").write_bytes(b"")
    (tmp_path / "in" / LIST_NAME).write_text(json.dumps(listed))
    with pytest.raises(IndexDamaged, match="found no file"):
        open_shards(tmp_path / "in")


@pytest.fixture
def client(tmp_path: Path) -> Iterator[Any]:
    distributed = pytest.importorskip("dask.distributed", reason="needs the optional extra 'cluster'")
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of the cluster's own shutting down
        cluster = distributed.LocalCluster(
            n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None, local_directory=str(tmp_path)
        )
        with cluster, distributed.Client(cluster) as connected:
            yield connected


@pytest.mark.slow
def test_a_cluster_answers_as_one_index_even_when_a_worker_is_killed(
    client: Any, folder: Path, expected: list[tuple[Hit, ...]]
) -> None:
    shards = open_shards(folder)
    assert list(search_on_cluster(client, shards, iter(QUERIES), K)) == expected
    workers = client.run(os.getpid)
    assert len(set(workers.values())) == 2
    results = search_on_cluster(client, shards, iter(QUERIES * 3), K)
    found = [next(results)]
    victim = sorted(workers)[0]  # home of the first shard: some of its tasks are under way
    os.kill(workers[victim], signal.SIGKILL)
    found += list(results)
    assert found == expected * 3
    assert workers[victim] not in client.run(os.getpid).values()
