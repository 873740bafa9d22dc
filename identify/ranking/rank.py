"""In which order, how sure, at what level, what next?"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

from identify.ranking.claim import make_claim
from identify.ranking.follow_up import propose_follow_up
from identify.ranking.shortlist import Draft
from identify.records import (
    Candidate,
    Claim,
    EvidenceItem,
    Explanation,
    FollowUp,
    MolecularIonEstimate,
    Query,
)
from identify.settings import Settings


class Ranking(NamedTuple):
    """What ranking adds to a query."""

    candidates: tuple[Candidate, ...]
    in_library_probability: float
    claim: Claim
    follow_up: tuple[FollowUp, ...]


def rank(
    query: Query,
    drafts: Sequence[Draft],
    evidence: Sequence[Sequence[EvidenceItem]],
    molecular_ion: MolecularIonEstimate,
    settings: Settings,
) -> Ranking:
    """Candidates in their final order with probabilities, the claim and the next measurements.

    Parameters
    ----------
    query : Query
    drafts : sequence of Draft
        From `identify.ranking.shortlist.shortlist`.
    evidence : sequence of sequences of EvidenceItem
        Evidence of the first drafts, in their order; drafts beyond its length have none.
    molecular_ion : MolecularIonEstimate
    settings : Settings

    Returns
    -------
    Ranking
        As many candidates as drafts; probabilities are of the compound, and add up to at most 1.
    """
    rows = []
    for place, draft in enumerate(drafts):
        items = tuple(evidence[place]) if place < len(evidence) else ()
        parts = tuple(Explanation(item.kind, item.log_odds, item.reason) for item in items if item.log_odds)
        told = Explanation("evidence", sum(part.value for part in parts), parts=parts)
        rows.append((draft.match.value + told.value, draft, items, told))
    rows.sort(key=lambda row: -row[0])
    inside = _in_library(rows[0][0] if rows else -math.inf)
    total = sum(math.exp(row[0] - rows[0][0]) for row in rows) if rows else 1.0
    candidates = tuple(
        Candidate(
            rank=place,
            entry=draft.entry,
            library=draft.library,
            aligned=draft.aligned,
            cosine=draft.cosine,
            reverse=draft.reverse,
            evidence=items,
            probability=inside * math.exp(value - rows[0][0]) / total,
            explanation=Explanation("log-odds", draft.match.value + told.value, parts=(draft.match, told)),
            n_entries=draft.n_entries,
        )
        for place, (value, draft, items, told) in enumerate(rows, start=1)
    )
    claim = make_claim(candidates, inside, settings)
    return Ranking(candidates, inside, claim, propose_follow_up(query, candidates, molecular_ion))


def _in_library(best: float) -> float:
    """Share of queries whose compound is in the library, from the log-odds of the best candidate."""
    return 1.0 / (1.0 + math.exp(-(best - 14.0))) if best > -700 else 0.0
