"""The main path: accurate masses are used where both sides have them."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from identify.library.build import build_from_records
from identify.pipeline.search import identify_records, open_libraries
from identify.records import Acquisition, Identity, Source, SpectrumRecord
from identify.settings import Settings

BENZOTHIAZOLE = {
    134.9937: 40.0,
    135.0137: 100.0,
    108.0028: 30.0,
    91.0417: 5.0,
    82.0072: 9.0,
    68.9794: 20.0,
    63.0229: 12.0,
}
"""Invented intensities at ions of C7H5NS+ and its fragments; the first m/z is the 13C-free neighbour no such compound has."""


def record(peaks: dict[float, float], accession: str) -> SpectrumRecord:
    return SpectrumRecord(
        Source(f"{accession}.csv", 1), np.array(sorted(peaks)), np.array([peaks[mz] for mz in sorted(peaks)]),
        accession=accession, title=accession, licence="CC0",
        identity=Identity(name="benzothiazole", formula="C7H5NS", smiles="c1ccc2scnc2c1"),
        acquisition=Acquisition(instrument_type="GC-EI-TOF", ionization="EI", energy_ev=70.0, ms_level=1, polarity="positive"),
    )  # fmt: skip


@pytest.fixture(scope="module")
def library(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("accurate") / "a.ionlib"
    clean = {mz: i for mz, i in BENZOTHIAZOLE.items() if mz != 134.9937}
    build_from_records(path, [record(clean, "A1")], origin="test", who="tester", when=datetime(2026, 1, 1, tzinfo=UTC))
    return path


def identify(library: Path, peaks: dict[float, float]) -> tuple[float, tuple[str, ...]]:
    settings = Settings()
    with open_libraries([library], settings) as libraries:
        (found,) = identify_records([record(peaks, "Q")], libraries, settings, [])
    return found.candidates[0].cosine, found.candidates[0].notes


def test_accurate_pairs_are_scored_on_accurate_peaks(library: Path) -> None:
    same, notes = identify(library, {mz: i for mz, i in BENZOTHIAZOLE.items() if mz != 134.9937})
    assert same == pytest.approx(1.0)
    assert notes[0].startswith("Scores on accurate m/z (10 ppm or 0.002 Da); at nominal m/z cosine 1.000")
    foreign, _ = identify(library, BENZOTHIAZOLE)
    assert foreign < 0.98, "a foreign ion at the same nominal m/z must count against the match"


def test_a_mixed_pair_says_that_nominal_masses_were_compared(library: Path) -> None:
    _, notes = identify(library, {float(round(mz)): i for mz, i in BENZOTHIAZOLE.items() if mz != 134.9937})
    assert notes == ("Compared at nominal m/z: the query has no accurate masses.",)


@pytest.mark.parametrize(("stated", "warned"), [("EI", False), ("", False), ("CI", True)])
def test_a_query_that_is_no_ei_spectrum_by_its_own_record_is_answered_with_a_warning(
    library: Path, stated: str, warned: bool
) -> None:
    query = record(BENZOTHIAZOLE, "Q")
    query = replace(query, acquisition=replace(query.acquisition, ionization=stated))
    with open_libraries([library], Settings()) as libraries:
        (found,) = identify_records([query], libraries, Settings(), [])
    assert [f"ionization '{stated}'" in note for note in found.notes] == [True] * warned


def named(name: str, smiles: str, peaks: dict[float, float], accession: str) -> SpectrumRecord:
    made = record(peaks, accession)
    return replace(made, identity=Identity(name=name, formula="C7H5NS", smiles=smiles))


def test_several_libraries_answer_as_one_that_holds_all_and_each_candidate_names_its_own(tmp_path: Path) -> None:
    other = {mz + 0.02: 100.0 - i / 2 for mz, i in BENZOTHIAZOLE.items()}
    here = [
        named("benzothiazole", "c1ccc2scnc2c1", BENZOTHIAZOLE, "A1"),
        named("phenyl isothiocyanate", "S=C=Nc1ccccc1", other, "A2"),
    ]
    there = [
        named("phenyl thiocyanate", "N#CSc1ccccc1", {mz: i + 9.0 for mz, i in other.items()}, "B1"),
        named("benzothiazole", "c1ccc2scnc2c1", {mz: i + 3.0 for mz, i in BENZOTHIAZOLE.items()}, "B2"),
    ]
    made = {"one": here, "two": there, "both": [*here, *there]}
    for name, records in made.items():
        build_from_records(tmp_path / name, records, origin="test", who="tester", when=datetime(2026, 1, 1, tzinfo=UTC))
    settings, query = Settings(), record({mz: i + 1.0 for mz, i in BENZOTHIAZOLE.items()}, "Q")
    answers = []
    for names in (["one", "two"], ["both"]):
        with open_libraries([tmp_path / name for name in names], settings) as libraries:
            (found,) = identify_records([query], libraries, settings, [])
        answers.append(found.candidates)
    shown = [
        [(c.entry.accession, c.cosine, c.reverse, c.probability, c.n_entries) for c in candidates]
        for candidates in answers
    ]
    assert shown[0] == shown[1]
    assert len(shown[0]) == 3
    assert [Path(c.library).name for c in answers[0]] == [
        "one" if c.entry.accession[0] == "A" else "two" for c in answers[0]
    ]
