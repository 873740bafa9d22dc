"""Does a formula leave only one way to bind its atoms? Then an isomer without an entry cannot exist."""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from typing import Final

from identify.chem.formula import Formula, parse_formula, rings_plus_double_bonds
from identify.errors import FormulaError

_ONE_BOND: Final = frozenset({"H", "[1H]", "[2H]", "[3H]", "F", "Cl", "Br", "I"})
_SEVERAL_BONDS: Final[Mapping[str, int]] = {"C": 4, "[12C]": 4, "[13C]": 4, "Si": 4, "N": 3, "P": 3, "O": 2, "S": 2}


def has_one_constitution(formula: Formula) -> bool:
    """Whether a formula has exactly one constitutional isomer, shown without enumeration for up to three atoms in the frame.

    Parameters
    ----------
    formula : Formula
        Of the molecule as measured.

    Returns
    -------
    bool
        False also where it is not known: a larger frame, other elements, ions. Usual valences (C and Si 4, N and P 3, O and
        S 2) and no carbenes are taken for granted.

    Notes
    -----
    Atoms with several bonds make the frame, the others fill its free places. One frame atom: all places are alike. Two alike
    (C=C and C≡C included): one constitution if all fillings are equal, or all but one. Two different: if all fillings are
    equal. Three alike in a saturated chain: if all fillings are equal.

    Examples
    --------
    >>> [text for text in ("CH2Cl2", "C2H5Cl", "C2H4Cl2", "C3H8", "C4H10") if has_one_constitution(parse_formula(text))]
    ['CH2Cl2', 'C2H5Cl', 'C3H8']
    """
    frame = [symbol for symbol, number in formula.counts if symbol in _SEVERAL_BONDS for _ in range(number)]
    fillings = sorted(number for symbol, number in formula.counts if symbol in _ONE_BOND)
    if formula.charge or not frame or len(frame) + sum(fillings) != formula.n_atoms:
        return False
    unsaturation = rings_plus_double_bonds(formula)
    are_alike = len(set(frame)) == 1
    all_equal = len(fillings) <= 1
    if len(frame) == 1:
        return unsaturation == 0
    if len(frame) == 2 and are_alike and frame[0] == "C":
        return unsaturation in (0, 1, 2) and (all_equal or (len(fillings) == 2 and fillings[0] == 1))
    if len(frame) == 2:
        return unsaturation == 0 and all_equal
    return len(frame) == 3 and are_alike and frame[0] == "C" and unsaturation == 0 and all_equal


@lru_cache(maxsize=20_000)
def is_only_isomer(formula_text: str) -> bool:
    """`has_one_constitution` of a formula as text; False where it cannot be read or is empty.

    Parameters
    ----------
    formula_text : str

    Returns
    -------
    bool

    Examples
    --------
    >>> is_only_isomer("CHCl3"), is_only_isomer("C8H10"), is_only_isomer("")
    (True, False, False)
    """
    try:
        return bool(formula_text) and has_one_constitution(parse_formula(formula_text))
    except FormulaError:
        return False
