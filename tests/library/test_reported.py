"""Results can be followed from an entry to every query it answered, and nobody can take them out again."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from library_builders import WHEN, WHO, build_test_library, move
from test_verify import tamper

from identify.errors import LibraryConflict, UsageError
from identify.library.reported import find_affected, find_affected_by_all_withdrawn, record_report
from identify.library.store import Library, open_library
from identify.library.verify import verify_library
from identify.records import (
    AlignedPeaks,
    Candidate,
    Claim,
    ClaimLevel,
    CleanSpectrum,
    EntryStatus,
    Explanation,
    Identification,
    MolecularIonEstimate,
    Query,
    Report,
)


def build_report(library: Library, *entry_ids: int) -> Report:
    """Two queries, each answered by all the entries."""
    entries = library.get_entries(list(entry_ids))
    record = library.get_records([1])[0]
    spectrum: CleanSpectrum = entries[0].spectrum
    aligned = AlignedPeaks(*(spectrum.nominal.mz,) * 3, 30)
    candidates = tuple(
        Candidate(rank, entry, str(library.path), aligned, 0.9, 0.9, (), 0.5, Explanation("p", 0.0))
        for rank, entry in enumerate(entries, 1)
    )
    found = tuple(
        Identification(
            Query(name, replace(record, title=f"unknown {name}"), spectrum),
            MolecularIonEstimate((), 0.0),
            0.9,
            Claim(ClaimLevel.TENTATIVE, "x", 0.5),
            candidates,
        )
        for name in ("q1", "q2")
    )
    return Report("ionwitness", "1", {}, (library.state(),), found)


def test_a_withdrawn_entry_leads_to_the_queries_it_answered(library_path: Path) -> None:
    with open_library(library_path, writable=True) as library:
        before = library.fingerprint
        assert record_report(library, build_report(library, 1, 2), result="monday.html", who=WHO, when=WHEN) == 4
        assert record_report(library, build_report(library, 2), result="tuesday.html", who=WHO, when=WHEN) == 2
        assert library.fingerprint == before
    move(library_path, 2, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        affected = find_affected(library, "TEST-2")
        assert [(row.result, row.query_name, row.rank, row.claim) for row in affected] == [
            ("monday.html", "unknown q1", 2, "tentative"),
            ("monday.html", "unknown q2", 2, "tentative"),
            ("tuesday.html", "unknown q1", 1, "tentative"),
            ("tuesday.html", "unknown q2", 1, "tentative"),
        ]
        assert {row.fingerprint for row in affected} == {before}
        assert find_affected_by_all_withdrawn(library) == {"TEST-2": affected}
        assert find_affected(library, "TEST-4") == ()
    assert verify_library(library_path).is_intact


def test_candidates_of_other_libraries_are_not_recorded_here(library_path: Path, tmp_path: Path) -> None:
    other = tmp_path / "other.ionlib"
    build_test_library(other)
    with open_library(other) as foreign:
        report = build_report(foreign, 1)
    with open_library(library_path, writable=True) as library:
        assert record_report(library, report, result="x", who=WHO, when=WHEN) == 0


def test_a_result_needs_a_name_and_a_person(library_path: Path) -> None:
    with open_library(library_path, writable=True) as library:
        for result, who in (("", WHO), ("x", " ")):
            with pytest.raises(UsageError):
                record_report(library, build_report(library, 1), result=result, who=who, when=WHEN)


@pytest.mark.parametrize(
    ("statement", "place"),
    [
        ("DELETE FROM reported WHERE id = 2", "reported query 2 is missing"),
        ("UPDATE reported SET query_name = 'nothing' WHERE id = 3", "reported query 3"),
    ],
)
def test_a_record_changed_behind_the_back_is_named(library_path: Path, statement: str, place: str) -> None:
    with open_library(library_path, writable=True) as library:
        record_report(library, build_report(library, 1, 2), result="x", who=WHO, when=WHEN)
        with pytest.raises(LibraryConflict, match="append-only"), library.writing() as raw:
            raw.execute(statement)
    tamper(library_path, statement)
    assert verify_library(library_path).problems[0].place == place
