"""Entries leave in open formats without loss, and licences that exclude each other do not leave together."""

from __future__ import annotations

import itertools
import zipfile
from pathlib import Path

import numpy as np
import pytest
from library_builders import ALANINE_2TMS, BENZENE, TOLUENE, WHEN, WHO, build_record, build_test_library

from identify.errors import LibraryConflict, LibraryError, UsageError
from identify.library.build import build_library
from identify.library.export import export_entries, find_licence_conflict
from identify.library.identities import resolve_identity
from identify.library.standards import StandardDetails, propose_standard, review_standard
from identify.library.store import Library, open_library
from identify.records import Acquisition, Retention, SpectrumRecord

FORMATS = ("jcamp", "msp", "mzspeclib", "mzml", "csv", "massbank")


def build_rich_records() -> list[SpectrumRecord]:
    """Records that state much, with accurate and nominal peaks in no special intensity unit."""
    how = Acquisition("invented", "GC-EI-TOF", "EI", 70.0, "GC", 1, "positive", 35.0, 550.0)
    accurate = {39.02293: 12.25, 65.03858: 130.5, 91.05423: 1234.5, 92.06205: 777.125}
    common = {"formula": "C7H8", "smiles": "Cc1ccccc1", "inchikey": "YXFVVABEGXRONW-UHFFFAOYSA-N", "acquisition": how}
    first = build_record(
        "MSBNK-Invented-AB000001", "Toluene", accurate, retention=Retention(412.5, 768.0, "linear", "DB-5", ""),
        comments=("first", "second: with colon"), **common,
    )  # fmt: skip
    second = build_record("MSBNK-Invented-AB000002", "Benzene", BENZENE, formula="C6H6", acquisition=how)
    third = build_record(
        "MSBNK-Invented-AB000003", "Alanine", ALANINE_2TMS, formula="C3H7NO2", derivative="2 TMS", acquisition=how
    )
    return [first, second, third]


def content(library: Library) -> list[dict[str, object]]:
    """What must survive a round trip, by entry."""
    out = []
    for entry, record in zip(library.iter_entries(), library.get_records(library.entry_ids()), strict=True):
        order = np.argsort(record.mz)
        out.append(
            {
                "mz": record.mz[order].tolist(), "intensity": record.intensity[order].tolist(),
                "accession": entry.accession, "identity": entry.identity, "acquisition": entry.acquisition,
                "retention": entry.retention, "measured_as": entry.measured_as, "licence": entry.licence,
                "formula_as_measured": entry.formula_as_measured, "authors": entry.authors, "comments": entry.comments,
                "labelled": entry.is_labelled, "compound": entry.compound_id,
            }
        )  # fmt: skip
    return out


@pytest.mark.parametrize("file_format", FORMATS)
def test_export_and_build_again_lose_nothing(tmp_path: Path, file_format: str) -> None:
    build_test_library(tmp_path / "a.ionlib", build_rich_records())
    with open_library(tmp_path / "a.ionlib") as library:
        before = content(library)
        report = export_entries(library, tmp_path / "out.txt", file_format, when=WHEN)
        assert (report.n_written, report.fingerprint) == (3, library.fingerprint)
        assert report.licences == {"CC BY": 3}
    again = build_library(tmp_path / "b.ionlib", [tmp_path / "out.txt"], who=WHO, when=WHEN)
    assert again.n_rejected == {}
    with open_library(tmp_path / "b.ionlib") as library:
        after = content(library)
    keep = {"mz", "intensity"} if file_format == "csv" else set(before[0])
    for old, new in zip(before, after, strict=True):
        for name in sorted(keep):
            assert new[name] == old[name], (file_format, name)


@pytest.mark.parametrize(
    ("licences", "conflict"),
    [
        ({"CC BY", "CC0", "public domain", "dl-de/by-2-0"}, ""),
        ({"CC BY", "CC BY-SA"}, ""),
        ({"CC BY", "CC BY-NC"}, ""),
        ({"CC BY-NC", "CC BY-NC-SA"}, ""),
        ({"CC BY-SA", "CC BY-NC-SA"}, "CC BY-NC-SA together with CC BY-SA"),
        ({"CC BY-SA", "CC BY-NC"}, "CC BY-NC together with CC BY-SA"),
        ({"CC BY-ND"}, ""),
        ({"CC BY", "CC BY-ND"}, "CC BY-ND together with other licences"),
        ({"house rules"}, ""),
        ({"house rules", "CC BY"}, "house rules together with other licences"),
        ({"not stated"}, "entries whose licence is not stated"),
    ],
)
def test_the_rule_on_licences(licences: set[str], conflict: str) -> None:
    """The project's own cautious reading of the licences' terms (from memory), not legal advice."""
    for order in itertools.permutations(licences):
        assert find_licence_conflict(dict.fromkeys(order)) == conflict


