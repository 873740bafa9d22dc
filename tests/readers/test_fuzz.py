"""Whatever bytes come in: records, rejections, or one of our own errors; never anything else, and never for long."""

from __future__ import annotations

import gzip
import io
import tarfile
import tempfile
import zipfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.errors import IonwitnessError
from identify.readers import read_spectra
from identify.readers.jcamp import parse_jcamp
from identify.readers.massbank import parse_massbank
from identify.readers.mgf import parse_mgf
from identify.readers.msp import parse_msp
from identify.readers.mzspeclib import parse_mzspeclib
from identify.readers.table import parse_table
from identify.records import Rejection
from tests.builders import at_most
from tests.readers.format_samples import FORMATS, PAIRS, document

PARSERS = {
    "massbank": parse_massbank,
    "msp": parse_msp,
    "jcamp": parse_jcamp,
    "table": parse_table,
    "mzspeclib": parse_mzspeclib,
    "mgf": parse_mgf,
}
TYPICAL = [
    *("ACCESSION: X", "//", "PK$PEAK: m/z int. rel.int.", "PK$NUM_PEAK: 1", "  43 1 999", "CH$NAME: a", "COMMENT: b"),
    *("AC$INSTRUMENT_TYPE: EI-B", "AC$CHROMATOGRAPHY: RETENTION_INDEX 0", "CH$LINK: CAS", "PK$ANNOTATION: x", "  "),
    *(
        "Name: a",
        "Num Peaks: 2",
        "Num Peaks: -1",
        "43 1; 58 2",
        "43 1",
        "RI: 1e999",
        "RT: 5 min",
        'Comments: "a=b" c=d',
    ),
    *("##TITLE= a", "##END=", "##DATA TYPE= MASS SPECTRUM", "##DATA TYPE= LINK", "##BLOCKS= 2", "##NPOINTS= 1"),
    *("##NTUPLES= MASS SPECTRUM", "##PAGE= T= 1", "##DATA TABLE= (XY..XY), PEAKS", "##XYDATA= (X++(Y..Y))", "40A0JJT"),
    *(
        "##PEAK TABLE= (XY..XY)",
        "##XFACTOR= 1e300",
        "##FIRSTX= 0",
        "##LASTX= 1",
        "##DELTAX= 0",
        "$$ c",
        "##=",
        "##",
        "%S9",
    ),
    *("m/z,intensity", "43,1", "43;1", "43:1 58:2", "# c", "name: b", "", "nan nan", "1e400 1", "١ ٢", "43\t1"),
    *("BEGIN IONS", "END IONS", "TITLE=a", "PEPMASS=1", "CHARGE=x", "RTINSECONDS=z"),
    *("<mzSpecLib>", "<Spectrum=1>", "<Analyte=1>", "<Peaks>", "<AttributeSet Spectrum=all>", "MS:1000511|ms level=q"),
    *("[1]UO:0000000|unit=UO:0000010|second", "[1]MS:1000894|retention time=5", "MS:1003276|other attribute value=v"),
]
lines_of_text = st.lists(st.one_of(st.sampled_from(TYPICAL), st.text(max_size=40)), max_size=25)
quiet = settings(max_examples=60)


@pytest.fixture(scope="module", autouse=True)
def slow_imports_are_done() -> None:
    """The first MGF record imports matchms, which takes seconds that the limits of time are not about."""
    run("mgf", document("mgf", PAIRS).split("\n"))


def run(name: str, lines: list[str]) -> None:
    rejected: list[Rejection] = []
    try:
        for record in PARSERS[name](iter(lines), "fuzz", rejected.append):
            assert record.mz.size == record.intensity.size > 0
            assert np.isfinite(record.mz).all() and np.isfinite(record.intensity).all()
    except IonwitnessError as error:
        assert error.found and error.expected
    for item in rejected:
        assert item.reason and item.found and item.expected
        assert item.line is not None and 1 <= item.line <= len(lines) + 1


@pytest.mark.parametrize("name", PARSERS)
@quiet
@given(lines=lines_of_text)
def test_any_lines_give_records_rejections_or_our_errors(name: str, lines: list[str]) -> None:
    with at_most(seconds=2.0):
        run(name, lines)


@pytest.mark.parametrize("name", PARSERS)
@quiet
@given(data=st.data())
def test_a_good_file_with_lines_changed_gives_records_rejections_or_our_errors(name: str, data: st.DataObject) -> None:
    lines = document(name, PAIRS, PAIRS).split("\n")
    for _ in range(data.draw(st.integers(1, 4))):
        position = data.draw(st.integers(0, len(lines) - 1))
        change = data.draw(st.sampled_from(["drop", "double", "cut", "replace", "insert"]))
        if change == "drop" and len(lines) > 1:
            del lines[position]
        elif change == "double":
            lines.insert(position, lines[position])
        elif change == "cut":
            lines[position] = lines[position][: data.draw(st.integers(0, 20))]
        else:
            text = data.draw(st.one_of(st.sampled_from(TYPICAL), st.text(max_size=20)))
            lines[position : position + (change == "replace")] = [text]
    with at_most(seconds=2.0):
        run(name, lines)


