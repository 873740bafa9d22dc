"""What we write, read by others: the validator of `mzspeclib`, the `jcamp` package, matchms; and 1,000 open records."""

from __future__ import annotations

import dataclasses
import io
import socket
import zipfile
from pathlib import Path

import jcamp
import numpy as np
import pytest

from identify.readers import read_spectra
from identify.records import Rejection, SpectrumRecord
from identify.writers.jcamp import render_jcamp
from identify.writers.msp import render_msp
from identify.writers.spectrum_files import SUFFIXES, write_spectra
from tests.writers.record_samples import assert_equal, build_record


@pytest.fixture
def no_network(monkeypatch: pytest.MonkeyPatch) -> None:
    """The validator would fetch the vocabularies; without a network it takes those that psims carries."""

    def refuse(*_: object, **__: object) -> None:
        raise OSError("no network in tests")

    monkeypatch.setattr(socket.socket, "connect", refuse)
    monkeypatch.setattr(socket, "getaddrinfo", refuse)


@pytest.mark.filterwarnings("ignore")
def test_the_validator_of_mzspeclib_finds_no_breach_of_a_must_rule(tmp_path: Path, no_network: None) -> None:
    reason = "mzspeclib is not installed (pip install mzspeclib); it is an outside check, not a dependency"
    pytest.importorskip("mzspeclib", reason=reason)
    from mzspeclib import SpectrumLibrary
    from mzspeclib.validate import validator
    from mzspeclib.validate.level import RequirementLevel

    path = tmp_path / "a.mzSpecLib.txt"
    # Plain letters only: its index counts letters where it needs bytes, and then looks in the wrong place.
    plain = dataclasses.replace(build_record().identity, name="Inventol")
    records = [build_record(number, title="Inventol; GC-EI-TOF; MS", identity=plain) for number in (1, 2, 3)]
    write_spectra(path, records, "mzspeclib")
    library = SpectrumLibrary(filename=str(path))
    assert len(library) == 3
    chain = validator.load_default_validator()
    chain.validate_library(library)
    breaches = [item for item in chain.error_log if item.requirement_level == RequirementLevel.must]
    assert not breaches, breaches
    # What it misses beyond that is what an electron-ionization spectrum does not have.
    missed = {item.message.split(" failed to validate")[0] for item in chain.error_log}
    assert missed <= {"Spectrum_has_precursor_charge", "Spectrum_has_precursor_mz", "Analyte_has_charge"}, missed
    found = library.get_spectrum(spectrum_number=2)
    wanted = np.column_stack([records[1].mz, records[1].intensity])
    np.testing.assert_array_equal(np.array([peak[:2] for peak in found.peak_list], dtype=float), wanted)


def test_the_jcamp_package_reads_the_same_peaks() -> None:
    record = build_record()
    found = jcamp.read(io.StringIO(render_jcamp(record)))
    np.testing.assert_array_equal(found["x"], record.mz)
    np.testing.assert_array_equal(found["y"], record.intensity)
    assert found["title"] == record.title and found["molform"] == "C5 H12 O"


def test_matchms_reads_the_same_peaks_and_name_of_the_exchange_format(tmp_path: Path) -> None:
    from matchms.importing import load_from_msp

    path = tmp_path / "a.msp"
    record = build_record(comments=())
    path.write_text(render_msp(record) * 2, encoding="utf-8")
    spectra = list(load_from_msp(str(path)))
    assert len(spectra) == 2
    np.testing.assert_array_equal(spectra[1].peaks.mz, record.mz)
    np.testing.assert_array_equal(spectra[1].peaks.intensities, record.intensity)
    assert spectra[1].get("compound_name") == record.identity.name


@pytest.fixture(scope="module")
def open_records(shared_data: Path, tmp_path_factory: pytest.TempPathFactory) -> list[SpectrumRecord]:
    """1,000 full-scan electron-ionization records, from all over the open release."""
    folder = tmp_path_factory.mktemp("records")
    with zipfile.ZipFile(shared_data / "massbank-2025.05.1-ei.zip") as archive:
        archive.extractall(folder, [name for name in archive.namelist() if name.endswith(".txt")][::12])
    records = read_spectra(folder, lambda _: None)
    kept = [item for item in records if item.acquisition.ionization == "EI" and item.acquisition.ms_level == 1]
    return kept[:1000]


@pytest.mark.slow
@pytest.mark.parametrize("file_format", SUFFIXES)
def test_a_thousand_open_records_come_back(
    file_format: str, open_records: list[SpectrumRecord], tmp_path: Path
) -> None:
    assert len(open_records) == 1000
    path = tmp_path / "out"
    write_spectra(path, open_records, file_format)
    rejected: list[Rejection] = []
    found = list(read_spectra(path, rejected.append))
    assert not rejected and len(found) == 1000
    for pair in zip(found, open_records, strict=True):
        assert_equal(*pair, file_format)
