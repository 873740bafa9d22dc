"""MassBank records (format 2.6.0) → spectrum records.

Strict about what decides whether a record can be used (tags, end mark, peak count, numbers), line by line; everything
without a field of its own is kept in `extra` under its tag. Format: the MassBank record format document, version 2.6.0
(13 May 2022), as excerpted in the project's reference notes (standards 5.4).
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator

import numpy as np

from identify.errors import InputError, quote
from identify.readers.fault_reports import OnReject, counted, fault, rejection_of
from identify.readers.named_fields import cut_field
from identify.readers.numbers import parse_columns
from identify.readers.statements import (
    ionization_of_instrument_type,
    read_derivative_segments,
    read_energy,
    read_mass_range,
    read_retention,
)
from identify.readers.text_lines import RecordLines
from identify.records import Acquisition, FloatArray, Identity, Source, SpectrumRecord

END = "//"
PEAK_HEADER = "m/z int. rel.int."
_TAG = re.compile(r"[A-Z]{2}\$[A-Z_]+|[A-Z_]+")
_ONCE = frozenset(
    {"ACCESSION", "RECORD_TITLE", "DATE", "AUTHORS", "LICENSE", "CH$FORMULA", "CH$SMILES", "CH$IUPAC"}
    | {"AC$INSTRUMENT", "AC$INSTRUMENT_TYPE", "PK$SPLASH", "PK$ANNOTATION", "PK$NUM_PEAK", "PK$PEAK"}
)
_REQUIRED = ("CH$NAME", "AC$INSTRUMENT_TYPE", "PK$NUM_PEAK", "PK$PEAK")
_WITH_SUBTAG = frozenset(
    {"CH$LINK", "SP$LINK", "AC$MASS_SPECTROMETRY", "AC$CHROMATOGRAPHY", "AC$GENERAL", "AC$ION_MOBILITY"}
    | {"MS$FOCUSED_ION", "MS$DATA_PROCESSING"}
)
_NOTHING = frozenset({"", "N/A", "NA"})
_COLUMN = "AC$CHROMATOGRAPHY"
_SPECTROMETRY = "AC$MASS_SPECTROMETRY"


def parse_massbank(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of a text in MassBank record format, one or many.

    Parameters
    ----------
    lines : iterable of str
        Lines without their ends.
    path : str
        File (or ``archive::member``) for provenance and messages.
    on_reject : callable
        Takes the `Rejection` of each record that breaks the format; reading goes on with the next one.

    Yields
    ------
    SpectrumRecord
        `source.line` is the line of ``ACCESSION``; `comments` the ``COMMENT`` lines; `extra` everything else under
        ``TAG`` or ``TAG SUBTAG``, repeated ones joined by line feeds. A retention index that cannot be one (0, NA, equal
        to the retention time) is left out and kept in `extra` with the reason.
    """
    for number, (block, is_closed) in enumerate(_split_records(lines), 1):
        try:
            block.refuse_if_full(path)
            if not is_closed:
                raise fault(
                    "record without end", path, block.last_line, found=quote(block.lines[-1]), expected="a line '//'",
                    hint="The file may be truncated.",
                )  # fmt: skip
            yield _parse_record(block.lines, block.first_line, path, number)
        except InputError as error:
            on_reject(rejection_of(error, path, block.first_line))


def _split_records(lines: Iterable[str]) -> Iterator[tuple[RecordLines, bool]]:
    """Lines of each record, and whether its end mark is there."""
    block = RecordLines()
    for line_number, line in enumerate(lines, 1):
        if line.rstrip() == END:
            if block:
                yield block, True
            block = RecordLines()
            continue
        if block and line.startswith("ACCESSION:"):
            yield block, False
            block = RecordLines()
        if block or line.strip():
            block.add(line, line_number)
    while block and not block.lines[-1].strip():
        block.lines.pop()
        block.last_line -= 1
    if block:
        yield block, False


