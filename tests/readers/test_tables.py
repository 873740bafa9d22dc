"""Tables, pasted peak lists and the name/value exchange format: many spellings, one meaning, or a refusal."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.readers import read_pasted
from identify.records import Rejection, SpectrumRecord

PEAKS = [(43.0, 100.0), (58.0, 22.0)]


def read(text: str) -> tuple[list[SpectrumRecord], list[Rejection]]:
    rejected: list[Rejection] = []
    return list(read_pasted(text, "a.txt", rejected.append)), rejected


def peaks(record: SpectrumRecord) -> list[tuple[float, float]]:
    return list(zip(record.mz.tolist(), record.intensity.tolist(), strict=True))


@pytest.mark.parametrize(
    "text",
    [
        *(
            "43 100\n58 22",
            "43\t100\n58\t22",
            "43,100\n58,22",
            "43;100\n58;22",
            "43, 100\n58, 22",
            " 43  100 \n\n58 22\n",
        ),
        *(
            "m/z,intensity\n43,100\n58,22",
            "m/z;rel. int. (%);Intensity\n43;1;100\n58;2;22",
            "mass\tabundance\n43\t100\n58\t22",
        ),
        *('"m/z","Intensity"\n"43","100"\n"58","22"', "ion,annotation,counts\n43,C3H7,100\n58,C3H6O,22"),
        *("m/z;intensity\n43,0;100,0\n58,0;22,0", "43,0\t100,0\n58,0\t22,0", "43.0 1e2\n5.8e1 +22"),
        *(
            "43:100 58:22",
            "43:100, 58:22",
            "43:100; 58:22;",
            "43 : 100  58 : 22",
            "43 100; 58 22",
            "43 100, 58 22",
            "43:100\n58:22",
            "43:100 ,58:22",
        ),
        *("# a comment\n43 100\n% another\n58 22", "name: x\nRI: 900\n43 100\n58 22"),
        *(
            "Name: x\nNum Peaks: 2\n43 100\n58 22",
            "NAME: x\nNUM PEAKS: 2\n43 100; 58 22;",
            "Name:x\nNum peaks:2\n43,100 58,22",
        ),
        *('Name: x\nNumPeaks: 2\n43\t100\t"C3H7"\n58\t22\t"a b"', "Name: x\nNum Peaks: 2\n(43,100) (58,22)"),
        *(
            "Name: x\nNum_Peaks: 2\n43:100 58:22",
            "Name: x\nNum Peaks: 2  43 100; 58 22",
            "name: x\nnum peaks: 2\n43 100 58 22",
        ),
    ],
)
def test_all_these_say_the_same_two_peaks(text: str) -> None:
    (record,), rejected = read(text)
    assert peaks(record) == PEAKS and not rejected


def test_the_pasted_example_of_the_manual_is_three_peaks() -> None:
    (record,), _ = read("43:100 58:22, 15 30")
    assert peaks(record) == [*PEAKS, (15.0, 30.0)]


@pytest.mark.parametrize(
    ("text", "n_spectra"),
    [
        ("name: a\n43 100\n58 22\nname: b\n43 100\n58 22", 2),
        ("43 100\n58 22\n\n43 100\n58 22", 2),
        ("43 100\n\n58 22", 1),
        ("m/z int\n43 100\n58 22\nm/z int\n43 100\n58 22", 2),
        ("# a\n43 100\n58 22\n\nRI: 900\n43 100\n58 22", 2),
        ("Name: a\nNum Peaks: 1\n43 100\nName: b\nNum Peaks: 1\n43 100", 2),
        ("Name: a\nSynon: c\nNum Peaks: 1\n43 100\n\n\nName: b\nNum Peaks: 1\n43 100\n", 2),
    ],
)
def test_several_spectra_in_one_text_are_told_apart(text: str, n_spectra: int) -> None:
    records, rejected = read(text)
    assert len(records) == n_spectra and not rejected


def test_metadata_of_a_table_fill_the_fields_they_name() -> None:
    text = "# sample 7\nname: Inventol\nRT: 5.5 min\nRI: 900\nwho: me\nm/z,intensity\n43,100\n"
    (record,), _ = read(text)
    assert (record.identity.name, record.retention.time_s, record.retention.index) == ("Inventol", 330.0, 900.0)
    assert record.comments == ("sample 7",) and record.extra == {"who": "me"}


MSP = """Name: Inventol
Synon: Fictional alcohol
Formula: C5H12O
MW: 88
CAS#: 00-00-0
InChIKey: AAAAAAAAAAAAAA-BBBBBBBBBB-N
Retention_index: 900
RT: 5.5 min
Column: Invented-5
Ion_mode: P
Ionization: EI
Ionization_energy: 70 eV
Instrument_type: GC-EI-Q
Derivative: 2 TMS
License: CC0
DB#: 12
Comments: "SMILES=CCCCCO" "author=Nobody A" column=other
Num Peaks: 1
43 100
"""


def test_metadata_of_the_exchange_format_fill_the_fields() -> None:
    (record,), rejected = read(MSP)
    assert not rejected
    identity = record.identity
    assert (identity.name, identity.other_names, identity.formula) == ("Inventol", ("Fictional alcohol",), "C5H12O")
    assert (identity.smiles, identity.inchikey, identity.cas) == ("CCCCCO", "AAAAAAAAAAAAAA-BBBBBBBBBB-N", "00-00-0")
    retention = record.retention
    assert (retention.index, retention.time_s, retention.column) == (900.0, 330.0, "Invented-5")
    acquisition = record.acquisition
    assert (acquisition.ionization, acquisition.energy_ev, acquisition.polarity) == ("EI", 70.0, "positive")
    assert (record.derivative, record.licence, record.authors, record.accession) == ("2 TMS", "CC0", "Nobody A", "12")
    assert record.extra["MW"] == "88"


def test_a_bare_retention_time_is_kept_but_not_used() -> None:
    (record,), _ = read(MSP.replace("5.5 min", "5.5"))
    assert record.retention.time_s is None
    assert record.extra["retention time as stated"] == "5.5 (not used: no unit)"


numbers = st.floats(min_value=-1e6, max_value=1e6, allow_nan=False).map(lambda value: float(f"{value:.6g}"))


@given(
    pairs=st.lists(st.tuples(numbers, numbers), min_size=2, max_size=20),
    separator=st.sampled_from(["\t", ";", ",", " ", ", "]),
)
def test_any_two_columns_come_back_as_written(pairs: list[tuple[float, float]], separator: str) -> None:
    (record,), rejected = read("\n".join(f"{mz!r}{separator}{height!r}" for mz, height in pairs))
    assert peaks(record) == pairs and not rejected
