"""Which elements does an isotope cluster ask for, whatever the candidate? Least squares over the whole cluster.

Every composition in a small set (halogens, S, Si, B, Se, some metals) gives a pattern. The observed cluster is fitted as a sum
of that pattern at M, M−1, M−2 and M+1 ([M+H]+) with non-negative amounts. Elements that every good fit contains are supported,
elements that no good fit contains are excluded, the rest is open.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from identify.chem.formula import Formula
from identify.chem.isotopes import isotope_pattern
from identify.evidence.facts import QueryFacts
from identify.records import FloatArray

SHIFTS = (-2, -1, 0, 1)
"""Hydrogens lost (−) or gained (+) by the ions that share a molecular cluster."""
BELOW, ABOVE = 6, 10
"""Offsets of the cluster that are compared: from 6 below M (metals) to 10 above."""
LOOKED_FOR = ("Cl", "Br", "S", "Si", "B", "Se", "Sn", "Ge")
"""Elements about which a verdict is given."""
RELATIVE_ERROR, NOISE_PERCENT = 0.05, 0.4
"""Error of an intensity: 5 % of it (2–5 % RSD is good practice; methods.md 4) and 0.4 % of the cluster's tallest peak."""
DECISIVE, OPEN = 12.0, 4.0
"""Differences in misfit (chi squared) beyond which an element is decided, and below which compositions count as equally good."""
ROUNDS = 20
"""Rounds of coordinate descent; the systems are nearly triangular, so that few are needed."""
GOOD_FIT = 4.0
"""Misfit per degree of freedom above which no composition explains the cluster."""


@dataclass(frozen=True, slots=True)
class ClusterFit:
    """What an isotope cluster says about elements.

    Attributes
    ----------
    mz : int
        The all-light peak the fit was made for.
    composition : tuple of (str, int)
        Elements of the best fit; empty for C, H, N, O, F, P, I only.
    supported, excluded, open : tuple of str
        Elements of `LOOKED_FOR` by verdict.
    misfit : float
        Chi squared per degree of freedom of the best fit.
    parts : tuple of float
        Amounts of [M−2], [M−1], M and [M+H]+ in the best fit, relative to their sum.
    reason : str
        Empty when the fit is good, else why nothing was decided.
    """

    mz: int
    composition: tuple[tuple[str, int], ...]
    supported: tuple[str, ...]
    excluded: tuple[str, ...]
    open: tuple[str, ...]
    misfit: float
    parts: tuple[float, ...]
    reason: str = ""

    def count(self, element: str) -> int:
        """Atoms of an element in the best fit."""
        return dict(self.composition).get(element, 0)


def _compositions() -> Iterable[dict[str, int]]:
    for chlorine in range(11):
        for bromine in range(6 if chlorine == 0 else 4):
            for sulfur in range(4 if chlorine + bromine == 0 else 3 if chlorine + bromine <= 3 else 1):
                yield {"Cl": chlorine, "Br": bromine, "S": sulfur}
    for silicon in range(1, 9):
        for other in ({}, {"Cl": 1}, {"Cl": 2}, {"S": 1}, {"Br": 1}):
            if silicon <= 4 or not other:
                yield {"Si": silicon, **other}
    for element in ("B", "Se", "Sn", "Ge"):
        for other in ({}, {"Cl": 1}, {"Cl": 2}, {"Br": 1}):
            yield {element: 1, **other}


@lru_cache(maxsize=1200)
def _patterns(mz: int) -> tuple[tuple[tuple[tuple[str, int], ...], ...], FloatArray]:
    """Compositions that fit under a mass, and their design matrices of shape (n, offsets, shifts)."""
    kept: list[tuple[tuple[str, int], ...]] = []
    rows: list[FloatArray] = []
    for composition in _compositions():
        heavy = Formula.from_counts({symbol: count for symbol, count in composition.items() if count})
        rest = mz - heavy.nominal_mass
        if rest < 0:
            continue
        for share in (0.5, 0.9):  # part of the rest that is carbon with its hydrogens (13 Da a carbon)
            carbon = round(share * rest / 13.0)
            if carbon == 0 and share > 0.6:
                continue
            pattern = isotope_pattern(heavy + Formula.from_counts({"C": carbon}) if carbon else heavy)
            kept.append(tuple((symbol, count) for symbol, count in composition.items() if count))
            rows.append(
                np.array([[pattern.at(offset - shift) for shift in SHIFTS] for offset in range(-BELOW, ABOVE + 1)])
            )
    return tuple(kept), np.stack(rows)


def fit_cluster(facts: QueryFacts, mz: int) -> ClusterFit:
    """Elements that the isotope cluster starting at an m/z supports, excludes and leaves open.

    Parameters
    ----------
    facts : QueryFacts
    mz : int
        Nominal mass (all-light) of the ion.

    Returns
    -------
    ClusterFit
        With a `reason` and everything open when the cluster is too weak or no composition fits.

    Notes
    -----
    Weighted non-negative least squares by coordinate descent, for all compositions at once. Peaks below M − 2 belong to other
    ions and are counted only where a composition predicts them. The carbon number is not decided here: two are tried and the best
    counts, so that M+1 alone never decides about an element.
    """
    if mz < 12 or mz > 2000:
        return _undecided(mz, "There is no ion to judge at this mass.")
    observed = np.array([facts.at(mz + offset) for offset in range(-BELOW, ABOVE + 1)])
    tallest = float(observed[BELOW - 2 :].max(initial=0.0))
    if tallest < max(3.0 * facts.floor, 1.0):
        return _undecided(mz, "The cluster is too weak for its isotope peaks to be recorded.")
    names, design = _patterns(mz)
    unseen = np.where(
        observed > 0, 0.5 * facts.floor, facts.floor
    )  # a peak not recorded may have been just below the floor
    sigma = np.hypot(RELATIVE_ERROR * observed, np.maximum(NOISE_PERCENT / 100.0 * tallest, unseen))
    amounts, misfits, degrees = _fit_all(design, observed, sigma)
    if not np.isfinite(misfits).any():
        return _undecided(mz, "No ion of the cluster stands at this mass.")
    return _decide(mz, names, amounts, misfits, degrees)