class _Fields:
    """Tagged values of one record; what was taken leaves, so that the rest is `extra`."""

    def __init__(self) -> None:
        self.values: dict[str, list[str]] = {}
        self.lines: dict[str, int] = {}
        self.rows: dict[str, tuple[list[str], int]] = {}

    def add(self, key: str, value: str, line: int) -> None:
        self.values.setdefault(key, []).append(value)
        self.lines.setdefault(key, line)

    def take(self, key: str) -> str:
        """Value under `key`, several joined by line feeds; empty for none or ``N/A``."""
        text = "\n".join(self.values.pop(key, ()))
        return "" if text in _NOTHING else text

    def take_first(self, key: str) -> str:
        """First value under `key`, as it stands; the others stay."""
        values = self.values.get(key)
        if not values:
            return ""
        value = values.pop(0)
        if not values:
            del self.values[key]
        return value


def _parse_record(block: list[str], first_line: int, path: str, number: int) -> SpectrumRecord:
    fields = _split_fields(block, first_line, path)
    mz, intensity = _parse_peaks(fields, path)
    title = cut_field(fields.take("RECORD_TITLE"))
    energy, energy_note = read_energy(
        fields.take(f"{_SPECTROMETRY} IONIZATION_ENERGY") or fields.take(f"{_SPECTROMETRY} IONIZATION_POTENTIAL")
    )
    retention, retention_notes = read_retention(
        time=fields.take_first(f"{_COLUMN} RETENTION_TIME"),
        time_hint=title,
        indices=[
            ("kovats", fields.take_first(f"{_COLUMN} KOVATS_RTI")),
            ("lee", fields.take_first(f"{_COLUMN} LEE_RTI")),
            ("", fields.take_first(f"{_COLUMN} RETENTION_INDEX")),
        ],
        column=fields.take_first(f"{_COLUMN} COLUMN_NAME"),
    )
    record = {
        "accession": fields.take("ACCESSION"),
        "identity": _take_identity(fields),
        "acquisition": _take_acquisition(fields, energy),
        "derivative": _take_derivative(fields, title),
        "licence": fields.take("LICENSE"),
        "authors": fields.take("AUTHORS"),
        "splash": fields.take("PK$SPLASH"),
        "comments": tuple(fields.values.pop("COMMENT", ())),
    }
    notes = energy_note | retention_notes
    extra = {key: cut_field("\n".join(values)) for key, values in fields.values.items()} | notes
    source = Source(path, first_line, number)
    return SpectrumRecord(source, mz, intensity, title=title, retention=retention, extra=extra, **record)  # type: ignore[arg-type]


def _split_fields(block: list[str], first_line: int, path: str) -> _Fields:
    if not block[0].startswith("ACCESSION: "):
        raise fault("record start", path, first_line, found=quote(block[0]), expected="'ACCESSION: '")
    fields = _Fields()
    key = ""
    position, n_lines = 0, len(block)
    while position < n_lines:
        line, line_number = block[position], first_line + position
        position += 1
        if line.startswith("  ") and key:
            fields.values[key][-1] = f"{fields.values[key][-1]} {line.strip()}".strip()
            continue
        tag, colon, value = line.partition(":")
        value = value.strip()
        if not colon or not _TAG.fullmatch(tag):
            raise fault("record line", path, line_number, found=quote(line), expected="'TAG: value' or '//'")
        if tag == "DEPRECATED":
            raise fault("deprecated record", path, line_number, found=quote(value), expected="a record in force")
        if tag in _ONCE and (tag in fields.values or tag in fields.rows):
            raise fault("tag given twice", path, line_number, found=quote(tag), expected=f"one {tag}")
        if tag in ("PK$PEAK", "PK$ANNOTATION"):
            start = position
            while position < n_lines and block[position][:2] == "  ":
                position += 1
            fields.rows[tag] = block[start:position], line_number + 1
            key = tag
            fields.add(key, value, line_number)
            continue
        key = tag
        if tag in _WITH_SUBTAG:
            subtag, _, value = value.partition(" ")
            key = f"{tag} {subtag}"
            value = value.strip()
        fields.add(key, value, line_number)
    for tag in _REQUIRED:
        if tag not in fields.values:
            raise fault("record without a required tag", path, first_line, found="none", expected=f"'{tag}:'")
    return fields


