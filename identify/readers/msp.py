"""The plain-text name/value-and-peaks exchange format (.msp) → spectrum records.

There is no written standard; open collections share one shape: ``Name: value`` lines, ``Num Peaks: n``, then n pairs.
Tolerant about spelling and separators, strict about the count and the numbers.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from functools import partial

import numpy as np

from identify.errors import InputError, quote
from identify.readers.fault_reports import OnReject, counted, fault, rejection_of
from identify.readers.limits import MAX_PEAKS
from identify.readers.named_fields import NamedFields, bare_name, record_from_fields, split_statement
from identify.readers.numbers import parse_tokens, too_many_peaks
from identify.readers.text_lines import RecordLines
from identify.records import FloatArray, Source, SpectrumRecord

_COUNT_NAMES = frozenset({"numpeaks", "numpeak", "numberofpeaks", "npeaks"})
_SEPARATORS = re.compile(r"[\s,;:()\[\]{}]+")
_NO_COUNT = "record without a peak count"
_ANNOTATION = re.compile(r'"[^"]*"')
_Line = tuple[int, str]


def parse_msp(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of a text in the name/value-and-peaks format.

    Parameters
    ----------
    lines : iterable of str
        Lines without their ends.
    path : str
        File, for provenance and messages.
    on_reject : callable
        Takes the `Rejection` of each record with a fault.

    Yields
    ------
    SpectrumRecord
        `source.line` is the first line of the record. Pairs inside ``Comments`` (``"SMILES=CCO"``) fill fields that have
        no line of their own. A retention time without a unit is not used: minutes and seconds are both common.

    Notes
    -----
    A record ends at a blank line behind its peaks, or where a name follows the peaks. Peaks are pairs of numbers separated
    by blanks, commas, semicolons, colons or brackets; text in double quotes is an annotation and is left out.

    Examples
    --------
    >>> lines = ["Name: acetone", "Formula: C3H6O", "Num Peaks: 2", "43 100; 58 23"]
    >>> [record] = parse_msp(lines, "a.msp", print)
    >>> record.identity.formula, record.mz.tolist(), record.intensity.tolist()
    ('C3H6O', [43.0, 58.0], [100.0, 23.0])
    """
    for number, block in enumerate(_split_records(lines), 1):
        try:
            block.refuse_if_full(path)
            yield _parse_record(block, path, number)
        except InputError as error:
            on_reject(rejection_of(error, path, block.first_line))


def _split_records(lines: Iterable[str]) -> Iterator[RecordLines]:
    block = RecordLines()
    in_peaks = has_name = False
    for line_number, line in enumerate(lines, 1):
        is_blank = not line or line.isspace()
        pair = None if is_blank else split_statement(line)
        name = "" if pair is None else bare_name(pair[0])
        is_count = name in _COUNT_NAMES
        ends_peaks = in_peaks and (is_blank or (pair is not None and not is_count))
        starts_anew = has_name and name == "name"
        if ends_peaks or starts_anew:
            yield block
            block, in_peaks, has_name = RecordLines(), False, False
        in_peaks, has_name = in_peaks or is_count, has_name or name == "name"
        if block or not is_blank:
            block.add(line, line_number)
    if block:
        yield block


def _parse_record(block: RecordLines, path: str, number: int) -> SpectrumRecord:
    pairs: list[tuple[str, str]] = []
    count_line, stated, rest = 0, "", 0
    numbered = [pair for pair in enumerate(block.lines, block.first_line) if pair[1] and not pair[1].isspace()]
    for position, (line_number, line) in enumerate(numbered):
        pair = split_statement(line)
        if pair is None and line.lstrip()[:1].isdigit():
            raise fault(_NO_COUNT, path, line_number, found=quote(line), expected="'Num Peaks: n' before the peaks")
        if pair is None:
            expected = "'Name: value' or 'Num Peaks: n'"
            raise fault("record line", path, line_number, found=quote(line), expected=expected)
        name, value = pair
        if bare_name(name) in _COUNT_NAMES:
            count_line, stated, rest = line_number, value, position + 1
            break
        pairs.append((name.rstrip("#"), value))
    if not count_line:
        raise fault(_NO_COUNT, path, block.first_line, found="none", expected="'Num Peaks: n'")
    mz, intensity = _parse_peaks(numbered[rest:], stated, count_line, path)
    return record_from_fields(NamedFields(pairs), Source(path, block.first_line, number), mz, intensity)


def _parse_peaks(rows: list[_Line], stated: str, count_line: int, path: str) -> tuple[FloatArray, FloatArray]:
    # Some exporters put the first peaks behind the count, on its line.
    count_text, _, behind = stated.partition(" ")
    if not (count_text.isascii() and count_text.isdigit() and len(count_text) < 10):
        raise fault("peak count", path, count_line, found=quote(stated), expected="a whole number")
    n_stated = int(count_text)
    if n_stated > MAX_PEAKS:
        raise too_many_peaks(path, count_line)
    if behind.strip():
        rows = [(count_line, behind), *rows]
    tokens: list[str] = []
    lines: list[int] = []
    for line_number, row in rows:
        found = [token for token in _SEPARATORS.split(_ANNOTATION.sub(" ", row)) if token]
        if len(found) % 2:
            parse_tokens(found, partial(_same_line, line_number), path)
            hint = "Decimal commas are not read." if "," in row else ""
            expected = "pairs of m/z and intensity"
            raise fault("peak row", path, line_number, found=quote(row.strip()), expected=expected, hint=hint)
        tokens += found
        lines += [line_number] * len(found)
        if len(tokens) > 2 * MAX_PEAKS:
            raise too_many_peaks(path, line_number)
    values = parse_tokens(tokens, lines.__getitem__, path)
    if values.size != 2 * n_stated:
        raise fault(
            "peak count",
            path,
            count_line,
            found=counted(values.size // 2, "peak"),
            expected=str(n_stated),
            hint="Peaks are missing, or a decimal comma splits numbers.",
        )
    if not n_stated:
        raise fault("no peaks", path, count_line, found="0 peaks", expected="at least one")
    return np.ascontiguousarray(values[0::2]), np.ascontiguousarray(values[1::2])


def _same_line(line_number: int, _position: int) -> int:
    return line_number
