"""What is written in an open format is read back: equal peaks, equal metadata."""

from __future__ import annotations

import dataclasses
import itertools
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from identify.errors import FormatError, UsageError
from identify.readers import read_spectra
from identify.records import Identity, Rejection, Retention, Source, SpectrumRecord
from identify.writers.spectrum_files import SUFFIXES, write_spectra
from tests.writers.record_samples import assert_equal, build_record

every_format = pytest.mark.parametrize("file_format", SUFFIXES)
DATE = "2026.01.02"


def write_and_read(folder: Path, records: list[SpectrumRecord], file_format: str) -> list[SpectrumRecord]:
    path = folder / f"out{SUFFIXES[file_format]}"
    assert write_spectra(path, records, file_format, date=DATE, contributor="Invented") == len(records)
    rejected: list[Rejection] = []
    found = list(read_spectra(path, rejected.append))
    assert not rejected
    return found


@every_format
def test_one_spectrum_comes_back_as_it_was(file_format: str, tmp_path: Path) -> None:
    written = build_record()
    (found,) = write_and_read(tmp_path, [written], file_format)
    assert_equal(found, written, file_format)


@every_format
def test_several_spectra_come_back_in_order(file_format: str, tmp_path: Path) -> None:
    written = [build_record(number) for number in range(1, 5)]
    found = write_and_read(tmp_path, written, file_format)
    assert [record.accession for record in found] == [record.accession for record in written]
    for pair in zip(found, written, strict=True):
        assert_equal(*pair, file_format)


@every_format
@pytest.mark.parametrize("kind", ["kovats", "linear", "lee", ""])
def test_the_kind_of_a_retention_index_comes_back(kind: str, file_format: str, tmp_path: Path) -> None:
    written = build_record(retention=Retention(index=987.65, index_kind=kind))
    (found,) = write_and_read(tmp_path, [written], file_format)
    assert found.retention == written.retention


@pytest.mark.parametrize("file_format", [name for name in SUFFIXES if name != "massbank"])
def test_a_record_with_next_to_nothing_comes_back(file_format: str, tmp_path: Path) -> None:
    written = SpectrumRecord(Source("x"), np.array([43.0]), np.array([1.0]), identity=Identity(name="nearly nothing"))
    (found,) = write_and_read(tmp_path, [written], file_format)
    bare = dataclasses.replace(found.acquisition, ms_level=None)  # level 1 is a statement of some formats
    assert (bare, found.retention, found.identity) == (written.acquisition, written.retention, written.identity)
    assert not found.extra and not found.comments


@pytest.mark.parametrize("file_format", [name for name in SUFFIXES if name != "massbank"])
def test_profile_data_come_back_as_profile(file_format: str, tmp_path: Path) -> None:
    (found,) = write_and_read(tmp_path, [build_record(is_profile=True)], file_format)
    assert found.is_profile


@pytest.mark.parametrize("file_format", [name for name in SUFFIXES if name != "massbank"])
def test_zero_and_negative_values_come_back(file_format: str, tmp_path: Path) -> None:
    written = build_record(mz=np.array([50.0, -3.0, 0.0, 1e-7]), intensity=np.array([0.0, -1e-9, 1e22, 1 / 3]))
    (found,) = write_and_read(tmp_path, [written], file_format)
    assert (found.mz.tolist(), found.intensity.tolist()) == (written.mz.tolist(), written.intensity.tolist())


words = st.text(st.characters(codec="utf-8", exclude_categories=("C", "Z")), min_size=1, max_size=12)
phrase = st.lists(words, min_size=1, max_size=4).map(" ".join)
plain = phrase.filter(lambda text: text not in ("N/A", "NA", "n/a", "-") and "=" not in text and "$$" not in text)
masses = st.floats(0.5, 2000).map(lambda value: float(np.float64(value)))
heights = st.floats(1e-6, 1e12)


@every_format
@settings(max_examples=25)
@given(
    peaks=st.lists(st.tuples(masses, heights), min_size=1, max_size=12),
    name=plain,
    synonyms=st.lists(plain, max_size=2),
    column=plain,
    derivative=plain,
    comments=st.lists(plain, max_size=2),
    instrument=plain,
    authors=plain,
    energy=st.floats(0.1, 500),
    time=st.floats(1e-3, 1e5) | st.just(0.0),
    index=st.floats(100, 5000),
)
def test_any_text_and_any_numbers_come_back(
    file_format: str,
    tmp_path: Path,
    peaks: list[tuple[float, float]],
    name: str,
    synonyms: list[str],
    column: str,
    derivative: str,
    comments: list[str],
    instrument: str,
    authors: str,
    energy: float,
    time: float,
    index: float,
) -> None:
    assume(time != index)  # a retention index equal to the time is not believed, on purpose
    base = build_record()
    unique = tuple(dict.fromkeys(text for text in synonyms if text != name))
    written = build_record(
        mz=np.array([mz for mz, _ in peaks]),
        intensity=np.array([height for _, height in peaks]),
        identity=dataclasses.replace(base.identity, name=name, other_names=unique),
        acquisition=dataclasses.replace(base.acquisition, instrument=instrument, energy_ev=energy),
        retention=Retention(time_s=time, index=index, index_kind="linear", column=column),
        derivative=derivative,
        authors=authors,
        comments=tuple(comments),
    )
    (found,) = write_and_read(tmp_path, [written], file_format)
    assert_equal(found, written, file_format)


