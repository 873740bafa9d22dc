"""What the query itself is, through the whole main path: a mixture is held back, an unnamed compound gets class and analogue."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from identify.library.build import build_from_records
from identify.pipeline.search import identify_records, open_libraries
from identify.records import Acquisition, ClaimLevel, Identification, Identity, Source, SpectrumRecord, Verdict
from identify.settings import Settings

NAPHTHALENE = {51: 8.0, 63: 6.0, 64: 7.0, 74: 4.0, 77: 4.0, 102: 8.0, 126: 7.0, 127: 13.0, 128: 100.0, 129: 10.9}
DODECANE = {
    41: 40.0, 43: 88.0, 55: 25.0, 56: 20.0, 57: 100.0, 70: 15.0, 71: 60.0, 85: 43.0, 99: 7.0, 113: 5.0, 170: 6.5, 171: 0.9,
}  # fmt: skip
PHENOL = {39: 12.0, 40: 6.0, 55: 6.0, 63: 5.0, 65: 18.0, 66: 24.0, 94: 100.0, 95: 6.6}
ESTERS = {
    "methyl palmitate": ("CCCCCCCCCCCCCCCC(=O)OC", "C17H34O2", 270),
    "methyl stearate": ("CCCCCCCCCCCCCCCCCC(=O)OC", "C19H38O2", 298),
    "methyl arachidate": ("CCCCCCCCCCCCCCCCCCCC(=O)OC", "C21H42O2", 326),
}
"""Invented, rounded, from general knowledge of the compounds."""


def ester(mass: int) -> dict[float, float]:
    """Methyl ester of a fatty acid: 74, 87, the losses of 31 and 43, M and its 13C."""
    return {
        41.0: 22.0, 43.0: 35.0, 55.0: 24.0, 57.0: 18.0, 69.0: 12.0, 74.0: 100.0, 75.0: 18.0, 87.0: 66.0, 143.0: 15.0,
        float(mass - 43): 9.0, float(mass - 31): 7.0, float(mass): 10.0, float(mass + 1): 2.0,
    }  # fmt: skip


def record(peaks: dict[float, float], name: str = "", smiles: str = "", formula: str = "") -> SpectrumRecord:
    return SpectrumRecord(
        Source(f"{name or 'query'}.csv", 1), np.array(sorted(peaks), float), np.array([peaks[mz] for mz in sorted(peaks)]),
        accession=name.upper().replace(" ", "-"), title=name, licence="CC0",
        identity=Identity(name=name, formula=formula, smiles=smiles),
        acquisition=Acquisition(ionization="EI", energy_ev=70.0, ms_level=1, polarity="positive", lowest_mz=35.0),
    )  # fmt: skip


@pytest.fixture(scope="module")
def library(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("nature") / "a.ionlib"
    records = [
        record(NAPHTHALENE, "naphthalene", "c1ccc2ccccc2c1", "C10H8"),
        record(DODECANE, "dodecane", "CCCCCCCCCCCC", "C12H26"),
        record(PHENOL, "phenol", "Oc1ccccc1", "C6H6O"),
        *(record(ester(mass), name, smiles, formula) for name, (smiles, formula, mass) in ESTERS.items()),
    ]
    build_from_records(path, records, origin="test", who="tester", when=datetime(2026, 1, 1, tzinfo=UTC))
    return path


def identify(library: Path, peaks: dict[float, float]) -> Identification:
    settings = Settings()
    with open_libraries([library], settings) as libraries:
        (found,) = identify_records([record(peaks)], libraries, settings, [])
    return found


def mix(*parts: tuple[dict[int, float], float]) -> dict[float, float]:
    total: dict[float, float] = {}
    for peaks, share in parts:
        for mz, value in peaks.items():
            total[float(mz)] = total.get(float(mz), 0.0) + share * value
    return total


def test_a_mixture_of_two_entries_is_held_back_and_its_parts_are_named(library: Path) -> None:
    found = identify(library, mix((NAPHTHALENE, 1.0), (DODECANE, 0.8)))
    assert found.purity is not None and found.purity.verdict is Verdict.CONFLICTS
    assert {part.name for part in found.purity.parts} == {"naphthalene", "dodecane"}
    assert found.claim.level is ClaimLevel.NO_CLAIM
    assert "take a cleaner spectrum" in found.claim.statement
    assert found.analogues == ()


def test_a_pure_spectrum_is_one_compound_and_needs_no_class(library: Path) -> None:
    found = identify(library, {float(mz): value for mz, value in NAPHTHALENE.items()})
    assert found.purity is not None and found.purity.verdict is Verdict.AGREES
    assert [part.name for part in found.purity.parts] == ["naphthalene"]


def test_an_unnamed_ester_gets_its_class_and_an_analogue_with_the_difference_in_words(library: Path) -> None:
    found = identify(library, ester(284))
    assert found.claim.level in (ClaimLevel.NO_CLAIM, ClaimLevel.CLASS)
    ester_class = next(item for item in found.classes if item.name == "fatty acid methyl ester")
    assert ester_class.probability > 0.8
    assert any("74 with 87" in text for text in ester_class.ions)
    assert {(like.name, like.shift, like.text) for like in found.analogues} >= {
        ("methyl palmitate", 14, "plus CH2"),
        ("methyl stearate", -14, "minus CH2"),
    }
    assert all(0.5 <= like.score <= 1.0 for like in found.analogues)
