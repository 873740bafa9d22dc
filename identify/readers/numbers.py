"""Numbers of text formats, strictly: finite decimal numbers, anything else named with its line.

Python's own ``float`` also takes ``1_000``, ``nan``, ``infinity`` and digits of other scripts; a peak list may not.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from itertools import chain

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
    """First number in a metadata text such as ``70 eV``, or None.

    Examples
    --------
    >>> find_number("70 eV"), find_number("about 12.5 min"), find_number("none")
    (70.0, 12.5, None)
    """
    match = _FIRST_NUMBER.search(text[:400])
    return None if match is None else parse_number(match.group())


def too_many_peaks(path: str, line: int | None = None) -> FormatError:
    """The error for a spectrum beyond `MAX_PEAKS`, the same from every reader."""
    return FormatError(
        "too many peaks",
        where=path if line is None else f"{path}:{line}",
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
    tokens = list(chain.from_iterable(rows))
    return parse_tokens(tokens, lambda position: lines[position // width], path).reshape(len(rows), width)


def parse_tokens(tokens: Sequence[str], line_of: Callable[[int], int], path: str) -> FloatArray:
    """Numbers that `tokens` spell.

    Parameters
    ----------
    tokens : sequence of str
        ``n`` tokens without blanks.
    line_of : callable
        Line number of the token at a position.
    path : str
        File, for messages.

    Returns
    -------
    ndarray of shape (n,)

    Raises
    ------
    FormatError
        Naming the line of the first token that is not a finite decimal number.
    """
    try:
        values = np.array(list(map(float, tokens)), dtype=np.float64)
    except ValueError:
        raise _locate_fault(tokens, line_of, path) from None
    text = "".join(tokens)
    if not np.isfinite(values).all() or "_" in text or not text.isascii():
        raise _locate_fault(tokens, line_of, path)
    return values


def _locate_fault(tokens: Sequence[str], line_of: Callable[[int], int], path: str) -> FormatError:
    for position, token in enumerate(tokens):
        if parse_number(token) is None:
            where = f"{path}:{line_of(position)}"
            return FormatError("number in a peak row", where=where, found=quote(token), expected="a finite number")
    raise AssertionError("every token is a number after all")
