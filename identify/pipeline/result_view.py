"""A parsed result JSON as typed records, every field checked: the file may be hand-edited, cut off or hostile."""

from __future__ import annotations

import sys
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, TypeVar

from identify.errors import FormatError, quote

Kind = TypeVar("Kind")
_WORDS = {dict: "an object", list: "a list", str: "a text", int: "a whole number"}
MAX_DEPTH = 20
"""Levels of an explanation tree."""


@dataclass(frozen=True, slots=True)
class LibraryView:
    """One library searched."""

    path: str
    fingerprint: str
    entries: int
    compounds: int

    @property
    def described(self) -> str:
        """Path, size and state in one line."""
        return f"{self.path}, {self.entries:,} entries of {self.compounds:,} compounds, {self.fingerprint[:16]}"


@dataclass(frozen=True, slots=True)
class CandidateView:
    """One candidate: `key` is what the candidate is, `parts` the log-odds by label."""

    key: str
    name: str
    rank: int
    accession: str
    cosine: float
    reverse: float
    probability: float
    verdicts: Mapping[str, str]
    parts: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class QueryView:
    """One query with its claim and candidates."""

    id: str
    source: str
    name: str
    peaks: tuple[tuple[float, float], ...]
    level: str
    statement: str
    claim_probability: float
    in_library: float
    molecular_mass: str
    candidates: tuple[CandidateView, ...]


@dataclass(frozen=True, slots=True)
class ResultView:
    """A whole result; `settings` flat, by dotted name."""

    version: str
    settings: Mapping[str, str]
    libraries: tuple[LibraryView, ...]
    queries: tuple[QueryView, ...]


class _Table:
    """A JSON object whose fields are taken out with their type, or refused with their place."""

    def __init__(self, value: Any, where: str, place: str) -> None:
        self.where, self.place = where, place
        if not isinstance(value, Mapping):
            raise self.refuse("", value, "an object")
        self.value = value

    def refuse(self, name: str, found: Any, expected: str) -> FormatError:
        place = f"{self.place}.{name}".strip(".") or "whole"
        return FormatError("result", where=f"{self.where}, {place}", found=quote(found), expected=expected)

    def take(self, name: str, kind: type[Kind]) -> Kind:
        found = self.value.get(name)
        if not isinstance(found, kind) or (isinstance(found, bool) and kind is not bool):
            raise self.refuse(name, found, _WORDS[kind])
        return found

    def number(self, name: str) -> float:
        found = self.value.get(name)
        # Not `isfinite`, which fails on a whole number that no float can hold.
        if isinstance(found, bool) or not isinstance(found, int | float) or not abs(found) <= sys.float_info.max:
            raise self.refuse(name, found, "a number")
        return float(found)

    def table(self, name: str) -> _Table:
        return _Table(self.value.get(name), self.where, f"{self.place}.{name}".strip("."))

    def tables(self, name: str) -> list[_Table]:
        rows: list[Any] = self.take(name, list)
        return [_Table(row, self.where, f"{self.place}.{name}[{i}]".strip(".")) for i, row in enumerate(rows)]


def view_result(result: Mapping[str, Any], where: str) -> ResultView:
    """Typed view of a parsed result.

    Parameters
    ----------
    result : mapping
    where : str
        Name of the result, for messages.

    Returns
    -------
    ResultView

    Raises
    ------
    FormatError
        If a field that a comparison needs is missing or of another type.
    """
    table = _Table(result, where, "")
    settings: dict[str, str] = {}
    _flatten(table.take("settings", dict), "", settings)
    libraries = [
        LibraryView(
            row.take("path", str), row.take("fingerprint", str), row.take("entries", int), row.take("compounds", int)
        )
        for row in table.tables("libraries")
    ]
    queries = tuple(_view_query(row) for row in table.tables("queries"))
    return ResultView(table.table("program").take("version", str), settings, tuple(libraries), queries)


def _flatten(value: Mapping[str, Any], prefix: str, into: dict[str, str]) -> None:
    for name, item in value.items():
        if isinstance(item, Mapping):
            _flatten(item, f"{prefix}{name}.", into)
        else:
            into[f"{prefix}{name}"] = str(item)


def _view_query(row: _Table) -> QueryView:
    claim, ion = row.table("claim"), row.table("molecular_ion")
    estimates = ion.tables("estimates")
    peaks = []
    for pair in row.take("peaks", list):
        if not (isinstance(pair, list) and len(pair) == 2 and all(isinstance(x, int | float) for x in pair)):
            raise row.refuse("peaks", pair, "pairs of m/z and intensity")
        peaks.append((float(pair[0]), float(pair[1])))
    return QueryView(
        row.take("id", str),
        row.take("source", str),
        row.take("name", str),
        tuple(peaks),
        claim.take("level", str),
        claim.take("statement", str),
        claim.number("probability"),
        row.number("in_library_probability"),
        str(estimates[0].take("nominal_mass", int)) if estimates else "no estimate",
        tuple(_view_candidate(hit) for hit in row.tables("hits")),
    )


def _view_candidate(row: _Table) -> CandidateView:
    name, inchikey = row.take("name", str), row.take("inchikey", str)
    measured_as = row.value.get("measured_as") or ""
    formula = row.value.get("formula_as_measured") or ""
    label = formula if "[" in str(formula) else ""  # a labelled compound shares the structure of its parent
    parts: dict[str, float] = {}
    _collect_leaves(row.table("explanation"), 0, parts)
    return CandidateView(
        f"{inchikey[:14] or name} {measured_as} {label}".strip(),
        f"{name} ({measured_as})" if measured_as else name,
        row.take("rank", int),
        row.take("accession", str),
        row.number("cosine"),
        row.number("reverse"),
        row.number("probability"),
        {item.take("kind", str): item.take("verdict", str) for item in row.tables("evidence")},
        parts,
    )


def _collect_leaves(part: _Table, depth: int, into: dict[str, float]) -> None:
    """Sum of the leaves of an explanation tree by label."""
    if depth > MAX_DEPTH:
        raise part.refuse("parts", "a deeper tree", f"at most {MAX_DEPTH} levels")
    children = part.tables("parts")
    for child in children:
        _collect_leaves(child, depth + 1, into)
    if not children:
        label = part.take("label", str)
        into[label] = into.get(label, 0.0) + part.number("value")
