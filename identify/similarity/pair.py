"""Scores of one query and one entry on the best peaks both have: accurate m/z where both carry it, else nominal.

The index compares nominal m/z only; this rescores the few entries that matter.
"""

from __future__ import annotations

from dataclasses import dataclass

from identify.records import AlignedPeaks, CleanSpectrum
from identify.settings import Settings
from identify.similarity.scores import cosine_score, reverse_score
from identify.spectra.align import align, align_accurate


@dataclass(frozen=True, slots=True, eq=False)
class PairScores:
    """How alike two spectra are, and on which peaks that was judged.

    Attributes
    ----------
    aligned : AlignedPeaks
        The peaks compared.
    cosine, reverse : float
        Scores in [0, 1] on these peaks.
    is_accurate : bool
        Whether accurate m/z were compared.
    note : str
        For a mixed pair, what was compared instead and why; else empty.
    """

    aligned: AlignedPeaks
    cosine: float
    reverse: float
    is_accurate: bool
    note: str = ""


def score_pair(query: CleanSpectrum, entry: CleanSpectrum, settings: Settings) -> PairScores:
    """Cosine and reverse-match similarity on accurate m/z where both spectra carry them, else on nominal m/z.

    Parameters
    ----------
    query, entry : CleanSpectrum
        The two spectra.
    settings : Settings
        Weighting and accurate-mass tolerance.

    Returns
    -------
    PairScores
        Accurate scores are not above the nominal ones by much and often far below: an ion of another formula at the same
        nominal m/z no longer matches.
    """
    if query.accurate is not None and entry.accurate is not None:
        lowest = max(query.lowest_mz, entry.lowest_mz)
        aligned = align_accurate(query.accurate, entry.accurate, lowest, settings.tolerance_ppm, settings.tolerance_da)
        return _score(aligned, settings, is_accurate=True)
    note = ""
    if query.accurate is not None or entry.accurate is not None:
        which = "entry" if entry.accurate is None else "query"
        note = f"Compared at nominal m/z: the {which} has no accurate masses."
    return _score(align(query, entry), settings, is_accurate=False, note=note)


def _score(aligned: AlignedPeaks, settings: Settings, *, is_accurate: bool, note: str = "") -> PairScores:
    cosine, reverse = cosine_score(aligned, settings.weighting), reverse_score(aligned, settings.weighting)
    return PairScores(aligned, cosine, reverse, is_accurate, note)
