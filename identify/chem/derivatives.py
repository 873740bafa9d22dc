"""Derivatives made before a measurement, as formula changes: how records write them, what they do to a composition.

A *notation* states groups and numbers ("3 TMS", "n TMS", "1MEOX 5TMS", "(2TMS)", "MEOX, 2TBDMS-derivative"). A *name* that
contains "methyl", "acetate" or "trimethylsilyl ester" is the compound itself and is never read as a notation.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import product
from types import MappingProxyType
from typing import Final

from identify.chem.elements import MASS_NUMBER
from identify.chem.formula import MAX_NOMINAL_MASS, Formula

GROUPS: Final[Mapping[str, tuple[tuple[str, int], ...]]] = MappingProxyType(
    {
        "MEOX": (("C", 1), ("H", 3), ("N", 1)),
        "EOX": (("C", 2), ("H", 5), ("N", 1)),
        "PFBO": (("C", 7), ("H", 2), ("F", 5), ("N", 1)),
        "Me": (("C", 1), ("H", 2)),
        "Et": (("C", 2), ("H", 4)),
        "Ac": (("C", 2), ("H", 2), ("O", 1)),
        "TFA": (("C", 2), ("H", -1), ("F", 3), ("O", 1)),
        "PFP": (("C", 3), ("H", -1), ("F", 5), ("O", 1)),
        "HFB": (("C", 4), ("H", -1), ("F", 7), ("O", 1)),
        "PFB": (("C", 7), ("H", 1), ("F", 5)),
        "TMS": (("C", 3), ("H", 8), ("Si", 1)),
        "TBDMS": (("C", 6), ("H", 14), ("Si", 1)),
    }
)
"""Change of composition by one group, in the order of the normal form.

