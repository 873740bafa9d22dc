"""What every reader promises, run over all of them."""

from __future__ import annotations

import itertools
import socket
import tracemalloc
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from identify.errors import FormatError, InputError
from identify.readers import read_pasted, read_spectra
from identify.readers.limits import MAX_PEAKS
from identify.readers.opening import TEXT_READERS
from identify.readers.recognize import recognize_format
from identify.records import Rejection, SpectrumRecord
from tests.readers.format_samples import FORMATS, NAME, PAIRS, TEXT_FORMATS, document

every_format = pytest.mark.parametrize("name", FORMATS)


def read(path: Path) -> tuple[list[SpectrumRecord], list[Rejection]]:
    rejected: list[Rejection] = []
    return list(read_spectra(path, rejected.append)), rejected


def write(folder: Path, name: str, text: str | bytes) -> Path:
    path = folder / f"spectra-{name}.dat"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


@every_format
def test_content_and_not_the_name_of_the_file_chooses_the_reader(name: str) -> None:
    assert recognize_format(document(name, PAIRS).encode(), "misleading.pdf") == name


@every_format
def test_peaks_and_name_come_out_as_written(name: str, tmp_path: Path) -> None:
    (record,), rejected = read(write(tmp_path, name, document(name, PAIRS)))
    assert not rejected
    assert list(zip(record.mz, record.intensity, strict=True)) == list(PAIRS)
    assert record.identity.name == NAME
    assert record.mz.dtype == np.float64 and not record.mz.flags.writeable


@every_format
def test_source_says_file_line_and_number(name: str, tmp_path: Path) -> None:
    path = write(tmp_path, name, document(name, PAIRS, PAIRS, names=["First", "Second"]))
    records, _ = read(path)
    assert [record.source.number for record in records] == [1, 2]
    assert {record.source.path for record in records} == {str(path)}
    if name != "mzml":
        lines = [record.source.line for record in records]
        assert lines[0] is not None and lines[1] is not None and lines[0] < lines[1]
        assert "First" in "".join(path.read_text().split("\n")[lines[0] - 1 : lines[1] - 1])


@every_format
def test_a_bad_spectrum_is_rejected_and_the_next_is_read(name: str, tmp_path: Path) -> None:
    good = document(name, PAIRS, PAIRS, names=["First", "Second"])
    bad = ((42.0, 100.0), (55.0, float("nan")), (70.0, 60.0))
    records, rejected = read(write(tmp_path, name, document(name, bad, PAIRS, names=["First", "Second"])))
    assert good.count("Second") and [record.identity.name for record in records] == ["Second"]
    (rejection,) = rejected
    assert rejection.found and rejection.expected
    assert name == "mzml" or rejection.line is not None


@every_format
def test_zero_and_negative_values_are_kept_for_cleaning_to_judge(name: str, tmp_path: Path) -> None:
    odd = ((-42.0, 100.0), (0.0, 5.0), (55.0, -80.0), (70.0, 0.0))
    (record,), rejected = read(write(tmp_path, name, document(name, odd)))
    assert not rejected
    assert sorted(zip(record.mz, record.intensity, strict=True)) == sorted(odd)


@every_format
def test_a_one_peak_spectrum_is_read(name: str, tmp_path: Path) -> None:
    (record,), _ = read(write(tmp_path, name, document(name, [(43.0, 7.0)])))
    assert record.mz.tolist() == [43.0]


@pytest.mark.parametrize("name", [name for name in FORMATS if name != "mgf"])
def test_peaks_keep_the_order_of_the_file(name: str, tmp_path: Path) -> None:
    shuffled = (PAIRS[2], PAIRS[0], PAIRS[1])
    (record,), _ = read(write(tmp_path, name, document(name, shuffled)))
    assert record.mz.tolist() == [70.0, 42.0, 55.0]


@every_format
def test_too_many_peaks_are_refused_and_the_next_spectrum_is_read(name: str, tmp_path: Path) -> None:
    # A million where writing them down is quick; elsewhere one more than allowed is as much too many.
    n_peaks = 1_000_000 if name == "mzml" else MAX_PEAKS + 1
    many = np.column_stack([np.linspace(10.0, 1000.0, n_peaks), np.ones(n_peaks)])
    records, rejected = read(write(tmp_path, name, document(name, many, PAIRS, names=["First", "Second"])))
    assert [record.identity.name for record in records] == ["Second"]
    (rejection,) = rejected
    assert rejection.reason == "too many peaks"
    where = "" if name != "mzml" else " in spectrum 1"
    assert rejection.found == f"more than {MAX_PEAKS}{where}"
    assert rejection.expected == f"at most {MAX_PEAKS} peaks in one spectrum"


