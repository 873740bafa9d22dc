"""Libraries too big for one index: shard files that the same code searches, on this machine or on a cluster.

For predicted libraries of 10^7 to 10^8 spectra. A shard is an index file of `identify.library.cache`; a folder of them has a
list that is written last, so a half-written folder is never taken for a whole one::

    predicted/
      shard-00000.index      1,000,000 entries     (about 510 MB at 53 peaks an entry)
      shard-00001.index      1,000,000 entries
      …
      shards.json            names, number of entries, weighting, the token that every shard carries

The best k of the whole are among the best k of the shards, so the union is exact: the same hits, bit for bit, as one index
would give. One core does about 10 ms per query and million entries; shards and queries share the work over cores.

On a cluster (``pip install 'ionwitness[cluster]'``) every worker must see the folder under the same path::

    from dask.distributed import Client
    from identify.library.shards import open_shards, search_on_cluster

    shards = open_shards(Path("/data/predicted"))
    with Client("tcp://scheduler:8786") as client:          # or Client(n_workers=2) on one machine
        for hits in search_on_cluster(client, shards, spectra, k=100):
            ...

Each shard has a home worker, which keeps it open; when a worker dies, its tasks run elsewhere with the same result. A dask
cluster runs whatever its clients send: use it inside a trusted network only.
"""

from __future__ import annotations

import json
import os
import secrets
from collections import deque
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import islice
from pathlib import Path
from typing import Any

from identify.errors import IndexDamaged, UsageError
from identify.index import SearchIndex, build_index, search_index, search_many
from identify.index.build import Row
from identify.index.union import unite_parts
from identify.library.cache import read_index, write_index
from identify.records import CleanSpectrum, Hit
from identify.settings import Weighting

LIST_NAME = "shards.json"
FORMAT = 1
QUERIES_PER_TASK = 64
"""Queries that visit a shard together: opening it and starting a task cost nothing beside their work."""
MAX_OPEN_SHARDS = 256
_MAX_LIST_BYTES = 2**24


@dataclass(frozen=True, slots=True)
class Shard:
    """One shard file.

    Attributes
    ----------
    path : Path
    n_entries : int
    token : str
        What the file itself must carry: shards of another library are refused.
    weighting : Weighting
    """

    path: Path
    n_entries: int
    token: str
    weighting: Weighting


def write_shards(
    folder: Path, rows: Iterable[Row], weighting: Weighting, *, entries_per_shard: int = 1_000_000
) -> tuple[Shard, ...]:
    """Shards written from a stream of entries; memory holds one shard at a time.

    Parameters
    ----------
    folder : Path
        Created if missing; must not hold a list of shards yet.
    rows : iterable of (entry id, Peaks, lowest m/z)
        Entry ids are distinct over the whole stream.
    weighting : Weighting
    entries_per_shard : int
        ≥ 1.

    Returns
    -------
    tuple of Shard

    Raises
    ------
    UsageError
        If the folder holds shards already, or `entries_per_shard` is below 1.
    SpectrumError
        For rows that cannot be indexed.
    OSError
        If a file cannot be written.
    """
    if entries_per_shard < 1:
        raise UsageError("entries per shard", found=str(entries_per_shard), expected="at least 1")
    folder.mkdir(parents=True, exist_ok=True)
    if (folder / LIST_NAME).exists():
        raise UsageError("folder of shards", where=str(folder), found=LIST_NAME, expected="a folder without shards")
    token = secrets.token_hex(16)
    shards: list[Shard] = []
    stream = iter(rows)
    while chunk := list(islice(stream, entries_per_shard)):
        path = folder / f"shard-{len(shards):05d}.index"
        write_index(path, build_index(chunk, weighting), token, path.name)
        shards.append(Shard(path, len(chunk), token, weighting))
    listed = {
        "format": FORMAT,
        "token": token,
        "weighting": [weighting.mz_power, weighting.intensity_power],
        "shards": [[shard.path.name, shard.n_entries] for shard in shards],
    }
    temporary = folder / f".{LIST_NAME}.{token}"
    with temporary.open("w", encoding="utf-8") as stream_out:
        json.dump(listed, stream_out)
        stream_out.flush()
        os.fsync(stream_out.fileno())
    temporary.replace(folder / LIST_NAME)
    return tuple(shards)


