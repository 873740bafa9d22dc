"""Many queries on all cores: worker processes with their own open libraries, results in the order of the queries.

Each worker opens the libraries once (the index is memory-mapped, so they share its pages) and takes small groups of records;
at most a few groups are under way, so that memory stays bounded whatever the number of queries.
"""

from __future__ import annotations

import gc
import os
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import Future, ProcessPoolExecutor
from contextlib import ExitStack
from dataclasses import replace
from itertools import chain, islice
from multiprocessing import get_context
from pathlib import Path
from typing import TypeVar

from identify.pipeline.search import (
    Progress,
    SearchableLibrary,
    identify_records,
    open_libraries,
)
from identify.records import Identification, Rejection, SpectrumRecord
from identify.settings import Settings

Shape = TypeVar("Shape")
WORTH_WORKERS = 60
"""From this many queries on, starting workers (about a second each) pays."""
WORTH_MACHINE_CODE = 400
"""From this many queries on, loading the machine code of the search in each worker pays for a small library too."""
GROUP = 12
GROUPS_UNDER_WAY = 3
"""Per worker: enough to keep it busy, few enough to bound memory."""
MAX_WORKERS = 16


def identify_many(
    records: Iterable[SpectrumRecord],
    libraries: Sequence[SearchableLibrary],
    settings: Settings,
    rejected: list[Rejection],
    progress: Progress | None = None,
    *,
    as_of: Sequence[int | str] = (),
) -> Iterator[Identification]:
    """Identifications in the order of the records, from this process for a few and from workers for many.

    All parameters are those of `map_identifications`.

    Yields
    ------
    Identification
    """
    return map_identifications(_whole, records, libraries, settings, rejected, progress, as_of=as_of)


def _whole(found: Identification) -> Identification:
    return found


def map_identifications(
    shape: Callable[[Identification], Shape],
    records: Iterable[SpectrumRecord],
    libraries: Sequence[SearchableLibrary],
    settings: Settings,
    rejected: list[Rejection],
    progress: Progress | None = None,
    *,
    as_of: Sequence[int | str] = (),
) -> Iterator[Shape]:
    """What `shape` makes of each identification, in the order of the records.

    Workers apply `shape` themselves: an identification is ten times as large as most of what is wanted of it.

    Parameters
    ----------
    shape : callable
        A function of a module, or a partial of one: it goes to other processes.
    records : iterable of SpectrumRecord
        Consumed as results are taken.
    libraries : sequence of SearchableLibrary
    settings : Settings
    rejected : list of Rejection
        Grows by what is left out.
    progress : callable, optional
    as_of : sequence of int or str
        The events the libraries were opened at, for the workers to do the same.

    Yields
    ------
    Shape
        The same, bit for bit, whatever the number of workers.
    """
    remaining = iter(records)
    first = list(islice(remaining, WORTH_MACHINE_CODE))
    workers = min(MAX_WORKERS, len(os.sched_getaffinity(0)))
    everything = chain(first, remaining)
    if len(first) < WORTH_WORKERS or workers < 2:
        yield from map(shape, identify_records(everything, libraries, settings, rejected, progress))
        return
    paths = [Path(searchable.state.path) for searchable in libraries]
    opened = (paths, settings, as_of, len(first) >= WORTH_MACHINE_CODE)
    # Not forked: a lock that a thread of this process holds just then (progress, workbench) would stay shut in the worker.
    with ProcessPoolExecutor(workers, get_context("spawn"), _open_in_worker, opened) as pool:
        under_way: deque[Future[tuple[list[Shape], list[Rejection]]]] = deque()
        done = 0
        for start, group in _groups(everything):
            under_way.append(pool.submit(_identify_group, shape, start, group))
            if len(under_way) >= workers * GROUPS_UNDER_WAY:
                done += GROUP
                yield from _take(under_way.popleft(), rejected, progress, done)
        while under_way:
            done += GROUP
            yield from _take(under_way.popleft(), rejected, progress, done)


def _groups(records: Iterator[SpectrumRecord]) -> Iterator[tuple[int, list[SpectrumRecord]]]:
    start = 1
    while group := list(islice(records, GROUP)):
        yield start, group
        start += len(group)


def _take(
    future: Future[tuple[list[Shape], list[Rejection]]],
    rejected: list[Rejection],
    progress: Progress | None,
    done: int,
) -> Iterator[Shape]:
    found, left_out = future.result()
    rejected.extend(left_out)
    if progress:
        progress(done, "")
    yield from found


class _Worker:
    """What a worker process keeps open between groups."""

    stack = ExitStack()
    """Holds the libraries open until the process ends."""
    libraries: tuple[SearchableLibrary, ...] = ()
    settings: Settings = Settings()


def _open_in_worker(paths: list[Path], settings: Settings, as_of: Sequence[int | str], is_busy: bool) -> None:
    libraries = _Worker.stack.enter_context(open_libraries(paths, settings, as_of))
    _Worker.libraries = tuple(replace(searchable, is_busy=is_busy) for searchable in libraries)
    _Worker.settings = settings
    # A result is a tree of thousands of small records without cycles; looking for cycles after every 700 of them, and again and
    # again through all entries kept, costs a worker 5 to 10 % of its time.
    gc.freeze()
    gc.set_threshold(100_000, 20, 20)


def _identify_group(
    shape: Callable[[Identification], Shape], start: int, records: list[SpectrumRecord]
) -> tuple[list[Shape], list[Rejection]]:
    rejected: list[Rejection] = []
    found = identify_records(records, _Worker.libraries, _Worker.settings, rejected, first=start)
    return [shape(item) for item in found], rejected
