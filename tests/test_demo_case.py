"""The invented case of `ionwitness demo`: made from chemistry, the same bytes each time, answered as it should be."""

from __future__ import annotations

import importlib.util
import sys
import tomllib
from datetime import UTC, datetime
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from identify.library.shipped import find_shipped
from identify.library.starter import build_starter, starter_records
from identify.pipeline import search_files
from identify.readers import read_spectra
from identify.records import Identification, Rejection, Report
from identify.settings import Settings

TESTS = Path(__file__).resolve().parent
DEMO = TESTS.parent / "fixtures" / "demo"
CASE: dict[str, Any] = tomllib.loads((DEMO / "case.toml").read_text(encoding="utf-8"))
UNKNOWNS: list[dict[str, Any]] = CASE["unknown"]
PLANTED = {unknown["file"]: unknown for unknown in UNKNOWNS}
KINDS = {"compound", "isomer group", "mixture", "not in library"}
LEVELS = {"supported", "tentative", "isomer group", "class", "no claim"}


@pytest.fixture(scope="module")
def maker() -> ModuleType:
    spec = importlib.util.spec_from_file_location("make_demo_case", TESTS / "make_demo_case.py")
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def report(tmp_path_factory: pytest.TempPathFactory) -> Report:
    library = tmp_path_factory.mktemp("demo") / "starter.ionlib"
    build_starter(library, "tests", datetime(2025, 1, 1, tzinfo=UTC))
    return search_files([DEMO / "unknowns" / name for name in sorted(PLANTED)], [library], Settings())


@pytest.fixture(scope="module")
def answers(report: Report) -> dict[str, Identification]:
    return {Path(found.query.record.source.path).name: found for found in report.identifications}


def names_of(identification: Identification) -> list[str]:
    return [candidate.entry.identity.name for candidate in identification.candidates]


def test_regenerating_gives_the_same_bytes(maker: ModuleType) -> None:
    made = {name: content.encode() for name, content in maker.make_case().items()}
    there = {path.name: path.read_bytes() for path in (DEMO / "unknowns").iterdir()}
    assert sorted(made) == sorted(there) == sorted(PLANTED)
    assert [name for name in made if made[name] != there[name]] == []


def test_every_planted_compound_but_two_has_a_starter_entry(maker: ModuleType) -> None:
    library = {record.identity.name for record in starter_records()}
    absent = {name for unknown in UNKNOWNS for name in unknown["answer"]} - library
    assert absent == {"coumaphos", "2-ethylhexyl 4-methoxycinnamate"}
    assert {name for unknown in UNKNOWNS if unknown["kind"] == "not in library" for name in unknown["answer"]} == absent


def test_case_covers_what_an_analyst_meets() -> None:
    assert len(UNKNOWNS) >= 12
    shown = " ".join(unknown["shows"] for unknown in UNKNOWNS)
    for word in ("clean", "noisy", "bleed", "two compounds", "isomers", "halogenated", "no molecular ion",
                 "trimethylsilyl", "scan starts", "accurate mass", "not in the library"):  # fmt: skip
        assert word in shown
    assert {unknown["kind"] for unknown in UNKNOWNS} == KINDS
    assert all(set(unknown["claims"]) <= LEVELS and unknown["why"] for unknown in UNKNOWNS)
    assert {Path(name).suffix for name in PLANTED} == {".jdx", ".msp", ".csv", ".txt"}


def test_files_say_that_they_are_invented() -> None:
    for path in (DEMO / "unknowns").iterdir():
        assert "invented for the ionwitness demonstration" in path.read_text(encoding="utf-8")


def test_shipped_folder_holds_case_and_unknowns() -> None:
    folder = find_shipped("demo")
    assert folder.joinpath("case.toml").is_file()
    assert {file.name for file in folder.joinpath("unknowns").iterdir()} == set(PLANTED)


