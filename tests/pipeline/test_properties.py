"""What holds for every result: the same input gives the same output wherever it runs, and no statement exceeds its evidence."""

from __future__ import annotations

import json
import math
import os
import random
import subprocess
import sys
import zipfile
from collections.abc import Iterator
from dataclasses import replace
from datetime import UTC, datetime
from functools import cache
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.library.build import build_library
from identify.library.starter import build_starter, starter_records
from identify.pipeline.files import search_files, search_pasted
from identify.pipeline.search import SearchableLibrary, identify_records, open_libraries
from identify.ranking.claim import INDEPENDENT
from identify.records import Source, SpectrumRecord
from identify.settings import Settings
from identify.writers.results_json import load_schema, report_to_dict
from tests.builders import build_report

ROOT = Path(__file__).resolve().parents[2]
UNKNOWNS = sorted((ROOT / "fixtures" / "demo" / "unknowns").iterdir())
WHEN = datetime(2026, 1, 1, tzinfo=UTC)
ROUNDING = 2e-6
"""Numbers of a result are written with six decimals."""


@pytest.fixture(scope="module")
def library(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("properties") / "starter.ionlib"
    build_starter(path, "tester", WHEN)
    return path


@pytest.fixture(scope="module")
def opened(library: Path) -> Iterator[tuple[SearchableLibrary, ...]]:
    with open_libraries([library], Settings()) as libraries:
        yield libraries


@pytest.fixture(scope="module")
def validator() -> jsonschema.Draft202012Validator:
    return jsonschema.Draft202012Validator(load_schema())


def result(found: tuple[Any, ...]) -> dict[str, Any]:
    return report_to_dict(replace(build_report(), identifications=found, rejected=()))


def check_sums(node: dict[str, Any], where: str) -> None:
    """Parts of an explanation add up to its value, at every level."""
    if node["parts"]:
        total = math.fsum(part["value"] for part in node["parts"])
        allowed = ROUNDING * (1 + len(node["parts"]))
        assert abs(total - node["value"]) <= allowed, (where, node["label"], node["value"], total)
    for part in node["parts"]:
        check_sums(part, where)


def check_query(query: dict[str, Any], threshold: float) -> None:
    """Everything that must hold for one query of any result."""
    claim, hits = query["claim"], query["hits"]
    assert claim["level"] != "confirmed", "only a person confirms"
    levels = claim["levels"]
    assert 0.0 <= levels["compound"] <= levels["isomer group"] + ROUNDING <= 1.0 + 2 * ROUNDING
    assert math.fsum(hit["probability"] for hit in hits) <= 1.0 + ROUNDING * (1 + len(hits))
    assert [hit["rank"] for hit in hits] == list(range(1, len(hits) + 1))
    for hit in hits:
        check_sums(hit["explanation"], f"{query['id']}, {hit['name']}")
        assert 0.0 <= hit["probability"] <= 1.0
        assert 0.0 <= hit["cosine"] <= 1.0 + ROUNDING and 0.0 <= hit["reverse"] <= 1.0 + ROUNDING
        for item in hit["evidence"]:
            assert item["reason"], item
            if item["verdict"] == "not assessed":
                assert item["log_odds"] == 0.0, item
    if claim["level"] == "supported":
        agreeing = [
            item for item in hits[0]["evidence"]
            if item["kind"] in INDEPENDENT and item["verdict"] == "agrees" and item["log_odds"] > 0
        ]  # fmt: skip
        assert agreeing, f"{query['id']}: supported without independent evidence"
        assert not [item for item in hits[0]["evidence"] if item["verdict"] == "conflicts"]
    if claim["level"] in ("supported", "tentative"):
        assert hits[0]["probability"] >= threshold - ROUNDING
    if claim["level"] == "isomer group":
        assert levels["isomer group"] >= threshold - ROUNDING


def check_result(document: dict[str, Any], validator: Any) -> None:
    validator.validate(document)
    for query in document["queries"]:
        check_query(query, Settings().claim_threshold)


def test_the_demo_case_holds_every_property(library: Path, validator: Any) -> None:
    report = search_files(UNKNOWNS, [library], Settings())
    document = report_to_dict(report)
    assert len(document["queries"]) >= 15
    check_result(document, validator)


@cache
def starters() -> tuple[SpectrumRecord, ...]:
    return tuple(starter_records())


PEAK = st.tuples(st.integers(12, 400), st.floats(0.01, 1000.0))


@st.composite
def spectra(draw: st.DrawFn) -> SpectrumRecord:
    """Any peaks at all, or those of an entry bent, thinned, or mixed with another."""
    chance = random.Random(draw(st.integers(0, 2**32)))
    peaks: dict[float, float] = dict(draw(st.lists(PEAK, max_size=12)))
    for _ in range(draw(st.integers(0, 2))):
        entry = chance.choice(starters())
        tilt = chance.uniform(-1.0, 1.0)
        for mz, value in zip(entry.mz.tolist(), entry.intensity.tolist(), strict=True):
            if chance.random() > 0.15:
                peaks[mz] = peaks.get(mz, 0.0) + value * chance.lognormvariate(0.0, 0.25) * (mz / 100.0) ** tilt
    if not peaks:
        peaks = {43.0: 100.0, 58.0: 30.0}
    mz = sorted(peaks)
    return SpectrumRecord(Source("made.csv", 1), np.array(mz, float), np.array([peaks[m] for m in mz]), title="made")


@settings(max_examples=40)
@given(record=spectra())
def test_any_spectrum_gives_a_valid_result_that_claims_no_more_than_its_evidence(
    record: SpectrumRecord, opened: tuple[SearchableLibrary, ...], validator: Any
) -> None:
    found = tuple(identify_records([record], opened, Settings(), []))
    check_result(result(found), validator)


@settings(max_examples=10)
@given(record=spectra(), exponent=st.integers(-20, 40))
def test_the_scale_of_the_intensities_changes_nothing(
    record: SpectrumRecord, exponent: int, opened: tuple[SearchableLibrary, ...]
) -> None:
    # A power of two changes no digit.
    scaled = replace(record, intensity=record.intensity * 2.0**exponent)
    one, two = (next(iter(identify_records([item], opened, Settings(), []))) for item in (record, scaled))
    assert [answers(query) for query in result((one,))["queries"]] == [answers(q) for q in result((two,))["queries"]]


def answers(query: dict[str, Any]) -> dict[str, Any]:
    """A query without its number, which is its place in the order given, and without the peaks as given."""
    return {name: value for name, value in query.items() if name not in ("id", "cleaning")}


def test_the_order_of_the_files_changes_nothing(library: Path) -> None:
    files = UNKNOWNS[:8]
    straight = report_to_dict(search_files(files, [library], Settings()))["queries"]
    mixed = random.Random(4).sample(files, len(files))
    again = report_to_dict(search_files(mixed, [library], Settings()))["queries"]
    key = lambda query: (query["source"], query["name"])  # noqa: E731
    assert [query["source"] for query in straight] != [query["source"] for query in again]
    assert [answers(q) for q in sorted(straight, key=key)] == [answers(q) for q in sorted(again, key=key)]


def test_the_order_of_the_peaks_changes_nothing(library: Path) -> None:
    peaks = ["43 100", "58 30", "15 20", "27 8", "42 7", "59 1", "39 4.5", "41 2.25"]
    told = []
    for seed in range(3):
        lines = random.Random(seed).sample(peaks, len(peaks))
        told.append(report_to_dict(search_pasted("\n".join(lines), [library], Settings())))
    assert told[0] == told[1] == told[2]


PLACES = (
    {"LC_ALL": "C", "TZ": "UTC", "OMP_NUM_THREADS": "1", "PYTHONHASHSEED": "0"},
    {"LC_ALL": "C.utf8", "LANG": "de_DE.UTF-8", "TZ": "Pacific/Kiritimati", "OMP_NUM_THREADS": "2", "NUMBA_NUM_THREADS": "2",
     "OPENBLAS_NUM_THREADS": "2", "PYTHONHASHSEED": "4711"},
)  # fmt: skip


def test_locale_time_zone_threads_and_hash_seed_change_no_byte(library: Path, tmp_path: Path) -> None:
    told = []
    for number, place in enumerate(PLACES):
        out, table = tmp_path / f"{number}.json", tmp_path / f"{number}.csv"
        keep = {
            name: value for name, value in os.environ.items() if name in ("PATH", "HOME", "XDG_CACHE_HOME", "TMPDIR")
        }
        command = [
            sys.executable, "-c", "import sys; from identify.cli import main; sys.exit(main())", "search",
            *map(str, UNKNOWNS[:6]), "--library", str(library), "--json", str(out), "--csv", str(table), "--no-record",
        ]  # fmt: skip
        done = subprocess.run(
            command, env={**keep, "PYTHONPATH": str(ROOT), **place}, capture_output=True, timeout=240, check=False
        )
        assert done.returncode == 0, done.stderr.decode()
        told.append((out.read_bytes(), table.read_bytes(), done.stdout.decode("utf-8", "replace")))
    assert told[0][0] == told[1][0], "result"
    assert told[0][1] == told[1][1], "table"
    assert json.loads(told[0][0])["queries"]


@pytest.mark.slow
def test_open_records_hold_every_property(shared_data: Path, tmp_path: Path, validator: Any) -> None:
    archive = shared_data / "massbank-2025.05.1-ei.zip"
    if not archive.is_file():
        pytest.skip(f"{archive} not found")
    kept, asked = tmp_path / "kept", tmp_path / "asked"
    with zipfile.ZipFile(archive) as packed:
        names = sorted(name for name in packed.namelist() if name.endswith(".txt"))
        packed.extractall(kept, names[::20])
        # Half of the queries are records whose neighbours in the list, often replicates, are in the library.
        packed.extractall(asked, names[1::320] + names[5::320])
    library = tmp_path / "part.ionlib"
    build_library(library, [kept], licences="all", who="tester", when=WHEN)
    document = report_to_dict(search_files([asked], [library], Settings()))
    assert len(document["queries"]) > 60
    check_result(document, validator)
    levels = {query["claim"]["level"] for query in document["queries"]}
    assert len(levels) >= 3, f"a check that sees few levels proves little: {levels}"
