"""The main job on the open records beside the repository: built, counted, searched. Skips where they are missing."""

from __future__ import annotations

import resource
from datetime import UTC, datetime
from pathlib import Path

import pytest

from identify.evidence.facts import build_query_facts
from identify.library.build import BuildReport, build_library
from identify.pipeline import make_query, search_files, search_pasted
from identify.readers import read_pasted
from identify.records import Report, Verdict
from identify.settings import Settings

pytestmark = pytest.mark.slow

ACETOPHENONE = """##TITLE= Acetophenone
##JCAMP-DX= 4.24
##DATA TYPE= MASS SPECTRUM
##DATA CLASS= XYPOINTS
##.IONIZATION MODE= EI+
##.SPECTROMETER TYPE= TRAP
##.INLET= GC
##MOLFORM= C 8 H 8 O
##NPOINTS= 19
##XYPOINTS= (XY..XY)
0,0 38,5.2 39,8.0 43,21.9 50,20.2 51,41.9 52,4.0 63,3.8 74,6.6 75,3.7 76,4.6 77,100 78,10.4 89,1.0 91,1.0 105,80.8
106,6.0 120,23.1 121,2.0
##END=
"""
"""Public-domain JCAMP-DX spectrum (standards table 5.1, [F])."""


@pytest.fixture(scope="module")
def built(shared_data: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, BuildReport]:
    path = tmp_path_factory.mktemp("open") / "all.ionlib"
    archive = shared_data / "massbank-2025.05.1-ei.zip"
    if not archive.is_file():
        pytest.skip(f"{archive} not found")
    report = build_library(path, [archive], licences="all", who="tester", when=datetime(2026, 1, 1, tzinfo=UTC))
    return path, report


def test_every_record_is_accepted_or_counted_with_a_reason(built: tuple[Path, BuildReport]) -> None:
    _, report = built
    assert report.n_accepted + sum(report.n_rejected.values()) == report.n_read == 14_159
    # 14,155 records and four other files; 1,613 records are CI, FI, FD, APCI or LC-MS (README of the data).
    assert report.n_rejected["not electron ionization"] == 1613
    assert report.n_rejected["another kind of file"] == 4
    assert set(report.n_rejected) <= {
        "not electron ionization",
        "another kind of file",
        "not a full-scan spectrum (MS1)",
    }


def test_the_process_that_builds_and_tests_stays_below_two_gigabytes(built: tuple[Path, BuildReport]) -> None:
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss < 2 * 1024 * 1024, "the whole test process, in KiB"


def test_the_free_choice_takes_free_licences_only(shared_data: Path, tmp_path: Path) -> None:
    from identify.library.store import open_library

    folder = tmp_path / "records"
    folder.mkdir()
    import zipfile

    with zipfile.ZipFile(shared_data / "massbank-2025.05.1-ei.zip") as archive:
        names = [name for name in archive.namelist() if name.endswith(".txt")][::40]
        archive.extractall(folder, names)
    path = tmp_path / "free.ionlib"
    report = build_library(path, [folder], who="tester", when=datetime(2026, 1, 1, tzinfo=UTC))
    with open_library(path) as library:
        licences = {entry.licence for entry in library.iter_entries()}
    assert licences
    assert all("NC" not in licence for licence in licences)
    assert any("licence" in reason for reason in report.n_rejected)


def test_acetophenone_is_found_and_its_isotope_peak_gives_eight_carbons(built: tuple[Path, BuildReport]) -> None:
    path, _ = built
    report = search_pasted(ACETOPHENONE, [path], Settings(), "acetophenone.jdx")
    (found,) = report.identifications
    assert found.candidates[0].entry.identity.formula == "C8H8O"
    assert found.candidates[0].entry.identity.name.upper() == "ACETOPHENONE"
    (count,) = [item for item in found.candidates[0].evidence if item.kind == "carbon count"]
    assert count.verdict is Verdict.AGREES, count.reason
    # 2.0 / 23.1 = 8.66 % of M: eight carbons by 1.0816 % each (standards table 3.1).
    assert round(2.0 / 23.1 * 100 / 1.0816) == 8


def test_the_first_step_of_cleaning_drops_the_bogus_point(built: tuple[Path, BuildReport]) -> None:
    (record,) = list(read_pasted(ACETOPHENONE, "acetophenone.jdx", lambda rejection: pytest.fail(str(rejection))))
    query = make_query(record, 1, Settings())
    assert query.spectrum.steps[0].removed == ((0.0, 0.0),)
    assert build_query_facts(query) is not None


def test_a_library_finds_its_own_records(built: tuple[Path, BuildReport], shared_data: Path, tmp_path: Path) -> None:
    import zipfile

    path, _ = built
    with zipfile.ZipFile(shared_data / "massbank-2025.05.1-ei.zip") as archive:
        names = [n for n in archive.namelist() if "-Osaka_Univ-" in n][:20]
        archive.extractall(tmp_path, names)
    report: Report = search_files(sorted(tmp_path.rglob("*.txt")), [path], Settings())
    assert len(report.identifications) == len(names)
    for found in report.identifications:
        best = max(found.candidates, key=lambda candidate: candidate.cosine)
        # Cleaning takes noise from the query that the entry keeps, so the cosine is near 1, not 1.
        assert best.entry.accession == found.query.record.accession
        assert best.cosine > 0.98