MEOX methoxime, EOX ethoxime, PFBO pentafluorobenzyl oxime: C=O becomes C=N–O–R. All others replace one hydrogen: Me methyl,
Et ethyl, Ac acetyl, TFA trifluoroacetyl, PFP pentafluoropropionyl, HFB heptafluorobutyryl, PFB pentafluorobenzyl, TMS
trimethylsilyl, TBDMS tert-butyldimethylsilyl.
"""

OXIMES: Final = frozenset({"MEOX", "EOX", "PFBO"})
"""Groups that take a carbonyl oxygen; the others take a hydrogen."""

MAX_GROUPS: Final = 40
"""Largest number of groups read from a text or tried for an unknown number."""

# Unmistakable abbreviations may stand behind a name; the rest are read only in a field of their own, with a number.
_PLAIN: Final = {
    "tms": "TMS",
    "tbdms": "TBDMS",
    "tbs": "TBDMS",
    "meox": "MEOX",
    "mox": "MEOX",
    "eox": "EOX",
    "tfa": "TFA",
    "pfp": "PFP",
    "hfb": "HFB",
    "pfb": "PFB",
    "pfbo": "PFBO",
}
_NUMBERED: Final = {
    "mo": "MEOX",
    "methoxime": "MEOX",
    "methoximes": "MEOX",
    "methyloxime": "MEOX",
    "me": "Me",
    "methyl": "Me",
    "et": "Et",
    "ethyl": "Et",
    "ac": "Ac",
    "acetyl": "Ac",
    "trifluoroacetyl": "TFA",
    "trimethylsilyl": "TMS",
    "tert-butyldimethylsilyl": "TBDMS",
}
_WORDS: Final = {
    "mono": 1,
    "di": 2,
    "bis": 2,
    "tri": 3,
    "tris": 3,
    "tetra": 4,
    "tetrakis": 4,
    "penta": 5,
    "pentakis": 5,
    "hexa": 6,
    "hexakis": 6,
}
_NUMBER: Final = r"(?P<number>\d{1,2}|[nNxX]|mono|di|bis|tri|tris|tetra|tetrakis|penta|pentakis|hexa|hexakis)"
_ANY_GROUP: Final = "|".join(sorted((*_PLAIN, *_NUMBERED), key=len, reverse=True))
_CAPITALS: Final = r"T(?:MS|BDMS|BS|FA)|t-?BDMS|M[Ee]O[Xx]|MOX|EOX|PFBO?|PFP|HFB"
_TAIL: Final = r"(?:[\s-]*(?:derivatives?|deriv\.?|derivatized|ester|ether))?"

# A field that holds nothing but groups: "2 TMS", "MEOX, 2TMS-derivative", "1MEOX 5TMS".
_TOKEN: Final = re.compile(rf"(?:{_NUMBER}\s*[-x(]?\s*)?(?P<group>{_ANY_GROUP}|t-?bdms)\)?{_TAIL}", re.IGNORECASE)
_BETWEEN: Final = re.compile(r"[\s,+/_&]+|and\b", re.IGNORECASE)
# A numbered group behind a name: "glucose 5TMS", "alanine, 2 TMS derivative", "serine_3TMS".
_BEHIND: Final = re.compile(
    rf"(?<![A-Za-z0-9.'’)\]-]){_NUMBER}[\s-]?\(?(?P<group>{_CAPITALS})\)?(?![A-Za-z0-9]|-(?!deriv))"
)
_DERIVATIVE: Final = re.compile(rf"(?<![A-Za-z0-9-])(?P<group>{_CAPITALS})[\s-]+deriv")
_MAYBE: Final = re.compile(r"tms|bdms|tbs|eox|mox|tfa|pfp|hfb|pfb|(?:^|[;(\[])\s*\(?\d", re.IGNORECASE)
"""What every notation has; most titles have none of it and are done at once."""
_PARENTHESIS: Final = re.compile(r"[(\[]([^()\[\]]{2,40})[)\]]")


@dataclass(frozen=True, slots=True)
class Derivative:
    """Groups a compound carried when it was measured.

    `groups` holds ``(group, number)`` with groups of `GROUPS` in their order, each once; a number of None is not known.
    `str()` gives the normal form: `3 TMS`, `n TMS`, `1 MEOX 5 TMS`.
    """

    groups: tuple[tuple[str, int | None], ...]

    def __post_init__(self) -> None:
        names = [group for group, _ in self.groups]
        if not names or names != [group for group in GROUPS if group in names]:
            raise ValueError(f"groups {names} are not distinct groups in normal order")
        if any(number is not None and not 1 <= number <= MAX_GROUPS for _, number in self.groups):
            raise ValueError(f"a number of groups outside 1 to {MAX_GROUPS}")

    def __str__(self) -> str:
        return " ".join(f"{'n' if number is None else number} {group}" for group, number in self.groups)

    @property
    def is_known(self) -> bool:
        """Whether every number of groups is known."""
        return all(number is not None for _, number in self.groups)


def find_derivative(text: str) -> Derivative | None:
    """Derivative that a record's derivative field, title or name states; None when it states none.

    Parameters
    ----------
    text : str
        A derivative field ("5 TMS; 1 MEOX"), a title of fields ("Alanine; GC-EI-TOF; MS; 2 TMS") or a name ("alanine (2TMS)",
        "glucose, 1MEOX, 5TMS"). Only the first 2,000 characters are read.

    Returns
    -------
    Derivative or None
        `n` and `x` mean an unknown number; a group without a number counts once; "0 TMS" is no derivative; of
        "2 TMS; n TMS" the number counts, and two different numbers of the same group make it unknown.

    Notes
    -----
    A number with TMS, TBDMS, MEOX (MOX), EOX, TFA, PFP, HFB, PFB or PFBO is read anywhere behind a name; such a group without
    number only in a field or parenthesis of its own or before "derivative"; "2 Me", "1 Ac", "methoxime" only with a number
    in a field or parenthesis of its own. So names are safe: "methyl acetate", "2-TMS-furan", "MSTFA".

    Examples
    --------
    >>> str(find_derivative("Glucose; GC-EI-TOF; MS; 5 TMS; 1 MEOX")), str(find_derivative("x TMS"))
    ('1 MEOX 5 TMS', 'n TMS')
    >>> find_derivative("3-methylbutyl acetate") is None
    True
    """
    text = text[:2000]
    if not _MAYBE.search(text):
        return None
    found: dict[str, set[int | None]] = {}
    for group, number in _statements(text):
        found.setdefault(group, set()).add(number)
    stated = {group: values - {None} for group, values in found.items()}
    numbers = {group: next(iter(values)) if len(values) == 1 else None for group, values in stated.items()}
    groups = tuple((group, numbers[group]) for group in GROUPS if group in numbers and numbers[group] != 0)
    return Derivative(groups) if groups else None


def _statements(text: str) -> Iterator[tuple[str, int | None]]:
    """Every (group, number) the text states; number 0 for "0 TMS"."""
    fields = text.split(";")
    for position, field in enumerate(fields):
        is_name = position == 0 and len(fields) > 1
        whole = _read_field(field.strip(), need_number=is_name)
        if whole:
            yield from whole
            continue
        for match in _PARENTHESIS.finditer(field):
            yield from _read_field(match[1].strip(), need_number=False)
        for match in _BEHIND.finditer(field):
            yield from _read_groups([(match["group"], match["number"])])
        for match in _DERIVATIVE.finditer(field):
            yield from _read_groups([(match["group"], "1")])


def _read_field(field: str, *, need_number: bool) -> list[tuple[str, int | None]]:
    """Groups of a field that holds nothing else; empty for any other field."""
    found: list[tuple[str, str]] = []
    at = 0
    field = field.removeprefix("(").removesuffix(")") if field.startswith("(") else field
    while at < len(field):
        match = _TOKEN.match(field, at)
        if match is None:
            return []
        number = match["number"]
        if match["group"].lower() in _NUMBERED and (number is None or not number.isdigit()):  # "diethyl ether"
            return []
        if number is None and need_number:
            return []
        found.append((match["group"], number or "1"))
        at = match.end()
        gap = _BETWEEN.match(field, at)
        if at < len(field) and gap is None and not field[at].isdigit():
            return []
        while gap is not None:
            at = gap.end()
            gap = _BETWEEN.match(field, at)
    return _read_groups(found)


def _read_groups(found: list[tuple[str, str]]) -> list[tuple[str, int | None]]:
    result: list[tuple[str, int | None]] = []
    for name, written in found:
        key = name.lower().replace("t-bdms", "tbdms")
        group = _PLAIN.get(key) or _NUMBERED[key]
        written = written.lower()
        number = None if written in ("n", "x") else _WORDS.get(written) or int(written if written.isdigit() else 0)
        if number is not None and number > MAX_GROUPS:
            return []
        result.append((group, number))
    return result


def formula_as_measured(parent: Formula, derivative: Derivative) -> Formula | None:
    """Composition of a compound with its derivative groups.

    Parameters
    ----------
    parent : Formula
        The compound itself, labelled or not.
    derivative : Derivative

    Returns
    -------
    Formula or None
        None when a number of groups is unknown, the compound has too few hydrogens or oxygens for the groups,
        or the result is heavier than a formula may be.

    Examples
    --------
    >>> from identify.chem.formula import parse_formula
    >>> formula_as_measured(parse_formula("C6H12O6"), Derivative((("MEOX", 1), ("TMS", 5)))).hill
    'C22H55NO6Si5'
    """
    if not derivative.is_known:
        return None
    numbers = [(group, number) for group, number in derivative.groups if number is not None]
    n_oximes = sum(number for group, number in numbers if group in OXIMES)
    n_replaced = sum(number for group, number in numbers) - n_oximes
    if parent.count("H") < n_replaced or parent.count("O") < n_oximes:
        return None
    change = [(symbol, count * number) for group, number in numbers for symbol, count in GROUPS[group]]
    measured = dict(parent.counts)
    for symbol, count in change:
        measured[symbol] = measured.get(symbol, 0) + count
    if any(count < 0 for count in measured.values()):
        return None
    mass = sum(MASS_NUMBER[symbol] * count for symbol, count in measured.items())
    return Formula.from_counts(measured, parent.charge) if mass <= MAX_NOMINAL_MASS else None


def possible_formulas(parent: Formula, derivative: Derivative, max_groups: int) -> tuple[tuple[int, Formula], ...]:
    """Compositions that a derivative with unknown numbers may stand for.

    Parameters
    ----------
    parent : Formula
    derivative : Derivative
    max_groups : int
        Largest total of the groups whose number is unknown (for TMS: the active hydrogens); at most `MAX_GROUPS` are tried.

    Returns
    -------
    tuple of (int, Formula)
        Total of the unknown groups (each at least 1) and composition, by rising total. For a known derivative one pair with
        total 0; empty when nothing fits or more than two numbers are unknown.

    Examples
    --------
    >>> from identify.chem.formula import parse_formula
    >>> glycine = parse_formula("C2H5NO2")
    >>> [(n, f.hill) for n, f in possible_formulas(glycine, Derivative((("TMS", None),)), 2)]
    [(1, 'C5H13NO2Si'), (2, 'C8H21NO2Si2')]
    """
    unknown = [group for group, number in derivative.groups if number is None]
    if len(unknown) > 2:
        return ()
    limit = min(max_groups, MAX_GROUPS)
    found: dict[Formula, int] = {}
    for numbers in product(range(1, limit + 1), repeat=len(unknown)):
        if sum(numbers) <= limit:
            trial = dict(zip(unknown, numbers, strict=True))
            groups = tuple((group, number or trial[group]) for group, number in derivative.groups)
            formula = formula_as_measured(parent, Derivative(groups))
            if formula is not None:
                found.setdefault(formula, sum(numbers))
    return tuple((total, formula) for formula, total in sorted(found.items(), key=lambda item: (item[1], item[0].hill)))
