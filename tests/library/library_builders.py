"""Small invented spectra and libraries for the tests of this room; nothing here is reference data."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np

from identify.library.build import BuildReport, build_from_records
from identify.library.events import append_event
from identify.library.store import open_library
from identify.records import Acquisition, EntryStatus, Identity, Source, SpectrumRecord

WHEN = datetime(2025, 5, 2, 9, 30, tzinfo=UTC)
WHO = "A. Example"

# Principal ions from memory, rounded, invented intensities.
TOLUENE = {39: 10.0, 65: 12.0, 91: 100.0, 92: 70.0}
BENZENE = {39: 12.0, 50: 16.0, 51: 18.0, 52: 19.0, 77: 25.0, 78: 100.0, 79: 6.0}
ETHANOL = {27: 20.0, 29: 30.0, 31: 100.0, 45: 50.0, 46: 20.0}
ALANINE_2TMS = {45: 8.0, 59: 5.0, 73: 70.0, 74: 6.0, 116: 100.0, 117: 11.0, 147: 12.0, 190: 5.0, 218: 4.0}


def build_record(
    accession: str,
    name: str,
    peaks: Mapping[float, float],
    *,
    formula: str = "",
    smiles: str = "",
    inchikey: str = "",
    licence: str = "CC BY",
    energy_ev: float | None = 70.0,
    **others: Any,
) -> SpectrumRecord:
    """Record with the peaks in the order given."""
    how = others.pop("acquisition", None) or Acquisition(
        instrument="invented", instrument_type="GC-EI-Q", ionization="EI", energy_ev=energy_ev, ms_level=1,
        polarity="positive",
    )  # fmt: skip
    return SpectrumRecord(
        others.pop("source", Source("invented.txt", 1, 1)),
        np.array(list(peaks), float),
        np.array(list(peaks.values()), float),
        accession=accession,
        title=name,
        identity=Identity(name, formula, smiles, inchikey=inchikey),
        acquisition=how,
        licence=licence,
        authors=others.pop("authors", "B. Beispiel"),
        **others,
    )


def build_records() -> list[SpectrumRecord]:
    """Five records of three compounds and a derivative."""
    toluene = {"formula": "C7H8", "smiles": "Cc1ccccc1", "inchikey": "YXFVVABEGXRONW-UHFFFAOYSA-N"}
    benzene = {"formula": "C6H6", "smiles": "c1ccccc1", "inchikey": "UHOVQNZJYSORNB-UHFFFAOYSA-N"}
    return [
        build_record("TEST-1", "Toluene", TOLUENE, **toluene),
        build_record("TEST-2", "Benzene", BENZENE, **benzene),
        build_record("TEST-3", "Toluene", TOLUENE | {63: 4.0}, energy_ev=None, **toluene),
        build_record("TEST-4", "Ethanol", ETHANOL, formula="C2H6O", licence="CC BY-SA"),
        build_record("TEST-5", "Alanine", ALANINE_2TMS, formula="C3H7NO2", derivative="2 TMS", licence="CC0"),
    ]


def build_random_records(n_records: int, seed: int = 1) -> list[SpectrumRecord]:
    """Invented spectra of invented compounds, four entries to a compound, always the same for a seed."""
    chance = np.random.default_rng(seed)
    records = []
    for number in range(n_records):
        mz = np.sort(chance.choice(np.arange(30, 300), size=60, replace=False))
        peaks = dict(zip(mz.tolist(), chance.uniform(1, 1000, mz.size).round(1).tolist(), strict=True))
        name = f"Compound {number // 4}"
        records.append(build_record(f"RANDOM-{seed}-{number}", name, peaks, formula=f"C{6 + number // 4}H12"))
    return records


def build_test_library(
    path: Path, records: Sequence[SpectrumRecord] | None = None, *, status: EntryStatus = EntryStatus.REFERENCE
) -> BuildReport:
    """Library of the given records, or of `build_records`."""
    chosen = build_records() if records is None else records
    return build_from_records(path, chosen, origin="invented", who=WHO, when=WHEN, reason="test", status=status)


def move(path: Path, entry_id: int, status: EntryStatus) -> None:
    """Give an entry another standing, with its event."""
    with open_library(path, writable=True) as library, library.writing() as connection:
        event = append_event(
            connection, kind="withdrawn", who=WHO, when=WHEN, reason="test",
            content={"standing": [[entry_id, status.value]]},
        )  # fmt: skip
        connection.execute("INSERT INTO standing VALUES (?, ?, ?)", (entry_id, event.seq, status.value))
