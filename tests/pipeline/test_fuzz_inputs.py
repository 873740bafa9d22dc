"""Settings, ladders, formulas, result files and library files that are not what they should be: our own errors, nothing else.

Coverage-guided runs of minutes are in `tests/benchmarks/fuzz.py`; these are the short ones of every day.
"""

from __future__ import annotations

import copy
import json
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.chem.formula import parse_formula
from identify.errors import IonwitnessError
from identify.library.build import build_from_records
from identify.library.starter import starter_records
from identify.library.store import open_library
from identify.library.verify import verify_library
from identify.pipeline.compare import compare_results, read_result
from identify.pipeline.files import search_pasted
from identify.retention import parse_ladder
from identify.settings import Settings, resolve
from identify.writers.results_json import report_to_dict
from tests.builders import at_most

quiet = settings(max_examples=60)
WORDS = st.sampled_from(
    ["top", "=", "25", "[cleaning]", "[weighting]", "mz_power", "nan", "inf", "-1", "1e999", "true", '"x"', "[", "]", "\n", ".",
     "noise_fraction", "claim_threshold", "'''",
     "{", "}", "C10", "8.00", "C", "H", "[13C]", "+", "2", "(", ")", "·", "D", "٣", "\0"]
)  # fmt: skip
TEXTS = st.one_of(
    st.text(max_size=60), st.lists(WORDS, max_size=14).map(" ".join), st.lists(WORDS, max_size=14).map("".join)
)


@pytest.mark.parametrize("take", [resolve, parse_ladder, parse_formula], ids=["settings", "ladder", "formula"])
@quiet
@given(text=TEXTS)
def test_any_text_is_taken_or_refused_in_words(take: Callable[[str], object], text: str) -> None:
    try:
        with at_most(seconds=2.0):
            take(text)
    except IonwitnessError as error:
        assert error.found and error.expected and len(error.message) < 1000


@pytest.fixture(scope="module")
def library(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("fuzz") / "small.ionlib"
    build_from_records(path, starter_records()[:6], origin="t", who="t", when=datetime(2026, 1, 5, tzinfo=UTC))
    return path


@pytest.fixture(scope="module")
def good(library: Path) -> dict[str, Any]:
    document = report_to_dict(search_pasted("43 100, 58 30, 15 20", [library], replace(Settings(), top=3)))
    return dict(json.loads(json.dumps(document)))


ODD = st.one_of(
    st.none(), st.booleans(), st.integers(-1, 3), st.floats(), st.text(max_size=5),
    st.sampled_from([10**400, 1e308, -0.0, "", "x", "\ud800", [], {}, [None], {"a": 1}]),
)  # fmt: skip


def places(value: Any) -> list[tuple[Any, Any]]:
    """Every container with each of its keys."""
    found = []
    keys = list(value) if isinstance(value, dict) else range(len(value)) if isinstance(value, list) else ()
    for key in keys:
        found += [(value, key), *places(value[key])]
    return found


@quiet
@given(data=st.data())
def test_a_result_with_odd_values_is_compared_or_refused_in_words(
    data: st.DataObject, good: dict[str, Any], tmp_path: Path
) -> None:
    document = copy.deepcopy(good)
    for _ in range(data.draw(st.integers(1, 3))):
        container, key = data.draw(st.sampled_from(places(document)))
        if data.draw(st.integers(0, 4)) == 0:
            del container[key]
        else:
            container[key] = copy.deepcopy(data.draw(ODD))
        if not places(document):
            break
    path = tmp_path / "odd.json"
    path.write_text(json.dumps(document), "utf-8")
    try:
        with at_most(seconds=2.0):
            found = compare_results(good, read_result(path), ("a", "b"))
        assert found.n_same >= 0
    except IonwitnessError as error:
        assert error.message and len(error.message) < 5000


@pytest.mark.parametrize(
    "value", [10**400, -(10**400), float("nan"), float("inf"), True, "1"], ids=lambda v: str(v)[:5]
)
def test_a_number_that_no_float_can_hold_is_refused_in_words(
    value: object, good: dict[str, Any], tmp_path: Path
) -> None:
    document = copy.deepcopy(good)
    document["queries"][0]["hits"][0]["probability"] = value
    path = tmp_path / "odd.json"
    path.write_text(json.dumps(document), "utf-8")
    with pytest.raises(IonwitnessError, match=r"probability.*expected a number"):
        compare_results(good, read_result(path), ("a", "b"))


@settings(quiet, max_examples=40)
@given(data=st.data())
def test_a_library_with_bytes_changed_is_read_or_refused_in_words(
    data: st.DataObject, library: Path, tmp_path: Path
) -> None:
    content = bytearray(library.read_bytes())
    for _ in range(data.draw(st.integers(1, 8))):
        content[data.draw(st.integers(0, len(content) - 1))] = data.draw(st.integers(0, 255))
    path = tmp_path / "odd.ionlib"
    for left in ("", "-wal", "-shm", "-journal"):
        path.with_name(path.name + left).unlink(missing_ok=True)
    path.write_bytes(bytes(content[: data.draw(st.sampled_from([len(content), len(content) // 2, 5000, 90]))]))
    for use in (verify_library, _read_all):
        try:
            with at_most(seconds=2.0):
                use(path)
        except IonwitnessError as error:
            assert error.message


def _read_all(path: Path) -> None:
    with open_library(path) as opened:
        opened.state()
        for _ in opened.iter_entries():
            pass
        opened.find_entries(name="a")
