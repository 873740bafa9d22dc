"""mzML (through pyteomics) and MGF (through matchms) → spectrum records: the one adapter to those packages.

Both are imported inside the functions that need them: matchms takes seconds to import. Their errors are translated here.
What they pass over in silence is guarded: an MGF record is checked for its rows before, and compared after; binary arrays are
unpacked by this module within bounds; nothing is fetched from a network.
"""

from __future__ import annotations

import base64
import binascii
import io
import re
import tempfile
import warnings
import zlib
from collections.abc import Iterable, Iterator, Mapping
from typing import IO, Any, ClassVar, cast

import numpy as np

from identify.errors import FormatError, InputError, quote
from identify.readers.fault_reports import OnReject, fault, rejection_of
from identify.readers.limits import CHUNK_BYTES, MAX_FILE_BYTES, MAX_PEAKS, MAX_RECORD_LINES
from identify.readers.named_fields import NamedFields, record_from_fields
from identify.readers.numbers import parse_columns, too_many_peaks
from identify.readers.statements import IONIZATION_TERMS, read_ionization
from identify.readers.text_lines import PeekedStream
from identify.records import FloatArray, Rejection, Source, SpectrumRecord, read_only

NOT_EI = "not electron ionization"
NOT_MS1 = "not a full-scan spectrum (MS1)"
_FORBIDDEN = re.compile(rb"<!(?:DOCTYPE|ENTITY)")
_STRUCTURE = frozenset({"index", "count", "defaultArrayLength", "encodedLength", "arrayLength"})
_MZML_NAMES = {
    "spectrum title": "title",
    "molecular formula": "formula",
    "splash key": "splash",
    "id": "spectrum id in file",
}
_SPOOL_BYTES = 16 * 1024 * 1024
_FOREIGN_FAULTS = (ValueError, KeyError, IndexError, TypeError, AttributeError, AssertionError, OverflowError)
"""What the two packages raise on input they do not expect, besides their own error classes."""


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
    for number, (block, first_line) in enumerate(_split_mgf(lines), 1):
        try:
            if block[-1] != "END IONS":
                hint = "The file may be truncated."
                line = first_line + len(block) - 1
                raise fault("record without end", path, line, found=quote(block[-1]), expected="'END IONS'", hint=hint)
            yield _parse_mgf_record(block, Source(path, first_line, number))
        except InputError as error:
            on_reject(rejection_of(error, path, first_line))


def _split_mgf(lines: Iterable[str]) -> Iterator[tuple[list[str], int]]:
    block: list[str] = []
    first_line = 1
    for line_number, line in enumerate(lines, 1):
        text = line.strip()
        if text == "BEGIN IONS":
            if block:
                yield block, first_line
            block, first_line = [text], line_number
        elif block:
            if len(block) < MAX_RECORD_LINES or text == "END IONS":
                block.append(text)
            if text == "END IONS":
                yield block, first_line
                block = []
    if block:
        yield block, first_line


def _parse_mgf_record(block: list[str], source: Source) -> SpectrumRecord:
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
    except (PyteomicsError, *_FOREIGN_FAULTS) as error:
        found = quote(str(error).replace("\n", " "), 200)
        raise fault("MGF record", path, line, found=found, expected="what the MGF parser can read") from None
    if len(spectra) != 1:
        raise fault(
            "MGF record", path, line, found=f"{len(spectra)} spectra", expected="one between BEGIN and END IONS"
        )
    peaks = spectra[0].peaks
    return read_only(peaks.mz), read_only(peaks.intensities), spectra[0].metadata


