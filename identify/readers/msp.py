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
from identify.readers.limits import MAX_PEAKS, MAX_RECORD_LINES
from identify.readers.named_fields import NamedFields, bare_name, record_from_fields, split_statement
from identify.readers.numbers import parse_tokens, too_many_peaks
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
    """
    for number, block in enumerate(_split_records(lines), 1):
        first_line = block[0][0]
        try:
            yield _parse_record(block, path, number)
        except InputError as error:
            on_reject(rejection_of(error, path, first_line))


def _split_records(lines: Iterable[str]) -> Iterator[list[_Line]]:
    block: list[_Line] = []
    in_peaks = False
    n_lines = 0
    for line_number, line in enumerate(lines, 1):
        if not line or line.isspace():
            if in_peaks and block:
                yield block
                block, in_peaks, n_lines = [], False, 0
            continue
        pair = split_statement(line)
        if pair is not None:
            name = bare_name(pair[0])
            starts = name == "name" and any(_is_name(text) for _, text in block)
            if block and ((in_peaks and name not in _COUNT_NAMES) or starts):
                yield block
                block, in_peaks, n_lines = [], False, 0
            in_peaks = in_peaks or name in _COUNT_NAMES
        n_lines += 1
        if n_lines <= MAX_RECORD_LINES:
            block.append((line_number, line))
    if block:
        yield block


def _is_name(line: str) -> bool:
    return line.lstrip()[:5].lower() in ("name:", "name ")


def _parse_record(block: list[_Line], path: str, number: int) -> SpectrumRecord:
    pairs: list[tuple[str, str]] = []
    count_line, stated, rest = 0, "", 0
    for position, (line_number, line) in enumerate(block):
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
        raise fault(_NO_COUNT, path, block[0][0], found="none", expected="'Num Peaks: n'")
    mz, intensity = _parse_peaks(block[rest:], stated, count_line, path)
    return record_from_fields(NamedFields(pairs), Source(path, block[0][0], number), mz, intensity)


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