def _parse_peaks(fields: _Fields, path: str) -> tuple[FloatArray, FloatArray]:
    header, header_line = fields.take("PK$PEAK"), fields.lines["PK$PEAK"]
    if header != PEAK_HEADER:
        raise fault("peak header", path, header_line, found=quote(header), expected=f"'{PEAK_HEADER}'")
    count_text, count_line = fields.take("PK$NUM_PEAK"), fields.lines["PK$NUM_PEAK"]
    if not (count_text.isascii() and count_text.isdigit() and len(count_text) < 10):
        raise fault("peak count", path, count_line, found=quote(count_text), expected="a whole number")
    rows, first_line = fields.rows.pop("PK$PEAK")
    expected = "'m/z intensity relative-intensity'"
    tokens = [row.split() for row in rows]
    if tokens and len(tokens[0]) != 3:
        raise fault("peak row", path, first_line, found=quote(rows[0].strip()), expected=expected)
    table = parse_columns(tokens, range(first_line, first_line + len(rows)), path, expected)
    if len(rows) != int(count_text):
        hint = "Peaks are missing or were added by hand."
        raise fault("peak count", path, count_line, found=counted(len(rows), "row"), expected=count_text, hint=hint)
    if not rows:
        raise fault("no peaks", path, header_line, found="0 peak rows", expected="at least one")
    if "PK$ANNOTATION" in fields.rows:
        annotation, _ = fields.rows.pop("PK$ANNOTATION")
        fields.values["PK$ANNOTATION"] += [row.strip() for row in annotation]
    return np.ascontiguousarray(table[:, 0]), np.ascontiguousarray(table[:, 1])


def _take_identity(fields: _Fields) -> Identity:
    names = tuple(fields.values.pop("CH$NAME"))
    cas_numbers = fields.take("CH$LINK CAS").split()
    if len(cas_numbers) > 1:
        fields.add("CH$LINK CAS", " ".join(cas_numbers), 0)
    return Identity(
        name=cut_field(names[0]),
        formula=fields.take("CH$FORMULA"),
        smiles=fields.take("CH$SMILES"),
        inchi=fields.take("CH$IUPAC"),
        inchikey=fields.take_first("CH$LINK INCHIKEY"),
        cas=cas_numbers[0] if cas_numbers else "",
        other_names=tuple(cut_field(name) for name in names[1:]),
    )


def _take_acquisition(fields: _Fields, energy_ev: float | None) -> Acquisition:
    instrument_type = fields.take("AC$INSTRUMENT_TYPE")
    stated = fields.take(f"{_SPECTROMETRY} IONIZATION")
    ms_type = fields.take(f"{_SPECTROMETRY} MS_TYPE")
    ms_level = {"MS": 1, "MS2": 2, "MS3": 3, "MS4": 4}.get(ms_type)
    if ms_type and ms_level is None:
        fields.add(f"{_SPECTROMETRY} MS_TYPE", ms_type, 0)
    lowest, highest = None, None
    for subtag in ("SCAN_RANGE_M/Z", "MASS_RANGE_M/Z"):
        text = fields.take(f"{_SPECTROMETRY} {subtag}")
        lowest, highest = read_mass_range(text) if lowest is None else (lowest, highest)
        if text and lowest is None:
            fields.add(f"{_SPECTROMETRY} {subtag}", text, 0)
    separation = instrument_type.partition("-")[0] if instrument_type.startswith(("GC-", "LC-", "CE-")) else ""
    return Acquisition(
        instrument=cut_field(fields.take("AC$INSTRUMENT")),
        instrument_type=instrument_type,
        ionization=ionization_of_instrument_type(instrument_type) or stated.upper(),
        energy_ev=energy_ev,
        inlet=fields.take(f"{_COLUMN} INLET_TYPE") or separation,
        ms_level=ms_level,
        polarity=fields.take(f"{_SPECTROMETRY} ION_MODE").lower(),
        lowest_mz=lowest,
        highest_mz=highest,
    )


def _take_derivative(fields: _Fields, title: str) -> str:
    stated = fields.take("MS$FOCUSED_ION DERIVATIVE_TYPE")
    if stated:
        return stated
    for comment in fields.values.get("COMMENT", ()):
        if comment.startswith("DERIVATIVE_TYPE "):
            return comment.removeprefix("DERIVATIVE_TYPE ").partition("; DERIVATIVE_")[0].strip()
    return read_derivative_segments(title)
