"""Spectrum records → a file in an open format, whole or not at all."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from pathlib import Path

import identify
from identify.errors import UsageError, quote
from identify.records import SpectrumRecord
from identify.writers.files import write_atomically
from identify.writers.jcamp import render_jcamp, render_link
from identify.writers.massbank import render_massbank
from identify.writers.msp import render_msp
from identify.writers.mzml import render_mzml
from identify.writers.mzspeclib import render_mzspeclib, render_mzspeclib_head
from identify.writers.peaks_csv import render_peaks_csv


def _join_jcamp(records: Sequence[SpectrumRecord], title: str) -> str:
    blocks = [render_jcamp(record) for record in records]
    return blocks[0] if len(blocks) == 1 else render_link(title, blocks)


def _join_mzspeclib(records: Sequence[SpectrumRecord], title: str) -> str:
    entries = [render_mzspeclib(record, number) for number, record in enumerate(records, 1)]
    return render_mzspeclib_head(title) + "".join(entries)


_JOINERS: dict[str, Callable[[Sequence[SpectrumRecord], str], str]] = {
    "jcamp": _join_jcamp,
    "msp": lambda records, _: "".join(map(render_msp, records)),
    "mzspeclib": _join_mzspeclib,
    "mzml": lambda records, _: render_mzml(records, identify.__version__),
    "csv": lambda records, _: "".join(map(render_peaks_csv, records)),
}
SUFFIXES = {
    "massbank": ".txt",
    "jcamp": ".jdx",
    "msp": ".msp",
    "mzspeclib": ".mzSpecLib.txt",
    "mzml": ".mzML",
    "csv": ".csv",
}
"""Formats that can be written, and the customary ending of their files."""


def write_spectra(
    path: Path, records: Iterable[SpectrumRecord], file_format: str, *, date: str = "", contributor: str = ""
) -> int:
    """Number of spectra written to `path`, which then holds all of them, or what it held before if anything went wrong.

    Parameters
    ----------
    path : Path
        File to write or replace.
    records : iterable of SpectrumRecord
        At least one; held in memory together with the text.
    file_format : str
        One of `SUFFIXES`.
    date, contributor : str
        For MassBank records, see `identify.writers.massbank.render_massbank`.

    Returns
    -------
    int

    Raises
    ------
    UsageError
        For an unknown format, no record at all, two MassBank records of one accession, or a file that cannot be written.
    FormatError
        If a record lacks what the MassBank format requires.
    """
    if file_format not in SUFFIXES:
        raise UsageError("format", found=quote(file_format), expected=f"one of {', '.join(SUFFIXES)}")
    held = list(records)
    if not held:
        raise UsageError("export", where=str(path), found="no spectrum", expected="at least one")
    joiner = _JOINERS.get(file_format)
    text = _join_massbank(held, path, date, contributor) if joiner is None else joiner(held, path.stem)
    write_atomically(path, text.encode("utf-8", "replace"))
    return len(held)


def _join_massbank(records: Sequence[SpectrumRecord], path: Path, date: str, contributor: str) -> str:
    texts = [render_massbank(record, date=date, contributor=contributor) for record in records]
    seen: set[str] = set()
    for text in texts:
        first_line = text.partition("\n")[0]
        if first_line in seen:
            raise UsageError(
                "accession", where=str(path), found=quote(first_line), expected="one record of each accession"
            )
        seen.add(first_line)
    return "".join(texts)
