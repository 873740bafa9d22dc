"""Isotope patterns by exact convolution, at unit mass and at accurate mass.

Which peak is "the molecular ion"? Everywhere in this package it is the one at `Formula.nominal_mass`: the most abundant
isotope of *each element*. For C, H, N, O, S, Si, Cl, Br that is the all-light ion, which need not be the tallest (Br2, Cl4);
for B, Se, Ge, Sn, Hg and others lighter isotopologues stand *below* it, so a pattern may start at a negative offset.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import permutations
from math import exp, lgamma, log
from typing import Final

import numpy as np

from identify.chem.elements import ELECTRON_MASS, MASS, MASS_NUMBER, NATURAL_ISOTOPES
from identify.chem.formula import Formula
from identify.errors import UsageError
from identify.records import FloatArray, read_only

MIN_RATIO: Final = 1e-9
"""Unit-mass ratios above the last one that reaches this are cut off."""
MIN_FRACTION: Final = 1e-5
"""Smallest fraction that `fine_isotope_pattern` may be asked for; it bounds the number of peaks by its inverse."""


@dataclass(frozen=True, slots=True, eq=False)
class IsotopePattern:
    """Unit-mass isotope pattern of one composition.

    `ratios` has shape ``(n,)``: intensity at `first_mass`, `first_mass` + 1, … relative to the peak at `nominal_mass`,
    which is exactly 1; values may exceed 1 (Br2).
    """

    nominal_mass: int
    first_mass: int
    ratios: FloatArray

    def at(self, offset_from_nominal: int) -> float:
        """Ratio at `nominal_mass` + offset; 0 outside the pattern."""
        position = self.nominal_mass - self.first_mass + offset_from_nominal
        return float(self.ratios[position]) if 0 <= position < self.ratios.size else 0.0


@lru_cache(maxsize=256)
def _element_ratios(symbol: str) -> tuple[int, FloatArray]:
    """Offset of the lightest isotope from the principal one, and abundances relative to the principal one."""
    isotopes = NATURAL_ISOTOPES[symbol]
    first, principal = isotopes[0].mass_number, MASS_NUMBER[symbol]
    ratios = np.zeros(isotopes[-1].mass_number - first + 1)
    for isotope in isotopes:
        ratios[isotope.mass_number - first] = isotope.fraction
    return first - principal, read_only(ratios / ratios[principal - first])


@lru_cache(maxsize=8192)
def _power(symbol: str, count: int) -> tuple[int, FloatArray]:
    """Pattern of `count` atoms of one element, by repeated squaring."""
    if count == 1:
        return _element_ratios(symbol)
    offset, half = _power(symbol, count // 2)
    offset, ratios = _cut(2 * offset, np.convolve(half, half))
    if count % 2:
        step, single = _element_ratios(symbol)
        offset, ratios = _cut(offset + step, np.convolve(ratios, single))
    return offset, read_only(ratios)


def _cut(offset: int, ratios: FloatArray) -> tuple[int, FloatArray]:
    """Without the upper tail that no later product could lift to `MIN_RATIO`; never below the nominal peak."""
    limit = ratios.max() * (MIN_RATIO * 1e-6)
    last = max(int(np.flatnonzero(ratios > limit)[-1]), -offset)
    return offset, ratios[: last + 1]


@lru_cache(maxsize=65536)
def isotope_pattern(formula: Formula) -> IsotopePattern:
    """Unit-mass isotope pattern relative to the peak at the nominal mass.

    Parameters
    ----------
    formula : Formula
        Labelled atoms count as pure nuclides. Charge does not change the ratios.

    Returns
    -------
    IsotopePattern
        Read-only ratios; the upper tail is cut where it stays below `MIN_RATIO`.

    Notes
    -----
    The pattern is the convolution of the elements' abundance vectors, each raised to its number of atoms by repeated
    squaring, on the axis of mass numbers. Abundances: `identify.chem.elements`.

    Examples
    --------
    >>> toluene = isotope_pattern(Formula((("C", 7), ("H", 8))))
    >>> round(100 * toluene.at(1), 3), round(100 * toluene.at(2), 3)
    (7.663, 0.253)
    >>> boronic = isotope_pattern(Formula((("B", 1), ("F", 3))))
    >>> boronic.first_mass - boronic.nominal_mass, round(boronic.at(-1), 4)
    (-1, 0.2484)
    """
    offset, ratios = 0, np.ones(1)
    for symbol, count in formula.counts:
        if len(NATURAL_ISOTOPES.get(symbol, ())) > 1:
            step, power = _power(symbol, count)
            offset, ratios = offset + step, np.convolve(ratios, power)
    ratios = ratios / ratios[-offset]
    last = max(int(np.flatnonzero(ratios >= MIN_RATIO)[-1]), -offset)
    nominal = formula.nominal_mass
    return IsotopePattern(nominal, nominal + offset, read_only(ratios[: last + 1]))


def _log_fraction(symbol: str, numbers: tuple[int, ...]) -> float:
    """Log of the multinomial probability of one isotopologue of an element, isotopes by rising mass number."""
    terms = (n * log(iso.fraction) - lgamma(n + 1) for n, iso in zip(numbers, NATURAL_ISOTOPES[symbol], strict=True))
    return lgamma(sum(numbers) + 1) + sum(terms)


@lru_cache(maxsize=2048)
def _summit(symbol: str, count: int) -> tuple[tuple[int, ...], float]:
    """The most abundant isotopologue of `count` atoms and the log of its fraction."""
    principal = MASS_NUMBER[symbol]
    summit = tuple(count if isotope.mass_number == principal else 0 for isotope in NATURAL_ISOTOPES[symbol])
    level = _log_fraction(symbol, summit)
    while True:
        higher_level, higher = max((_log_fraction(symbol, move), move) for move in _moves(summit))
        if higher_level <= level:
            return summit, level
        summit, level = higher, higher_level


def _fine_element(symbol: str, count: int, log_threshold: float) -> FloatArray:
    """Rows of mass and fraction, one for every isotopologue of one element whose log fraction reaches the threshold.

    A multinomial distribution has one summit, and what lies above any level hangs together by moves of a single atom from
    one isotope to another; so flood from the summit.
    """
    isotopes = NATURAL_ISOTOPES[symbol]
    summit, _ = _summit(symbol, count)
    seen, to_visit = {summit}, [summit]
    found: list[tuple[float, float]] = []
    while to_visit:
        numbers = to_visit.pop()
        level = _log_fraction(symbol, numbers)
        if level >= log_threshold:
            found.append((sum(n * iso.mass for n, iso in zip(numbers, isotopes, strict=True)), exp(level)))
            fresh = [move for move in _moves(numbers) if move not in seen]
            seen.update(fresh)
            to_visit.extend(fresh)
    return np.array(found, dtype=np.float64).reshape(-1, 2)


def _moves(numbers: tuple[int, ...]) -> list[tuple[int, ...]]:
    """All ways to turn one atom of an element into another of its isotopes."""
    moves = []
    for source, target in permutations(range(len(numbers)), 2):
        if numbers[source]:
            step = list(numbers)
            step[source] -= 1
            step[target] += 1
            moves.append(tuple(step))
    return moves


def fine_isotope_pattern(formula: Formula, min_fraction: float = 1e-4) -> tuple[FloatArray, FloatArray]:
    """Accurate masses and fractions of all isotopologues down to a fraction, by rising mass.

    Parameters
    ----------
    formula : Formula
    min_fraction : float
        Smallest fraction of all ions to list, in [`MIN_FRACTION`, 1].

    Returns
    -------
    masses : FloatArray of shape (n,)
        In Da, electrons of the charge accounted for, not divided by the charge.
    fractions : FloatArray of shape (n,)
        Exact for every isotopologue listed; their sum falls short of 1 by what is not listed. Never more than
        ``1 / min_fraction`` values.

    Raises
    ------
    UsageError
        If `min_fraction` is out of range.

    Examples
    --------
    >>> masses, fractions = fine_isotope_pattern(Formula((("C", 1), ("Cl", 1))), 0.001)
    >>> [(round(m, 4), round(x, 4)) for m, x in zip(masses.tolist(), fractions.tolist())]
    [(46.9689, 0.7495), (47.9722, 0.0081), (48.9659, 0.2398), (49.9693, 0.0026)]
    """
    if not MIN_FRACTION <= min_fraction <= 1:
        raise UsageError(
            "smallest isotopologue fraction", found=f"{min_fraction}", expected=f"a value from {MIN_FRACTION} to 1"
        )
    mixed = [(symbol, count) for symbol, count in formula.counts if len(NATURAL_ISOTOPES.get(symbol, ())) > 1]
    pure_mass = sum(MASS[symbol] * count for symbol, count in formula.counts if (symbol, count) not in mixed)
    masses, fractions = np.array([pure_mass]), np.ones(1)
    limit = log(min_fraction) - 1e-9
    summits = [_summit(symbol, count)[1] for symbol, count in mixed]
    for position, (symbol, count) in enumerate(mixed):
        # no isotopologue of this element counts unless it reaches the limit beside the best of all the others
        part = _fine_element(symbol, count, limit - (sum(summits) - summits[position]))
        fractions = np.outer(fractions, part[:, 1]).ravel()
        kept = fractions >= exp(limit - sum(summits[position + 1 :]))
        masses, fractions = np.add.outer(masses, part[:, 0]).ravel()[kept], fractions[kept]
    order = np.argsort(masses, kind="stable")
    return read_only(masses[order] - formula.charge * ELECTRON_MASS), read_only(fractions[order])
