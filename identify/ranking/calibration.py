"""Do the probabilities fit this library? Three numbers refitted on its own replicates."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from identify.ranking.model import RankingModel
from identify.records import FloatArray

LEAST_QUERIES: Final = 60
"""Fewer compounds with replicates than this say too little; the shipped calibration stays."""
PRIOR: Final = 2.0
"""Precision of the normal prior around the shipped numbers: worth a few dozen queries."""
ROUNDS: Final = 50
N_PARTS: Final = 5
"""Parts of the compounds, each judged by a calibration fitted on the others."""


@dataclass(frozen=True, slots=True)
class Shift:
    """What a calibration changes; the values of the shipped model are 1, 0 and 0.

    Attributes
    ----------
    sharpness : float
        Factor on all log-odds, greater than 0.
    unlisted, elsewhere : float
        Added to the log-odds of isomers without an entry, and of something else.
    """

    sharpness: float = 1.0
    unlisted: float = 0.0
    elsewhere: float = 0.0


SHIPPED: Final = Shift()
"""No change."""


@dataclass(frozen=True, slots=True, eq=False)
class Played:
    """One replicate played as a query against the rest of its library, with its compound or without it.

    Attributes
    ----------
    listed : array of shape (n_candidates,)
        Log-odds of each compound.
    unlisted : array of shape (n_groups,)
        Log-odds of isomers without an entry; ``-inf`` where there can be none.
    elsewhere : float
        Log-odds of something else.
    right_candidate, right_group : int or None
        Which of them is the answer; both None when it is something else.
    weight : float
    part : int
        Part of the compound; see `N_PARTS`.
    """

    listed: FloatArray
    unlisted: FloatArray
    elsewhere: float
    right_candidate: int | None = None
    right_group: int | None = None
    weight: float = 1.0
    part: int = 0


@dataclass(frozen=True, slots=True)
class CalibrationResult:
    """What was found.

    Attributes
    ----------
    shift : Shift
        Without effect when the shipped calibration stays.
    is_refitted : bool
    n_compounds : int
    loss_shipped, loss_refitted : float
        Mean negative log-likelihood of the right answer on compounds that took no part in the fit; lower is better.
    note : str
        One sentence.
    """

    shift: Shift
    is_refitted: bool
    n_compounds: int
    loss_shipped: float
    loss_refitted: float
    note: str


def shift_model(model: RankingModel, shift: Shift) -> RankingModel:
    """The model with a calibration applied; the order of candidates stays, their probabilities change.

    Parameters
    ----------
    model : RankingModel
    shift : Shift

    Returns
    -------
    RankingModel
    """
    return replace(
        model,
        sharpness=model.sharpness * shift.sharpness,
        unlisted=replace(model.unlisted, constant=model.unlisted.constant + shift.unlisted),
        elsewhere=replace(model.elsewhere, constant=model.elsewhere.constant + shift.elsewhere),
    )


def fit_shift(played: Sequence[Played], n_compounds: int) -> CalibrationResult:
    """The sharpness and the weight of the two "not listed" answers that fit a library best, if they fit better at all.

    Parameters
    ----------
    played : sequence of Played
        Of every compound with replicates, best both with its compound in the library and without it.
    n_compounds : int
        Compounds played.

    Returns
    -------
    CalibrationResult
        Not refitted when fewer than `LEAST_QUERIES` compounds were played, or when numbers fitted on four parts of the compounds
        do no better on the fifth than the shipped ones.

    Notes
    -----
    Maximum likelihood of ``softmax(sharpness · (log-odds + offset))`` with a normal prior around the shipped numbers.

    Examples
    --------
    >>> fit_shift([], 0).note
    'compounds with replicates: 0, at least 60 needed; the shipped calibration stays'
    """
    if n_compounds < LEAST_QUERIES:
        note = (
            f"compounds with replicates: {n_compounds}, at least {LEAST_QUERIES} needed; the shipped calibration stays"
        )
        return CalibrationResult(SHIPPED, False, n_compounds, 0.0, 0.0, note)
    shipped = refitted = total = 0.0
    for part in range(N_PARTS):
        others = _maximise([one for one in played if one.part != part])
        for one in played:
            if one.part == part:
                shipped += one.weight * _loss(SHIPPED, one)
                refitted += one.weight * _loss(others, one)
                total += one.weight
    shipped, refitted = shipped / total, refitted / total
    if refitted >= shipped:
        note = (
            f"{n_compounds} compounds played; refitted numbers do no better on compounds held out "
            f"(loss {refitted:.4f} against {shipped:.4f}); the shipped calibration stays"
        )
        return CalibrationResult(SHIPPED, False, n_compounds, shipped, refitted, note)
    shift = _maximise(played)
    note = (
        f"{n_compounds} compounds played: sharpness × {shift.sharpness:.2f}, unlisted isomers {shift.unlisted:+.2f}, "
        f"something else {shift.elsewhere:+.2f} log-odds; loss on compounds held out {refitted:.4f} instead of {shipped:.4f}"
    )
    return CalibrationResult(shift, True, n_compounds, shipped, refitted, note)


def _answers(shift: Shift, one: Played) -> tuple[FloatArray, int]:
    """Log-odds of all answers after a shift, and the place of the right one."""
    odds = np.concatenate([one.listed, one.unlisted + shift.unlisted, [one.elsewhere + shift.elsewhere]])
    if one.right_candidate is not None:
        return odds, one.right_candidate
    return odds, odds.size - 1 if one.right_group is None else one.listed.size + one.right_group


def _chances(shift: Shift, odds: FloatArray) -> FloatArray:
    weight = np.exp(shift.sharpness * (odds - odds.max()))
    chances: FloatArray = weight / weight.sum()
    return chances


def _loss(shift: Shift, one: Played) -> float:
    odds, answer = _answers(shift, one)
    return -float(np.log(max(_chances(shift, odds)[answer], 1e-12)))


def _maximise(played: Sequence[Played]) -> Shift:
    """Numbers of the largest likelihood with its prior, by Fisher scoring over ln sharpness and the two offsets."""
    theta = np.zeros(3)
    for _ in range(ROUNDS):
        shift = Shift(float(np.exp(theta[0])), float(theta[1]), float(theta[2]))
        slope, curvature = -PRIOR * theta, PRIOR * np.eye(3)
        for one in played:
            odds, answer = _answers(shift, one)
            chance = _chances(shift, odds)
            n, finite = one.listed.size, np.where(np.isfinite(odds), odds, 0.0)
            kind = np.zeros((odds.size, 3))
            kind[:, 0] = shift.sharpness * finite
            kind[n:-1, 1] = kind[-1, 2] = shift.sharpness
            mean = chance @ kind
            slope = slope + one.weight * (kind[answer] - mean)
            curvature = curvature + one.weight * ((kind * chance[:, None]).T @ kind - np.outer(mean, mean))
        step = np.clip(np.linalg.solve(curvature, slope), -0.5, 0.5)
        theta = np.clip(theta + step, -4.0, 4.0)
        if np.abs(step).max() < 1e-6:
            break
    return Shift(float(np.exp(theta[0])), float(theta[1]), float(theta[2]))
