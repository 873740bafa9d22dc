"""From an error about one record to a `Rejection`: a bad record is listed, and the rest of the file goes on."""

from __future__ import annotations

from collections.abc import Callable

from identify.errors import FormatError, InputError
from identify.records import Rejection

OnReject = Callable[[Rejection], None]
NOT_EI = "not electron ionization"
NOT_MS1 = "not a full-scan spectrum (MS1)"
"""Reasons that readers and the library give in the same words, so that they are counted as one."""
FOREIGN_FAULTS = (ValueError, KeyError, IndexError, TypeError, AttributeError, AssertionError, OverflowError)
"""What parsers of other packages raise on input they do not expect, besides their own error classes."""


def fault(what: str, path: str, line: int, *, found: str = "", expected: str = "", hint: str = "") -> FormatError:
    """Error about one line of one file, in the form all readers share."""
    return FormatError(what, where=f"{path}:{line}", found=found, expected=expected, hint=hint)


def counted(number: int, noun: str) -> str:
    """`number` with its noun, in the plural where there is not exactly one.

    Examples
    --------
    >>> counted(1, "peak"), counted(0, "peak")
    ('1 peak', '0 peaks')
    """
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def rejection_of(error: InputError, path: str, line: int | None = None) -> Rejection:
    """Rejection that says what `error` says.

    Parameters
    ----------
    error : InputError
        Its `where` is ``path`` or ``path:line``.
    path : str
        File the error is about.
    line : int, optional
        Line to name when the error names none.

    Returns
    -------
    Rejection
    """
    tail = error.where.removeprefix(f"{path}:")
    if tail != error.where and tail.isdigit():
        line = int(tail)
    return Rejection(
        source=path, line=line, reason=error.what, found=error.found, expected=error.expected, hint=error.hint
    )