@every_format
def test_an_old_file_survives_a_failed_write(file_format: str, tmp_path: Path) -> None:
    path = tmp_path / "out"
    path.write_text("old")
    with pytest.raises(UsageError, match="found no spectrum, expected at least one"):
        write_spectra(path, [], file_format)
    assert path.read_text() == "old" and len(list(tmp_path.iterdir())) == 1


@pytest.mark.parametrize("name", ["NUM PEAKS", "Numpeak", "Number of Peaks", "n_peaks"])
def test_a_further_value_called_like_the_peak_count_hides_no_peaks(name: str, tmp_path: Path) -> None:
    record = build_record(extra={name: "7"})
    (found,) = write_and_read(tmp_path, [record], "msp")
    assert found.mz.tolist() == record.mz.tolist()
    assert found.extra[f"x {name}"] == "7"


def test_an_unknown_format_is_refused(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match=r"format: found 'docx', expected one of massbank, jcamp, msp"):
        write_spectra(tmp_path / "a", [build_record()], "docx")


def test_two_massbank_records_of_one_accession_are_refused(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="expected one record of each accession"):
        write_spectra(tmp_path / "a", [build_record(1), build_record(1)], "massbank")


def test_a_massbank_record_that_lacks_something_lists_everything_it_lacks(tmp_path: Path) -> None:
    bare = SpectrumRecord(Source("a.csv", 3), np.array([43.0]), np.array([1.0]))
    with pytest.raises(FormatError) as caught:
        write_spectra(tmp_path / "a", [bare], "massbank")
    assert str(caught.value) == (
        "record for the MassBank format in a.csv:3: found ACCESSION missing (ID-contributor-NUMBER); DATE missing (YYYY.MM.DD); "
        "AUTHORS missing (at least one); LICENSE missing (a licence that the format names); CH$NAME missing (a name); "
        "CH$FORMULA missing (a formula); CH$EXACT_MASS missing (a mass, or a formula to compute it from); "
        "AC$INSTRUMENT_TYPE missing (separation-ionization-analyser); AC$MASS_SPECTROMETRY MS_TYPE missing; "
        "AC$MASS_SPECTROMETRY ION_MODE missing, expected what format 2.6.0 requires. "
        "Complete the entry, or export it in another format."
    )


def test_a_foreign_accession_is_kept_in_a_comment(tmp_path: Path) -> None:
    (found,) = write_and_read(tmp_path, [build_record(accession="own 7/b", extra={})], "massbank")
    assert found.accession == "MSBNK-Invented-OWN_7_B"
    assert found.comments[-1] == "accession of the source: own 7/b"
    assert found.extra["DATE"] == DATE


def test_massbank_tags_come_in_the_order_of_the_format(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    write_spectra(path, [build_record()], "massbank")
    tags = [tag for tag, _ in itertools.groupby(line.partition(":")[0] for line in path.read_text().split("\n"))]
    assert tags == [
        *("ACCESSION", "RECORD_TITLE", "DATE", "AUTHORS", "LICENSE", "COMMENT", "CH$NAME", "CH$COMPOUND_CLASS"),
        *("CH$FORMULA", "CH$EXACT_MASS", "CH$SMILES", "CH$IUPAC", "CH$LINK", "AC$INSTRUMENT", "AC$INSTRUMENT_TYPE"),
        *("AC$MASS_SPECTROMETRY", "AC$CHROMATOGRAPHY", "MS$FOCUSED_ION", "PK$SPLASH", "PK$NUM_PEAK", "PK$PEAK"),
        *("  42 100 999", "  55.0542 80.5 804", "  70.0777 0.0625 1", "//", ""),
    ]


def test_no_cell_of_the_table_is_taken_for_a_formula(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    write_spectra(path, [build_record(comments=("=1+1", "x,=cmd()"))], "csv")
    for line in path.read_text().split("\n"):
        assert not line or line[0] in '"m' or line[0].isdigit()
