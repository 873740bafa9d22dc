"""Molecular formulas: reading, arithmetic, masses, rings plus double bonds.

Text is read by `identify.chem.formula_reader`, which bounds length, nesting and counts; the mass is bounded here.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

from identify.chem.elements import ALIASES, ELECTRON_MASS, MASS, MASS_NUMBER, element_of
from identify.chem.formula_reader import read_formula_text
from identify.errors import FormulaError, quote

MAX_NOMINAL_MASS: Final = 10_000
"""Heaviest formula accepted, in Da: far above any electron-ionization spectrum, and it bounds all later work."""

_UNSATURATION: Final = {
    **dict.fromkeys(("H", "F", "Cl", "Br", "I", "Li", "Na", "K", "Rb", "Cs"), -1),
    **dict.fromkeys(("N", "P", "As", "Sb", "Bi", "B", "Al", "Ga", "In"), 1),
    **dict.fromkeys(("C", "Si", "Ge", "Sn", "Pb"), 2),
}
"""Valence − 2 of one atom; divalent and all other elements have 0."""


def _hill_key(symbol: str, has_carbon: bool) -> tuple[int, str, int]:
    element = element_of(symbol)
    first = {"C": 0, "H": 1}.get(element, 2) if has_carbon else 2
    return first, element, MASS_NUMBER[symbol] if symbol.startswith("[") else 0


@dataclass(frozen=True, slots=True)
class Formula:
    """A composition with charge; equal formulas are equal objects whatever text they came from.

    Parameters
    ----------
    counts : tuple of (str, int)
        Element symbols or nuclides (`[13C]`, `[2H]`) with their numbers of atoms (≥ 1), in Hill order: carbon, hydrogen,
        then alphabetical (all alphabetical without carbon); a nuclide follows its element. `from_counts` sorts.
    charge : int
        Number of elementary charges.

    Raises
    ------
    FormulaError
        For an unknown element, a count < 1, a wrong order, or a mass above `MAX_NOMINAL_MASS`.

    Examples
    --------
    >>> caffeine = Formula((("C", 8), ("H", 10), ("N", 4), ("O", 2)))
    >>> caffeine.hill, caffeine.nominal_mass, round(caffeine.monoisotopic_mass, 4)
    ('C8H10N4O2', 194, 194.0804)
    """

    counts: tuple[tuple[str, int], ...]
    charge: int = 0

    def __post_init__(self) -> None:
        for symbol, count in self.counts:
            if symbol not in MASS:
                raise FormulaError("formula", found=f"element {quote(symbol)}", expected="a known element or nuclide")
            if count < 1:
                raise FormulaError("formula", found=f"{count} {symbol}", expected="at least one atom")
        symbols = [symbol for symbol, _ in self.counts]
        has_carbon = any(element_of(symbol) == "C" for symbol in symbols)
        if len(set(symbols)) != len(symbols) or symbols != sorted(symbols, key=lambda s: _hill_key(s, has_carbon)):
            raise FormulaError("formula", found=f"elements {' '.join(symbols)}", expected="each once, in Hill order")
        if self.nominal_mass > MAX_NOMINAL_MASS:
            raise FormulaError("formula", found=f"{self.nominal_mass} Da", expected=f"at most {MAX_NOMINAL_MASS} Da")

    @staticmethod
    def from_counts(counts: Mapping[str, int] | Iterable[tuple[str, int]], charge: int = 0) -> Formula:
        """Formula of atoms in any order; repeated symbols add up, zeros vanish.

        Parameters
        ----------
        counts : mapping or iterable of (str, int)
            Symbols (`D` and `T` accepted) and numbers of atoms ≥ 0.
        charge : int

        Returns
        -------
        Formula

        Raises
        ------
        FormulaError
            For an unknown element or a negative sum.

        Examples
        --------
        >>> Formula.from_counts({"Cl": 1, "H": 5, "C": 6}).hill
        'C6H5Cl'
        """
        total: dict[str, int] = {}
        for symbol, count in counts.items() if isinstance(counts, Mapping) else counts:
            symbol = ALIASES.get(symbol, symbol)
            total[symbol] = total.get(symbol, 0) + count
        for symbol, count in total.items():
            if symbol not in MASS:
                raise FormulaError("formula", found=f"element {quote(symbol)}", expected="a known element or nuclide")
            if count < 0:
                raise FormulaError("formula", found=f"{count} {symbol}", expected="no negative number of atoms")
        present = [symbol for symbol, count in total.items() if count]
        has_carbon = any(element_of(symbol) == "C" for symbol in present)
        present.sort(key=lambda symbol: _hill_key(symbol, has_carbon))
        return Formula(tuple((symbol, total[symbol]) for symbol in present), charge)

    @property
    def hill(self) -> str:
        """Text in Hill order that `parse_formula` reads back: `C7H7+`, `C6H5[2H]`, `C2H4^2+`."""
        text = "".join(symbol + (str(count) if count > 1 else "") for symbol, count in self.counts)
        if not self.charge:
            return text
        sign = "+" if self.charge > 0 else "-"
        return text + (sign if abs(self.charge) == 1 else f"^{abs(self.charge)}{sign}")

    def __str__(self) -> str:
        return self.hill

    @property
    def nominal_mass(self) -> int:
        """Sum of mass numbers: the most abundant isotope of each element, labelled atoms their own."""
        return sum(MASS_NUMBER[symbol] * count for symbol, count in self.counts)

    @property
    def monoisotopic_mass(self) -> float:
        """Mass in Da of the same isotopes as `nominal_mass`; missing or extra electrons of the charge accounted for."""
        return sum(MASS[symbol] * count for symbol, count in self.counts) - self.charge * ELECTRON_MASS

    @property
    def n_atoms(self) -> int:
        """Number of atoms."""
        return sum(count for _, count in self.counts)

    @property
    def is_labelled(self) -> bool:
        """Whether any atom is a stated nuclide."""
        return any(symbol.startswith("[") for symbol, _ in self.counts)

    def count(self, symbol: str) -> int:
        """Number of atoms written with exactly this symbol (`C` does not count `[13C]`; `D` = `[2H]`)."""
        symbol = ALIASES.get(symbol, symbol)
        return next((count for other, count in self.counts if other == symbol), 0)

    def contains(self, other: Formula) -> bool:
        """Whether `other` has no more atoms of any symbol than this formula; charge is not looked at."""
        mine = dict(self.counts)
        return all(mine.get(symbol, 0) >= count for symbol, count in other.counts)

    def __add__(self, other: Formula) -> Formula:
        return Formula.from_counts(self.counts + other.counts, self.charge + other.charge)

    def __sub__(self, other: Formula) -> Formula:
        """Difference; `FormulaError` if `other` has more of any atom."""
        negated = tuple((symbol, -count) for symbol, count in other.counts)
        try:
            return Formula.from_counts(self.counts + negated, self.charge - other.charge)
        except FormulaError:
            raise FormulaError(
                "difference of formulas", found=f"{self.hill} − {other.hill}", expected="a subformula to subtract"
            ) from None


@lru_cache(maxsize=8192)
def _parse_cached(text: str) -> Formula:
    return Formula.from_counts(*read_formula_text(text))


def parse_formula(text: str, *, where: str = "") -> Formula:
    """Formula of a text as records and people write it.

    Understood: any element order; parentheses and brackets, nested, with multipliers; isotopes as `[13C]`, `[13C6]`, `D`,
    `T`; components joined by `.` or `·` with a leading number (`CuSO4.5H2O`); charge at the end of a component (`+`, `-`,
    `++`, `+2`, `^2-`, and `2+` after a bracket); a trailing radical sign; blanks anywhere (`C 8 H 8 O`); subscript digits.

    Parameters
    ----------
    text : str
        At most 400 characters.
    where : str
        File and line, for the message.

    Returns
    -------
    Formula

    Raises
    ------
    FormulaError
        With the position (counted from 1) of the first character that cannot be read.

    Examples
    --------
    >>> parse_formula("CuSO4.5H2O").hill, parse_formula("C6D6").nominal_mass
    ('CuH10O9S', 84)
    >>> parse_formula("C8Hx")
    Traceback (most recent call last):
    identify.errors.FormulaError: formula: found 'x' at character 4 of 'C8Hx', expected an element symbol.
    """
    try:
        return _parse_cached(text)
    except FormulaError as error:
        if not where:
            raise
        raise FormulaError(
            error.what, where=where, found=error.found, expected=error.expected, hint=error.hint
        ) from None


def doubled_unsaturation(symbol: str) -> int:
    """Twice what one atom adds to rings plus double bonds: its valence − 2.

    Parameters
    ----------
    symbol : str
        Element or nuclide known to the isotope table.

    Returns
    -------
    int
        −1 for hydrogen, halogens and alkali metals, 1 for the nitrogen and boron groups, 2 for the carbon group, else 0.

    Examples
    --------
    >>> doubled_unsaturation("[13C]"), doubled_unsaturation("Cl")
    (2, -1)
    """
    return _UNSATURATION.get(element_of(symbol), 0)


def rings_plus_double_bonds(formula: Formula) -> float:
    """Rings plus double bonds of a composition; half-integer for an even-electron ion.

    Parameters
    ----------
    formula : Formula
        Nuclides count as their element. Charge is not looked at: C7H5O gives 5.5 with or without it.

    Returns
    -------
    float

    Notes
    -----
    ``1 + Σ n·(valence − 2)/2`` with valence 1 for H, halogens and alkali metals, 3 for N, P, As, Sb, Bi, B, Al, Ga, In, 4
    for C, Si, Ge, Sn, Pb; all other elements count as divalent (for transition metals the result means little). Same as
    ``C + Si − (H + X)/2 + (N + P)/2 + 1`` (Bright & Chen, J. Chem. Educ. 1983, 60, 557).

    Examples
    --------
    >>> rings_plus_double_bonds(parse_formula("C8H8O")), rings_plus_double_bonds(parse_formula("C3H9Si+"))
    (5.0, 0.5)
    """
    return 1.0 + 0.5 * sum(doubled_unsaturation(symbol) * count for symbol, count in formula.counts)
