"""Small invented entries, drafts and answers for the tests of the ranking room."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from identify.ranking.alternatives import EXTENT, MIXTURE, Groups, group_isomers
from identify.ranking.features import NAMES
from identify.ranking.grouping import Match
from identify.ranking.model import RankingModel, default_model
from identify.ranking.rank import Ranking, rank
from identify.ranking.shortlist import shortlist
from identify.records import (
    Acquisition,
    CleanSpectrum,
    Entry,
    EntryStatus,
    EvidenceItem,
    Hit,
    Identity,
    MolecularIonEstimate,
    Peaks,
    Query,
    Retention,
    Source,
    SpectrumRecord,
    Verdict,
)
from identify.settings import Settings

NO_ION = MolecularIonEstimate((), 1.0)


def build_spectrum(peaks: Mapping[int, float], lowest_mz: int | None = None) -> CleanSpectrum:
    mz = sorted(peaks)
    return CleanSpectrum(Peaks(np.array(mz, float), np.array([peaks[m] for m in mz])), None, lowest_mz or mz[0])


def build_entry(
    number: int,
    peaks: Mapping[int, float],
    *,
    name: str = "",
    formula: str = "C8H10",
    block: str = "",
    smiles: str = "",
    measured_as: str = "",
    labelled: bool = False,
    energy: float | None = 70.0,
    status: EntryStatus = EntryStatus.REFERENCE,
    index: float | None = None,
) -> Entry:
    letters = block or "ABCDEFGHIJKLM" + chr(ord("A") + number % 26)
    identity = Identity(
        name=name or f"compound {number}", formula=formula, smiles=smiles, inchikey=f"{letters}-UHFFFAOYSA-N"
    )
    retention = Retention(index=index, phase="non-polar" if index else "")
    return Entry(
        number, number, f"E{number}", identity, build_spectrum(peaks), Acquisition(ionization="EI", energy_ev=energy),
        retention, measured_as, formula, labelled, status, "CC BY", "", "invented",
    )  # fmt: skip


def build_query(peaks: Mapping[int, float], lowest_mz: int | None = None) -> Query:
    spectrum = build_spectrum(peaks, lowest_mz)
    record = SpectrumRecord(Source("invented"), spectrum.nominal.mz, spectrum.nominal.intensity)
    return Query("q1", record, spectrum)


def build_item(kind: str, log_odds: float) -> EvidenceItem:
    verdict = Verdict.AGREES if log_odds > 0 else Verdict.CONFLICTS
    return EvidenceItem(kind, verdict, "because", log_odds=log_odds)


def build_ranking(
    query: Query,
    entries: Sequence[Entry],
    evidence: Sequence[Sequence[EvidenceItem]] = (),
    *,
    settings: Settings | None = None,
    model: RankingModel | None = None,
) -> Ranking:
    settings = settings or Settings()
    matches = [Match(Hit(entry.id, 0.9, 0.9), entry) for entry in entries]
    drafts = shortlist(query.spectrum, matches, settings, model or default_model())
    by_entry = dict(zip([entry.id for entry in entries], evidence, strict=False))
    told = [by_entry.get(draft.entry.id, ()) for draft in drafts]
    return rank(query, drafts, told, NO_ION, settings, model)


def build_groups(entries: Sequence[Entry], log_odds: Sequence[float]) -> Groups:
    """Isomer groups of candidates that nothing else is known of."""
    nothing = np.zeros((len(entries), len(NAMES)))
    about = np.zeros(len(EXTENT) + len(MIXTURE))
    return group_isomers(entries, nothing, np.array(log_odds), [()] * len(entries), about)


XYLENE = {51: 12.0, 65: 8.0, 77: 13.0, 91: 100.0, 105: 25.0, 106: 60.0, 107: 5.0}
"""Invented, of the kind a C8H10 aromatic gives."""
ALCOHOL = {31: 40.0, 41: 60.0, 43: 80.0, 56: 100.0, 69: 20.0}
"""Invented, of the kind a small alcohol gives."""
