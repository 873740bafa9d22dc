"""A segment survives storage, and arrays that do not fit each other are refused, never followed."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from identify.errors import IndexDamaged
from identify.index import SearchIndex, search_index
from identify.index.build import build_segment
from identify.index.query import weigh_query
from identify.index.scan_compiled import scan as scan_compiled
from identify.index.segment import BLOCK_ENTRIES, Segment, segment_from_arrays
from identify.records import CleanSpectrum, Peaks
from identify.settings import Weighting

WEIGHTING = Weighting()
QUERY = CleanSpectrum(Peaks([43, 58, 71], [100.0, 30.0, 12.0]), None, 40)


def build(n_entries: int = 900) -> Segment:
    rng = np.random.default_rng(3)
    rows = []
    for entry_id in range(n_entries):
        mz = np.sort(rng.choice(np.arange(40, 90), 6, replace=False))
        mz[0] = 43  # in every entry: a dense column
        rows.append((entry_id, Peaks(np.unique(mz), rng.random(np.unique(mz).size) + 0.01), 40))
    return build_segment(rows, WEIGHTING)


def test_arrays_come_back_as_they_were_and_answer_the_same() -> None:
    segment = build()
    stored = {name: np.frombuffer(array.tobytes(), dtype=array.dtype) for name, array in segment.to_arrays().items()}
    back = segment_from_arrays(stored)
    assert search_index(SearchIndex(WEIGHTING, (back,)), QUERY, 20) == search_index(
        SearchIndex(WEIGHTING, (segment,)), QUERY, 20
    )
    assert all(back.to_arrays()[name] is array for name, array in stored.items()), "stored arrays are not copied"
    assert back.weighting == WEIGHTING


def test_rows_lie_in_order_of_their_highest_mz() -> None:
    segment = build()
    highest = segment.mz[segment.row_start[1:] - 1]
    assert (np.diff(highest.astype(int)) >= 0).all()
    assert segment.highest_mz == highest[-1]


def test_codes_are_the_weights_on_a_scale_of_255() -> None:
    segment = build_segment([(1, Peaks([43, 58, 71], [100.0, 50.0, 0.0001]), 40)], Weighting(0.0, 1.0))
    assert segment.posting_code.tolist() == [255, 128, 1]
    assert segment.code_square[0] == 255**2 + 128**2 + 1
    # The errors are 127.5 - 128 and 0.000255 - 1.
    assert segment.code_error[0] == pytest.approx(np.hypot(0.5, 0.999745), abs=1e-5)
    assert segment.code_error[0] >= np.hypot(0.5, 0.999745)


def damaged(segment: Segment, name: str, change: Any) -> dict[str, np.ndarray]:
    arrays = {key: array.copy() for key, array in segment.to_arrays().items()}
    arrays[name] = change(arrays[name])
    return arrays


def put(position: int, value: float) -> Any:
    def change(array: np.ndarray) -> np.ndarray:
        array[position] = value
        return array

    return change


@pytest.mark.parametrize(
    ("name", "change"),
    [
        ("layout", put(0, 99)),
        ("layout", put(1, BLOCK_ENTRIES * 2)),
        ("layout", lambda a: a[:2]),
        ("ids", lambda a: a[:-1]),
        ("ids", lambda a: a.astype(np.int32)),
        ("ids", lambda a: a.reshape(-1, 1)),
        ("lowest_mz", lambda a: a[:-1]),
        ("row_start", put(1, -5)),
        ("row_start", put(-1, 10**12)),
        ("row_start", put(3, 10**6)),
        ("mz", lambda a: a[:-1]),
        ("weight", lambda a: a[:-3]),
        ("code_square", lambda a: a[:-1]),
        ("code_error", lambda a: a[1:]),
        ("block_start", lambda a: np.append(a, a[-1])),
        ("block_start", put(-1, 5)),
        ("column_mz", lambda a: a[:-1]),
        ("column_at", put(0, -1)),
        ("column_at", put(0, 10**9)),
        ("column_at", put(-1, 10**9)),
        ("column_count", put(-1, 2**30)),
        ("column_count", put(-1, -4)),
        ("dense", lambda a: a[:-1]),
        ("posting_code", lambda a: a[:-1]),
    ],
)
def test_arrays_that_do_not_fit_are_refused(name: str, change: Any) -> None:
    segment = build()
    assert (segment.column_count == 0).any()
    assert (segment.column_count > 0).any()
    with pytest.raises(IndexDamaged):
        segment_from_arrays(damaged(segment, name, change))


@pytest.mark.parametrize("name", sorted(build(3).to_arrays()))
def test_a_missing_array_is_refused(name: str) -> None:
    arrays = build(3).to_arrays()
    del arrays[name]
    with pytest.raises(IndexDamaged, match=f"found {name}: nothing"):
        segment_from_arrays(arrays)


def test_changed_content_stays_inside_the_arrays() -> None:
    # Content is guarded by a checksum elsewhere; here it only must not lead outside (rows of postings are two bytes).
    segment = build()
    arrays = damaged(segment, "posting_row", lambda a: np.full_like(a, 65535))
    arrays["mz"][:] = 65535
    odd = segment_from_arrays(arrays)
    query = weigh_query(QUERY, WEIGHTING)
    assert scan_compiled(odd, query, 5, None).max(initial=0) < odd.n_entries
    search_index(SearchIndex(WEIGHTING, (odd,)), QUERY, 5)
