"""Many queries at once, on all cores."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from itertools import islice

from identify.errors import UsageError
from identify.index.search import SearchIndex, search_index
from identify.records import CleanSpectrum, Hit

WAITING_PER_THREAD = 4
"""Queries taken from the iterable before their turn: enough that no thread waits for the caller, and no more."""


def search_many(
    index: SearchIndex, spectra: Iterable[CleanSpectrum], k: int, n_threads: int = 2
) -> Iterator[tuple[Hit, ...]]:
    """Hits of each spectrum, in order, as soon as they are there.

    Parameters
    ----------
    index : SearchIndex
        The library.
    spectra : iterable of CleanSpectrum
        Any number; read a few ahead of the result in hand, so memory does not depend on how many there are. Counting the
        results as they come is the progress.
    k : int
        How many by each score, ≥ 1.
    n_threads : int
        Threads, ≥ 1. The scan and most array work run without the interpreter lock.

    Yields
    ------
    tuple of Hit
        What `search_index` gives for that spectrum, bit for bit.

    Raises
    ------
    UsageError
        If `k` or `n_threads` is below 1.
    """
    if n_threads < 1:
        raise UsageError("number of threads", found=str(n_threads), expected="at least 1")
    if n_threads == 1:
        yield from (search_index(index, spectrum, k) for spectrum in spectra)
        return
    waiting: deque[Future[tuple[Hit, ...]]] = deque()
    source = iter(spectra)
    with ThreadPoolExecutor(n_threads, thread_name_prefix="search") as pool:
        try:
            for spectrum in islice(source, n_threads * WAITING_PER_THREAD):
                waiting.append(pool.submit(search_index, index, spectrum, k))
            while waiting:
                hits = waiting.popleft().result()
                waiting.extend(pool.submit(search_index, index, spectrum, k) for spectrum in islice(source, 1))
                yield hits
        finally:
            for future in waiting:
                future.cancel()
