"""mzML (through pyteomics) → spectrum records; what reading spectra and reading runs (`identify.readers.mzml_run`) share.

pyteomics and lxml are imported inside the functions that need them. What they would do for a hostile file is guarded: a
document that defines entities is refused, binary arrays are unpacked by this module within bounds, and no vocabulary is
fetched from a network.
"""

from __future__ import annotations

import base64
import binascii
import tempfile
import warnings
import zlib
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from typing import IO, Any, ClassVar, cast

import numpy as np

from identify.errors import FormatError, InputError, quote
from identify.readers.fault_reports import FOREIGN_FAULTS, NOT_EI, NOT_MS1, OnReject
from identify.readers.limits import CHUNK_BYTES, MAX_FILE_BYTES, MAX_PEAKS
from identify.readers.named_fields import NamedFields, record_from_fields
from identify.readers.numbers import too_many_peaks
from identify.readers.statements import IONIZATION_TERMS, read_ionization
from identify.readers.text_lines import PeekedStream
from identify.records import FloatArray, Rejection, Source, SpectrumRecord, read_only

_STRUCTURE = frozenset({"index", "count", "defaultArrayLength", "encodedLength", "arrayLength"})
_MZML_NAMES = {
    "spectrum title": "title",
    "molecular formula": "formula",
    "splash key": "splash",
    "id": "spectrum id in file",
}
_SPOOL_BYTES = 16 * 1024 * 1024
IonSources = Mapping[str, list[str]]
"""Names of the terms under each instrument configuration; those of the run's default also under ``""``."""


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
    with open_mzml(stream, path) as (items, sources):
        for number, item in enumerate(items, 1):
            source = Source(path, None, number)
            try:
                yield _build_record(item, sources, source)
            except InputError as error:
                found = f"{error.found} in spectrum {number}"
                on_reject(Rejection(path, None, error.what, found, error.expected, error.hint))


@contextmanager
def open_mzml(stream: PeekedStream, path: str) -> Iterator[tuple[Iterator[dict[str, Any]], IonSources]]:
    """Spectra of an mzML file as the parser gives them (all values still text), and its ion sources (see `ionization_of`).

    Parameters
    ----------
    stream : PeekedStream
        Bytes; copied to a temporary file, because the parser goes back and forth.
    path : str
        File, for messages.

    Raises
    ------
    FormatError
        For XML that is damaged or defines entities, and for a file that is too large; on iteration, too.
    """
    from lxml.etree import LxmlError
    from pyteomics.auxiliary import PyteomicsError

    with tempfile.SpooledTemporaryFile(max_size=_SPOOL_BYTES) as held:
        spool = cast(IO[bytes], held)
        _copy_bounded(stream, spool, path)
        try:
            sources = _read_ion_sources(spool, path)
            spool.seek(0)
            yield _without_warnings(_plain_mzml(spool)), sources
        except (LxmlError, PyteomicsError, *FOREIGN_FAULTS) as error:
            raise FormatError(
                "mzML", where=path, found=quote(str(error).replace("\n", " "), 200), expected="well-formed mzML 1.1",
                hint="The file may be truncated.",
            ) from None  # fmt: skip


def _copy_bounded(stream: PeekedStream, spool: IO[bytes], path: str) -> None:
    n_bytes = 0
    while chunk := stream.read(CHUNK_BYTES):
        n_bytes += len(chunk)
        if n_bytes > MAX_FILE_BYTES:
            raise FormatError("size", where=path, found=f"more than {MAX_FILE_BYTES} bytes", expected="a smaller file")
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


def _read_ion_sources(spool: IO[bytes], path: str) -> IonSources:
    from lxml.etree import iterparse

    groups: dict[str, list[str]] = {}
    found: dict[str, list[str]] = {}
    for event, element in iterparse(spool, events=("start", "end"), huge_tree=False, resolve_entities=False):
        if element.getroottree().docinfo.internalDTD is not None:
            raise FormatError("mzML", where=path, found="a document type definition", expected="plain mzML without one")
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


def ionization_of(scan: Mapping[str, Any], sources: IonSources) -> str:
    """Ionization code of the instrument configuration a scan names, else of the run's own; empty where none is stated.

    Examples
    --------
    >>> ionization_of({}, {"": ["electron ionization"]})
    'EI'
    """
    terms = sources.get(str(scan.get("instrumentConfigurationRef", "")), sources.get("", []))
    return next((IONIZATION_TERMS[name] for name in terms if name in IONIZATION_TERMS), "")


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


def _build_record(item: dict[str, Any], sources: IonSources, source: Source) -> SpectrumRecord:
    where = source.path
    level = item.pop("ms level", None)
    if level is not None and int(level) != 1:
        raise FormatError(NOT_MS1, where=where, found=f"MS level {level}", expected="MS1")
    scan = (item.pop("scanList", {}).get("scan") or [{}])[0]
    ionization = ionization_of(scan, sources) or read_ionization(str(item.get("ionization", "")))[0]
    if ionization not in ("", "EI"):
        raise FormatError(NOT_EI, where=where, found=quote(ionization), expected="EI")
    packing = [name for name in item if "compression" in name]
    if packing:
        raise FormatError("peak list", where=where, found=quote(packing[0]), expected="zlib or no compression")
    mz, intensity = (unpack_array(item, f"{name} array", where) for name in ("m/z", "intensity"))
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


def unpack_array(item: dict[str, Any], name: str, where: str) -> FloatArray:
    """Numbers of one binary array, taken out of the parser's item of a spectrum.

    Parameters
    ----------
    item : dict
        Loses the array.
    name : str
        ``m/z array`` or ``intensity array``.
    where : str
        File, for messages.

    Returns
    -------
    ndarray of shape (n_peaks,), read-only

    Raises
    ------
    FormatError
        If there is no such array, it is packed in an unknown way or damaged, longer than `MAX_PEAKS`, or not all finite.
    """
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