def read_bytes(content: bytes) -> None:
    rejected: list[Rejection] = []
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "fuzz.dat"
        path.write_bytes(content)
        try:
            with at_most(seconds=2.0):
                for record in read_spectra(path, rejected.append):
                    assert np.isfinite(record.mz).all()
        except IonwitnessError as error:
            assert str(error)
    for item in rejected:
        assert item.message


@quiet
@given(content=st.binary(max_size=400))
def test_any_bytes_give_records_rejections_or_our_errors(content: bytes) -> None:
    read_bytes(content)


@pytest.mark.parametrize("name", FORMATS)
@settings(quiet, max_examples=25)
@given(data=st.data())
def test_a_good_file_with_bytes_changed_gives_records_rejections_or_our_errors(name: str, data: st.DataObject) -> None:
    read_bytes(damage(document(name, PAIRS, PAIRS).encode(), data))


@pytest.mark.parametrize("kind", ["zip", "tar", "tar.gz", "gz"])
@settings(quiet, max_examples=25)
@given(data=st.data())
def test_an_archive_with_bytes_changed_gives_records_rejections_or_our_errors(kind: str, data: st.DataObject) -> None:
    read_bytes(damage(archive(kind), data))


def damage(content: bytes, data: st.DataObject) -> bytes:
    changed = bytearray(content)
    for _ in range(data.draw(st.integers(0, 6))):
        changed[data.draw(st.integers(0, len(changed) - 1))] = data.draw(st.integers(0, 255))
    return bytes(changed[: data.draw(st.integers(0, len(changed)))])


def archive(kind: str) -> bytes:
    text = document("msp", PAIRS, PAIRS).encode()
    buffer = io.BytesIO()
    if kind == "gz":
        return gzip.compress(text, mtime=0)
    if kind == "zip":
        with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as packed:
            for name in ("one.msp", "folder/two.msp"):
                packed.writestr(zipfile.ZipInfo(name, (2026, 1, 1, 0, 0, 0)), text, zipfile.ZIP_DEFLATED)
        return buffer.getvalue()
    with tarfile.open(fileobj=buffer, mode="w") as tar:
        for name in ("one.msp", "folder/two.msp"):
            info = tarfile.TarInfo(name)
            info.size = len(text)
            tar.addfile(info, io.BytesIO(text))
    return gzip.compress(buffer.getvalue(), mtime=0) if kind == "tar.gz" else buffer.getvalue()


LONG = 2_000_000
HOSTILE_LINES = [
    "Name" + " " * LONG,
    "Name" + " " * LONG + "x",
    "43" + " " * LONG + "100 :",
    '"' + ":" * LONG,
    '"' + ':"' * (LONG // 2),
    "43:" + " " * LONG + "100",
    "(" * LONG,
    "##" + " " * LONG + "=",
    "##XYDATA= " + "(" * LONG,
    "40" + "A" * LONG,
    "ACCESSION: " + "x" * LONG,
    "AC$MASS_SPECTROMETRY: IONIZATION_ENERGY 70" + " " * LONG + "x",
    "RECORD_TITLE: a; TMS" + " " * LONG + "x",
    "RECORD_TITLE: " + "RT: 1 " * (LONG // 6),
    "MS:1000511|" + "=" * LONG,
    "[1]MS:" + "1" * LONG,
    "<" + "=" * LONG,
    "Comments: " + '"a=' * (LONG // 3),
    "1" * LONG,
    "1," * (LONG // 2),
    "\t" * LONG + "1",
]


@pytest.mark.parametrize("line", HOSTILE_LINES, ids=lambda line: line[:20])
def test_a_hostile_line_costs_no_more_time_than_its_length(line: str) -> None:
    heads = {
        "massbank": ["ACCESSION: X"],
        "msp": ["Name: x"],
        "jcamp": ["##TITLE= x"],
        "mzspeclib": ["<mzSpecLib>", "<Spectrum=1>"],
        "table": ["43 100"],
        "mgf": ["BEGIN IONS"],
    }
    with at_most(seconds=5.0):
        for name, head in heads.items():
            run(name, [*head, line, "Num Peaks: 1", "43 1", "//", "##END=", "END IONS"])
            run(name, [line, "43 1"])
