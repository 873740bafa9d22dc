"""What else could the query be than one of the listed compounds: an isomer without an entry, or something else?"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from identify.evidence.facts import formula_facts
from identify.ranking.features import NAMES
from identify.ranking.grouping import isomer_key
from identify.records import CleanSpectrum, Entry, EvidenceItem, FloatArray, Purity, Verdict

FROM_BEST: Final = (
    "cosine, plain",
    "cosine, soft",
    "cosine without tilt",
    "deviation without tilt",
    "deviation at high m/z",
    "entry peaks missing",
    "query peaks missing",
    "query peaks",
    "low energy",
)
"""Spectral features of the best candidate that the alternatives look at."""
ELEMENTS: Final = {
    "carbon": ("C",),
    "oxygen": ("O",),
    "nitrogen": ("N",),
    "silicon": ("Si",),
    "halogens": ("F", "Cl", "Br", "I"),
    "sulfur and phosphorus": ("S", "P"),
}
"""Elements counted (logarithm of one more) in the best candidate: how many isomers it has, and how alike they fragment."""
EXTENT: Final = ("lowest m/z", "highest m/z", "weakest peak")
"""What the query's measurement covers."""
MIXTURE: Final = ("gain by a second entry", "second entry needed")
"""What the purity of the query says."""
EVIDENCE_KINDS: Final = (
    "molecular ion",
    "isotope pattern",
    "halogens in fragments",
    "carbon count",
    "losses from M",
    "ions above M",
    "nitrogen rule and rings",
    "intensity explained",
    "ions missing in the query",
    "ions only in the query",
    "accurate mass",
    "retention index",
)
"""Kinds of evidence with a weight of their own."""
KINDS: Final = ("derivative", "unsaturated")
"""Kinds of compounds for which every weight has a correction: derivatives decompose into each other, and the isomers of
unsaturated compounds (`LEAST_UNSATURATED` rings and double bonds or more, no derivative) fragment more alike than others."""
LEAST_UNSATURATED: Final = 4.0


def _by_kind(names: tuple[str, ...]) -> tuple[str, ...]:
    return (*names, *KINDS, *(f"{name}; {kind}" for kind in KINDS for name in names))


UNLISTED_NAMES: Final = _by_kind(
    (
        "log-odds of the best isomer",
        "lead over the next isomer",
        "share of the best isomer",
        "isomers listed",
        "rings and double bonds",
        "no rings or double bonds",
        "heavy atoms",
        *ELEMENTS,
        *FROM_BEST,
        *EXTENT,
    )
)
"""What isomers without an entry are judged by; see `KINDS`."""
ELSEWHERE_NAMES: Final = _by_kind(
    (
        "log-odds of the best candidate",
        "lead over the next formula",
        "second candidate behind",
        "fifth candidate behind",
        "tenth candidate behind",
        *ELEMENTS,
        *FROM_BEST,
        *EXTENT,
        *MIXTURE,
        *EVIDENCE_KINDS,
    )
)
"""What something else is judged by; see `KINDS`. Evidence is that for the best candidate."""
MOST_LEAD: Final = 6.0
"""A lead of more than this (log-odds) is no longer looked at; also the lead of a candidate without rivals."""
PROFILE: Final = (1, 4, 9)
"""Places of the candidates whose distance to the first one is looked at."""
MOST_BEHIND: Final = 10.0
"""No distance is larger; also that of a place without a candidate."""
HIGHEST_START: Final = 120
"""A query that begins higher counts as one that begins here."""
LEAST_FLOOR: Final = 0.05
"""Peaks weaker than this (%) count as this strong."""
MOST_GAIN: Final = 5.0
"""A misfit that a second entry divides by more than exp of this counts as divided by exp of this."""
_COLUMNS: Final = [NAMES.index(name) for name in FROM_BEST]


