"""The one way in: a path or pasted text → spectrum records, the reader chosen by content."""

from __future__ import annotations

import io
from collections.abc import Callable, Iterable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import BinaryIO, cast

from identify.errors import InputError
from identify.readers.containers import OpenFile, open_files
from identify.readers.fault_reports import OnReject, rejection_of
from identify.readers.jcamp import parse_jcamp
from identify.readers.massbank import parse_massbank
from identify.readers.mgf import parse_mgf
from identify.readers.msp import parse_msp
from identify.readers.mzml import read_mzml
from identify.readers.mzspeclib import parse_mzspeclib
from identify.readers.profile import looks_like_profile
from identify.readers.recognize import recognize_format
from identify.readers.table import parse_table
from identify.readers.text_lines import ASSUMED_ENCODING, LineDecoder, PeekedStream
from identify.records import SpectrumRecord

TextReader = Callable[[Iterable[str], str, OnReject], Iterator[SpectrumRecord]]
TEXT_READERS: dict[str, TextReader] = {
    "massbank": parse_massbank,
    "jcamp": parse_jcamp,
    "msp": parse_msp,
    "mzspeclib": parse_mzspeclib,
    "mgf": parse_mgf,
    "table": parse_table,
}
"""Readers of text formats by the names `recognize_format` gives: lines, path, on_reject → records."""


def read_spectra(path: Path, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records behind a path, one at a time, in file order.

    Parameters
    ----------
    path : Path
        A file in any format `recognize_format` knows, a folder of such files (with subfolders, sorted), or a zip, tar,
        tar.gz archive or gzipped file, read as a stream.
    on_reject : callable
        Takes a `Rejection` for each record that breaks its format and, in a folder or archive, for each file that is
        not readable as a whole; reading goes on.

    Yields
    ------
    SpectrumRecord
        Peaks as they stand in the file, uncleaned; `source.path` is ``archive::member`` inside an archive.

    Raises
    ------
    InputError
        If there is nothing to read at `path`.
    FormatError
        If a single file is empty, binary, of no known format or damaged, or an archive is damaged (the records before
        the damage have been yielded by then). Raised on iteration, not on the call.

    Notes
    -----
    Memory is bounded by one record; see `identify.readers.limits`.
    """
    for file in open_files(path, on_reject):
        if not file.is_member:
            yield from _read_file(file, on_reject)
            continue
        try:
            yield from _read_file(file, on_reject)
        except InputError as error:
            on_reject(rejection_of(error, file.path))


def read_pasted(text: str, name: str, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    """Spectrum records in a text that somebody pasted, in any of the text formats.

    Parameters
    ----------
    text : str
        Such as ``43:100 58:22, 15 30``, two columns, or a whole record.
    name : str
        Stands for the file in provenance and messages.
    on_reject : callable
        As for `read_spectra`.

    Yields
    ------
    SpectrumRecord

    Raises
    ------
    FormatError
        If the text as a whole is empty or of no known format.

    Examples
    --------
    >>> [record] = read_pasted("43:100 58:23, 15 30", "pasted", print)
    >>> record.mz.tolist(), record.intensity.tolist()
    ([43.0, 58.0, 15.0], [100.0, 23.0, 30.0])
    """
    stream = cast(BinaryIO, io.BytesIO(text.encode("utf-8", "replace")))
    yield from _read_file(OpenFile(name, stream, is_member=False), on_reject)


def _read_file(file: OpenFile, on_reject: OnReject) -> Iterator[SpectrumRecord]:
    stream = PeekedStream(file.stream)
    name = recognize_format(stream.head, file.path)
    lines = LineDecoder(stream, file.path)
    reader = TEXT_READERS.get(name)
    records = read_mzml(stream, file.path, on_reject) if reader is None else reader(lines, file.path, on_reject)
    for record in records:
        if lines.is_assumed:
            record = replace(record, extra={**record.extra, "encoding": ASSUMED_ENCODING})
        if not record.is_profile and looks_like_profile(record.mz, record.intensity):
            record = replace(record, is_profile=True)
        yield record
