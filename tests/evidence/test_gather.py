"""The contract every evidence check keeps."""

from __future__ import annotations

import numpy as np
import pytest

from identify.evidence.gather import gather_evidence
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
    Verdict,
)
from identify.settings import Settings
from identify.spectra.align import align
from tests.builders import PUBLISHED_ACETOPHENONE


def clean(peaks: dict[int, float]) -> CleanSpectrum:
    mz = sorted(peaks)
    return CleanSpectrum(Peaks(np.array(mz, float), np.array([peaks[m] for m in mz])), None, mz[0] if mz else 1)


def make_query(peaks: dict[int, float], **retention: float) -> Query:
    record = SpectrumRecord(Source("test"), np.array([]), np.array([]), retention=Retention(**retention))
    return Query("q", record, clean(peaks))


def make_entry(peaks: dict[int, float], formula: str, measured_as: str = "", parent: str = "") -> Entry:
    return Entry(
        1, 1, "X", Identity(formula=parent or formula), clean(peaks), Acquisition(), Retention(), measured_as, formula, False,
        EntryStatus.REFERENCE, "", "", "",
    )  # fmt: skip


def gather(peaks: dict[int, float], entry: Entry) -> dict[str, Verdict]:
    query = make_query(peaks)
    items = gather_evidence(query, entry, align(query.spectrum, entry.spectrum), Settings())
    return {item.kind: item.verdict for item in items}


def test_acetophenone_agrees_with_itself() -> None:
    verdicts = gather(PUBLISHED_ACETOPHENONE, make_entry(PUBLISHED_ACETOPHENONE, "C8H8O"))
    for kind in (
        "molecular ion",
        "carbon count",
        "isotope pattern",
        "ions above M",
        "losses from M",
        "intensity explained",
    ):
        assert verdicts[kind] is Verdict.AGREES, kind


def test_lighter_candidate_conflicts_through_ions_above_its_molecule() -> None:
    verdicts = gather(PUBLISHED_ACETOPHENONE, make_entry({77: 100.0, 105: 90.0, 106: 60.0, 51: 30.0}, "C7H6O"))
    assert verdicts["ions above M"] is Verdict.CONFLICTS


@pytest.mark.parametrize("formula", ["", "not a formula", "C8H8O", "C60H122Br10", "H", "B12H14", "C5[2H]5N"])
@pytest.mark.parametrize(
    "peaks", [{}, {43: 100.0}, {1: 1.0}, PUBLISHED_ACETOPHENONE, dict.fromkeys(range(1, 900), 50.0)]
)
def test_no_check_raises_and_silence_has_a_reason(formula: str, peaks: dict[int, float]) -> None:
    query, entry = make_query(peaks), make_entry(peaks, formula)
    items = gather_evidence(query, entry, align(query.spectrum, entry.spectrum), Settings())
    assert len({item.kind for item in items}) == len(items)
    for item in items:
        assert item.reason.endswith(".")
        assert np.isfinite(item.log_odds)
        if item.verdict in (Verdict.NOT_ASSESSED, Verdict.INCONCLUSIVE):
            assert item.log_odds == 0.0