@dataclass(frozen=True, slots=True, eq=False)
class Groups:
    """Candidates grouped by isomers.

    Attributes
    ----------
    of_candidate : int array of shape (n_candidates,)
    keys : tuple of str
        Formula as measured of each group; empty where the source gives none.
    unlisted : array of shape (n_groups, len(UNLISTED_NAMES))
    elsewhere : array of shape (len(ELSEWHERE_NAMES),)
    kinds : array of shape (len(KINDS),)
        1 where the best candidate is of that kind, else 0.
    """

    of_candidate: NDArray[np.int64]
    keys: tuple[str, ...]
    unlisted: FloatArray
    elsewhere: FloatArray
    kinds: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Chances:
    """Probabilities of all answers to one query; they add up to 1.

    Attributes
    ----------
    listed : array of shape (n_candidates,)
    unlisted : array of shape (n_groups,)
        Isomers of each group that have no entry.
    elsewhere : float
        Something else.
    groups : Groups
    """

    listed: FloatArray
    unlisted: FloatArray
    elsewhere: float
    groups: Groups

    def of_group(self, candidate: int) -> float:
        """Probability of the isomer group of a candidate: its members, listed and not."""
        group = self.groups.of_candidate[candidate]
        members = self.listed[self.groups.of_candidate == group].sum()
        return min(1.0, float(members + self.unlisted[group]))


def group_isomers(
    entries: Sequence[Entry],
    features: FloatArray,
    log_odds: FloatArray,
    evidence: Sequence[Sequence[EvidenceItem]],
    query: FloatArray,
) -> Groups:
    """Isomer groups of the candidates, with what the alternatives are judged by.

    Parameters
    ----------
    entries : sequence of Entry
        Best entry of each candidate; at least one.
    features : array of shape (n_candidates, n_features)
        Rows of `identify.ranking.features.compare_with_entries`.
    log_odds : array of shape (n_candidates,)
        For each compound, spectra and evidence together.
    evidence : sequence of sequences of EvidenceItem
        For each candidate.
    query : array of shape (len(EXTENT) + len(MIXTURE),)
        From `describe_query`.

    Returns
    -------
    Groups
    """
    places: dict[str, int] = {}
    keys = [isomer_key(entry) for entry in entries]
    of_candidate = np.array([places.setdefault(key or f"#{n}", len(places)) for n, key in enumerate(keys)])
    ranked = np.argsort(-log_odds, kind="stable")
    groups, first = np.unique(of_candidate[ranked], return_index=True)  # every group has a member: 0, 1, 2, …
    best = ranked[first]
    own = log_odds[best]
    lead = np.full(groups.size, MOST_LEAD)
    after = np.delete(ranked, first)
    others, second = np.unique(of_candidate[after], return_index=True)
    lead[others] = np.minimum(own[others] - log_odds[after[second]], MOST_LEAD)
    odds = np.bincount(of_candidate, np.exp(log_odds - own[of_candidate]))
    composition = np.array([describe_composition(entries[place]) for place in best])
    kinds = np.array([kinds_of(entries[place]) for place in best])
    extent = np.broadcast_to(query[: len(EXTENT)], (groups.size, len(EXTENT)))
    rows = np.column_stack(
        [own, lead, 1.0 / odds, np.log(np.bincount(of_candidate)), composition, features[best][:, _COLUMNS], extent]
    )
    top = int(ranked[0])
    rivals = np.sort(own)[::-1]
    formula_lead = min(float(rivals[0] - rivals[1]), MOST_LEAD) if rivals.size > 1 else MOST_LEAD
    of_top = int(of_candidate[top])
    told = {item.kind: item.log_odds for item in evidence[top]}
    elsewhere = np.concatenate(
        [
            [log_odds[top], formula_lead, *measure_distances(log_odds)],
            composition[of_top, -len(ELEMENTS) :],
            features[top, _COLUMNS],
            query,
            [told.get(kind, 0.0) for kind in EVIDENCE_KINDS],
        ]
    )
    names = tuple("" if key.startswith("#") else key for key in places)
    unlisted, of_something_else = spread_by_kind(rows, kinds), spread_by_kind(elsewhere, kinds[of_top])
    return Groups(of_candidate, names, unlisted, of_something_else, kinds[of_top])


