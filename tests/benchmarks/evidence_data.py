"""The open records as entries, with the nearest entries of other compounds: what the evidence fits and benchmarks share.

Records are read through `identify.library`; the built library is kept in a scratch folder and reused.
"""

from __future__ import annotations

import sys
import tempfile
from collections import defaultdict
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from identify.chem.structures import connectivity_block
from identify.library.build import build_library
from identify.library.store import open_library
from identify.records import Entry, Query, Source, SpectrumRecord
from identify.settings import Weighting
from identify.similarity.scores import peak_weights

ROOT = Path(__file__).resolve().parents[2]
ARCHIVE = ROOT.parent / "shared" / "data" / "massbank-2025.05.1-ei.zip"
CACHE = Path(tempfile.gettempdir()) / "ionwitness-benchmark" / "open-records.ionlib"
MAX_MZ = 1200
ROOM = ROOT / "identify" / "evidence"
PROVENANCE = "Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled)"
SEED = 20250501


def load_entries(library: Path = CACHE) -> list[Entry]:
    """All entries of the open records; the library is built on first use."""
    if not ARCHIVE.is_file():
        sys.exit(f"open data not found at {ARCHIVE}: this benchmark runs where that file is present")
    if not library.is_file():
        library.parent.mkdir(parents=True, exist_ok=True)
        build_library(library, [ARCHIVE], licences="all", who="benchmark", when=datetime.now(UTC))
    with open_library(library) as opened:
        return list(opened.iter_entries())


def is_usual(entry: Entry) -> bool:
    """60–80 eV or unstated, not isotope-labelled, with peaks."""
    energy = entry.acquisition.energy_ev
    return not entry.is_labelled and (energy is None or 60 <= energy <= 80) and len(entry.spectrum.nominal) > 0


def compound_of(entry: Entry) -> str:
    """Connectivity, whatever the derivative: replicates and derivatives of one compound share it."""
    identity = entry.identity
    block = connectivity_block(identity.inchikey) if identity.inchikey else ""
    return block or identity.smiles or identity.name.casefold()


def as_query(entry: Entry) -> Query:
    """An entry played as an unknown."""
    record = SpectrumRecord(
        Source("benchmark", None, entry.id),
        entry.spectrum.nominal.mz,
        entry.spectrum.nominal.intensity,
        acquisition=entry.acquisition,
        retention=entry.retention,
    )
    return Query(f"e{entry.id}", record, entry.spectrum)


@dataclass(frozen=True, eq=False)
class OpenRecords:
    """Usual entries with a dense matrix of weighted unit spectra."""

    entries: list[Entry]

    @cached_property
    def matrix(self) -> NDArray[np.float32]:
        rows = np.zeros((len(self.entries), MAX_MZ + 1), np.float32)
        for place, entry in enumerate(self.entries):
            peaks = entry.spectrum.nominal
            kept = peaks.mz <= MAX_MZ
            rows[place, peaks.mz[kept].astype(int)] = peak_weights(peaks.mz[kept], peaks.intensity[kept], Weighting())
        return rows / np.maximum(np.linalg.norm(rows, axis=1, keepdims=True), 1e-12)

    @cached_property
    def compounds(self) -> NDArray[np.int64]:
        return np.unique([compound_of(entry) for entry in self.entries], return_inverse=True)[1]

    @cached_property
    def replicates(self) -> dict[tuple[int, str], list[int]]:
        """Places of the entries of one compound measured as the same derivative."""
        groups: dict[tuple[int, str], list[int]] = defaultdict(list)
        for place, entry in enumerate(self.entries):
            groups[int(self.compounds[place]), entry.measured_as].append(place)
        return groups

    def nearest(self, place: int, count: int, *, without_compound: bool = False) -> list[tuple[int, float]]:
        """Best entry of each of the `count` nearest compounds, the query's own record left out."""
        cosine = self.matrix @ self.matrix[place]
        cosine[self.compounds == self.compounds[place]] -= 2.0 if without_compound else 0.0
        cosine[place] = -2.0
        taken: dict[int, tuple[int, float]] = {}
        for other in np.argsort(-cosine, kind="stable")[: 40 * count]:
            if cosine[other] <= 0 or len(taken) == count:
                break
            taken.setdefault(int(self.compounds[other]), (int(other), float(cosine[other])))
        return list(taken.values())


def load_open_records() -> OpenRecords:
    """The usual entries of the open records."""
    return OpenRecords([entry for entry in load_entries() if is_usual(entry)])
