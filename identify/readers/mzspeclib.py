"""mzSpecLib 1.0 text libraries → spectrum records.

Reads what a library of electron-ionization spectra needs: library and set attributes, spectra with their analytes, peaks.
Format: HUPO-PSI mzSpecLib 1.0 (recommendation of 23 May 2025) as excerpted in the project's reference notes (standards 5.5).
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator

import numpy as np

from identify.errors import InputError, quote
from identify.readers.fault_reports import OnReject, counted, fault, rejection_of
from identify.readers.limits import MAX_PEAKS
from identify.readers.named_fields import NamedFields, record_from_fields
from identify.readers.numbers import parse_columns, too_many_peaks
from identify.readers.text_lines import RecordLines
from identify.records import FloatArray, Source, SpectrumRecord

FIRST_LINE = "<mzSpecLib>"
_SECTION = re.compile(r"<(\w+)(?:[ =].*)?>")
_SPECTRUM = re.compile(r"<Spectrum=(\d{1,9})>")
_ATTRIBUTE = re.compile(r"(?:\[(\d{1,9})\])?([A-Za-z]+:\w+)\|([^=]*)=(.*)")
_NAME_ACCESSION, _VALUE_ACCESSION, _UNIT_ACCESSION = "MS:1003275", "MS:1003276", "UO:0000000"
_COUNT_ACCESSION = "MS:1003059"
_TERMS = {
    "MS:1003061": "title",
    "MS:1000511": "ms level",
    "MS:1000008": "ionization",
    "MS:1000465": "polarity",
    "MS:1000894": "retention time",
    "MS:1000866": "formula",
    "MS:1000868": "smiles",
    "MS:1003403": "inchi",
    "MS:1002894": "inchikey",
    "MS:1002599": "splash",
}
_MASS_ACCESSION, _FORMULA_ACCESSION = "MS:1000224", "MS:1000866"
_STRUCTURE = frozenset({_COUNT_ACCESSION, "MS:1003072", "MS:1003065", "MS:1003237"})
_Attribute = tuple[str, str, str, str]


def parse_mzspeclib(lines: Iterable[str], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of an mzSpecLib text.

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
        `source.line` is the line of ``<Spectrum=…>``. Attributes of the set ``all`` apply to each spectrum that does not state
        its own. The level is 2 where none is stated, as the format says.
    """
    common: list[_Attribute] = []
    number = 0
    for block in _split_spectra(lines):
        if not number and _SPECTRUM.fullmatch(block.lines[0]) is None:
            common = _attributes_of_set(block.lines)
            continue
        number += 1
        try:
            block.refuse_if_full(path)
            yield _parse_spectrum(block.lines, block.first_line, common, Source(path, block.first_line, number))
        except InputError as error:
            on_reject(rejection_of(error, path, block.first_line))


def _split_spectra(lines: Iterable[str]) -> Iterator[RecordLines]:
    """Lines of the head of the file, then of each spectrum; comments as blanks, so that line numbers stay right."""
    block = RecordLines()
    for line_number, line in enumerate(lines, 1):
        line = line.rstrip()
        if line.startswith("<Spectrum=") and block:
            yield block
            block = RecordLines()
        block.add("" if line.startswith("#") else line, line_number)
    if block:
        yield block


def _attributes_of_set(block: list[str]) -> list[_Attribute]:
    found: list[_Attribute] = []
    in_set = False
    for line in block:
        if line.startswith("<"):
            in_set = line == "<AttributeSet Spectrum=all>"
        elif in_set and (match := _ATTRIBUTE.fullmatch(line)) is not None:
            found.append(_attribute(match))
    return found


def _attribute(match: re.Match[str]) -> _Attribute:
    group, accession, name, value = match.groups()
    return group or "", accession, name, value


