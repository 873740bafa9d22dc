"""MGF (through matchms) → spectrum records: the one adapter to that package.

matchms is imported inside the function that needs it: that takes seconds. What it passes over in silence is guarded: the
rows of a record are read here before, and compared after.
"""

from __future__ import annotations

import io
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

import numpy as np

from identify.errors import InputError, quote
from identify.readers.fault_reports import FOREIGN_FAULTS, OnReject, fault, rejection_of
from identify.readers.named_fields import NamedFields, record_from_fields
from identify.readers.numbers import parse_columns
from identify.readers.text_lines import RecordLines
from identify.records import FloatArray, Source, SpectrumRecord, read_only


def parse_mgf(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of a text in MGF.

    Parameters
    ----------
    lines : iterable of str
        Lines without their ends.
    path : str
        File, for provenance and messages.
    on_reject : callable
        Takes the `Rejection` of each record with a fault, and of each one that matchms would lose or change.

    Yields
    ------
    SpectrumRecord
        Peaks sorted by m/z (matchms sorts them). `source.line` is the line of ``BEGIN IONS``.

    Notes
    -----
    Each record is handed over by itself, so that one bad record costs one rejection and keeps its line number.
    """
    for number, block in enumerate(_split_records(lines), 1):
        try:
            block.refuse_if_full(path)
            if block.lines[-1] != "END IONS":
                raise fault(
                    "record without end", path, block.last_line, found=quote(block.lines[-1]), expected="'END IONS'",
                    hint="The file may be truncated.",
                )  # fmt: skip
            yield _parse_record(block.lines, Source(path, block.first_line, number))
        except InputError as error:
            on_reject(rejection_of(error, path, block.first_line))


def _split_records(lines: Iterable[str]) -> Iterator[RecordLines]:
    block = RecordLines()
    for line_number, line in enumerate(lines, 1):
        text = line.strip()
        if text == "BEGIN IONS" and block:
            yield block
            block = RecordLines()
        if block or text == "BEGIN IONS":
            block.add(text, line_number)
        if block and text == "END IONS":
            yield block
            block = RecordLines()
    if block:
        yield block


def _parse_record(block: list[str], source: Source) -> SpectrumRecord:
    path, first_line = source.path, source.line or 1
    rows: list[list[str]] = []
    lines: list[int] = []
    for line_number, text in enumerate(block, first_line):
        if text and text not in ("BEGIN IONS", "END IONS") and "=" not in text and text[0] not in "#;!/":
            rows.append(text.split()[:2])
            lines.append(line_number)
    expected = "'m/z intensity'"
    if rows and len(rows[0]) != 2:
        raise fault("peak row", path, lines[0], found=quote(" ".join(rows[0])), expected=expected)
    stated = parse_columns(rows, lines, path, expected)
    if not rows:
        raise fault("no peaks", path, first_line, found="0 rows", expected="at least one")
    mz, intensity, metadata = _load_with_matchms(block, path, first_line)
    order = np.argsort(stated[:, 0], kind="stable")
    same_intensities = np.array_equal(np.sort(intensity), np.sort(stated[:, 1]))
    if not (np.array_equal(mz, stated[order, 0]) and same_intensities):
        found, expected = f"{mz.size} peaks from the MGF parser", f"the {len(rows)} rows of the record unchanged"
        raise fault("peak count", path, first_line, found=found, expected=expected)
    in_seconds = any(text.upper().startswith("RTINSECONDS=") for text in block)
    pairs = [(str(name), str(value)) for name, value in metadata.items() if value is not None]
    return record_from_fields(NamedFields(pairs), source, mz, intensity, default_time_unit="s" if in_seconds else "")


def _load_with_matchms(block: list[str], path: str, line: int) -> tuple[FloatArray, FloatArray, Mapping[str, Any]]:
    from matchms.importing import load_from_mgf
    from pyteomics.auxiliary import PyteomicsError

    try:
        spectra = list(load_from_mgf(io.StringIO("\n".join(block) + "\n"), metadata_harmonization=False))
    except (PyteomicsError, *FOREIGN_FAULTS) as error:
        found = quote(str(error).replace("\n", " "), 200)
        raise fault("MGF record", path, line, found=found, expected="what the MGF parser can read") from None
    if len(spectra) != 1:
        raise fault(
            "MGF record", path, line, found=f"{len(spectra)} spectra", expected="one between BEGIN and END IONS"
        )
    peaks = spectra[0].peaks
    return read_only(peaks.mz), read_only(peaks.intensities), spectra[0].metadata
