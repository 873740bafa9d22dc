"""Builders of queries and entries from a few peaks."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

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
)


class Build:
    """Small builders: peaks are given as {m/z: intensity}."""

    @staticmethod
    def spectrum(peaks: Mapping[int, float], lowest: int | None = None) -> CleanSpectrum:
        mz = sorted(peaks)
        nominal = Peaks(np.array(mz, float), np.array([peaks[m] for m in mz], float))
        return CleanSpectrum(nominal, None, lowest or (mz[0] if mz else 1))

    @classmethod
    def query(cls, peaks: Mapping[int, float], retention: Retention = Retention(), **acquisition: object) -> Query:  # noqa: B008
        record = SpectrumRecord(
            Source("test"), np.array([]), np.array([]), acquisition=Acquisition(**acquisition), retention=retention
        )
        return Query("q", record, cls.spectrum(peaks))

    @classmethod
    def entry(
        cls,
        peaks: Mapping[int, float],
        formula: str = "",
        *,
        measured_as: str = "",
        parent: str = "",
        retention: Retention = Retention(),  # noqa: B008
        status: EntryStatus = EntryStatus.REFERENCE,
        smiles: str = "",
        name: str = "",
        number: int = 1,
    ) -> Entry:
        identity = Identity(name=name, formula=parent or formula, smiles=smiles)
        return Entry(
            number, number, f"X{number}", identity, cls.spectrum(peaks), Acquisition(), retention, measured_as, formula,
            False, status, "", "", "",
        )  # fmt: skip


@pytest.fixture
def build() -> type[Build]:
    return Build
