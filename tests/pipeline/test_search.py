"""The main path: accurate masses are used where both sides have them."""

from __future__ import annotations

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
