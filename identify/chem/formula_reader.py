"""Reading formula text character by character into atoms and charge.

Text from files is hostile: length, nesting and counts are bounded, and every refusal names the character.
"""

from __future__ import annotations

from typing import Final

from identify.chem.elements import ALIASES, MASS, NUCLIDES
from identify.errors import FormulaError, quote

MAX_TEXT: Final = 400
"""Longest formula text read, in characters."""
MAX_DEPTH: Final = 8
"""Deepest nesting of parentheses and brackets."""
MAX_COUNT: Final = 10_000
"""Largest count or multiplier."""
MAX_CHARGE: Final = 20

_PLAIN: Final = {
    **{ord(char): str(value) for value, char in enumerate("₀₁₂₃₄₅₆₇₈₉")},
    **{ord(char): str(value) for value, char in enumerate("⁰¹²³⁴⁵⁶⁷⁸⁹")},
    **dict.fromkeys(map(ord, "⁻−–"), "-"),
    **dict.fromkeys(map(ord, "·•⋅∙"), "."),
    **dict.fromkeys(map(ord, "\t\r\n\u00a0"), " "),
    ord("⁺"): "+",
}
"""One plain character for each typographic one, so that positions in the message stay right."""

Counts = dict[str, int]


def read_formula_text(text: str) -> tuple[Counts, int]:
    """Atoms and charge of a formula text; see `identify.chem.formula.parse_formula` for what is understood.

    Parameters
    ----------
    text : str

    Returns
    -------
    counts : dict of str to int
        Symbols (`C`, `[13C]`) and numbers, in the order met.
    charge : int

    Raises
    ------
    FormulaError
        With the position of the first character that cannot be read.

    Examples
    --------
    >>> read_formula_text("CH3OH")
    ({'C': 1, 'H': 4, 'O': 1}, 0)
    """
    return _Reader(text).read()


class _Reader:
    """Recursive-descent reader over one text; `at` is the next character."""

    def __init__(self, text: str) -> None:
        self.original = text
        self.text = text.translate(_PLAIN)
        self.at = 0

    def fail(self, expected: str, *, at: int | None = None, hint: str = "") -> FormulaError:
        at = self.at if at is None else at
        shown = quote(self.original)
        if at < len(self.original):
            found = f"{quote(self.original[at])} at character {at + 1} of {shown}"
        else:
            found = f"the end of {shown}"
        return FormulaError("formula", found=found, expected=expected, hint=hint)

    def peek(self) -> str:
        while self.at < len(self.text) and self.text[self.at] == " ":
            self.at += 1
        return self.text[self.at] if self.at < len(self.text) else ""

    def read(self) -> tuple[Counts, int]:
        """Atoms and charge of the whole text: components joined by dots."""
        if len(self.text) > MAX_TEXT:
            raise FormulaError("formula", found=f"{len(self.text)} characters", expected=f"at most {MAX_TEXT}")
        counts, charge = self.component(1)
        while self.peek():
            if self.text[self.at] != ".":
                raise self.fail("an element symbol")
            self.at += 1
            multiplier = self.digits() if self.peek().isdigit() else 1
            more, more_charge = self.component(multiplier)
            for symbol, count in more.items():
                counts[symbol] = counts.get(symbol, 0) + count
            charge += more_charge
        if abs(charge) > MAX_CHARGE:
            raise FormulaError("formula", found=f"charge {charge}", expected=f"at most {MAX_CHARGE} charges")
        return counts, charge

    def component(self, multiplier: int) -> tuple[Counts, int]:
        """Units up to a dot or the end, with their charge."""
        counts = self.units(0)
        charge = self.charge()
        return {symbol: count * multiplier for symbol, count in counts.items()}, charge * multiplier

    def units(self, depth: int) -> Counts:
        """A run of elements, isotopes and groups; at least one."""
        if depth > MAX_DEPTH:
            raise self.fail(f"at most {MAX_DEPTH} nested brackets")
        total: Counts = {}
        while True:
            char = self.peek()
            if char in ("(", "["):
                unit = self.group(char, depth)
            elif "A" <= char <= "Z":
                unit = self.element()
            elif total:
                return total
            else:
                hint = "Isotopes are written [13C]." if char.isdigit() else ""
                raise self.fail("an element symbol", hint=hint)
            for symbol, count in unit.items():
                total[symbol] = total.get(symbol, 0) + count

    def element(self) -> Counts:
        start = self.at
        for length in (2, 1):
            symbol = self.text[start : start + length]
            if symbol in MASS or symbol in ALIASES:
                self.at += len(symbol)
                return {ALIASES.get(symbol, symbol): self.count()}
        raise self.fail("an element symbol")

    def group(self, opening: str, depth: int) -> Counts:
        start = self.at
        self.at += 1
        is_isotope = opening == "[" and self.peek().isdigit()
        inner = self.isotope() if is_isotope else self.units(depth + 1)
        closing = ")" if opening == "(" else "]"
        if self.peek() != closing:
            expected = f"'{closing}' for the '{opening}' at character {start + 1}"
            raise self.fail(expected if not self.peek() else f"an element symbol or {expected}")
        self.at += 1
        is_ion = opening == "[" and not is_isotope and depth == 0
        multiplier = 1 if is_ion and self.charge_with_digits_first() else self.count()
        return {symbol: count * multiplier for symbol, count in inner.items()}

    def isotope(self) -> Counts:
        start = self.at
        number = self.digits()
        letters = self.peek() + self.text[self.at + 1 : self.at + 2]
        for length in (2, 1):
            nuclide = f"[{number}{letters[:length]}]"
            if nuclide in NUCLIDES:
                self.at += length
                return {nuclide: self.count()}
        raise self.fail("an isotope such as 13C", at=start)

    def count(self) -> int:
        """The count after a unit, 1 if none is written."""
        if not self.peek().isdigit():
            return 1
        start = self.at
        value = self.digits()
        if value < 1:
            raise self.fail("a count of at least 1", at=start)
        return value

    def digits(self) -> int:
        start = self.at
        while self.at < len(self.text) and "0" <= self.text[self.at] <= "9":
            self.at += 1
        digits = self.text[start : self.at]
        if not digits:  # a digit of another script
            raise self.fail("a count in the digits 0 to 9")
        if len(digits) > 5 or int(digits) > MAX_COUNT:
            raise self.fail(f"a count of at most {MAX_COUNT}", at=start)
        return int(digits)

    def charge_with_digits_first(self) -> bool:
        rest = self.text[self.at :].lstrip(" ")
        return rest[:1].isdigit() and rest.lstrip("0123456789")[:1] in ("+", "-")

    def charge(self) -> int:
        """Charge and radical sign at the end of a component; 0 if there is none."""
        self.skip_radical()
        caret = self.peek() == "^"
        if caret:
            self.at += 1
        value = self.digits() if (caret or self.charge_with_digits_first()) and self.peek().isdigit() else 0
        sign = self.peek()
        if sign not in ("+", "-"):
            if caret or value:
                raise self.fail("the sign of a charge")
            return 0
        n_signs = 0
        while self.peek() == sign:
            self.at += 1
            n_signs += 1
        if not value and n_signs == 1 and self.peek().isdigit():
            value = self.digits()
        self.skip_radical()
        magnitude = value if value and n_signs == 1 else n_signs
        return magnitude if sign == "+" else -magnitude

    def skip_radical(self) -> None:
        if self.peek() in ("*", ".") and self.text[self.at + 1 :].strip(" ")[:1] in ("", "+", "-"):
            self.at += 1
