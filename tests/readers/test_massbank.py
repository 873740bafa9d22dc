"""MassBank records: fields, retention data, derivatives, and every record of the open release with its SPLASH key."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import pytest

from identify.readers import read_pasted, read_spectra
from identify.readers.massbank import parse_massbank
from identify.records import Rejection, SpectrumRecord
from identify.spectra.splash import verify_splash

RECORD = """ACCESSION: INVNT-Invented-IN000001
RECORD_TITLE: Inventol; GC-EI-TOF; MS; 2 TMS
DATE: 2026.01.01
AUTHORS: Nobody A, Invented Laboratory
LICENSE: CC BY
COPYRIGHT: Invented Laboratory
COMMENT: first comment
COMMENT: second comment
CH$NAME: Inventol
CH$NAME: Fictional alcohol
CH$COMPOUND_CLASS: N/A
CH$FORMULA: C5H12O
CH$EXACT_MASS: 88.08882
CH$SMILES: CCCCCO
CH$IUPAC: N/A
CH$LINK: CAS 00-00-0 11-11-1
CH$LINK: INCHIKEY AAAAAAAAAAAAAA-BBBBBBBBBB-N
CH$LINK: KEGG X00000
AC$INSTRUMENT: Invented instrument
AC$INSTRUMENT_TYPE: GC-EI-TOF
AC$MASS_SPECTROMETRY: MS_TYPE MS
AC$MASS_SPECTROMETRY: ION_MODE POSITIVE
AC$MASS_SPECTROMETRY: IONIZATION_ENERGY 70 eV
AC$MASS_SPECTROMETRY: SCAN_RANGE_M/Z 35-500
AC$CHROMATOGRAPHY: COLUMN_NAME Invented-5, 30 m
AC$CHROMATOGRAPHY: KOVATS_RTI 1234.5
AC$CHROMATOGRAPHY: RETENTION_TIME 7.5 min
MS$FOCUSED_ION: DERIVATIVE_FORM C11H28OSi2
MS$FOCUSED_ION: DERIVATIVE_TYPE 2 TMS
MS$DATA_PROCESSING: WHOLE
  invented software, second line
PK$SPLASH: splash10-0000-0000000000-00000000000000000000
PK$ANNOTATION: m/z formula
  42 C3H6+
PK$NUM_PEAK: 2
PK$PEAK: m/z int. rel.int.
  42.5 100 999
  55 80.25 799
