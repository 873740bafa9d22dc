"""MGF: what the adapter takes over, what it guards."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from identify.readers import read_pasted
from identify.records import Rejection, SpectrumRecord
from tests.readers.format_samples import PAIRS, document, mgf


def read_mgf(text: str) -> tuple[list[SpectrumRecord], list[Rejection]]:
    rejected: list[Rejection] = []
    return list(read_pasted(text, "a.mgf", rejected.append)), rejected


def test_a_time_in_seconds_and_other_metadata_of_mgf_are_read() -> None:
    text = "BEGIN IONS\nTITLE=scan 7\nNAME=Inventol\nRTINSECONDS=12.5\nIONIZATION=EI\nPEPMASS=88\n42 100\n55 80\nEND IONS\n"
    (record,), _ = read_mgf(text)
    assert (record.identity.name, record.title, record.retention.time_s) == ("Inventol", "scan 7", 12.5)
    assert record.acquisition.ionization == "EI"


@pytest.mark.parametrize(
    "lose", [lambda mz: mz[:-1], lambda mz: mz + 1, lambda mz: mz[:0]], ids=["a peak", "values", "everything"]
)
def test_what_matchms_would_lose_or_change_is_a_rejection(lose: object, monkeypatch: pytest.MonkeyPatch) -> None:
    def load(*_: object, **__: object) -> list[object]:
        mz, intensity = np.array(PAIRS).T
        peaks = SimpleNamespace(mz=lose(mz), intensities=intensity[: lose(mz).size])  # type: ignore[operator]
        return [SimpleNamespace(peaks=peaks, metadata={})]

    monkeypatch.setattr("matchms.importing.load_from_mgf", load)
    records, rejected = read_mgf(mgf(PAIRS))
    assert not records
    assert [item.expected for item in rejected] == ["the 3 rows of the record unchanged"]


def test_a_spectrum_that_matchms_passes_over_is_a_rejection(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("matchms.importing.load_from_mgf", lambda *_, **__: [])
    records, rejected = read_mgf(mgf(PAIRS) + mgf(PAIRS))
    assert not records and [item.found for item in rejected] == ["0 spectra", "0 spectra"]


def test_a_thousand_mgf_records_lose_none() -> None:
    records, rejected = read_mgf(document("mgf", *[PAIRS] * 1000))
    assert len(records) == 1000 and not rejected
