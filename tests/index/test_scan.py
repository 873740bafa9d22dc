"""The scan of the codes never loses an entry that belongs to the best, and its intervals hold the exact scores."""

from __future__ import annotations

import numpy as np
import pytest

from identify.index import scan
from identify.index.build import FlatRows, lay_out
from identify.index.exact import score_rows
from identify.index.query import WeighedQuery, weigh_query
from identify.index.scan_compiled import scan as scan_compiled
from identify.index.segment import Segment
from identify.records import CleanSpectrum, Peaks
from identify.settings import Weighting

WEIGHTING = Weighting()


def segment_of(spectra: list[tuple[np.ndarray, np.ndarray, int]]) -> Segment:
    """Segment of invented ``(m/z, weights, lowest m/z)`` rows."""
    starts = np.cumsum([0, *(mz.size for mz, _, _ in spectra)]).astype(np.int64)
    weight = np.concatenate([w / np.sqrt(np.sum(w * w)) for _, w, _ in spectra]).astype(np.float32)
    return lay_out(
        FlatRows(
            np.arange(1, len(spectra) + 1),
            np.array([lowest for _, _, lowest in spectra], dtype=np.uint16),
            starts,
            np.concatenate([mz for mz, _, _ in spectra]).astype(np.uint16),
            weight,
        ),
        WEIGHTING,
    )


def random_row(rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray, int]:
    lowest = int(rng.integers(10, 60))
    axis = np.arange(lowest, lowest + int(rng.integers(20, 250)))
    # Low m/z are crowded (dense columns), high ones rare (postings), as in real libraries.
    mz = axis[rng.random(axis.size) < np.clip(12 / axis, 0.02, 0.5)]
    mz = mz if mz.size else axis[:1]
    return mz, np.exp(rng.normal(0, 2.0, mz.size)), lowest


def near_duplicate(rng: np.random.Generator, spread: float) -> tuple[np.ndarray, np.ndarray, int]:
    base = np.random.default_rng(99)
    mz = np.sort(base.choice(np.arange(30, 200), 40, replace=False))
    return mz, np.exp(base.normal(0, 1.5, 40)) * np.exp(rng.normal(0, spread, 40)), 30


def build(kind: str, n_rows: int = 9000) -> Segment:
    rng = np.random.default_rng(7)
    if kind == "mixed":
        return segment_of([random_row(rng) for _ in range(n_rows)])
    spread = {"near duplicates": 0.01, "all but equal": 1e-4}[kind]
    return segment_of([near_duplicate(rng, spread) for _ in range(n_rows)])


def queries(segment: Segment) -> list[WeighedQuery]:
    """Entries of the segment with noise; some cut at a high lower limit, where tails are short."""
    rng = np.random.default_rng(11)
    made = []
    for row in rng.integers(0, segment.n_entries, 12):
        part = slice(segment.row_start[row], segment.row_start[row + 1])
        mz = segment.mz[part].astype(np.float64)
        peaks = Peaks(mz, segment.weight[part] * np.exp(rng.normal(0, 0.3, mz.size)))
        lowest = int(min(rng.choice([mz[0], 45, 90, 130]), mz[-1]))
        made.append(weigh_query(CleanSpectrum(peaks, None, lowest), WEIGHTING))
    return made


@pytest.fixture(scope="module", params=["mixed", "near duplicates", "all but equal"])
def segment(request: pytest.FixtureRequest) -> Segment:
    return build(request.param)


def true_best(segment: Segment, query: WeighedQuery, k: int, seen: np.ndarray) -> set[int]:
    """Every row that scores at least the k-th best value by either score."""
    rows = np.flatnonzero(seen)
    best: set[int] = set()
    for score in score_rows(segment, query, rows):
        floor = np.sort(score)[-k]
        best |= set(rows[(score >= floor) & (score > 0)].tolist())
    return best


def test_the_segment_has_dense_columns_and_postings() -> None:
    counts = build("mixed").column_count
    assert (counts == 0).any()
    assert (counts > 0).any()


@pytest.mark.parametrize("k", [1, 10, 300])
def test_candidates_contain_the_true_best(segment: Segment, k: int) -> None:
    hidden = np.zeros(segment.n_entries, dtype=np.bool_)
    hidden[::5] = True
    for query in queries(segment):
        expected = true_best(segment, query, k, ~hidden)
        for find in (scan._scan_arrays, scan_compiled):
            rows = find(segment, query, k, hidden)
            assert expected <= set(rows.tolist()), find
            assert not hidden[rows].any()
            assert (np.diff(rows) > 0).all()


def test_candidates_are_few_where_entries_differ() -> None:
    # Not needed for exactness; but a bound that excludes nothing would make every search a full rescoring.
    mixed = build("mixed")
    for query in queries(mixed):
        if query.lowest_mz < 90:
            assert scan_compiled(mixed, query, 10, None).size < 900


def test_intervals_hold_the_exact_scores(segment: Segment) -> None:
    for query in queries(segment):
        rows, *approximate, slack = scan.bound_scores(segment, query)
        everything = np.arange(segment.n_entries)
        exact = score_rows(segment, query, everything)
        untouched = np.setdiff1d(everything, rows)
        for score, true in zip(approximate, exact, strict=True):
            assert (true[untouched] == 0).all()
            known = score < scan.UNDECIDED
            assert (np.abs(score - true[rows])[known] <= slack[known]).all()
            # The bound is not vacuous: somewhere the error uses more than a thousandth of it.
            assert np.max(np.abs(score - true[rows])[known] / slack[known]) > 1e-3


def test_both_scans_give_the_same_sums(segment: Segment) -> None:
    for query in queries(segment):
        some = scan._scan_arrays(segment, query, 20, None)
        others = scan_compiled(segment, query, 20, None)
        # Float32 sums in another order may judge an entry on the edge differently; never more than a few.
        assert np.setxor1d(some, others).size <= 3 + 0.01 * some.size


def test_the_library_size_chooses_the_scan(monkeypatch: pytest.MonkeyPatch) -> None:
    small = build("mixed", 50)
    query = queries(small)[0]

    def refuse(*_: object) -> None:
        raise AssertionError("the numpy pass was used")

    monkeypatch.setattr(scan, "_scan_arrays", refuse)
    with pytest.raises(AssertionError, match="numpy pass"):
        scan.find_candidates(small, query, 3)
    monkeypatch.setattr(scan, "COMPILED_FROM_ENTRIES", 50)
    assert scan.find_candidates(small, query, 3).size >= 1