def test_licences_that_exclude_each_other_need_the_user_s_word(tmp_path: Path) -> None:
    records = [
        build_record("A", "Toluene", TOLUENE, licence="CC BY-SA"),
        build_record("B", "Benzene", BENZENE, licence="CC BY-NC-SA 4.0"),
    ]
    build_test_library(tmp_path / "a.ionlib", records)
    with open_library(tmp_path / "a.ionlib") as library:
        with pytest.raises(LibraryConflict) as caught:
            export_entries(library, tmp_path / "x.msp", "msp")
        assert str(caught.value) == (
            f"export in {tmp_path / 'a.ionlib'}: found CC BY-NC-SA together with CC BY-SA, expected licences that may be"
            " passed on together. Export them into separate files, or say --i-have-the-right."
        )
        assert not (tmp_path / "x.msp").exists()
        assert export_entries(library, tmp_path / "x.msp", "msp", i_have_the_right=True).n_written == 2
        assert export_entries(library, tmp_path / "y.msp", "msp", accessions=["A"]).licences == {"CC BY-SA": 1}
        with pytest.raises(LibraryError, match="no 'C'"):
            export_entries(library, tmp_path / "z.msp", "msp", accessions=["C"])
        with pytest.raises(UsageError, match="found no entry"):
            export_entries(library, tmp_path / "z.msp", "msp", statuses=frozenset())


def test_own_standards_go_out_with_what_is_known_of_the_material(library_path: Path, tmp_path: Path) -> None:
    with open_library(library_path, writable=True) as library:
        record = build_record("x", "x", TOLUENE, licence="")
        propose_standard(
            library, record, identity=resolve_identity(library, name="Toluene"),
            details=StandardDetails(supplier="Example Chemicals", lot="L-42"), who="Anna", when=WHEN,
        )  # fmt: skip
        review_standard(library, "OWN-000001", accept=True, who="Ben", when=WHEN, reason="fine")
        report = export_entries(library, tmp_path / "own.msp", "msp", accessions=["OWN-000001"])
        assert report.licences == {"own standard, no licence stated": 1}
    text = (tmp_path / "own.msp").read_text("utf-8")
    assert "STANDARD supplier Example Chemicals" in text
    assert "STANDARD lot L-42" in text


@pytest.fixture(scope="module")
def open_library_file(shared_data: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Every tenth open record, built once."""
    folder = tmp_path_factory.mktemp("open")
    with zipfile.ZipFile(shared_data / "massbank-2025.05.1-ei.zip") as archive:
        archive.extractall(folder / "records", [name for name in archive.namelist() if name.endswith(".txt")][::10])
    build_library(folder / "open.ionlib", [folder / "records"], licences="all", who=WHO, when=WHEN)
    return folder / "open.ionlib"


@pytest.mark.slow
@pytest.mark.parametrize("file_format", FORMATS)
def test_a_thousand_open_records_survive_a_round_trip(
    open_library_file: Path, tmp_path: Path, file_format: str
) -> None:
    with open_library(open_library_file) as library:
        # MassBank's format has no room for a peak of intensity 0; its writer says so and writes nothing.
        positive = [
            (entry_id, record)
            for entry_id in library.entry_ids()[:1200]
            for record in library.get_records([entry_id])
            if (record.intensity > 0).all()
        ][:1000]
        ids, records = [pair[0] for pair in positive], [pair[1] for pair in positive]
        entries = library.get_entries(ids)
        accessions = [entry.accession for entry in entries]
        export_entries(
            library, tmp_path / "out.txt", file_format, accessions=accessions, i_have_the_right=True, when=WHEN
        )
    build_library(tmp_path / "b.ionlib", [tmp_path / "out.txt"], licences="all", who=WHO, when=WHEN)
    with open_library(tmp_path / "b.ionlib") as library:
        after = {entry.accession: entry for entry in library.iter_entries()}
        by_id = dict(zip(library.entry_ids(), library.get_records(library.entry_ids()), strict=True))
    assert len(after) == 1000
    for old, record, new in zip(entries, records, after.values(), strict=True):
        if file_format != "csv":
            new = after[old.accession]
            for name in ("identity", "acquisition", "retention", "measured_as", "formula_as_measured", "licence", "authors",
                         "is_labelled"):  # fmt: skip
                assert getattr(new, name) == getattr(old, name), (old.accession, name)
            # What the source stated but could not be used (a retention time without a unit) comes back as a comment.
            added = set(new.comments) - set(old.comments)
            assert set(old.comments) <= set(new.comments), old.accession
            assert all("as stated" in comment for comment in added), (old.accession, added)
        again = by_id[new.id]
        order, old_order = np.argsort(again.mz, kind="stable"), np.argsort(record.mz, kind="stable")
        assert np.array_equal(again.mz[order], record.mz[old_order]), old.accession
        assert np.array_equal(again.intensity[order], record.intensity[old_order]), old.accession
