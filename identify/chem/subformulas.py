"""Which peaks a composition can make: possible fragment masses, and fragment formulas for an accurate m/z.

Both look at atoms and valence only: any subset of the atoms whose rings plus double bonds are at least −0.5 (a saturated ion
with one extra hydrogen, such as NH4+) counts, whether or not a structure could really lose the rest. Heavy isotopes are not
looked at: a fragment is taken at its principal isotopes, labelled atoms at their own mass.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from identify.chem.elements import ELECTRON_MASS, MASS, MASS_NUMBER, element_of
from identify.chem.formula import Formula, doubled_unsaturation
from identify.errors import FormulaError, UsageError

MAX_COMPOSITIONS: Final = 100_000
"""Most hydrogen-free subsets that `explain_mz` looks through."""
MAX_EXPLANATIONS: Final = 200
"""Most formulas that `explain_mz` gives for one m/z."""
_LOWEST: Final = -3
"""Lowest sum of (valence − 2) allowed: rings plus double bonds of −0.5."""
_NEVER: Final = -100_000


def _spread(best: NDArray[np.int32], symbol: str, count: int) -> NDArray[np.int32]:
    """`best` with up to `count` atoms of one more kind, added in lots of 1, 2, 4, … (every number is a sum of lots)."""
    mass, value = MASS_NUMBER[symbol], doubled_unsaturation(symbol)
    lot = 1
    while count > 0:
        lot = min(lot, count)
        step, before = mass * lot, best
        best = before.copy()
        np.maximum(best[step:], before[: before.size - step] + value * lot, out=best[step:])
        count -= lot
        lot *= 2
    return best


@lru_cache(maxsize=16384)
def reachable_nominal(formula: Formula) -> NDArray[np.bool_]:
    """For each integer mass, whether some chemically possible subset of the atoms has it.

    Parameters
    ----------
    formula : Formula
        The composition as measured; its charge is not looked at.

    Returns
    -------
    ndarray of bool, shape (nominal_mass + 1,), read-only
        True where a subset with at least one atom other than hydrogen and rings plus double bonds ≥ −0.5 has this nominal
        mass (principal isotopes).

    Notes
    -----
    For every mass the greatest ``Σ (valence − 2)`` over all subsets is kept (a bounded knapsack in max-plus algebra);
    rings plus double bonds are ``1 + Σ/2``. Time grows with nominal mass times log of the numbers of atoms.

    Examples
    --------
    >>> from identify.chem.formula import parse_formula
    >>> np.flatnonzero(reachable_nominal(parse_formula("CH4O"))).tolist()
    [12, 13, 14, 15, 16, 17, 18, 19, 28, 29, 30, 31, 32]
    """
    best = np.full(formula.nominal_mass + 1, _NEVER, dtype=np.int32)
    best[0] = 0
    hydrogens = [(symbol, count) for symbol, count in formula.counts if element_of(symbol) == "H"]
    for symbol, count in formula.counts:
        if element_of(symbol) != "H":
            best = _spread(best, symbol, count)
    best[0] = _NEVER  # nothing but hydrogen is no fragment
    for symbol, count in hydrogens:
        best = _spread(best, symbol, count)
    reachable = best >= _LOWEST
    reachable.setflags(write=False)
    return reachable


@lru_cache(maxsize=32)
def _compositions(
    formula: Formula,
) -> tuple[tuple[str, ...], NDArray[np.int16], NDArray[np.float64], NDArray[np.int32]]:
    """All subsets without ordinary hydrogen: symbols, counts, masses and ``Σ (valence − 2)``."""
    others = [(symbol, count) for symbol, count in formula.counts if symbol != "H"]
    size = 1
    for _, count in others:
        size *= count + 1
        if size > MAX_COMPOSITIONS:
            raise FormulaError(
                "formula to explain peaks with",
                found=f"{formula.hill} with more than {MAX_COMPOSITIONS} subsets",
                expected="a composition of an electron-ionization spectrum",
            )
    shape = tuple(count + 1 for _, count in others)
    counts = np.indices(shape, dtype=np.int16).reshape(len(others), size).T
    masses = np.asarray(counts @ np.array([MASS[symbol] for symbol, _ in others]), dtype=np.float64)
    values = np.asarray(counts @ np.array([doubled_unsaturation(symbol) for symbol, _ in others]), dtype=np.int32)
    return tuple(symbol for symbol, _ in others), counts, masses, values


def explain_mz(formula: Formula, mz: float, tolerance_da: float) -> tuple[Formula, ...]:
    """Fragment ions of a composition within a tolerance of an accurate m/z, best mass first.

    Parameters
    ----------
    formula : Formula
        The composition as measured.
    mz : float
        Measured m/z of a singly charged positive ion.
    tolerance_da : float
        Largest deviation in Da, in (0, 0.5].

    Returns
    -------
    tuple of Formula
        Subsets with charge +1, rings plus double bonds ≥ −0.5 and at least one atom other than hydrogen, principal
        isotopes, by rising deviation; at most `MAX_EXPLANATIONS`.

    Raises
    ------
    UsageError
        For a tolerance out of range.
    FormulaError
        For a composition with more than `MAX_COMPOSITIONS` hydrogen-free subsets.

    Notes
    -----
    ``m/z = Σ n·m − m(electron)``; for each subset without hydrogen the number of hydrogens follows from what is left.

    Examples
    --------
    >>> from identify.chem.formula import parse_formula
    >>> [str(ion) for ion in explain_mz(parse_formula("C8H8O"), 105.0335, 0.002)]
    ['C7H5O+']
    """
    if not 0 < tolerance_da <= 0.5:
        raise UsageError("mass tolerance", found=f"{tolerance_da} Da", expected="more than 0 and at most 0.5 Da")
    if not np.isfinite(mz):
        return ()
    symbols, counts, masses, values = _compositions(formula)
    left = mz + ELECTRON_MASS - masses
    n_hydrogen = np.rint(left / MASS["H"])
    deviation = np.abs(left - n_hydrogen * MASS["H"])
    heavy = np.array([element_of(symbol) != "H" for symbol in symbols], dtype=bool)
    fits = (n_hydrogen >= 0) & (n_hydrogen <= formula.count("H")) & (deviation <= tolerance_da)
    fits &= (values - n_hydrogen >= _LOWEST) & counts[:, heavy].any(axis=1)
    found = np.flatnonzero(fits)
    found = found[np.argsort(deviation[found], kind="stable")][:MAX_EXPLANATIONS]
    return tuple(
        Formula.from_counts([*zip(symbols, counts[row].tolist(), strict=True), ("H", int(n_hydrogen[row]))], 1)
        for row in found.tolist()
    )
