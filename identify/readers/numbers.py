"""Numbers of text formats, strictly: finite decimal numbers, anything else named with its line.

Python's own ``float`` also takes ``1_000``, ``nan``, ``infinity`` and digits of other scripts; a peak list may not.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np

from identify.errors import FormatError, quote
from identify.readers.limits import MAX_PEAKS
from identify.records import FloatArray

_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_FIRST_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?(?![\w.])", re.ASCII)


def parse_number(text: str) -> float | None:
    """Finite number that `text` spells, or None where it spells none.

    Parameters
    ----------
    text : str
        One token; blanks around it are ignored. Decimal point only.

    Returns
    -------
    float or None
        None for anything but a plain decimal number, and for one that overflows.

    Examples
    --------
    >>> parse_number(" 1.5e2 "), parse_number("nan"), parse_number("1_0")
    (150.0, None, None)
    """
    text = text.strip()
    if len(text) > 400 or not _NUMBER.fullmatch(text):
        return None
    value = float(text)
    return value if np.isfinite(value) else None


def find_number(text: str) -> float | None:
    """First number in a metadata text such as ``70 eV``, or None."""
    match = _FIRST_NUMBER.search(text[:400])
    return None if match is None else parse_number(match.group())


def too_many_peaks(path: str, line: int) -> FormatError:
    """The error for a spectrum beyond `MAX_PEAKS`, the same from every reader."""
    return FormatError(
        "too many peaks",
        where=f"{path}:{line}",
        found=f"more than {MAX_PEAKS}",
        expected=f"at most {MAX_PEAKS} peaks in one spectrum",
        hint="Profile data must be centroided before a search.",
    )


def parse_columns(rows: Sequence[Sequence[str]], lines: Sequence[int], path: str, expected: str) -> FloatArray:
    """Numbers of a block of rows that all have the same number of tokens.

    Parameters
    ----------
    rows : sequence of sequence of str
        Tokens of each row, ``n_rows`` rows.
    lines : sequence of int
        Line number of each row, ``n_rows`` values.
    path : str
        File, for messages.
    expected : str
        What a row should hold, for messages.

    Returns
    -------
    ndarray of shape (n_rows, n_columns)

    Raises
    ------
    FormatError
        Naming the line, for a row of another length or a token that is not a finite number; too many rows.
    """
    if len(rows) > MAX_PEAKS:
        raise too_many_peaks(path, lines[MAX_PEAKS])
    width = len(rows[0]) if rows else 0
    for row, line in zip(rows, lines, strict=True):
        if len(row) != width:
            raise FormatError("peak row", where=f"{path}:{line}", found=quote(" ".join(row)), expected=expected)
    try:
        values = np.array([[float(token) for token in row] for row in rows], dtype=np.float64).reshape(len(rows), width)
    except ValueError:
        raise _locate_fault(rows, lines, path) from None
    text = "".join(["".join(row) for row in rows])
    if not np.isfinite(values).all() or "_" in text or not text.isascii():
        raise _locate_fault(rows, lines, path)
    return values


def _locate_fault(rows: Sequence[Sequence[str]], lines: Sequence[int], path: str) -> FormatError:
    for row, line in zip(rows, lines, strict=True):
        for token in row:
            if parse_number(token) is None:
                return FormatError(
                    "number in a peak row", where=f"{path}:{line}", found=quote(token), expected="a finite number"
                )
    raise AssertionError("every token is a number after all")
