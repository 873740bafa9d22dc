"""Rows as CSV (RFC 4180), safe to open in a spreadsheet: what all tables of this program share."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence
from pathlib import Path

from identify.writers.files import write_atomically

FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n")
"""First characters at which spreadsheets take text for a formula, or skip to the one that follows."""


def write_rows(path: Path, heading: Sequence[str], rows: Iterable[Sequence[object]]) -> int:
    """Number of rows written below the heading to `path`, which then holds all of them, or what it held before.

    Parameters
    ----------
    path : Path
    heading : sequence of str
    rows : iterable of sequence
        Cells as for `render_rows`.

    Returns
    -------
    int

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    held = list(rows)
    write_atomically(path, render_rows(heading, held).encode("utf-8", "backslashreplace"))
    return len(held)


def render_rows(heading: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    """CSV text of a heading and rows; lines end with CR LF.

    Parameters
    ----------
    heading : sequence of str
    rows : iterable of sequence
        As many cells as the heading: text (made harmless, see `make_harmless`), numbers, None for an empty cell.

    Returns
    -------
    str

    Examples
    --------
    >>> render_rows(("name", "rank"), [("a, b", 1), ("=1+1", None)]).splitlines()
    ['name,rank', '"a, b",1', "'=1+1,"]
    """
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\r\n")
    writer.writerow(heading)
    for row in rows:
        writer.writerow([make_harmless(cell) if isinstance(cell, str) else cell for cell in row])
    return stream.getvalue()


def make_harmless(text: str) -> str:
    """The text, with an apostrophe in front where a spreadsheet would take it for a formula.

    Parameters
    ----------
    text : str

    Returns
    -------
    str

    Examples
    --------
    >>> make_harmless("=1+1"), make_harmless("  @x"), make_harmless("1-butanol"), make_harmless("(-)-menthol")
    ("'=1+1", "'  @x", '1-butanol', '(-)-menthol')
    """
    # Leading blanks are stripped by some importers before they look at the first character.
    return f"'{text}" if text.startswith(FORMULA_STARTS) or text.lstrip().startswith(FORMULA_STARTS) else text
