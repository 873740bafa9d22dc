"""``ionwitness library calibrate`` as a user meets it."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from click.testing import Result

from identify.errors import LibraryError
from identify.library.build import build_from_records
from identify.library.calibration import read_calibration, store_calibration
from identify.library.store import open_library
from identify.library.verify import verify_library
from identify.ranking.calibration import CalibrationResult, Shift
from identify.records import Acquisition, Identity, Source, SpectrumRecord

Run = Callable[..., Result]
WHEN = datetime(2026, 1, 2, tzinfo=UTC)


@pytest.fixture(scope="module")
def replicates(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Seventy invented compounds, two noisy spectra each."""
    rng = np.random.default_rng(5)
    records = []
    for number in range(70):
        mz = np.sort(rng.choice(np.arange(30, 150), 14, replace=False)).astype(float)
        pattern = rng.uniform(1, 100, mz.size)
        for copy in "ab":
            records.append(
                SpectrumRecord(
                    Source("invented", None, number), mz, pattern * np.exp(rng.normal(0, 0.2, mz.size)),
                    accession=f"R{number}{copy}", licence="CC0",
                    identity=Identity(name=f"n-alkane {number + 5}", smiles="C" * (number + 5)),
                    acquisition=Acquisition(ionization="EI", energy_ev=70.0, ms_level=1, polarity="positive"),
                )
            )  # fmt: skip
    path = tmp_path_factory.mktemp("replicates") / "r.ionlib"
    build_from_records(path, records, origin="test", who="tester", when=WHEN)
    return path


def test_too_few_replicates_keep_the_shipped_calibration(run: Run, starter: Path) -> None:
    output = run("library", "calibrate", starter, "--who", "Ada").output
    assert "at least 60 needed; the shipped calibration stays" in output
    with open_library(starter) as library:
        assert read_calibration(library) is None


def test_a_refit_is_stored_used_named_and_taken_back(run: Run, replicates: Path, tmp_path: Path) -> None:
    lab, unknown, result = tmp_path / "lab.ionlib", tmp_path / "u.csv", tmp_path / "r.json"
    shutil.copyfile(replicates, lab)
    with open_library(lab) as library:
        peaks = library.get_entries(library.entry_ids()[:1])[0].spectrum.nominal
    unknown.write_text(
        "m/z,intensity\n" + "".join(f"{m:.0f},{i:.3f}\n" for m, i in zip(peaks.mz, peaks.intensity, strict=True))
    )

    def first() -> tuple[str, float]:
        run("search", unknown, "--library", lab, "--json", result, "--no-record")
        told = json.loads(result.read_text(encoding="utf-8"))
        return told["library"]["calibration"], told["queries"][0]["hits"][0]["probability"]

    assert first()[0] == ""
    before = first()[1]
    trial = run("library", "calibrate", lab, "--trial").output
    assert "70 compounds played" in trial and "Not stored" in trial and first()[0] == ""
    output = run("library", "calibrate", lab, "--who", "Ada", "--why", "new instrument").output
    assert "calibrated by Ada: new instrument" in output
    named, after = first()
    assert named.startswith("event 3 of the library") and "70 compounds played" in named
    assert after != before
    assert verify_library(lab).exit_code == 0
    run("library", "calibrate", lab, "--shipped", "--why", "compare")
    assert first()[1] == before


def test_a_calibration_out_of_all_bounds_is_refused(replicates: Path, tmp_path: Path) -> None:
    lab = tmp_path / "lab.ionlib"
    shutil.copyfile(replicates, lab)
    with open_library(lab, writable=True) as library:
        mad = CalibrationResult(Shift(1e9, 0.0, 0.0), True, 70, 1.0, 0.9, "mad")
        store_calibration(library, mad, who="Mallory", when=WHEN, reason="")
        with pytest.raises(LibraryError, match="calibration"):
            read_calibration(library)
