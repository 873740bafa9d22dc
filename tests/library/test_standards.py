"""A standard is proposed by one person, reviewed by another, found at once, and its whole history can be read."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from library_builders import BENZENE, ETHANOL, TOLUENE, WHEN, build_record, build_test_library

from identify.errors import InputError, LibraryConflict, LibraryError, StructureError, UsageError
from identify.index import search_index
from identify.library.cache import load_index
from identify.library.identities import is_cas_number, resolve_identity
from identify.library.standards import (
    StandardDetails,
    list_proposals,
    propose_standard,
    read_standard_details,
    review_standard,
    supersede_standard,
)
from identify.library.standing import entry_history, quarantine_entries, reinstate_entry, withdraw_entry
from identify.library.store import Library, open_library
from identify.library.verify import verify_library
from identify.records import Acquisition, CleanSpectrum, EntryStatus, Identity, Peaks
from identify.settings import Weighting

XYLENE = {51: 9.0, 65: 7.0, 77: 11.0, 91: 100.0, 105: 25.0, 106: 60.0}
"""o-Xylene: principal ions from memory, rounded."""
DETAILS = StandardDetails(
    "Example Chemicals", "L-42", "99 %", "2025-05-01", "A. Example", "GC method 7", "kept in the fridge"
)


@pytest.fixture
def library(library_path: Path):
    with open_library(library_path, writable=True) as opened:
        yield opened


def propose(library: Library, peaks=XYLENE, who: str = "Anna", **identity: str):
    record = build_record("whatever", "peak at 7.2 min", peaks)
    known = resolve_identity(library, **(identity or {"name": "o-Xylene", "smiles": "Cc1ccccc1C"}))
    return propose_standard(library, record, identity=known, details=DETAILS, who=who, when=WHEN, reason="new standard")


def found(library: Library, peaks=XYLENE) -> list[str]:
    """Accessions a search finds, best first."""
    query = CleanSpectrum(Peaks(np.array(list(peaks)), np.array(list(peaks.values()))), None, 30)
    hits = search_index(load_index(library, Weighting()), query, 10)
    return [entry.accession for entry in library.get_entries([hit.entry_id for hit in hits])]


def test_the_whole_way_of_a_standard(library: Library) -> None:
    assert "OWN-000001" not in found(library)
    proposal = propose(library)
    assert (proposal.entry.accession, proposal.entry.status) == ("OWN-000001", EntryStatus.PROPOSED)
    assert proposal.entry.identity.formula == "C8H10"
    assert [entry.accession for entry in list_proposals(library)] == ["OWN-000001"]
    assert "OWN-000001" not in found(library), "not before its review"

    with pytest.raises(LibraryConflict, match="found 'Anna', who proposed it, expected a second person"):
        review_standard(library, "OWN-000001", accept=True, who="Anna", when=WHEN, reason="fine")
    with pytest.raises(LibraryConflict, match="who proposed it"):
        review_standard(library, "OWN-000001", accept=True, who=" ANNA ", when=WHEN, reason="fine")
    review = review_standard(library, "OWN-000001", accept=True, who="Ben", when=WHEN, reason="retention fits")
    assert review.entry.status is EntryStatus.OWN_STANDARD
    assert found(library)[0] == "OWN-000001", "at once"
    assert list_proposals(library) == []
    assert read_standard_details(library, "OWN-000001") == DETAILS

    withdraw_entry(library, "OWN-000001", who="Ben", when=WHEN, reason="wrong vial")
    assert "OWN-000001" not in found(library)
    history = entry_history(library, "OWN-000001")
    assert [(item.event.kind, item.event.who, item.status.value) for item in history] == [
        ("proposed", "Anna", "proposed"),
        ("accepted", "Ben", "own standard"),
        ("withdrawn", "Ben", "withdrawn"),
    ]
    assert [item.event.reason for item in history] == ["new standard", "retention fits", "wrong vial"]
    assert verify_library(library.path).is_intact


def test_a_refused_standard_stays_out_and_in_the_books(library: Library) -> None:
    propose(library)
    review_standard(library, "OWN-000001", accept=False, who="Ben", when=WHEN, reason="impure")
    assert "OWN-000001" not in found(library)
    with pytest.raises(LibraryConflict, match="found standing 'refused', expected a standard that waits for review"):
        review_standard(library, "OWN-000001", accept=True, who="Cleo", when=WHEN, reason="x")
    assert [item.status for item in entry_history(library, "OWN-000001")] == [EntryStatus.PROPOSED, EntryStatus.REFUSED]
    assert propose(library).entry.accession == "OWN-000002", "a number is used once"


def test_a_review_needs_a_reason_and_a_proposal(library: Library) -> None:
    propose(library)
    with pytest.raises(UsageError, match="why the standing of an entry changes"):
        review_standard(library, "OWN-000001", accept=True, who="Ben", when=WHEN, reason="  ")
    with pytest.raises(LibraryError, match="no 'OWN-000009'"):
        review_standard(library, "OWN-000009", accept=True, who="Ben", when=WHEN, reason="x")
    with pytest.raises(LibraryConflict, match="standing 'reference'"):
        review_standard(library, "TEST-1", accept=True, who="Ben", when=WHEN, reason="x")


def test_conflicts_show_disagreeing_replicates_and_other_compounds_that_match(library: Library) -> None:
    wrong = propose(library, BENZENE, name="Toluene", smiles="Cc1ccccc1")
    kinds = {(conflict.kind, conflict.accession) for conflict in wrong.conflicts}
    assert ("replicate disagrees", "TEST-1") in kinds
    assert ("other compound matches as well", "TEST-2") in kinds
    right = propose(library, TOLUENE, name="Toluene", smiles="Cc1ccccc1")
    assert right.conflicts == ()
    assert right.entry.compound_id == library.find_entries(accession="TEST-1")[0].compound_id


def test_a_spectrum_that_cannot_be_an_entry_is_refused(library: Library) -> None:
    record = build_record("x", "x", XYLENE, acquisition=Acquisition(ionization="CI"))
    with pytest.raises(InputError, match="not electron ionization"):
        propose_standard(library, record, identity=Identity("X"), details=DETAILS, who="Anna", when=WHEN)
    with pytest.raises(UsageError, match="expected a date like 2025-05-02"):
        propose_standard(
            library, build_record("x", "x", XYLENE), identity=Identity("X"),
            details=StandardDetails(measured_on="yesterday"), who="Anna", when=WHEN,
        )  # fmt: skip
    assert list_proposals(library) == []


def test_a_better_standard_supersedes_one_of_the_same_compound_only(library: Library) -> None:
    propose(library)
    propose(library)
    for number in (1, 2):
        review_standard(library, f"OWN-00000{number}", accept=True, who="Ben", when=WHEN, reason="fine")
    with pytest.raises(LibraryConflict, match="expected one compound"):
        supersede_standard(library, "TEST-1", "OWN-000002", who="Ben", when=WHEN, reason="better")
    with pytest.raises(LibraryConflict, match="expected own standard"):
        supersede_standard(library, "OWN-000001", "TEST-1", who="Ben", when=WHEN, reason="better")
    report = supersede_standard(library, "OWN-000001", "OWN-000002", who="Ben", when=WHEN, reason="better")
    assert report.entry.status is EntryStatus.WITHDRAWN
    assert "OWN-000001" not in found(library) and "OWN-000002" in found(library)
    assert [item.event.kind for item in entry_history(library, "OWN-000002")] == ["proposed", "accepted", "superseded"]


def test_quarantine_hides_and_a_reviewer_can_overrule_it(library: Library) -> None:
    quarantine_entries(library, {"TEST-1": "outlier"}, who="Ben", when=WHEN, reason="audit of May")
    assert "TEST-1" not in found(library, TOLUENE)
    assert library.find_entries(accession="TEST-1", statuses={EntryStatus.QUARANTINED}), "still there"
    with pytest.raises(LibraryConflict, match="standing 'quarantined', expected an entry in use"):
        quarantine_entries(library, {"TEST-1": "again"}, who="Ben", when=WHEN, reason="x")
    reinstate_entry(library, "TEST-1", who="Cleo", when=WHEN, reason="the spectrum is right")
    assert library.get_entries([1])[0].status is EntryStatus.REFERENCE
    assert "TEST-1" in found(library, TOLUENE)
    with pytest.raises(LibraryConflict, match="expected an entry set aside"):
        reinstate_entry(library, "TEST-1", who="Cleo", when=WHEN, reason="x")


def test_a_reinstated_standard_is_an_own_standard_again(library: Library) -> None:
    propose(library)
    review_standard(library, "OWN-000001", accept=True, who="Ben", when=WHEN, reason="fine")
    withdraw_entry(library, "OWN-000001", who="Ben", when=WHEN, reason="doubt")
    reinstate_entry(library, "OWN-000001", who="Ben", when=WHEN, reason="doubt removed")
    assert library.find_entries(accession="OWN-000001")[0].status is EntryStatus.OWN_STANDARD


def test_the_library_as_it_stood_before_the_review_does_not_know_the_standard(library: Library) -> None:
    propose(library)
    before = library.fingerprint
    review_standard(library, "OWN-000001", accept=True, who="Ben", when=WHEN, reason="fine")
    with open_library(library.path, as_of=before) as then:
        assert found(then) == [name for name in found(library) if name != "OWN-000001"]
        assert then.fingerprint == before


# Identity


def test_a_structure_gives_formula_and_key(library: Library) -> None:
    identity = resolve_identity(library, smiles="Cc1ccccc1")
    # InChIKey of toluene, from memory and agreeing with rdkit.
    assert (identity.name, identity.formula, identity.inchikey) == ("Toluene", "C7H8", "YXFVVABEGXRONW-UHFFFAOYSA-N")
    by_inchi = resolve_identity(library, name="ethanol", inchi="InChI=1S/C2H6O/c1-2-3/h3H,2H2,1H3")
    assert (by_inchi.name, by_inchi.formula, by_inchi.smiles) == ("ethanol", "C2H6O", "CCO")


def test_a_name_takes_the_structure_the_library_knows(library: Library) -> None:
    identity = resolve_identity(library, name="  toluene ".strip())
    assert identity.smiles == "Cc1ccccc1"
    unknown = resolve_identity(library, name="Nothing known")
    assert (unknown.name, unknown.smiles, unknown.formula) == ("Nothing known", "", "")


def test_contradictions_in_an_identity_are_refused(library: Library, tmp_path: Path) -> None:
    with pytest.raises(StructureError, match="that of the structure"):
        resolve_identity(library, smiles="CCO", formula="C7H8")
    with pytest.raises(StructureError, match="the same compound"):
        resolve_identity(library, smiles="CCC", inchi="InChI=1S/C2H6O/c1-2-3/h3H,2H2,1H3")
    with pytest.raises(UsageError, match="as in entry TEST-1"):
        resolve_identity(library, name="Toluene", formula="C2H6O")
    with pytest.raises(UsageError, match="right check digit"):
        resolve_identity(library, cas="67-64-2")
    with pytest.raises(UsageError, match="found nothing"):
        resolve_identity(library)
    path = tmp_path / "two.ionlib"
    records = [
        build_record("A", "Thing", ETHANOL, formula="C2H6O", smiles="CCO"),
        build_record("B", "Thing", ETHANOL, formula="C2H6O", smiles="COC"),
    ]
    build_test_library(path, records)
    with open_library(path) as two, pytest.raises(UsageError, match=r"several structures for 'Thing' \(A, B\)"):
        resolve_identity(two, name="Thing")


@pytest.mark.parametrize(
    ("text", "valid"),
    [("67-64-1", True), ("7732-18-5", True), ("67-64-2", False), ("", False), ("67641", False), ("a-b-c", False),
     ("67-64-", False), ("６７-64-1", False)],
)  # fmt: skip
def test_cas_numbers_have_a_check_digit(text: str, valid: bool) -> None:
    """Acetone 67-64-1 and water 7732-18-5: numbers from memory; the digit follows the published rule."""
    assert is_cas_number(text) is valid