def open_shards(folder: Path) -> tuple[Shard, ...]:
    """Shards of a folder, not yet opened.

    Parameters
    ----------
    folder : Path

    Returns
    -------
    tuple of Shard

    Raises
    ------
    IndexDamaged
        If there is no list, it cannot be read, or a file it names is missing.
    """
    path = folder / LIST_NAME
    try:
        with path.open("rb") as stream:
            version, shards = _parse_list(json.loads(stream.read(_MAX_LIST_BYTES)), folder)
    except (OSError, ValueError, KeyError, TypeError, OverflowError, RecursionError, UsageError) as error:
        raise IndexDamaged("list of shards", where=str(path), found=str(error), expected="a whole list") from None
    if version != FORMAT:
        raise IndexDamaged("list of shards", where=str(path), found=f"format {version}", expected=f"format {FORMAT}")
    for shard in shards:
        if not shard.path.is_file():
            raise IndexDamaged("shard", where=str(shard.path), found="no file", expected="the file the list names")
    return shards


def _parse_list(listed: Any, folder: Path) -> tuple[int, tuple[Shard, ...]]:
    weighting = Weighting(*map(float, listed["weighting"]))
    token = str(listed["token"])
    # The name alone: a list cannot lead out of its folder.
    shards = (Shard(folder / Path(str(name)).name, int(n), token, weighting) for name, n in listed["shards"])
    return int(listed["format"]), tuple(shards)


def search_shards(
    shards: Sequence[Shard], spectra: Iterable[CleanSpectrum], k: int, n_threads: int = 2
) -> Iterator[tuple[Hit, ...]]:
    """Hits of each spectrum over all shards, in order, on this machine.

    Parameters
    ----------
    shards : sequence of Shard
    spectra : iterable of CleanSpectrum
        Read `QUERIES_PER_TASK` at a time.
    k : int
        How many by each score, ≥ 1.
    n_threads : int
        Threads, ≥ 1.

    Yields
    ------
    tuple of Hit
        What one index of all entries would give.

    Raises
    ------
    IndexDamaged
        If a shard cannot be used.
    UsageError
        If `k` or `n_threads` is below 1.
    """
    stream = iter(spectra)
    while queries := list(islice(stream, QUERIES_PER_TASK)):
        found = [list(search_many(_open(shard), queries, k, n_threads)) for shard in shards]
        yield from (unite_parts(parts, k) for parts in zip(*found, strict=True))


def search_on_cluster(
    client: Any, shards: Sequence[Shard], spectra: Iterable[CleanSpectrum], k: int
) -> Iterator[tuple[Hit, ...]]:
    """Hits of each spectrum over all shards, in order, worked out on a dask cluster.

    Parameters
    ----------
    client : dask.distributed.Client
        Its workers see the shard files under the same paths.
    shards : sequence of Shard
    spectra : iterable of CleanSpectrum
        At most four times `QUERIES_PER_TASK` are under way at once.
    k : int
        How many by each score, ≥ 1.

    Yields
    ------
    tuple of Hit
        What one index of all entries would give, whichever workers did the work.

    Raises
    ------
    IndexDamaged
        If a worker cannot use a shard.
    UsageError
        If `k` is below 1.
    """
    stream = iter(spectra)
    under_way: deque[list[Any]] = deque()
    try:
        while True:
            while len(under_way) < 4 and (queries := tuple(islice(stream, QUERIES_PER_TASK))):
                under_way.append(_submit(client, shards, queries, k))
            if not under_way:
                return
            found = client.gather(under_way[0])
            under_way.popleft()
            yield from (unite_parts(parts, k) for parts in zip(*found, strict=True))
    finally:
        for futures in under_way:
            client.cancel(futures)


def _submit(client: Any, shards: Sequence[Shard], queries: tuple[CleanSpectrum, ...], k: int) -> list[Any]:
    """One task per shard, at home where the shard is open already; any worker may take it over."""
    workers = sorted(client.scheduler_info(n_workers=-1)["workers"])
    return [
        client.submit(
            _search_shard, shard, queries, k, pure=False, allow_other_workers=True,
            workers=[workers[place % len(workers)]] if workers else None,
        )
        for place, shard in enumerate(shards)
    ]  # fmt: skip


def _search_shard(shard: Shard, queries: tuple[CleanSpectrum, ...], k: int) -> list[tuple[Hit, ...]]:
    index = _open(shard)
    return [search_index(index, query, k) for query in queries]


@lru_cache(maxsize=MAX_OPEN_SHARDS)
def _open(shard: Shard) -> SearchIndex:
    """Memory-mapped index of a shard; kept, because checking its sums reads the file once."""
    index, _ = read_index(shard.path, shard.token, shard.weighting)
    if index.n_entries != shard.n_entries:
        raise IndexDamaged(
            "shard", where=str(shard.path), found=f"{index.n_entries} entries", expected=f"{shard.n_entries}"
        )
    return index