@pytest.mark.parametrize("name", sorted(PLANTED))
def test_unknown_is_read_whole_and_names_no_compound(name: str) -> None:
    rejected: list[Rejection] = []
    (record,) = read_spectra(DEMO / "unknowns" / name, rejected.append)
    assert rejected == []
    assert record.mz.size >= 10
    assert not (record.identity.formula or record.identity.smiles or record.identity.inchikey)
    text = " ".join((record.title, record.identity.name, *record.comments, *record.extra.values())).lower()
    assert not [answer for answer in PLANTED[name]["answer"] if answer.lower() in text]


def test_every_unknown_is_identified_and_none_rejected(report: Report, answers: dict[str, Identification]) -> None:
    assert report.rejected == ()
    assert sorted(answers) == sorted(PLANTED)


@pytest.mark.parametrize("name", sorted(PLANTED))
def test_claim_is_of_an_expected_level(name: str, answers: dict[str, Identification]) -> None:
    assert str(answers[name].claim.level) in PLANTED[name]["claims"]


@pytest.mark.parametrize("name", sorted(n for n, unknown in PLANTED.items() if unknown["kind"] == "compound"))
def test_compound_is_first(name: str, answers: dict[str, Identification]) -> None:
    assert names_of(answers[name])[0] == PLANTED[name]["answer"][0]


@pytest.mark.parametrize("name", sorted(n for n, unknown in PLANTED.items() if unknown["kind"] == "isomer group"))
def test_isomer_is_in_the_group_claimed(name: str, answers: dict[str, Identification]) -> None:
    answer = PLANTED[name]["answer"][0]
    assert answer in (*answers[name].claim.members, names_of(answers[name])[0])
    assert answer in names_of(answers[name])[:3]


@pytest.mark.parametrize("name", sorted(n for n, unknown in PLANTED.items() if unknown["kind"] == "mixture"))
def test_both_compounds_of_a_mixture_head_the_list(name: str, answers: dict[str, Identification]) -> None:
    assert set(names_of(answers[name])[:2]) == set(PLANTED[name]["answer"])


@pytest.mark.parametrize("name", sorted(n for n, unknown in PLANTED.items() if unknown["kind"] == "not in library"))
def test_compound_outside_the_library_is_not_given_another_name(name: str, answers: dict[str, Identification]) -> None:
    found = answers[name]
    assert found.claim.compound_probability < 0.5
    assert found.in_library_probability < 0.5


def test_bleed_is_recognised_and_only_there(answers: dict[str, Identification]) -> None:
    with_bleed = {
        name
        for name, found in answers.items()
        for step in found.query.spectrum.steps
        if step.step == "column bleed" and step.removed
    }
    assert with_bleed == {"08-soil-20cm.msp"}


def test_air_is_recognised_and_only_there(answers: dict[str, Identification]) -> None:
    with_air = {
        name
        for name, found in answers.items()
        for step in found.query.spectrum.steps
        if step.step == "air and water" and step.removed
    }
    assert with_air == {"02-drum-air.csv"}


def test_accurate_masses_are_kept_where_measured(answers: dict[str, Identification]) -> None:
    accurate = {name for name, found in answers.items() if found.query.spectrum.accurate is not None}
    assert accurate == {"12-hose-rinse.txt"}


def test_isotope_clusters_of_the_unknowns_are_those_of_their_elements(answers: dict[str, Identification]) -> None:
    """Two chlorine atoms 9 : 6 : 1, four with the second peak tallest (standards table 3: Cl clusters, [C])."""
    dichloromethane = answers["01-drum-air.jdx"].query.spectrum.nominal
    assert dichloromethane.intensity_at(86) / dichloromethane.intensity_at(84) == pytest.approx(0.64, rel=0.4)
    dde = answers["06-drum-label.jdx"].query.spectrum.nominal
    assert dde.intensity_at(318) > dde.intensity_at(316) > dde.intensity_at(320) > dde.intensity_at(322)
