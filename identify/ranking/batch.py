"""How many of the answers accepted in a batch are wrong, at any threshold?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from identify.records import Identification

THRESHOLDS: Final = (0.5, 0.6, 0.7, 0.8, 0.85, 0.9, 0.925, 0.95, 0.975, 0.99)


@dataclass(frozen=True, slots=True)
class BatchError:
    """Expected wrong answers among those accepted at one threshold.

    Attributes
    ----------
    threshold : float
    n_accepted : int
    wrong_share : float
        By the model: mean of 1 − probability of the accepted answers; 0 when none is accepted.
    second_hit_share : float or None
        By the second-ranked candidates: as many of them as reach the log-odds that the weakest accepted answer has by itself,
        over the accepted ones. None when none is accepted.
    """

    threshold: float
    n_accepted: int
    wrong_share: float
    second_hit_share: float | None


def estimate_batch_error(
    identifications: Sequence[Identification], *, groups: bool = False, thresholds: Sequence[float] = THRESHOLDS
) -> tuple[BatchError, ...]:
    """Expected share of wrong answers at each threshold, by two estimates.

    Parameters
    ----------
    identifications : sequence of Identification
    groups : bool
        Accept isomer groups instead of compounds.
    thresholds : sequence of float
        Probabilities in [0, 1].

    Returns
    -------
    tuple of BatchError
        In the order of the thresholds.

    Notes
    -----
    Two candidates of one query cannot both be right, so a second-ranked one that stands as well by itself as an accepted answer
    shows how easily a wrong compound gets that far (decoys from second hits, as in Mass Spectrometry 13:A0155,
    2024). It overstates
    the error at group level, where the second candidate is often an isomer of the first; there those are left out.
    """
    answered = [found for found in identifications if found.candidates]
    chance = np.array([f.claim.group_probability if groups else f.candidates[0].probability for f in answered])
    first = np.array([stands_alone(found, 0) for found in answered])
    second = np.array([_second(found, groups) for found in answered])
    rows = []
    for threshold in thresholds:
        accepted = chance >= threshold
        n = int(accepted.sum())
        if n == 0:
            rows.append(BatchError(threshold, 0, 0.0, None))
            continue
        decoys = int((second >= first[accepted].min()).sum())
        rows.append(BatchError(threshold, n, float((1.0 - chance[accepted]).mean()), min(1.0, decoys / n)))
    return tuple(rows)


def stands_alone(found: Identification, place: int) -> float:
    """Log-odds of a candidate before its rivals are looked at: the first part of its explanation.

    Parameters
    ----------
    found : Identification
    place : int
        Index of the candidate.

    Returns
    -------
    float
    """
    explained = found.candidates[place].explanation
    return explained.parts[0].value if explained.parts else explained.value


def _second(found: Identification, groups: bool) -> float:
    best = found.candidates[0].entry.formula_as_measured
    for place in range(1, len(found.candidates)):
        if not groups or found.candidates[place].entry.formula_as_measured != best:
            return stands_alone(found, place)
    return -np.inf
