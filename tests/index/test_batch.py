"""A batch answers as single searches do, in order, reading only a little ahead."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest

from identify.errors import SpectrumError, UsageError
from identify.index import build_index, scan, search_index, search_many
from identify.index.search import SearchIndex
from identify.records import CleanSpectrum, Peaks
from identify.settings import Weighting


def spectra(n: int, seed: int) -> list[CleanSpectrum]:
    rng = np.random.default_rng(seed)
    made = []
    for _ in range(n):
        mz = np.sort(rng.choice(np.arange(30, 120), 15, replace=False))
        made.append(CleanSpectrum(Peaks(mz, rng.random(15) + 0.01), None, int(rng.integers(20, mz[0] + 1))))
    return made


@pytest.fixture(scope="module")
def index() -> SearchIndex:
    return build_index(((i, s.nominal, s.lowest_mz) for i, s in enumerate(spectra(400, 1))), Weighting())


@pytest.mark.parametrize("n_threads", [1, 2, 5])
@pytest.mark.parametrize("compiled_from", [0, 10**9], ids=["compiled", "numpy"])
def test_a_batch_answers_as_single_searches_do(
    index: SearchIndex, n_threads: int, compiled_from: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(scan, "COMPILED_FROM_ENTRIES", compiled_from)
    queries = spectra(40, 2)
    assert list(search_many(index, queries, 7, n_threads)) == [search_index(index, query, 7) for query in queries]
    assert list(search_many(index, [], 7, n_threads)) == []


def test_queries_are_read_only_a_little_ahead(index: SearchIndex) -> None:
    n_read = 0

    def endless() -> Iterator[CleanSpectrum]:
        nonlocal n_read
        while True:
            n_read += 1
            yield queries[n_read % len(queries)]

    queries = spectra(5, 3)
    results = search_many(index, endless(), 3, n_threads=2)
    for n_results in range(1, 30):
        next(results)
        assert n_read <= n_results + 8
    results.close()


def test_an_error_of_the_source_reaches_the_caller(index: SearchIndex) -> None:
    def broken() -> Iterator[CleanSpectrum]:
        yield from spectra(3, 4)
        raise SpectrumError("spectrum", found="nonsense")

    with pytest.raises(SpectrumError, match="nonsense"):
        list(search_many(index, broken(), 3))


@pytest.mark.parametrize(("k", "n_threads"), [(0, 2), (0, 1), (3, 0)])
def test_impossible_numbers_are_refused(index: SearchIndex, k: int, n_threads: int) -> None:
    with pytest.raises(UsageError):
        list(search_many(index, spectra(2, 5), k, n_threads))
