"""Data sections of JCAMP-DX: pairs, and ordinates at equal steps with their compressed spellings.

Forms: ``(XY..XY)`` pairs of plain numbers; ``(X++(Y..Y))`` one abscissa per line, then ordinates, plain or squeezed (SQZ), as
differences (DIF) and with repeats (DUP). Definitions: McDonald & Wilks 1988, Appl. Spectrosc. 42:151 (the JCAMP-DX form;
coding characters from memory, agreement with the ``jcamp`` package is tested).
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.errors import FormatError, quote
from identify.readers.fault_reports import counted, fault
from identify.readers.limits import MAX_PEAKS
from identify.readers.numbers import parse_number, parse_tokens, too_many_peaks
from identify.records import FloatArray, read_only

_PAIRS = re.compile(r"\(([A-Z])([A-Z])\.\.\1\2\)")
_STEPS = re.compile(r"\([A-Z]\+\+\(([A-Z])\.\.\1\)\)")
_SEPARATORS = re.compile(r"[\s,;]+")
_CODED = re.compile(
    r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]\d+)?|(?P<sqz>[@A-Ia-i][\d.]*)|(?P<dif>[%J-Rj-r][\d.]*)|(?P<dup>[S-Zs]\d*)",
    re.ASCII,
)
_SQZ = {"@": "0"} | dict(zip("ABCDEFGHI", "123456789", strict=True)) | {c: f"-{ord(c) - 96}" for c in "abcdefghi"}
_DIF = {"%": "0"} | dict(zip("JKLMNOPQR", "123456789", strict=True)) | {c: f"-{ord(c) - 105}" for c in "jklmnopqr"}
_DUP = dict(zip("STUVWXYZs", "123456789", strict=True))


@dataclass(frozen=True, slots=True)
class Axis:
    """Scaling and abscissa of a data section; None where the file is silent."""

    x_factor: float = 1.0
    y_factor: float = 1.0
    first_x: float | None = None
    last_x: float | None = None
    step: float | None = None
    n_points: int | None = None


@dataclass(frozen=True, slots=True)
class DataSection:
    """One data label: its rows, where they start, and the form written behind the label."""

    form: str
    rows: Sequence[str]
    first_line: int


@dataclass(frozen=True, slots=True)
class Points:
    """Points of a data section, shape ``(n,)`` each, scaled; whether they lie at equal steps below 0.5."""

    x: FloatArray
    y: FloatArray
    is_profile: bool


def parse_data(section: DataSection, axis: Axis, path: str) -> Points:
    """Points of one data section.

    Parameters
    ----------
    section : DataSection
        Rows without comments.
    axis : Axis
        Factors, first and last abscissa, number of points.
    path : str
        File, for messages.

    Returns
    -------
    Points
        In file order.

    Raises
    ------
    FormatError
        For an unknown form, a number that is none, a failed check value, too many points, or another number of points
        than stated.
    """
    form = "".join(section.form.upper().split())
    is_stepped = _STEPS.search(form) is not None
    if not is_stepped and _PAIRS.search(form) is None:
        expected = "'(XY..XY)' or '(X++(Y..Y))'"
        raise fault("data form", path, section.first_line, found=quote(section.form.strip()), expected=expected)
    x, y, step = _parse_steps(section, axis, path) if is_stepped else (*_parse_pairs(section, path), 1.0)
    if axis.n_points is not None and x.size != axis.n_points:
        found, expected = counted(x.size, "point"), f"{axis.n_points} as NPOINTS says"
        raise fault("peak count", path, section.first_line, found=found, expected=expected)
    if not x.size:
        raise fault("no peaks", path, section.first_line, found="0 points", expected="at least one")
    x, y = (x if is_stepped else x * axis.x_factor), y * axis.y_factor
    if not (np.isfinite(x).all() and np.isfinite(y).all()):
        raise fault("scaled data", path, section.first_line, found="a value too large", expected="finite numbers")
    return Points(x, y, is_stepped and abs(step) < 0.5)


def _parse_pairs(section: DataSection, path: str) -> tuple[FloatArray, FloatArray]:
    tokens: list[str] = []
    lines: list[int] = []
    for line_number, row in enumerate(section.rows, section.first_line):
        found = [token for token in _SEPARATORS.split(row) if token]
        for token in found if len(found) % 2 else ():
            if parse_number(token) is None:
                raise _no_number(token, path, line_number)
        if len(found) % 2:
            raise fault("peak row", path, line_number, found=quote(row.strip()), expected="pairs of m/z and intensity")
        tokens += found
        lines += [line_number] * len(found)
        if len(tokens) > 2 * MAX_PEAKS:
            raise too_many_peaks(path, line_number)
    values = parse_tokens(tokens, lines.__getitem__, path)
    return values[0::2].copy(), values[1::2].copy()


def _no_number(token: str, path: str, line_number: int) -> FormatError:
    return fault("number in a peak row", path, line_number, found=quote(token), expected="a finite number")


def _parse_steps(section: DataSection, axis: Axis, path: str) -> tuple[FloatArray, FloatArray, float]:
    ordinates: list[float] = []
    anchors: list[tuple[int, float, int]] = []
    ends_in_difference = False
    for line_number, row in enumerate(section.rows, section.first_line):
        if not row.strip():
            continue
        tokens = _tokenize(row, path, line_number)
        abscissa = _decode(tokens[0], path, line_number)
        previous = ordinates[-1] if ends_in_difference else None
        values, ends_in_difference = _decode_row(tokens[1:], len(ordinates), path, line_number)
        if previous is not None and values:
            if not math.isclose(values[0], previous, rel_tol=1e-9, abs_tol=1e-6):
                hint = "The data before or behind this line are damaged."
                raise fault(
                    "check value", path, line_number, found=f"{values[0]:g}", expected=f"{previous:g}", hint=hint
                )
            ordinates.pop()
        anchors.append((len(ordinates), abscissa * axis.x_factor, line_number))
        ordinates += values
        if len(ordinates) > MAX_PEAKS:
            raise too_many_peaks(path, line_number)
    if not ordinates:
        return read_only([]), read_only([]), 1.0
    first, step = _find_step(anchors, len(ordinates), axis, path)
    x = first + step * np.arange(len(ordinates))
    for position, abscissa, line_number in anchors:
        if position < x.size and abs(x[position] - abscissa) > abs(step) + 1e-6 * abs(abscissa):
            found, expected = f"{abscissa:g}", f"about {x[position]:g} from the equal steps"
            raise fault("abscissa", path, line_number, found=found, expected=expected)
    return read_only(x), read_only(ordinates), step


def _find_step(anchors: Sequence[tuple[int, float, int]], n_points: int, axis: Axis, path: str) -> tuple[float, float]:
    first = anchors[0][1] if axis.first_x is None else axis.first_x
    if n_points == 1:
        return first, 1.0
    if axis.last_x is not None:
        return first, (axis.last_x - first) / (n_points - 1)
    if axis.step is not None:
        return first, axis.step
    position, abscissa, _ = anchors[-1]
    if position:
        return first, (abscissa - anchors[0][1]) / position
    raise fault("abscissa step", path, anchors[0][2], found="none", expected="LASTX or DELTAX")


def _tokenize(row: str, path: str, line_number: int) -> list[re.Match[str]]:
    tokens: list[re.Match[str]] = []
    position = 0
    while position < len(row):
        if row[position] in " \t,;":
            position += 1
            continue
        match = _CODED.match(row, position)
        if match is None:
            raise _no_number(row[position : position + 20], path, line_number)
        tokens.append(match)
        position = match.end()
    return tokens


def _decode(token: re.Match[str], path: str, line_number: int) -> float:
    text = token.group()
    if token.lastgroup is not None:
        codes = {"sqz": _SQZ, "dif": _DIF, "dup": _DUP}[token.lastgroup]
        text = codes[text[0]] + text[1:]
    value = parse_number(text)
    if value is None:
        raise _no_number(token.group(), path, line_number)
    return value


def _decode_row(
    tokens: Sequence[re.Match[str]], n_before: int, path: str, line_number: int
) -> tuple[list[float], bool]:
    values: list[float] = []
    difference: float | None = None
    for token in tokens:
        number = _decode(token, path, line_number)
        if token.lastgroup == "dup":
            if not values or number < 1:
                raise fault("repeat", path, line_number, found=quote(token.group()), expected="a value before it")
            if n_before + len(values) + number > MAX_PEAKS + 1:
                raise too_many_peaks(path, line_number)
            for _ in range(int(number) - 1):
                values.append(values[-1] + (difference or 0.0))
        elif token.lastgroup == "dif":
            if not values:
                raise fault("difference", path, line_number, found=quote(token.group()), expected="a value before it")
            difference = number
            values.append(values[-1] + number)
        else:
            difference = None
            values.append(number)
    return values, difference is not None