def spread_by_kind(features: FloatArray, kinds: FloatArray) -> FloatArray:
    """Features, the kinds, and the features once more for each kind, 0 where the compound is not of that kind.

    Parameters
    ----------
    features : array of shape (..., n_features)
    kinds : array of shape (..., len(KINDS))

    Returns
    -------
    array of shape (..., n_features + len(KINDS) · (1 + n_features))

    Examples
    --------
    >>> spread_by_kind(np.array([0.5, 2.0]), np.array([0.0, 1.0])).tolist()
    [0.5, 2.0, 0.0, 1.0, 0.0, 0.0, 0.5, 2.0]
    """
    corrections = [features * kinds[..., place, np.newaxis] for place in range(len(KINDS))]
    return np.concatenate([features, kinds, *corrections], axis=-1)


def describe_query(spectrum: CleanSpectrum, purity: Purity | None) -> FloatArray:
    """What a query's measurement covers and whether it is a mixture, in the order of `EXTENT` and `MIXTURE`.

    Parameters
    ----------
    spectrum : CleanSpectrum
        With at least one peak.
    purity : Purity or None
        None where it was not looked at: taken for a single compound.

    Returns
    -------
    array of shape (len(EXTENT) + len(MIXTURE),)
    """
    peaks, misfit = spectrum.nominal, () if purity is None else purity.misfit
    gain = float(np.log(misfit[0] / misfit[1])) if len(misfit) > 1 else 0.0
    return np.array(
        [
            min(spectrum.lowest_mz, HIGHEST_START) / 100.0,
            float(np.log(peaks.mz[-1])),
            float(np.log(max(float(peaks.relative.min()), LEAST_FLOOR))),
            min(gain, MOST_GAIN),
            float(purity is not None and purity.verdict is Verdict.CONFLICTS),
        ]
    )


def kinds_of(entry: Entry) -> tuple[float, ...]:
    """1 for each of `KINDS` that an entry belongs to, else 0.

    Parameters
    ----------
    entry : Entry

    Returns
    -------
    tuple of float
    """
    if entry.measured_as:
        return 1.0, 0.0
    return 0.0, float(describe_composition(entry)[0] >= LEAST_UNSATURATED)


def measure_distances(log_odds: FloatArray) -> list[float]:
    """How far the candidates at the places of `PROFILE` are behind the first one.

    Parameters
    ----------
    log_odds : array of shape (n_candidates,)

    Returns
    -------
    list of float
        Natural log-odds, at least 0 and at most `MOST_BEHIND`.

    Examples
    --------
    >>> measure_distances(np.array([1.0, 3.0]))
    [2.0, 10.0, 10.0]
    """
    ranked = np.sort(log_odds)[::-1]
    return [
        min(float(ranked[0] - ranked[place]), MOST_BEHIND) if place < ranked.size else MOST_BEHIND for place in PROFILE
    ]


def describe_composition(entry: Entry) -> tuple[float, ...]:
    """Rings plus double bonds, whether there are none, logarithms of the heavy atoms and of one more than each of `ELEMENTS`.

    Parameters
    ----------
    entry : Entry

    Returns
    -------
    tuple of float
        Of the formula as measured, else that of the compound; zeros if neither is known.
    """
    return _describe_formula(entry.formula_as_measured or entry.identity.formula)


@lru_cache(maxsize=4096)
def _describe_formula(formula: str) -> tuple[float, ...]:
    facts = formula_facts(formula)
    if facts is None:
        return (0.0,) * (3 + len(ELEMENTS))
    counts = dict(facts.formula.counts)
    heavy = sum(count for symbol, count in counts.items() if symbol not in ("H", "[2H]"))
    elements = [math.log1p(sum(counts.get(symbol, 0) for symbol in symbols)) for symbols in ELEMENTS.values()]
    return facts.saturation, float(facts.saturation < 1), math.log(max(heavy, 1)), *elements