def _parse_spectrum(block: list[str], first_line: int, common: list[_Attribute], source: Source) -> SpectrumRecord:
    path = source.path
    if _SPECTRUM.fullmatch(block[0]) is None:
        raise fault("section", path, first_line, found=quote(block[0]), expected="'<Spectrum=N>'")
    attributes: list[_Attribute] = []
    rows: list[str] = []
    row_lines: list[int] = []
    section = "Spectrum"
    n_analytes = 0
    for line_number, line in enumerate(block[1:], first_line + 1):
        if not line:
            continue
        header = _SECTION.fullmatch(line)
        if header is not None:
            section = header.group(1)
            n_analytes += section == "Analyte"
            if n_analytes > 1:
                raise fault("analytes", path, line_number, found="a second one", expected="one compound per spectrum")
            if section not in ("Analyte", "Interpretation", "Peaks"):
                raise fault("section", path, line_number, found=quote(line), expected="<Analyte=n> or <Peaks>")
        elif section == "Peaks":
            rows.append(line)
            row_lines.append(line_number)
            if len(rows) > MAX_PEAKS:
                raise too_many_peaks(path, line_number)
        elif (match := _ATTRIBUTE.fullmatch(line)) is not None:
            # The group numbers of spectrum and analyte are independent of each other.
            group, *rest = _attribute(match)
            attributes.append((f"{section}{group}" if group else "", *rest))  # type: ignore[arg-type]
        else:
            raise fault("attribute", path, line_number, found=quote(line), expected="'ACCESSION|name=value'")
    stated = {accession for _, accession, _, _ in attributes}
    attributes += [item for item in common if item[1] not in stated]
    mz, intensity = _parse_peaks(rows, row_lines, attributes, source)
    fields = NamedFields(_pairs(attributes))
    if not fields.has("name"):
        fields.add("name", next((value for _, accession, _, value in attributes if accession == "MS:1003061"), ""))
    if not fields.has("ms level"):
        fields.add("ms level", "2")
    return record_from_fields(fields, source, mz, intensity)


def _parse_peaks(
    rows: list[str], row_lines: list[int], attributes: list[_Attribute], source: Source
) -> tuple[FloatArray, FloatArray]:
    path, line = source.path, source.line or 1
    tokens = [row.split("\t")[:2] for row in rows]
    expected = "'m/z<TAB>intensity'"
    if tokens and len(tokens[0]) != 2:
        raise fault("peak row", path, row_lines[0], found=quote(rows[0]), expected=expected)
    table = parse_columns(tokens, row_lines, path, expected)
    stated = [value for _, accession, _, value in attributes if accession == _COUNT_ACCESSION]
    if stated and stated[0] != str(len(rows)):
        found, wanted = counted(len(rows), "peak row"), f"{quote(stated[0])} as the number of peaks says"
        raise fault("peak count", path, line, found=found, expected=wanted)
    if not rows:
        raise fault("no peaks", path, line, found="0 peak rows", expected="at least one")
    return np.ascontiguousarray(table[:, 0]), np.ascontiguousarray(table[:, 1])


def _pairs(attributes: list[_Attribute]) -> Iterator[tuple[str, str]]:
    names = {group: value for group, accession, _, value in attributes if accession == _NAME_ACCESSION}
    units = {group: value for group, accession, _, value in attributes if group and accession == _UNIT_ACCESSION}
    has_formula = any(accession == _FORMULA_ACCESSION for _, accession, _, _ in attributes)
    for group, accession, name, value in attributes:
        if accession in _STRUCTURE or accession in (_NAME_ACCESSION, _UNIT_ACCESSION):
            continue
        if accession == _MASS_ACCESSION and has_formula:
            continue
        if accession == _VALUE_ACCESSION:
            yield names.get(group, "other attribute"), value
            continue
        # A value that is itself a term of the vocabulary reads "MS:1000389|electron ionization".
        text = value.partition("|")[2] if re.match(r"[A-Z]+:\d+\|", value) else value
        unit = units.get(group, "").partition("|")[2] if group else ""
        yield _TERMS.get(accession, name), f"{text} {unit}".strip()
