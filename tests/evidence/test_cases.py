"""Every case in `fixtures/cases`: the verdicts a specialist would give. A new case is a new file there, no Python."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from identify.evidence.facts import build_query_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.isotope_cluster import fit_cluster
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.evidence.purity import judge_purity
from identify.records import (
    Acquisition,
    CleanSpectrum,
    Entry,
    EntryStatus,
    Identity,
    Peaks,
    Query,
    Retention,
    Source,
    SpectrumRecord,
    Verdict,
)
from identify.settings import Settings
from identify.spectra.align import align
from identify.spectra.cleaning import clean_spectrum

FOLDER = Path(__file__).resolve().parents[2] / "fixtures" / "cases"
CASES = sorted(FOLDER.glob("*.toml"))
VERDICTS = {verdict.value for verdict in Verdict}


def load(path: Path) -> dict[str, Any]:
    return tomllib.loads(path.read_text(encoding="utf-8"))


def make_query(table: dict[str, Any]) -> Query:
    mz, intensity = np.array(table["peaks"], float).T
    acquisition = Acquisition(
        instrument_type=table.get("instrument_type", ""),
        lowest_mz=table.get("lowest_mz"),
        highest_mz=table.get("highest_mz"),
    )
    retention = Retention(index=table.get("retention_index"), column=table.get("column", ""))
    record = SpectrumRecord(Source("case"), mz, intensity, acquisition=acquisition, retention=retention)
    return Query("case", record, clean_spectrum(record, Settings().cleaning))


def make_entry(table: dict[str, Any], number: int) -> Entry:
    mz, intensity = np.array(table["peaks"], float).T
    return Entry(
        number,
        number,
        f"case {number}",
        Identity(name=table["name"], formula=table.get("parent", table["formula"]), smiles=table.get("smiles", "")),
        CleanSpectrum(Peaks(mz, intensity), None, int(mz[0])),
        Acquisition(),
        Retention(index=table.get("retention_index"), column=table.get("column", "")),
        table.get("measured_as", ""),
        table["formula"],
        False,
        EntryStatus(table.get("status", "reference")),
        "",
        "",
        "",
    )


def test_there_are_cases() -> None:
    assert len(CASES) >= 10


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_case_gets_the_verdicts_of_a_specialist(path: Path) -> None:
    case = load(path)
    assert case["why"]
    query = make_query(case["query"])
    wrong: list[str] = []
    for number, candidate in enumerate(case["candidate"], start=1):
        entry = make_entry(candidate, number)
        items = {
            item.kind: item for item in gather_evidence(query, entry, align(query.spectrum, entry.spectrum), Settings())
        }
        for kind, (expected, why) in candidate["verdicts"].items():
            assert expected in VERDICTS, f"{path.name}: '{expected}' is no verdict"
            assert why, f"{path.name}: {kind} without a reason"
            if items[kind].verdict.value != expected:
                wrong.append(f"{candidate['name']}, {kind}: {items[kind].verdict.value} ({items[kind].reason}) "
                             f"instead of {expected} ({why})")  # fmt: skip
    assert not wrong, "\n".join(wrong)


@pytest.mark.parametrize("path", [path for path in CASES if "cluster" in load(path)], ids=lambda path: path.stem)
def test_case_cluster_asks_for_its_elements(path: Path) -> None:
    case = load(path)
    wanted = case["cluster"]
    fit = fit_cluster(build_query_facts(make_query(case["query"])), wanted["mz"])
    assert not fit.reason
    assert dict(fit.composition) == wanted["composition"]
    assert set(wanted["supported"]) == set(fit.supported)
    assert set(wanted["excluded"]) <= set(fit.excluded)


@pytest.mark.parametrize("path", [path for path in CASES if "molecular_ion" in load(path)], ids=lambda path: path.stem)
def test_case_molecular_ion_is_found_without_a_library(path: Path) -> None:
    case = load(path)
    estimate = estimate_molecular_ion(make_query(case["query"]).spectrum, [])
    assert estimate.estimates[0].nominal_mass == case["molecular_ion"]["mass"]


@pytest.mark.parametrize("path", [path for path in CASES if "purity" in load(path)], ids=lambda path: path.stem)
def test_case_purity_names_the_parts(path: Path) -> None:
    case = load(path)
    entries = [make_entry(candidate, number) for number, candidate in enumerate(case["candidate"], start=1)]
    purity = judge_purity(make_query(case["query"]).spectrum, entries)
    assert purity.verdict.value == case["purity"]["verdict"], purity.reason
    assert [part.name for part in purity.parts] == case["purity"]["parts"]
