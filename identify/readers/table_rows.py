"""How the rows of one table are written: separator, decimal sign, columns; settled once, then strict."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

from identify.errors import FormatError, quote
from identify.readers.named_fields import bare_name
from identify.readers.numbers import parse_number

_MZ_NAMES = frozenset(
    {"mz", "mass", "masses", "ion", "mzratio", "moverz", "mzda", "mzth", "mzvalue", "masstocharge", "masscharge", "x"}
    | {"masse", "masa"}
)
_RELATIVE_NAMES = frozenset({"relativeintensity", "relint", "relativeabundance", "rel", "relabundance"})
_INTENSITY_NAMES = _RELATIVE_NAMES | {
    *("intensity", "int", "intensities", "ints", "intensitycounts", "intensitypercent"),
    *("abundance", "height", "peakheight", "count", "counts", "y"),
    *("intensität", "intensitaet", "häufigkeit", "intensité", "intensite", "intensidad", "intensità"),
}
_DECIMAL_COMMA = re.compile(r"[+-]?\d+,\d+(?:[eE][+-]?\d+)?", re.ASCII)
_ROW_START = re.compile(r"[\s\"'(\[]*[+-]?(?:\d|[.,]\d|nan\b|inf)", re.IGNORECASE)
_PAIRS_HINT = "Write one pair per line, or pairs with a colon: 43:100 58:22."


@dataclass(frozen=True, slots=True)
class RowReader:
    """Reads one row into peaks; `read` takes the row and ``file:line``, and raises `FormatError`."""

    read: Callable[[str, str], list[tuple[float, float]]]
    is_ambiguous: bool = False
    """True where one row alone could also mean two peaks (``43,100;58,22``)."""


def looks_like_row(text: str) -> bool:
    """True where `text` starts with a number.

    Examples
    --------
    >>> looks_like_row("43 100"), looks_like_row("m/z int")
    (True, False)
    """
    return _ROW_START.match(text) is not None


def find_heading(text: str) -> RowReader | None:
    """Reader for the rows below a heading that names the m/z and the intensity column, or None.

    Parameters
    ----------
    text : str
        One line, such as ``m/z;intensity``. An absolute intensity is preferred over a relative one.

    Examples
    --------
    >>> rows = find_heading("rel. int.;Intensity;m/z")
    >>> rows.read("100;2500;43,05", "a.csv:2")
    [(43.05, 2500.0)]
    """
    for separator in ("\t", ";", ",", None):
        names = [bare_name(name) for name in text.split(separator)]
        if len(names) < 2:
            continue
        mz_column = next((position for position, name in enumerate(names) if name in _MZ_NAMES), None)
        columns = [position for position, name in enumerate(names) if name in _INTENSITY_NAMES]
        columns.sort(key=lambda position: names[position] in _RELATIVE_NAMES)
        if mz_column is not None and columns:
            return RowReader(_read_columns(separator, len(names), mz_column, columns[0]))
    return None


def settle_rows(text: str) -> RowReader:
    """Reader for rows written like `text`, the first row of a table without heading.

    Parameters
    ----------
    text : str
        A row of two numbers, or of pairs.

    Returns
    -------
    RowReader
        For columns where the row is two numbers, else for pairs.

    Examples
    --------
    >>> settle_rows("43,1;100,5").read("58,1;22,5", "a.csv:2")
    [(58.1, 22.5)]
    >>> settle_rows("43:100 58:22, 15 30").read("43:100 58:22, 15 30", "a.txt:1")
    [(43.0, 100.0), (58.0, 22.0), (15.0, 30.0)]
    """
    for separator in ("\t", ";"):
        fields = [field.strip() for field in text.rstrip(";\t ").split(separator)]
        if len(fields) == 2 and all(_single(field) is not None for field in fields):
            commas = all("," in field for field in fields)
            return RowReader(_read_columns(separator, 2, 0, 1), is_ambiguous=separator == ";" and commas)
    if ":" not in text:
        fields = [field.strip() for field in text.split(",")]
        if len(fields) == 2 and all(parse_number(_unquote(field)) is not None for field in fields):
            return RowReader(_read_columns(",", 2, 0, 1))
        fields = text.split()
        if len(fields) == 2 and all(_single(field) is not None for field in fields):
            commas = all("," in field for field in fields)
            return RowReader(_read_columns(None, 2, 0, 1), is_ambiguous=commas)
    return RowReader(_read_pairs)


def _unquote(text: str) -> str:
    return text.strip().strip('"').strip()


def _single(text: str) -> float | None:
    """Number with decimal point or decimal comma, or None."""
    text = _unquote(text)
    return parse_number(text.replace(",", ".") if _DECIMAL_COMMA.fullmatch(text) else text)


def _read_columns(
    separator: str | None, n_columns: int, mz_column: int, intensity_column: int
) -> Callable[[str, str], list[tuple[float, float]]]:
    def read(text: str, where: str) -> list[tuple[float, float]]:
        fields = text.split() if separator is None else text.rstrip(separator).split(separator)
        # Cells at the end may be empty in a table with more than two columns.
        if not max(mz_column, intensity_column) < len(fields) <= n_columns:
            raise FormatError("peak row", where=where, found=quote(text), expected=f"{n_columns} columns")
        mz, intensity = (_single(fields[column]) for column in (mz_column, intensity_column))
        if mz is None or intensity is None:
            raise _no_number(fields[mz_column if mz is None else intensity_column], where)
        return [(mz, intensity)]

    return read


def _read_pairs(text: str, where: str) -> list[tuple[float, float]]:
    tokens: list[str] = []
    for group in re.split(r"[;,]", text):
        words = " ".join(group.strip(" \t()[]").split()).replace(" :", ":").replace(": ", ":").split()
        if any(":" in word for word in words):
            words = [part for word in words for part in (word.split(":") if word.count(":") == 1 else (word,))]
            is_paired = len(words) % 2 == 0
        else:
            is_paired = len(words) in (0, 2)
        for word in words:
            if parse_number(word) is None:
                raise _no_number(word, where)
        if not is_paired:
            expected = "pairs of m/z and intensity"
            raise FormatError("peak row", where=where, found=quote(text), expected=expected, hint=_PAIRS_HINT)
        tokens += words
    values = [float(token) for token in tokens]
    return list(zip(values[0::2], values[1::2], strict=True))


def _no_number(text: str, where: str) -> FormatError:
    return FormatError("number in a peak row", where=where, found=quote(text.strip()), expected="a finite number")