//
"""


def parse(text: str) -> SpectrumRecord:
    rejected: list[Rejection] = []
    (record,) = parse_massbank(text.split("\n"), "a.txt", rejected.append)
    assert not rejected
    return record


def with_line(line: str) -> SpectrumRecord:
    head, _, tail = RECORD.partition(
        "AC$CHROMATOGRAPHY: KOVATS_RTI 1234.5\nAC$CHROMATOGRAPHY: RETENTION_TIME 7.5 min\n"
    )
    return parse(f"{head}{line}\n{tail}")


def test_every_field_lands_where_it_belongs() -> None:
    record = parse(RECORD)
    assert record.accession == "INVNT-Invented-IN000001"
    assert record.title == "Inventol; GC-EI-TOF; MS; 2 TMS"
    assert (record.licence, record.authors) == ("CC BY", "Nobody A, Invented Laboratory")
    assert record.comments == ("first comment", "second comment")
    identity = record.identity
    assert (identity.name, identity.other_names) == ("Inventol", ("Fictional alcohol",))
    assert (identity.formula, identity.smiles, identity.inchi) == ("C5H12O", "CCCCCO", "")
    assert (identity.inchikey, identity.cas) == ("AAAAAAAAAAAAAA-BBBBBBBBBB-N", "00-00-0")
    acquisition = record.acquisition
    assert (acquisition.instrument, acquisition.instrument_type) == ("Invented instrument", "GC-EI-TOF")
    assert (acquisition.ionization, acquisition.energy_ev, acquisition.inlet) == ("EI", 70.0, "GC")
    assert (acquisition.ms_level, acquisition.polarity) == (1, "positive")
    assert (acquisition.lowest_mz, acquisition.highest_mz) == (35.0, 500.0)
    retention = record.retention
    assert (retention.time_s, retention.index, retention.index_kind) == (450.0, 1234.5, "kovats")
    assert retention.column == "Invented-5, 30 m"
    assert record.derivative == "2 TMS"
    assert record.splash.startswith("splash10-0000")
    assert (record.mz.tolist(), record.intensity.tolist()) == ([42.5, 55.0], [100.0, 80.25])


def test_what_has_no_field_is_kept_under_its_tag() -> None:
    extra = parse(RECORD).extra
    assert extra["DATE"] == "2026.01.01"
    assert extra["CH$LINK KEGG"] == "X00000"
    assert extra["CH$LINK CAS"] == "00-00-0 11-11-1"
    assert extra["MS$FOCUSED_ION DERIVATIVE_FORM"] == "C11H28OSi2"
    assert extra["MS$DATA_PROCESSING WHOLE"] == "invented software, second line"
    assert extra["PK$ANNOTATION"].split("\n")[0] == "m/z formula"


@pytest.mark.parametrize(
    ("lines", "index", "kind"),
    [
        ("AC$CHROMATOGRAPHY: RETENTION_INDEX 1100", 1100.0, ""),
        ("AC$CHROMATOGRAPHY: LEE_RTI 300.1", 300.1, "lee"),
        ("AC$CHROMATOGRAPHY: KOVATS_RTI NA", None, ""),
        ("AC$CHROMATOGRAPHY: RETENTION_INDEX 0.0000", None, ""),
        ("AC$CHROMATOGRAPHY: RETENTION_INDEX -5", None, ""),
        ("AC$CHROMATOGRAPHY: RETENTION_INDEX 12.5\nAC$CHROMATOGRAPHY: RETENTION_TIME 12.5 min", None, ""),
        ("AC$CHROMATOGRAPHY: KOVATS_RTI NA\nAC$CHROMATOGRAPHY: RETENTION_INDEX 1100", 1100.0, ""),
    ],
)
def test_a_retention_index_is_used_only_where_it_can_be_one(lines: str, index: float | None, kind: str) -> None:
    record = with_line(lines)
    assert (record.retention.index, record.retention.index_kind) == (index, kind)
    if "NA" in lines or index is None:
        assert "not used" in record.extra["retention index as stated"]


@pytest.mark.parametrize(
    ("text", "time_s"),
    [
        ("7.5 min", 450.0),
        ("7.5 min.", 450.0),
        ("450 sec", 450.0),
        ("450.25  sec", 450.25),
        ("450 s", 450.0),
        ("450", None),
    ],
)
def test_a_retention_time_needs_its_unit(text: str, time_s: float | None) -> None:
    record = with_line(f"AC$CHROMATOGRAPHY: RETENTION_TIME {text}")
    assert record.retention.time_s == time_s
    assert ("retention time as stated" in record.extra) == (time_s is None)


def test_a_title_may_give_the_unit_that_the_retention_time_lacks() -> None:
    text = RECORD.replace("MS; 2 TMS", "MS; n TMS; RT: 450 s").replace("7.5 min", "450")
    assert parse(text).retention.time_s == 450.0


@pytest.mark.parametrize(
    ("title", "derivative"),
    [
        ("Inventol; GC-EI-TOF; MS; 4 TMS; BP:73", "4 TMS"),
        ("Inventol; EI-B; MS; n TMS; RT: 5 s", "n TMS"),
        ("Inventol; EI-B; MS; MEOX,2TBDMS-derivative", "MEOX,2TBDMS"),
        ("Trimethylsilyl inventate; EI-B; MS", ""),
        ("TMS; EI-B; MS", ""),
    ],
)
def test_a_derivative_in_the_title_counts_but_not_in_the_name(title: str, derivative: str) -> None:
    text = RECORD.replace("MS$FOCUSED_ION: DERIVATIVE_TYPE 2 TMS\n", "")
    assert parse(text.replace("Inventol; GC-EI-TOF; MS; 2 TMS", title)).derivative == derivative


@pytest.mark.parametrize(
    ("instrument_type", "ionization", "inlet"),
    [
        ("EI-B", "EI", ""),
        ("GC-EI-FT", "EI", "GC"),
        ("CI-B", "CI", ""),
        ("GC-APCI-QTOF", "APCI", "GC"),
        ("LC-ESI-Q", "ESI", "LC"),
    ],
)
def test_ionization_comes_from_the_instrument_type(instrument_type: str, ionization: str, inlet: str) -> None:
    record = parse(RECORD.replace("GC-EI-TOF\nAC", f"{instrument_type}\nAC"))
    assert (record.acquisition.ionization, record.acquisition.inlet) == (ionization, inlet)


def test_kilovolts_are_no_electron_energy() -> None:
    record = parse(RECORD.replace("70 eV", "8 kV"))
    assert record.acquisition.energy_ev is None
    assert record.extra["ionization energy as stated"] == "8 kV"


def test_records_of_one_file_keep_their_lines() -> None:
    rejected: list[Rejection] = []
    records = list(read_pasted(RECORD + "\n" + RECORD, "a.txt", rejected.append))
    assert [record.source.line for record in records] == [1, RECORD.count("\n") + 2]


@pytest.mark.slow
def test_the_whole_open_release_is_read(shared_data: Path) -> None:
    rejected: list[Rejection] = []
    records = list(read_spectra(shared_data / "massbank-2025.05.1-ei.zip", rejected.append))
    # Counts as the README of the data states them.
    ionizations = Counter(record.acquisition.ionization for record in records)
    assert len(records) == 14_155 and ionizations["EI"] == 12_542
    assert len(rejected) == 4 and {item.reason for item in rejected} == {"unknown format"}
    assert len({record.accession for record in records}) == 14_155
    assert all(record.licence and record.authors and record.identity.name for record in records)
    # One pass for both: that the peaks are read as they were written is what the keys say.
    assert all(record.splash for record in records)
    assert [fault for fault in map(verify_splash, records) if fault] == []
    indices = [record.retention.index for record in records if record.retention.index is not None]
    assert min(indices) > 200
    assert all(not record.is_profile for record in records if record.acquisition.ionization == "EI")