@pytest.mark.parametrize("name", TEXT_FORMATS)
@pytest.mark.parametrize(
    "encode",
    [
        pytest.param(lambda text: text.replace("\n", "\r\n").encode(), id="Windows line ends"),
        pytest.param(lambda text: text.replace("\n", "\r").encode(), id="old line ends"),
        pytest.param(lambda text: b"\xef\xbb\xbf" + text.encode(), id="UTF-8 with mark"),
        pytest.param(lambda text: text.encode("utf-16"), id="UTF-16"),
        pytest.param(lambda text: b"\xfe\xff" + text.encode("utf-16-be"), id="UTF-16, big end first"),
        pytest.param(lambda text: ("\n \n" + text + "\n\n").encode(), id="blank lines around"),
        pytest.param(lambda text: text.rstrip("\n").encode(), id="no end of the last line"),
    ],
)
def test_encodings_and_line_ends_make_no_difference(name: str, encode: object, tmp_path: Path) -> None:
    text = document(name, PAIRS, names=["Räuchöl"])
    (record,), rejected = read(write(tmp_path, name, encode(text)))  # type: ignore[operator]
    assert not rejected and record.identity.name == "Räuchöl"
    assert list(zip(record.mz, record.intensity, strict=True)) == list(PAIRS)


@pytest.mark.parametrize("name", TEXT_FORMATS)
def test_a_name_that_is_not_utf_8_is_read_with_a_note(name: str, tmp_path: Path) -> None:
    text = document(name, PAIRS, names=["Räuchöl"])
    (record,), rejected = read(write(tmp_path, name, text.encode("cp1252")))
    assert not rejected
    assert "Windows-1252" in record.extra["encoding"]
    assert list(zip(record.mz, record.intensity, strict=True)) == list(PAIRS)


@pytest.mark.parametrize("name", TEXT_FORMATS)
def test_pasted_text_is_read_like_a_file(name: str) -> None:
    rejected: list[Rejection] = []
    (record,) = read_pasted(document(name, PAIRS), "pasted", rejected.append)
    assert record.source.path == "pasted" and not rejected
    assert list(zip(record.mz, record.intensity, strict=True)) == list(PAIRS)


@every_format
def test_a_path_with_spaces_and_other_letters_is_a_path(name: str, tmp_path: Path) -> None:
    folder = tmp_path / "Messung März 光谱"
    folder.mkdir()
    records, _ = read(write(folder, name, document(name, PAIRS)))
    assert "März 光谱" in records[0].source.path


@every_format
def test_reading_opens_no_network_connection(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("a reader went to the network")

    monkeypatch.setattr(socket.socket, "connect", refuse)
    monkeypatch.setattr(socket, "getaddrinfo", refuse)
    assert len(read(write(tmp_path, name, document(name, PAIRS)))[0]) == 1


@every_format
def test_reading_is_lazy(name: str, tmp_path: Path) -> None:
    spectra = read_spectra(write(tmp_path, name, document(name, PAIRS)), lambda _: None)
    assert isinstance(spectra, Iterator)
    assert next(spectra).identity.name == NAME


def test_a_missing_file_is_an_input_error(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"found nothing there, expected a file or folder"):
        read(tmp_path / "none.msp")


def test_a_line_without_end_costs_bounded_memory(tmp_path: Path) -> None:
    path = write(tmp_path, "long", b"Name: x\nNum Peaks: 1\n43 1" + b" " * 9_000_000)
    with pytest.raises(FormatError, match=r"line in .*: found more than 4194304 bytes"):
        read(path)


ENDLESS = {
    "massbank": ("ACCESSION: A", "COMMENT: "),
    "jcamp": ("##TITLE= A", "##$A= "),
    "jcamp, comments": ("##TITLE= A", "##$A= 1 $$ "),
    "msp": ("Name: A", "Comment: "),
    "mzspeclib": ("<Spectrum=1>", "MS:1003061|library spectrum name="),
    "mgf": ("BEGIN IONS", "TITLE="),
    "table": ("# A", "# "),
}


@pytest.mark.parametrize("case", ENDLESS)
def test_a_record_without_end_costs_bounded_memory(case: str, monkeypatch: pytest.MonkeyPatch) -> None:
    # A gzipped megabyte of this once took 2.4 GB.
    for module in ("text_lines", "jcamp", "table"):
        monkeypatch.setattr(f"identify.readers.{module}.MAX_RECORD_BYTES", 100_000)
    first, start = ENDLESS[case]
    lines = (f"{start}{number}{'x' * 1000}" for number in range(5_000))
    rejected: list[Rejection] = []
    reader = TEXT_READERS[case.partition(",")[0]]
    tracemalloc.start()
    try:
        assert list(reader(itertools.chain([first], lines), "a", rejected.append)) == []
        assert tracemalloc.get_traced_memory()[1] < 1_000_000
    finally:
        tracemalloc.stop()
    assert rejected[-1].found == ("none" if case.startswith("jcamp") else "more than 100000 bytes")
