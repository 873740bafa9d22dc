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
from numpy.typing import NDArray

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
REACH = range(-8, ABOVE - min(SHIFTS) + 1)
"""Offsets at which patterns are worked out: from the lightest tin, through all that a shift can move into the cluster."""
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


@dataclass(frozen=True, slots=True, eq=False)
class _Designs:
    """Compositions that fit under a mass, and what their fits need.

    Attributes
    ----------
    names : tuple of compositions
    matrix : array of shape (n, offsets, shifts)
        Pattern of each composition at each shift.
    penalty : array of shape (n,)
        Misfit that a composition must save to be preferred to a simpler one.
    has : bool array of shape (elements of `LOOKED_FOR`, n)
    """

    names: tuple[tuple[tuple[str, int], ...], ...]
    matrix: FloatArray
    penalty: FloatArray
    has: NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class _Compositions:
    """All compositions tried: nominal mass, pattern at the offsets `REACH`, penalty and elements of each (see `_Designs`)."""

    names: tuple[tuple[tuple[str, int], ...], ...]
    masses: NDArray[np.int64]
    patterns: FloatArray
    penalty: FloatArray
    has: NDArray[np.bool_]


@lru_cache(maxsize=1)
def _all_compositions() -> _Compositions:
    names = tuple(tuple((symbol, count) for symbol, count in found.items() if count) for found in _compositions())
    patterns = [isotope_pattern(Formula.from_counts(dict(name))) for name in names]
    return _Compositions(
        names,
        np.array([pattern.nominal_mass for pattern in patterns]),
        np.array([[pattern.at(offset) for offset in REACH] for pattern in patterns]),
        np.array([2.0 * sum(1 + 0.2 * count for _, count in name) for name in names]),
        np.array([[element in dict(name) for name in names] for element in LOOKED_FOR]),
    )


def _carbon_patterns(counts: NDArray[np.int64]) -> FloatArray:
    """Binomial 13C patterns of numbers of carbons, shape (n, len(REACH)), relative to the all-light peak."""
    carbon_13 = isotope_pattern(Formula((("C", 1),))).at(1)
    columns = [np.ones(counts.size)]
    for number in range(1, len(REACH)):
        columns.append(columns[-1] * carbon_13 * np.maximum(counts - number + 1, 0) / number)
    return np.stack(columns, axis=1)


@lru_cache(maxsize=64)
def _designs(mz: int) -> _Designs:
    """What the compositions below a mass predict, each with half and with nine tenths of the rest as carbon."""
    tried = _all_compositions()
    rows = np.repeat(np.flatnonzero(tried.masses <= mz), 2)
    share = np.tile([0.5, 0.9], rows.size // 2)  # part of the rest that is carbon with its hydrogens (13 Da a carbon)
    carbons = np.rint(share * (mz - tried.masses[rows]) / 13.0).astype(np.int64)
    kept = (carbons > 0) | (share < 0.6)
    rows, carbons = rows[kept], carbons[kept]
    pattern, light = np.zeros((rows.size, len(REACH))), tried.patterns[rows]
    for number, fraction in enumerate(_carbon_patterns(carbons).T):
        pattern[:, number:] += light[:, : len(REACH) - number] * fraction[:, None]
    pattern /= pattern[:, [-REACH[0]]]
    place = np.arange(-BELOW, ABOVE + 1)[:, None] - np.array(SHIFTS) - REACH[0]
    names = tuple(tried.names[row] for row in rows.tolist())
    return _Designs(names, pattern[:, place], tried.penalty[rows], tried.has[:, rows])


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
    designs = _designs(mz)
    unseen = np.where(
        observed > 0, 0.5 * facts.floor, facts.floor
    )  # a peak not recorded may have been just below the floor
    sigma = np.hypot(RELATIVE_ERROR * observed, np.maximum(NOISE_PERCENT / 100.0 * tallest, unseen))
    amounts, misfits, degrees = _fit_all(designs.matrix, observed, sigma)
    if not np.isfinite(misfits).any():
        return _undecided(mz, "No ion of the cluster stands at this mass.")
    return _decide(mz, designs, amounts, misfits, degrees)


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
    rows, wanted = np.ascontiguousarray(gram.transpose(1, 2, 0)), np.ascontiguousarray(target.T)
    amounts = np.zeros_like(wanted)  # systems along the last axis, so that numpy works on long rows
    inverse = [1.0 / rows[shift, shift] for shift in range(len(SHIFTS))]
    for _ in range(ROUNDS):
        for shift, row in enumerate(rows):
            rest = wanted[shift] - (row * amounts).sum(axis=0)
            amounts[shift] = np.maximum(amounts[shift] + rest * inverse[shift], 0.0)
    return amounts.T


def _decide(mz: int, designs: _Designs, amounts: FloatArray, misfits: FloatArray, degrees: int) -> ClusterFit:
    best = int(np.argmin(misfits + designs.penalty))
    composition = designs.names[best]
    misfit = float(misfits[best]) / degrees
    total = float(amounts[best].sum())
    parts = tuple(float(value) / total for value in amounts[best]) if total > 0 else (0.0,) * len(SHIFTS)
    if misfit > GOOD_FIT:
        reason = "No composition of the elements tried fits the cluster; it may hold more than one compound."
        return ClusterFit(mz, composition, (), (), LOOKED_FOR, misfit, parts, reason)
    supported, excluded, undecided = [], [], []
    scale = max(misfit, 1.0)
    for element, has in zip(LOOKED_FOR, designs.has, strict=True):
        with_it = float(misfits[has].min(initial=np.inf))
        without = float(misfits[~has].min(initial=np.inf))
        if with_it - without > DECISIVE * scale:
            excluded.append(element)
        elif without - with_it > DECISIVE * scale:
            supported.append(element)
        else:
            undecided.append(element)
    return ClusterFit(mz, composition, tuple(supported), tuple(excluded), tuple(undecided), misfit, parts)


def _undecided(mz: int, reason: str) -> ClusterFit:
    return ClusterFit(mz, (), (), (), LOOKED_FOR, 0.0, (0.0,) * len(SHIFTS), reason)


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
