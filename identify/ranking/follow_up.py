"""Which next measurement would change the answer most?"""

from __future__ import annotations

import math
from collections.abc import Sequence

from identify.records import Candidate, FollowUp, MolecularIonEstimate, Query


def propose_follow_up(
    query: Query,
    candidates: Sequence[Candidate],
    molecular_ion: MolecularIonEstimate,
) -> tuple[FollowUp, ...]:
    """Next measurements, most informative first.

    Parameters
    ----------
    query : Query
    candidates : sequence of Candidate
        Best first, with probabilities.
    molecular_ion : MolecularIonEstimate

    Returns
    -------
    tuple of FollowUp
        `priority` is the expected information in nats.
    """
    plans = []
    for candidate in candidates[:3]:
        information = _binary_entropy(candidate.probability)
        if information > 0.01:
            name = candidate.entry.identity.name
            plans.append(
                FollowUp(
                    f"measure an authentic standard of {name}",
                    f"{name} has probability {candidate.probability:.2f}",
                    (name,),
                    "same retention time and spectrum confirm it; a difference excludes it",
                    information,
                )
            )
    if molecular_ion.not_observed_probability > 0.3:
        plans.append(
            FollowUp(
                "soft ionization",
                "the spectrum may show no molecular ion",
                tuple(c.entry.identity.name for c in candidates[:3]),
                "the molecular mass",
                0.5 * molecular_ion.not_observed_probability,
            )
        )
    return tuple(sorted(plans, key=lambda plan: -plan.priority))


def _binary_entropy(p: float) -> float:
    """Entropy in nats of a yes/no question with probability `p`."""
    return 0.0 if p <= 0.0 or p >= 1.0 else -p * math.log(p) - (1 - p) * math.log1p(-p)