def read_mzml(stream: PeekedStream, path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records of an mzML file: its first-level electron-ionization spectra.

    Parameters
    ----------
    stream : PeekedStream
        Bytes; copied to a temporary file, because the parser goes back and forth.
    path : str
        File, for provenance and messages.
    on_reject : callable
        Takes the `Rejection` of each spectrum of a higher level, of another ionization, or with a fault.

    Yields
    ------
    SpectrumRecord
        `source.number` counts the spectra of the file; there are no line numbers. A file that does not state its ionization is
        read with an empty one.

    Raises
    ------
    FormatError
        For XML that is damaged or defines entities, and for a file that is too large.
    """
    from lxml.etree import LxmlError
    from pyteomics.auxiliary import PyteomicsError

    with tempfile.SpooledTemporaryFile(max_size=_SPOOL_BYTES) as spool:
        _copy_xml(stream, cast(IO[bytes], spool), path)
        try:
            yield from _iterate_mzml(cast(IO[bytes], spool), path, on_reject)
        except (LxmlError, PyteomicsError, *_FOREIGN_FAULTS) as error:
            found = quote(str(error).replace("\n", " "), 200)
            raise FormatError("mzML", where=path, found=found, expected="well-formed mzML 1.1") from None


def _copy_xml(stream: PeekedStream, spool: IO[bytes], path: str) -> None:
    n_bytes, tail = 0, b""
    while chunk := stream.read(CHUNK_BYTES):
        n_bytes += len(chunk)
        if _FORBIDDEN.search(tail + chunk):
            raise FormatError("mzML", where=path, found="a document type definition", expected="plain mzML without one")
        if n_bytes > MAX_FILE_BYTES:
            raise FormatError("size", where=path, found=f"more than {MAX_FILE_BYTES} bytes", expected="a smaller file")
        tail = chunk[-16:]
        spool.write(chunk)
    spool.seek(0)


def _plain_mzml(spool: IO[bytes]) -> Any:
    """Parser that leaves all values as text and needs no vocabulary file (which it would fetch from a network)."""
    from pyteomics.auxiliary import unitstr
    from pyteomics.mzml import MzML

    class PlainMzML(MzML):  # type: ignore[misc]  # the package is untyped
        _default_param_type = unitstr
        _param_types: ClassVar[dict[str, Any]] = {}
        _cv_type_cache: ClassVar[dict[str, Any]] = {}

    return PlainMzML(spool, use_index=False, decode_binary=False, huge_tree=False, cv=_NoVocabulary())


class _NoTerm:
    """A vocabulary term that says nothing about types and units."""

    relationship = ()
    name = ""


class _NoVocabulary:
    """Stands for the controlled vocabulary where none is needed."""

    def __getitem__(self, accession: str) -> _NoTerm:
        return _NoTerm()


def _iterate_mzml(spool: IO[bytes], path: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    sources = _read_ion_sources(spool)
    spool.seek(0)
    for number, item in enumerate(_without_warnings(_plain_mzml(spool)), 1):
        source = Source(path, None, number)
        try:
            yield _build_mzml_record(item, sources, source)
        except InputError as error:
            on_reject(
                Rejection(path, None, error.what, f"{error.found} in spectrum {number}", error.expected, error.hint)
            )


def _read_ion_sources(spool: IO[bytes]) -> dict[str, list[str]]:
    """Names of the terms under each instrument configuration; that of the run's default also under ``""``."""
    from lxml.etree import iterparse

    groups: dict[str, list[str]] = {}
    found: dict[str, list[str]] = {}
    for event, element in iterparse(spool, events=("start", "end"), huge_tree=False, resolve_entities=False):
        kind = str(element.tag).rpartition("}")[2]
        if event == "start" and kind == "run":
            default = element.get("defaultInstrumentConfigurationRef", "")
            found[""] = found.get(default, [])
            break
        if event == "end" and kind in ("referenceableParamGroup", "instrumentConfiguration"):
            names = [str(item.get("name", "")) for item in element.iter("{*}cvParam", "{*}userParam")]
            for reference in element.iter("{*}referenceableParamGroupRef"):
                names += groups.get(str(reference.get("ref")), [])
            (groups if kind == "referenceableParamGroup" else found)[str(element.get("id"))] = names
    return found


def _without_warnings(items: Iterable[dict[str, Any]]) -> Iterator[dict[str, Any]]:
    """Items of the parser; its warnings about arrays it cannot name are answered by the checks below."""
    iterator = iter(items)
    while True:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            item = next(iterator, None)
        if item is None:
            return
        yield item


def _build_mzml_record(item: dict[str, Any], sources: Mapping[str, list[str]], source: Source) -> SpectrumRecord:
    where = source.path
    level = item.pop("ms level", None)
    if level is not None and int(level) != 1:
        raise FormatError(NOT_MS1, where=where, found=f"MS level {level}", expected="MS1")
    scan = (item.pop("scanList", {}).get("scan") or [{}])[0]
    terms = sources.get(str(scan.get("instrumentConfigurationRef", "")), sources.get("", []))
    ionization = next((IONIZATION_TERMS[name] for name in terms if name in IONIZATION_TERMS), "")
    ionization = ionization or read_ionization(str(item.get("ionization", "")))[0]
    if ionization not in ("", "EI"):
        raise FormatError(NOT_EI, where=where, found=quote(ionization), expected="EI")
    packing = [name for name in item if "compression" in name]
    if packing:
        raise FormatError("peak list", where=where, found=quote(packing[0]), expected="zlib or no compression")
    mz, intensity = (_unpack_array(item, f"{name} array", where) for name in ("m/z", "intensity"))
    if mz.size != intensity.size:
        found = f"{mz.size} m/z and {intensity.size} intensities"
        raise FormatError("peak list", where=where, found=found, expected="as many")
    if not mz.size:
        raise FormatError("no peaks", where=where, found="0 peaks", expected="at least one")
    fields = NamedFields([("ionization", ionization), *_pairs_of_mzml(item, scan)])
    return record_from_fields(fields, source, mz, intensity, is_profile="profile spectrum" in item)


def _pairs_of_mzml(item: dict[str, Any], scan: Mapping[str, Any]) -> list[tuple[str, str]]:
    pairs = [("ms level", "1")]
    time = scan.get("scan start time")
    unit = str(getattr(time, "unit_info", "") or "")
    if time is not None:
        pairs.append(("retention time", f"{float(time)!r} {unit}".strip()))
    windows = scan.get("scanWindowList", {}).get("scanWindow") or [{}]
    limits = [windows[0].get(f"scan window {side} limit") for side in ("lower", "upper")]
    if all(limit is not None for limit in limits):
        pairs.append(("scan range", "-".join(f"{float(limit):.10g}" for limit in limits)))
    for sign in ("positive", "negative"):
        if f"{sign} scan" in item:
            pairs.append(("polarity", sign))
    for name, value in item.items():
        for text in value if isinstance(value, list) else [value]:
            if name == "id" and str(text).startswith("index="):
                continue
            if name not in _STRUCTURE and isinstance(text, str | int | float) and str(text):
                pairs += [(_MZML_NAMES.get(name, name), part) for part in str(text).split("\n")]
    return pairs


def _unpack_array(item: dict[str, Any], name: str, where: str) -> FloatArray:
    record = item.pop(name, None)
    if record is None:
        raise FormatError("peak list", where=where, found=f"no {name}", expected="an m/z and an intensity array")
    limit = (MAX_PEAKS + 1) * 8
    try:
        data = base64.b64decode(record.data or "", validate=False)
        if record.compression == "zlib compression":
            data = zlib.decompressobj().decompress(data, limit)
        elif record.compression not in (None, "no compression"):
            raise FormatError(
                "peak list", where=where, found=quote(record.compression), expected="zlib or no compression"
            )
        values = np.frombuffer(data, dtype=record.dtype or np.float64).astype(np.float64)
    except (binascii.Error, zlib.error, ValueError, TypeError) as failure:
        found, expected = quote(str(failure)), "a packed array of numbers"
        raise FormatError("peak list", where=where, found=found, expected=expected) from None
    if values.size > MAX_PEAKS:
        raise too_many_peaks(where)
    if not np.isfinite(values).all():
        raise FormatError("number in a peak list", where=where, found="NaN or infinity", expected="finite numbers")
    return read_only(values)
