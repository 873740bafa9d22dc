"""Isotope labels that compound names state, and what they do to a formula.

Records often give the formula of the unlabelled compound and say "(METHYL-D3)" or "-[1,2-13C2]" in the name. Where a SMILES with
isotopes is at hand, `identify.chem.structures.formula_of` knows better; this module is for the rest.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Final

from identify.chem.elements import MASS_NUMBER, NUCLIDES, element_of
from identify.chem.formula import Formula

MAX_NAME: Final = 500
"""Only so many characters of a name are read."""

_COUNTS: Final = {
    "": 0,
    "mono": 1,
    "di": 2,
    "tri": 3,
    "tetra": 4,
    "penta": 5,
    "hexa": 6,
    "hepta": 7,
    "octa": 8,
    "nona": 9,
    "deca": 10,
    "undeca": 11,
    "dodeca": 12,
}
# Letters D with a number that are part of a name: vitamins, prostaglandins, natural products, dimethylsiloxane units.
_NOT_LABELS: Final = re.compile(
    r"(?:\bvitamin|prostaglandin|\bPG|resolvin|protectin|maresin|lipoxin|thromboxane|leukotriene|aflatoxin|fumonisin|cyclin)"
    r"[\s(-]*(?-i:D[1-7]?)\b\)?|calciferol\s*\(D[2-7]\)",
    re.IGNORECASE,
)
_SILOXANE_UNIT: Final = re.compile(r"\(D\d{1,2}\)|^D\d{1,2}(?=-Ph)")
_PHENYLSILOXANE: Final = re.compile(r"D\d{1,2}-Ph")
_ONE_EACH: Final = re.compile(r"\((?:O|(?!2,4-)(?P<where>\d+[A-Za-z]?(?:,\d+[A-Za-z]?)*)-)D\)$|(?<=[A-Z]-)\d{1,2}-D$")
_UNCLEAR: Final = re.compile(r"\([2-9]D\)")  # (5D): five atoms, or one at position 5?
_DEUTERIUM: Final = (
    re.compile(r"(?<=[-(\[,])D(?P<count>[1-9]\d?)(?![\w:'’])"),  # (METHYL-D3), -2,2-D2, (D10), [D3]
    re.compile(r"(?<=[-(\[, ])d(?P<count>[1-9]\d?)(?![\w:'’])"),  # toluene-d8, benzene d6
    re.compile(r"^[Dd](?P<count>[1-9]\d?)(?=-[A-Za-z]{4})"),  # d5-phenol
    re.compile(r"(?<![A-Za-z])C(?:\d{0,2})D(?P<count>[1-9]\d?)(?![\w])"),  # (14-CD3), C6D5
    re.compile(r"[(\[](?:[\w,'’.-]+-)?2H\(?(?P<count>[1-9]\d?)\)?[)\]]"),  # (2H3), [1,1-2H2]
)
_WORD: Final = re.compile(
    rf"(?P<times>bis|tris|di)?\(?(?:(?P<where>\d[,\d]{{0,40}})-)?(?<![A-Za-z])(?P<many>{'|'.join(filter(None, _COUNTS))}|per)?-?"
    r"deute?r(?:io|o|ium|i?ated)(?!porphyrin|hem)",
    re.IGNORECASE,
)
_NUCLIDE: Final = re.compile(
    r"(?<![\w.])(?P<open>\[)?(?P<where>(?:\d+|[A-Za-z]+|α|β)['’]*(?:,(?:\d+|[A-Za-z]+|α|β)['’]*)*-)?"
    r"(?P<number>\d{1,3})(?P<element>[A-Z][a-z]?)(?P<count>\d{1,2})?(?![\w:])"
)
_MAYBE: Final = re.compile(r"[Dd]\d|D\)|-[Dd]$|deut|\d[HCNO]|\[\d", re.IGNORECASE)
"""What every label has; most names have none of it and are done at once."""
_OUTSIDE_BRACKETS: Final = frozenset({"[13C]", "[15N]", "[17O]", "[18O]"})
"""Nuclides that are read without square brackets."""
_UNIFORM: Final = frozenset({"u-", "ul-", "all-", "uniform-"})


@dataclass(frozen=True, slots=True)
class Label:
    """Labelled atoms of a compound.

    `atoms` holds ``(nuclide, number)`` such as ``("[2H]", 3)``; a number of None is not known. With `is_complete` an unknown
    number means every atom of that element.
    """

    atoms: tuple[tuple[str, int | None], ...]
    is_complete: bool = False

    def __str__(self) -> str:
        return ", ".join(f"{nuclide}{'' if number is None else number}" for nuclide, number in self.atoms)


def find_label(name: str) -> Label | None:
    """Isotope label that a compound name states; None when it states none.

    Parameters
    ----------
    name : str
        One name or title; the first `MAX_NAME` characters are read.

    Returns
    -------
    Label or None

    Notes
    -----
    Read: D with a number after ``- ( [ ,`` or at the start before a longer word ("(METHYL-D3)", "-2,2-D2", "d5-phenol"); d with
    a number after a blank too; "CD3"; "(2H3)", "[2H]"; "(1-D)" and "(2,2-D)" at the end; 13C, 15N, 17O, 18O behind locants or
    in brackets ("[1,2-13C2]", "(ALPHA-13C)", "U-13C") and other nuclides in square brackets; words with "deutero",
    "deuterio", "deuterated". Several deuterium groups add up, unless the last stands at the end of the name as the total
    ("[D3]METHYL … -D12"). Not read: vitamin D3 and other names with D, dimethylsiloxane units ("…siloxane (D4)"), indicated
    hydrogen ("2H-pyran", "1(2H)-one"), ring fusion ("pyrrolo(1,2-d)"), D- and DL- of sugars and amino acids, "2,4-D".

    Examples
    --------
    >>> str(find_label("ACETONE (1,1,1,3,3,3-D6)")), str(find_label("citric acid-[1,5-13C2]"))
    ('[2H]6', '[13C]2')
    >>> find_label("VITAMIN D3") is None, find_label("D-GLUCOSE") is None
    (True, True)
    """
    name = name[:MAX_NAME].strip()
    if not _MAYBE.search(name):
        return None
    name = _NOT_LABELS.sub("", name)
    if "siloxan" in name.lower() or _PHENYLSILOXANE.match(name):
        name = _SILOXANE_UNIT.sub("", name)
    found: dict[str, int | None] = {}
    deuterium, is_complete = _count_deuterium(name)
    if deuterium != 0:
        found["[2H]"] = deuterium
    for match in _NUCLIDE.finditer(name):
        nuclide = f"[{match['number']}{match['element']}]"
        if not _is_label(nuclide, in_brackets=match["open"] is not None):
            continue
        where = (match["where"] or "").lower()
        count: int | None = None
        if match["count"]:
            count = int(match["count"])
        elif where in _UNIFORM:
            is_complete = True
        elif where:
            count = where.count(",") + 1
        elif match["open"]:
            count = 1
        known = found.get(nuclide, 0)
        found[nuclide] = None if count is None or known is None else known + count
    return Label(tuple(sorted(found.items())), is_complete) if found else None


def _is_label(nuclide: str, *, in_brackets: bool) -> bool:
    """Whether a nuclide in a name is a label: known, not the principal isotope; bare deuterium is counted elsewhere."""
    if nuclide not in NUCLIDES or nuclide == "[2H]":
        return False
    element, number, _ = NUCLIDES[nuclide]
    return number != MASS_NUMBER[element] and (in_brackets or nuclide in _OUTSIDE_BRACKETS)


def _count_deuterium(name: str) -> tuple[int | None, bool]:
    """Number of deuterium atoms a name states (0 none, None unknown), and whether it says "every hydrogen"."""
    tokens = {match.start("count"): match for pattern in _DEUTERIUM for match in pattern.finditer(name)}
    ordered = [tokens[start] for start in sorted(tokens)]
    if ordered:
        counts = [int(match["count"]) * _repeats(name, match.end()) for match in ordered]
        inner = [name[match.end() : match.end() + 1] == "]" for match in ordered]
        is_total = len(ordered) > 1 and ordered[-1].end() == len(name) and all(inner[:-1])
        return (counts[-1] if is_total else sum(counts)), False
    if re.search(r"\[(?:[\w,'’]+-)?2H\]|(?<=[a-z])-d$|^D2O$", name):
        return (2 if name == "D2O" else 1), False
    if single := _ONE_EACH.search(name):
        return (single["where"] or "").count(",") + 1, False
    if _UNCLEAR.search(name):
        return None, False
    total: int | None = 0
    is_complete = False
    for word in _WORD.finditer(name):
        many, where = (word["many"] or "").lower(), word["where"]
        is_complete = is_complete or many == "per"
        count = _COUNTS.get(many)
        if count == 0:  # no number word: one atom per locant; "deuteromethyl" is written for CD3 as well as for CH2D
            count = where.count(",") + 1 if where else None
        times = {"bis": 2, "di": 2, "tris": 3}.get((word["times"] or "").lower(), 1)
        total = None if count is None or total is None else total + count * times
    return total, is_complete


def _repeats(name: str, end: int) -> int:
    """Multiplier behind a parenthesis: 2 for the ")2" of "(CD3)2"."""
    match = re.match(r"\)([2-6])(?![\d,-])", name[end : end + 3])
    return int(match[1]) if match else 1


def apply_label(formula: Formula, label: Label) -> Formula | None:
    """Formula with the labelled atoms in place of natural ones.

    Parameters
    ----------
    formula : Formula
        The compound with natural isotopes, or already labelled.
    label : Label

    Returns
    -------
    Formula or None
        The formula itself if it already holds labelled atoms; None when a number is not known or there are too few atoms.

    Examples
    --------
    >>> from identify.chem.formula import parse_formula
    >>> apply_label(parse_formula("C7H8"), Label((("[2H]", 8),))).hill
    'C7[2H]8'
    """
    if formula.is_labelled:
        return formula
    counts = dict(formula.counts)
    for nuclide, stated in label.atoms:
        element = element_of(nuclide)
        number = counts.get(element, 0) if stated is None and label.is_complete else stated
        if number is None or not 0 < number <= counts.get(element, 0):
            return None
        counts[element] -= number
        counts[nuclide] = counts.get(nuclide, 0) + number
    return Formula.from_counts(counts, formula.charge)
