"""JCAMP-DX for mass spectra: forms of data, blocks, series, dialects; the `jcamp` package as a second opinion."""

from __future__ import annotations

import io
import itertools
import time

import jcamp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.readers import read_pasted
from identify.records import Rejection, SpectrumRecord

# Acetophenone, GC, TRAP, EI+, DATA CLASS XYPOINTS, 19 points: public-domain spectrum found in standards.md 5.1 [F].
ACETOPHENONE = (
    "0,0 38,5.2 39,8.0 43,21.9 50,20.2 51,41.9 52,4.0 63,3.8 74,6.6 75,3.7 76,4.6 77,100 78,10.4 89,1.0 91,1.0 105,80.8 "
    "106,6.0 120,23.1 121,2.0"
)
BLOCK = f"""##TITLE= Acetophenone
##JCAMP-DX= 5.00 $$ a comment
##DATA TYPE= MASS SPECTRUM
##DATA CLASS= XYPOINTS
##ORIGIN= somebody
##OWNER= public domain
##MOLFORM= C 8 H 8 O
##CAS REGISTRY NO= 98-86-2
##.SPECTROMETER TYPE= TRAP
##.INLET= GC
##.IONIZATION MODE= EI+
##.IONIZATION ENERGY= 70
##$RETENTION INDEX= 1065
##$COLUMN= Invented-5
##XUNITS= M/Z
##YUNITS= RELATIVE ABUNDANCE
##NPOINTS= 19
##XYPOINTS= (XY..XY)
{ACETOPHENONE}
##END=
"""


def read(text: str) -> tuple[list[SpectrumRecord], list[Rejection]]:
    rejected: list[Rejection] = []
    return list(read_pasted(text, "a.jdx", rejected.append)), rejected


def read_one(text: str) -> SpectrumRecord:
    (record,), rejected = read(text)
    assert not rejected
    return record


def stepped(rows: str, n_points: int, first: float = 40, last: float = 43, **labels: float) -> str:
    factors = "".join(f"##{name}= {value}\n" for name, value in labels.items())
    return (
        f"##TITLE= stepped\n##JCAMP-DX= 5.00\n##DATA TYPE= MASS SPECTRUM\n##XUNITS= M/Z\n##YUNITS= COUNTS\n{factors}"
        f"##FIRSTX= {first}\n##LASTX= {last}\n##NPOINTS= {n_points}\n##XYDATA= (X++(Y..Y))\n{rows}\n##END=\n"
    )


def test_the_public_domain_spectrum_is_read_with_its_metadata() -> None:
    record = read_one(BLOCK)
    assert record.mz.size == 19 and record.mz[0] == 0.0  # the bogus 0,0 point is cleaning's affair
    assert record.intensity[record.mz == 77].item() == 100
    assert (record.identity.name, record.identity.formula, record.identity.cas) == ("Acetophenone", "C8H8O", "98-86-2")
    acquisition = record.acquisition
    assert (acquisition.ionization, acquisition.polarity, acquisition.inlet) == ("EI", "positive", "GC")
    assert (acquisition.instrument_type, acquisition.energy_ev) == ("TRAP", 70.0)
    assert (record.retention.index, record.retention.column) == (1065.0, "Invented-5")
    assert (record.authors, record.licence, record.comments) == ("somebody", "public domain", ("a comment",))
    assert not record.is_profile


@pytest.mark.parametrize("label", ["PEAK TABLE", "XYPOINTS", "XYDATA", "Peak_Table", "xy-points"])
@pytest.mark.parametrize("rows", ["42,100\n55,80", "42,100 55,80", "42, 100; 55, 80", "42 100\n55 80", "42,100;55,80"])
def test_pairs_may_be_separated_as_the_format_allows(label: str, rows: str) -> None:
    record = read_one(f"##TITLE= a\n##DATA TYPE= MASS SPECTRUM\n##NPOINTS= 2\n##{label}= (XY..XY)\n{rows}\n##END=\n")
    assert (record.mz.tolist(), record.intensity.tolist()) == ([42, 55], [100, 80])


@pytest.mark.parametrize("label", ["DATA TYPE", "data type", "DATA-TYPE", "DataType", "DATA_TYPE"])
def test_labels_compare_without_case_blanks_and_marks(label: str) -> None:
    assert not read(BLOCK.replace("DATA TYPE= MASS", f"{label}= INFRARED"))[0]


def test_concatenated_blocks_are_all_read() -> None:
    records, rejected = read(BLOCK + BLOCK.replace("Acetophenone", "Second"))
    assert [record.identity.name for record in records] == ["Acetophenone", "Second"] and not rejected


def test_blocks_inside_a_link_block_are_read() -> None:
    for count in (2, 3):
        link = f"##TITLE= both\n##DATA TYPE= LINK\n##BLOCKS= {count}\n{BLOCK}{BLOCK}##END=\n"
        records, rejected = read(link)
        assert len(records) == 2 and not rejected


def test_each_page_of_a_series_is_a_spectrum_with_its_time() -> None:
    head = (
        "##TITLE= series\n##DATA TYPE= MASS SPECTRUM\n##DATA CLASS= NTUPLES\n##NTUPLES= MASS SPECTRUM\n"
        "##VAR_NAME= MASS, INTENSITY, RETENTION TIME\n##SYMBOL= X, Y, T\n##UNITS= M/Z, RELATIVE ABUNDANCE, {unit}\n"
        "##FACTOR= 1, 2, 1\n"
    )
    pages = "".join(
        f"##PAGE= T= {time}\n##NPOINTS= 2\n##DATA TABLE= (XY..XY), PEAKS\n42,{time}\n55,80\n" for time in (5, 6)
    )
    tail = "##END NTUPLES= MASS SPECTRUM\n##END=\n"
    for unit, factor in (("SECONDS", 1), ("MINUTES", 60)):
        records, rejected = read(head.format(unit=unit) + pages + tail)
        assert not rejected
        assert [record.retention.time_s for record in records] == [5 * factor, 6 * factor]
        assert [record.intensity.tolist() for record in records] == [[10, 160], [12, 160]]
        assert [record.source.line for record in records] == [9, 14]