def _fit_all(design: FloatArray, observed: FloatArray, sigma: FloatArray) -> tuple[FloatArray, FloatArray, int]:
    counted = np.ones(observed.size)
    counted[: BELOW - 2] = 0.0
    needed = design[:, : BELOW - 2, 2] > 0.01  # a light isotope below M: compared, though it may hide under other ions
    weight = np.tile(counted / sigma**2, (len(design), 1))
    weight[:, : BELOW - 2] = np.where(needed, 1.0 / sigma[: BELOW - 2] ** 2, 0.0)
    weighted = design * weight[:, :, None]
    gram = np.matmul(weighted.transpose(0, 2, 1), design)
    target = np.einsum("nos,o->ns", weighted, observed)
    amounts = _descend(gram, target)
    residual = observed - np.matmul(design, amounts[:, :, None])[:, :, 0]
    excess_below = (residual[:, : BELOW - 2] > 0) & (weight[:, : BELOW - 2] > 0)
    weight[:, : BELOW - 2][excess_below] = 0.0
    misfits = np.sum(weight * residual**2, axis=1)
    main = amounts[:, 2] >= 0.05 * amounts.sum(axis=1)
    misfits = np.where(main, misfits, np.inf)
    return amounts, misfits, int(counted.sum()) - len(SHIFTS)


def _descend(gram: FloatArray, target: FloatArray) -> FloatArray:
    """Non-negative least squares for many small systems at once: cyclic coordinate descent."""
    amounts = np.zeros_like(target)
    columns = [np.ascontiguousarray(gram[:, shift]) for shift in range(len(SHIFTS))]
    inverse = [1.0 / gram[:, shift, shift] for shift in range(len(SHIFTS))]
    for _ in range(ROUNDS):
        for shift, column in enumerate(columns):
            rest = target[:, shift] - (column * amounts).sum(axis=1)
            amounts[:, shift] = np.maximum(amounts[:, shift] + rest * inverse[shift], 0.0)
    return amounts


def _decide(
    mz: int, names: tuple[tuple[tuple[str, int], ...], ...], amounts: FloatArray, misfits: FloatArray, degrees: int
) -> ClusterFit:
    simple = misfits + np.array([2.0 * sum(1 + 0.2 * count for _, count in composition) for composition in names])
    best = int(np.argmin(simple))
    misfit = float(misfits[best]) / degrees
    total = float(amounts[best].sum())
    parts = tuple(float(value) / total for value in amounts[best]) if total > 0 else (0.0,) * len(SHIFTS)
    if misfit > GOOD_FIT:
        reason = "No composition of the elements tried fits the cluster; it may hold more than one compound."
        return ClusterFit(mz, names[best], (), (), LOOKED_FOR, misfit, parts, reason)
    supported, excluded, undecided = [], [], []
    scale = max(misfit, 1.0)
    for element in LOOKED_FOR:
        has = np.array([any(symbol == element for symbol, _ in composition) for composition in names])
        with_it = float(misfits[has].min(initial=np.inf))
        without = float(misfits[~has].min(initial=np.inf))
        if with_it - without > DECISIVE * scale:
            excluded.append(element)
        elif without - with_it > DECISIVE * scale:
            supported.append(element)
        else:
            undecided.append(element)
    return ClusterFit(mz, names[best], tuple(supported), tuple(excluded), tuple(undecided), misfit, parts)


def _undecided(mz: int, reason: str) -> ClusterFit:
    return ClusterFit(mz, (), (), (), LOOKED_FOR, 0.0, (0.0,) * len(SHIFTS), reason)


def find_clusters(facts: QueryFacts, count: int = 3) -> tuple[int, ...]:
    """m/z of the all-light peaks of the strongest isotope clusters in the upper half of the spectrum, strongest first.

    Parameters
    ----------
    facts : QueryFacts
    count : int
        How many at most.

    Returns
    -------
    tuple of int
        Where the molecular ion is missing, these big fragments carry the isotope evidence instead.

    Notes
    -----
    A cluster begins at a peak of at least 5 % of base with less than a fifth of its height at each of the three m/z below it.
    """
    half = max(facts.top_mz // 2, facts.lowest_mz, 40)
    starts = [
        (value, mz)
        for mz, value in enumerate(facts.dense[half:], start=half)
        if value >= 5.0 and all(facts.at(mz - step) < 0.2 * value for step in (1, 2, 3))
    ]
    return tuple(mz for _, mz in sorted(starts, reverse=True)[:count])


def element_words(fit: ClusterFit) -> str:
    """The elements of the best fit as a short text.

    Examples
    --------
    >>> element_words(ClusterFit(146, (("Cl", 2),), ("Cl",), ("Br",), (), 0.5, (0.0, 0.0, 1.0, 0.0)))
    'Cl2'
    >>> element_words(ClusterFit(78, (), (), (), (), 0.5, (0.0, 0.0, 1.0, 0.0)))
    'no Cl, Br, S or Si'
    """
    text = "".join(f"{symbol}{count if count > 1 else ''}" for symbol, count in fit.composition)
    return text or "no Cl, Br, S or Si"
