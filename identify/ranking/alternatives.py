"""What else could the query be than one of the listed compounds: an isomer without an entry, or something else?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from identify.evidence.facts import formula_facts
from identify.ranking.features import NAMES
from identify.ranking.grouping import isomer_key
from identify.records import Entry, FloatArray

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
UNLISTED_NAMES: Final = (
    "log-odds of the best isomer",
    "lead over the next isomer",
    "share of the best isomer",
    "isomers listed",
    "rings and double bonds",
    "no rings or double bonds",
    "heavy atoms",
    "formula not known",
    "derivative",
    *FROM_BEST,
)
ELSEWHERE_NAMES: Final = (
    "log-odds of the best candidate",
    "lead over the next formula",
    "derivative",
    "second candidate behind",
    "fifth candidate behind",
    "tenth candidate behind",
    *FROM_BEST,
)
MOST_LEAD: Final = 6.0
"""A lead of more than this (log-odds) is no longer looked at; also the lead of a candidate without rivals."""
PROFILE: Final = (1, 4, 9)
"""Places of the candidates whose distance to the first one is looked at."""
MOST_BEHIND: Final = 10.0
"""No distance is larger; also that of a place without a candidate."""
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
    """

    of_candidate: NDArray[np.int64]
    keys: tuple[str, ...]
    unlisted: FloatArray
    elsewhere: FloatArray


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


def group_isomers(entries: Sequence[Entry], features: FloatArray, log_odds: FloatArray) -> Groups:
    """Isomer groups of the candidates, with what the alternatives are judged by.

    Parameters
    ----------
    entries : sequence of Entry
        Best entry of each candidate; at least one.
    features : array of shape (n_candidates, n_features)
        Rows of `identify.ranking.features.compare_with_entries`.
    log_odds : array of shape (n_candidates,)
        For each compound, spectra and evidence together.

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
    rows = np.column_stack(
        [
            own,
            lead,
            1.0 / odds,
            np.log(np.bincount(of_candidate)),
            [describe_composition(entries[place]) for place in best],
            [not keys[place] for place in best],
            [bool(entries[place].measured_as) for place in best],
            features[best][:, _COLUMNS],
        ]
    )
    top = int(ranked[0])
    rivals = np.sort(own)[::-1]
    formula_lead = min(float(rivals[0] - rivals[1]), MOST_LEAD) if rivals.size > 1 else MOST_LEAD
    derivative = float(bool(entries[top].measured_as))
    behind = measure_distances(log_odds)
    elsewhere = np.array([log_odds[top], formula_lead, derivative, *behind, *features[top, _COLUMNS]])
    names = tuple("" if key.startswith("#") else key for key in places)
    return Groups(of_candidate, names, rows, elsewhere)


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


def describe_composition(entry: Entry) -> tuple[float, float, float]:
    """Rings plus double bonds, whether there are none, and the logarithm of the number of heavy atoms; zeros if not known.

    Parameters
    ----------
    entry : Entry

    Returns
    -------
    tuple of float
    """
    facts = formula_facts(entry.formula_as_measured or entry.identity.formula)
    if facts is None:
        return 0.0, 0.0, 0.0
    heavy = sum(count for symbol, count in facts.formula.counts if symbol not in ("H", "[2H]"))
    return facts.saturation, float(facts.saturation < 1), float(np.log(max(heavy, 1)))
