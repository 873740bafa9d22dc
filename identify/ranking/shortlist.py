"""Which compounds deserve a closer look, best first, before any evidence is gathered?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from identify.ranking.grouping import Match, group_matches
from identify.records import AlignedPeaks, CleanSpectrum, Entry, Explanation
from identify.settings import Settings
from identify.spectra.align import align

N_DRAFTS = 25
"""Drafts kept at least, however few candidates are reported, so that the probabilities have rivals to weigh."""


@dataclass(frozen=True, slots=True, eq=False)
class Draft:
    """A compound on the shortlist: its best entry, exact peaks, and what the spectra alone say for it.

    Attributes
    ----------
    key : str
        See `identify.ranking.grouping.compound_key`.
    match : Explanation
        Log-odds from the spectra alone, part by part.
    n_entries : int
        Entries of this compound among the hits; shown, never used.
    """

    key: str
    entry: Entry
    library: str
    aligned: AlignedPeaks
    cosine: float
    reverse: float
    match: Explanation
    n_entries: int


def shortlist(spectrum: CleanSpectrum, matches: Sequence[Match], settings: Settings) -> tuple[Draft, ...]:
    """Ordered drafts, one per compound, at most the larger of `settings.top` and 25.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    matches : sequence of Match
        United hits of all libraries searched, with their entries.
    settings : Settings

    Returns
    -------
    tuple of Draft
        Best first by the log-odds of the spectra alone; empty when there is no hit.
    """
    scored: list[tuple[float, str, Match, Explanation, int]] = []
    for key, members in group_matches(matches).items():
        best, explanation = max(((m, _explain_match(m)) for m in members), key=lambda pair: pair[1].value)
        scored.append((explanation.value, key, best, explanation, len(members)))
    scored.sort(key=lambda row: (-row[0], row[2].entry.id))
    drafts = []
    for _, key, best, explanation, n_entries in scored[: max(settings.top, N_DRAFTS)]:
        aligned = align(spectrum, best.entry.spectrum)
        hit = best.hit
        drafts.append(Draft(key, best.entry, best.library, aligned, hit.cosine, hit.reverse, explanation, n_entries))
    return tuple(drafts)


def _explain_match(match: Match) -> Explanation:
    cosine = Explanation("weighted cosine", 14.0 * match.hit.cosine)
    reverse = Explanation("reverse match", 4.0 * match.hit.reverse)
    return Explanation("spectra", cosine.value + reverse.value, parts=(cosine, reverse))
