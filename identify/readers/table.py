"""Tables of m/z and intensity, and pasted peak lists → spectrum records.

Columns may be separated by tabs, semicolons, commas or blanks, with a heading or none; numbers may have a decimal comma
where the separator leaves no doubt. Pasted pairs (``43:100 58:22, 15 30``) are read as well. The way rows are written is
settled by the first one of each spectrum (`identify.readers.table_rows`) and then held to, line by line.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

from identify.errors import FormatError, InputError, quote
from identify.readers.fault_reports import OnReject, fault, rejection_of
from identify.readers.limits import LINE_OVERHEAD_BYTES, MAX_PEAKS, MAX_RECORD_BYTES
from identify.readers.named_fields import (
    SPELLINGS,
    NamedFields,
    bare_name,
    cut_field,
    record_from_fields,
    split_statement,
)
from identify.readers.numbers import too_many_peaks
from identify.readers.recognize import unknown_format
from identify.readers.table_rows import RowReader, find_heading, looks_like_row, settle_rows
from identify.records import Source, SpectrumRecord, read_only

_COMMENT_MARKS = ("#", "%", "//", "!")
_STARTS_SPECTRUM = frozenset(SPELLINGS["name"] + SPELLINGS["title"] + SPELLINGS["accession"])


@dataclass
class _Draft:
    """One spectrum while its lines come in."""

    statements: list[tuple[str, str]] = field(default_factory=list)
    comments: list[str] = field(default_factory=list)
    first_line: int = 0
    n_bytes: int = 0
    rows: RowReader | None = None
    peaks: list[tuple[float, float]] = field(default_factory=list)
    error: InputError | None = None
    after_gap: bool = False

    @property
    def has_rows(self) -> bool:
        return bool(self.peaks) or self.error is not None


def parse_table(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of a text of two columns, or of pairs.

    Parameters
    ----------
    lines : iterable of str
        Lines without their ends.
    path : str
        File, for provenance and messages.
    on_reject : callable
        Takes the `Rejection` of each spectrum with a fault.

    Yields
    ------
    SpectrumRecord
        Lines ``name: value`` before the rows fill the fields they name; comment lines (``#``, ``%``, ``!``, ``//``) are kept
        as comments.

    Raises
    ------
    FormatError
        If the first line that is neither blank, comment nor ``name: value`` is neither a heading nor a row: the text is no
        table.

    Notes
    -----
    A new spectrum starts at a name, at a heading, and behind a blank line where the m/z start again from below.

    Examples
    --------
    >>> [record] = parse_table(["name: acetone", "m/z;intensity", "43,05;100", "58,1;23"], "a.csv", print)
    >>> record.identity.name, record.mz.tolist()
    ('acetone', [43.05, 58.1])
    """
    draft = _Draft()
    number = 0
    for line_number, line in enumerate(lines, 1):
        text = _single_cell(line.strip())
        if not text:
            draft.after_gap = draft.has_rows
            continue
        if _starts_anew(text, draft):
            number += 1
            yield from _finish(draft, path, number, on_reject)
            draft = _Draft()
        _take_line(draft, text, line_number, path, is_first=number == 0)
    if not draft.has_rows and not number:
        raise unknown_format(path, "no row of numbers")
    if draft.has_rows or draft.statements or draft.rows is not None:
        yield from _finish(draft, path, number + 1, on_reject)


def _single_cell(text: str) -> str:
    """Content of a line that is one quoted cell with a colon in it; any other line as it is."""
    if len(text) < 3 or text[0] != '"' or text[-1] != '"' or ":" not in text:
        return text
    inner = text[1:-1]
    return text if '"' in inner.replace('""', "") else inner.replace('""', '"').strip()


def _starts_anew(text: str, draft: _Draft) -> bool:
    if not draft.has_rows:
        return False
    if looks_like_row(text):
        if not draft.after_gap or draft.rows is None or not draft.peaks:
            return False
        try:
            peaks = draft.rows.read(text, "")
        except FormatError:
            return True
        return peaks[0][0] <= draft.peaks[-1][0]
    statement = split_statement(text, ":=")
    if statement is not None and bare_name(statement[0]) in _STARTS_SPECTRUM:
        return True
    if draft.after_gap and not text.startswith(_COMMENT_MARKS):
        return True
    return ":" not in text and find_heading(text) is not None


def _take_line(draft: _Draft, text: str, line_number: int, path: str, *, is_first: bool) -> None:
    draft.after_gap = False
    if draft.error is not None:
        return
    draft.first_line = draft.first_line or line_number
    if text.startswith(_COMMENT_MARKS):
        draft.comments.append(cut_field(text.lstrip("#%!/ ")))
    elif looks_like_row(text) or draft.peaks:
        _take_row(draft, text, line_number, path)
    elif draft.rows is None and ":" not in text and (heading := find_heading(text)) is not None:
        draft.rows = heading
    elif draft.rows is None and (statement := split_statement(text, ":=")) is not None:
        draft.statements.append(statement)
    elif is_first and draft.rows is None:
        raise unknown_format(f"{path}:{line_number}", quote(text))
    else:
        expected = "a row of numbers" if draft.rows is not None else "a heading, a row of numbers or 'name: value'"
        draft.error = fault("table line", path, line_number, found=quote(text), expected=expected)
    draft.n_bytes += len(text) + LINE_OVERHEAD_BYTES
    if draft.n_bytes > MAX_RECORD_BYTES:
        found, expected = f"more than {MAX_RECORD_BYTES} bytes", "one spectrum with its metadata"
        draft.error = fault("table", path, draft.first_line, found=found, expected=expected)


def _take_row(draft: _Draft, text: str, line_number: int, path: str) -> None:
    try:
        if draft.rows is None:
            draft.rows = settle_rows(text)
        draft.peaks += draft.rows.read(text, f"{path}:{line_number}")
        if len(draft.peaks) > MAX_PEAKS:
            raise too_many_peaks(path, line_number)
    except InputError as error:
        draft.error = error


def _finish(draft: _Draft, path: str, number: int, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    error = draft.error
    if error is None and not draft.peaks:
        error = fault("no peaks", path, draft.first_line, found="0 rows", expected="at least one row of numbers")
    if error is None and draft.rows is not None and draft.rows.is_ambiguous and len(draft.peaks) == 1:
        found = "a single row that reads as one peak with decimal commas or as two peaks"
        hint = "Write pairs with colons (43:100 58:22) or numbers with decimal points."
        error = fault("peak row", path, draft.first_line, found=found, expected="one meaning", hint=hint)
    if error is not None:
        on_reject(rejection_of(error, path, draft.first_line))
        return
    mz, intensity = zip(*draft.peaks, strict=True)
    fields = NamedFields(draft.statements)
    source = Source(path, draft.first_line, number)
    yield record_from_fields(fields, source, read_only(mz), read_only(intensity), comments=draft.comments)
