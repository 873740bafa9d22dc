"""Which compounds deserve a closer look, best first, before any evidence is gathered?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.ranking.features import compare_with_entries
from identify.ranking.grouping import Match, compound_key
from identify.ranking.ions import compare_closely
from identify.ranking.model import RankingModel, default_model, explain_spectra
from identify.records import AlignedPeaks, CleanSpectrum, Entry, Explanation, FloatArray
from identify.settings import Settings
from identify.spectra.align import align_all

N_CLOSER = 50
"""Compounds whose best entry is compared ion by ion."""
EQUAL = 9
"""Decimals of log-odds: what differs by less is a tie, whatever the rounding of the machine."""
N_DRAFTS = 25
"""Drafts kept at least, however few candidates are reported, so that the probabilities have rivals to weigh."""


@dataclass(frozen=True, slots=True, eq=False)
class Draft:
    """A compound on the shortlist: its best entry, exact peaks, and what the spectra alone say for it.

    Attributes
    ----------
    key : str
        See `identify.ranking.grouping.compound_key`.
    features : array of shape (n_features,)
        In the order of `identify.ranking.model.SPECTRAL_NAMES`.
    match : Explanation
        Log-odds from the spectra as they count beside the evidence, part by part.
    n_entries : int
        Entries of this compound among the hits; shown, never used.
    """

    key: str
    entry: Entry
    library: str
    aligned: AlignedPeaks
    cosine: float
    reverse: float
    features: FloatArray
    match: Explanation
    n_entries: int


def shortlist(
    spectrum: CleanSpectrum, matches: Sequence[Match], settings: Settings, model: RankingModel | None = None
) -> tuple[Draft, ...]:
    """Ordered drafts, one per compound, at most the larger of `settings.top` and 25.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    matches : sequence of Match
        United hits of all libraries searched, with their entries; of equally good ones the first is kept.
    settings : Settings
    model : RankingModel, optional
        The shipped one by default.

    Returns
    -------
    tuple of Draft
        Best first by the log-odds of the spectra alone; empty when there is no hit.
    """
    if not matches:
        return ()
    model = model or default_model()
    entries = [match.entry for match in matches]
    features = compare_with_entries(
        spectrum, [entry.spectrum for entry in entries], [entry.acquisition.energy_ev for entry in entries]
    )
    log_odds = np.round(model.shortlist.value(features), EQUAL)
    best: dict[str, int] = {}
    n_entries: dict[str, int] = {}
    for place, entry in enumerate(entries):
        key = compound_key(entry)
        n_entries[key] = n_entries.get(key, 0) + 1
        if key not in best or log_odds[place] > log_odds[best[key]]:
            best[key] = place
    keys = sorted(best, key=lambda key: (-log_odds[best[key]], best[key]))[: max(settings.top, N_CLOSER)]
    places = [best[key] for key in keys]
    closer = compare_closely(spectrum, [entries[place].spectrum for place in places])
    rows = np.concatenate([features[places], closer], axis=1)
    order = np.argsort(-np.round(model.spectra.value(rows), EQUAL), kind="stable")
    chosen = order[: max(settings.top, N_DRAFTS)].tolist()
    told = explain_spectra(model, rows[chosen])
    pairs = align_all(spectrum, [entries[places[number]].spectrum for number in chosen])
    drafts = []
    for number, explained, aligned in zip(chosen, told, pairs, strict=True):
        match = matches[places[number]]
        drafts.append(
            Draft(
                keys[number],
                match.entry,
                match.library,
                aligned,
                match.hit.cosine,
                match.hit.reverse,
                rows[number],
                explained,
                n_entries[keys[number]],
            )
        )
    return tuple(drafts)