def test_pairs_behind_the_number_of_points_are_read() -> None:
    record = read_one(
        "##TITLE= a\n##JCAMPDX=Revision 4.10\n##$RETENTION INDEX= 900\n##NPOINTS= 2\n42,100 55,80\n##END=\n"
    )
    assert record.mz.tolist() == [42, 55] and record.retention.index == 900


def test_factors_scale_both_axes() -> None:
    head = "##TITLE= a\n##DATA TYPE= MASS SPECTRUM\n##XFACTOR= 0.1\n##YFACTOR= 2\n"
    record = read_one(f"{head}##PEAK TABLE= (XY..XY)\n420,100\n##END=\n")
    assert (record.mz.tolist(), record.intensity.tolist()) == ([42.0], [200.0])


def test_ordinates_at_equal_steps_are_read_plain() -> None:
    record = read_one(stepped("40 1 2\n42 3 4", 4, YFACTOR=2))
    assert (record.mz.tolist(), record.intensity.tolist()) == ([40, 41, 42, 43], [2, 4, 6, 8])
    assert not record.is_profile


def test_dense_equal_steps_are_a_profile() -> None:
    assert read_one(stepped("40 1 2\n40.2 3 4", 4, last=40.3)).is_profile


@pytest.mark.parametrize(
    ("rows", "expected"),
    [
        ("40A0B0\n42C0D0", [10, 20, 30, 40]),  # squeezed
        ("40a0B0\n42C0@", [-10, 20, 30, 0]),  # squeezed, signs and zero
        ("40A0JJ\n42A2J", [10, 11, 12, 13]),  # differences; the last value comes again as the check of the next line
        ("40A0JT", [10, 11, 12]),  # a difference, and once more
        ("40A0V", [10, 10, 10, 10]),  # one value four times
        ("40A0J5%j9", [10, 25, 25, 6]),  # a difference of more digits, of zero, and a negative one
    ],
)
def test_compressed_ordinates_are_decoded(rows: str, expected: list[float]) -> None:
    text = stepped(rows, len(expected), last=40 + len(expected) - 1)
    record = read_one(text)
    assert record.intensity.tolist() == expected
    assert record.mz.tolist() == list(range(40, 40 + len(expected)))


pair_lists = st.lists(
    st.tuples(st.integers(1, 900), st.floats(0.01, 1e6).map(lambda value: round(value, 3))), min_size=1, max_size=30
)


def read_with_jcamp(text: str) -> tuple[np.ndarray, np.ndarray]:
    found = jcamp.read(io.StringIO(text))
    return np.asarray(found["x"], dtype=float), np.asarray(found["y"], dtype=float)


@settings(max_examples=40, deadline=None)
@given(pairs=pair_lists, separator=st.sampled_from(["\n", " ", "; "]))
def test_the_jcamp_package_reads_the_same_pairs(pairs: list[tuple[int, float]], separator: str) -> None:
    rows = separator.join(f"{mz}, {height}" if separator == "; " else f"{mz},{height}" for mz, height in pairs)
    text = (
        f"##TITLE= a\n##JCAMP-DX= 5.00\n##DATA TYPE= MASS SPECTRUM\n##NPOINTS= {len(pairs)}\n##PEAK TABLE= (XY..XY)\n"
    )
    record = read_one(f"{text}{rows}\n##END=\n")
    x, y = read_with_jcamp(f"{text}{rows}\n##END=\n")
    np.testing.assert_allclose(record.mz, x)
    np.testing.assert_allclose(record.intensity, y)


def encode_differences(values: list[int]) -> str:
    """One line in difference form, written by the rules of the format: squeezed first value, then differences."""

    def code(number: int, zero: str, plus: str, minus: str) -> str:
        digits = str(abs(number))
        letters = minus if number < 0 else plus
        return (zero if digits[0] == "0" else letters[int(digits[0]) - 1]) + digits[1:]

    text = code(values[0], "@", "ABCDEFGHI", "abcdefghi")
    for before, value in itertools.pairwise(values):
        text += code(value - before, "%", "JKLMNOPQR", "jklmnopqr")
    return text


@settings(max_examples=60, deadline=None)
@given(values=st.lists(st.integers(0, 10**6), min_size=3, max_size=40))
def test_differences_are_decoded_as_encoded_and_as_the_jcamp_package_does(values: list[int]) -> None:
    half = len(values) // 2 + 1
    # The second line starts with the last value of the first one again: the check value.
    lines = [f"40{encode_differences(values[:half])}", f"{40 + half - 1}{encode_differences(values[half - 1 :])}"]
    text = stepped("\n".join(lines), len(values), last=40 + len(values) - 1, XFACTOR=1, YFACTOR=1)
    record = read_one(text)
    assert record.intensity.tolist() == values
    _, y = read_with_jcamp(text)
    np.testing.assert_allclose(y, values)


def test_a_block_of_very_many_labels_is_read_in_time_that_grows_with_their_number() -> None:
    # Each label once recounted the lines of all before it: 60,000 labels (1 MB) took minutes.
    labels = "".join(f"##$L{number}= x\n" for number in range(30_000))
    started = time.process_time()
    record = read_one(BLOCK.replace("##XUNITS=", f"{labels}##XUNITS="))
    assert time.process_time() - started < 8.0
    assert record.extra["L29999"] == "x"
