"""Every finding of an audit has a reason, its evidence adds up, and a reviewer's word is kept."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from library_builders import BENZENE, TOLUENE, WHEN, build_record, build_test_library

from identify.library.audit import (
    CAUTION,
    QUARANTINE,
    USE,
    AuditReport,
    audit_entry,
    audit_library,
    look_around,
    observe_in_library,
    propose,
    read_overruled,
    suspect,
    weigh_cells,
)
from identify.library.audit_cells import Cell, Neighbour, observe_entry
from identify.library.audit_metadata import AuditFinding, Grade, check_statements
from identify.library.audit_weights import BASE_LOG_ODDS, CAUTION_FROM, QUARANTINE_FROM, WEIGHTS
from identify.library.cache import load_index
from identify.library.standing import quarantine_entries, reinstate_entry
from identify.library.starter import build_starter
from identify.library.store import open_library
from identify.records import Entry, EntryStatus, Retention, SpectrumRecord
from identify.settings import Weighting


def make(
    peaks: dict[int, float], name: str = "Toluene", formula: str = "C7H8", smiles: str = "Cc1ccccc1", **more: Any
) -> tuple[Entry, SpectrumRecord]:
    """Entry and record without a library file."""
    import tempfile

    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "a.ionlib"
        build_test_library(path, [build_record("X", name, peaks, formula=formula, smiles=smiles, **more)])
        with open_library(path) as library:
            return library.get_entries([1])[0], library.get_records([1])[0]


def statements(entry: Entry, record: SpectrumRecord, others: Sequence[Entry] = ()) -> dict[str, Grade]:
    return {finding.kind: finding.grade for finding in check_statements(entry, record, others)}


def cells(entry: Entry, neighbours: Sequence[Neighbour] = (), replicates: Sequence[Neighbour] = ()) -> dict[str, str]:
    return {cell.kind: cell.cell for cell in observe_entry(entry, neighbours, replicates)}


FULL = TOLUENE | {51: 8.0, 63: 7.0}


def test_a_sound_entry_has_no_findings_on_its_statements() -> None:
    assert statements(*make(FULL)) == {}


def test_statements_that_contradict_each_other_are_found() -> None:
    entry, record = make(FULL, formula="C7H8O")
    assert statements(entry, record) == {"formula and structure": Grade.SERIOUS}
    entry, record = make(FULL, inchikey="UHOVQNZJYSORNB-UHFFFAOYSA-N")
    assert statements(entry, record) == {"InChIKey and structure": Grade.CAUTION}
    entry, record = make(FULL, smiles="C1CC")
    assert statements(entry, record) == {"structure": Grade.CAUTION}


def test_peaks_that_do_not_fit_their_splash_are_serious() -> None:
    entry, record = make(FULL)
    assert statements(entry, replace(record, splash="splash10-0006-0900000000-b112e4e059e1ecf98c5f")) == {
        "SPLASH": Grade.SERIOUS
    }


@pytest.mark.parametrize(
    ("energy", "expected"),
    [
        (70.0, {}),
        (None, {"energy": Grade.NOTE}),
        (20.0, {"energy": Grade.NOTE}),
        (14.0, {"energy": Grade.CAUTION}),
        (120.0, {"energy": Grade.CAUTION}),
    ],
)
def test_energies_far_from_70_ev_ask_for_caution(energy: float | None, expected: dict[str, Grade]) -> None:
    assert statements(*make(FULL, energy_ev=energy)) == expected


def test_few_peaks_and_undeclared_derivatization_ask_for_caution() -> None:
    assert statements(*make({91: 100.0, 92: 60.0})) == {"few peaks": Grade.CAUTION}
    comment = "The compound was chemically modified with MSTFA before measurement."
    entry, record = make(FULL, comments=(comment,))
    assert statements(entry, record) == {"derivative not declared": Grade.CAUTION}
    entry, record = make(
        FULL, comments=(comment,), derivative="1 TMS", name="Cresol", formula="C7H8O", smiles="Cc1ccccc1O"
    )
    assert statements(entry, record) == {}


def test_a_retention_index_far_from_the_others_is_found() -> None:
    entry, record = make(FULL)

    def at(index: float, phase: str = "non-polar") -> Entry:
        return replace(entry, retention=Retention(index=index, phase=phase))

    others = [at(765.0), at(770.0)]
    assert statements(at(768.0), record, others) == {}
    assert statements(at(1020.0), record, others) == {"retention index": Grade.CAUTION}
    assert statements(at(1020.0, "polar"), record, others) == {}, "another phase"
    assert statements(at(1020.0), record, others[:1]) == {}, "one value is no rule"


@pytest.mark.parametrize(("index", "time_s"), [(0.0, None), (462.0, 462.0), (9.1, 546.0), (45.0, None)])
def test_a_retention_index_that_is_none_is_found(index: float, time_s: float | None) -> None:
    """0, the retention time written in the wrong field (seconds or minutes), and values below any alkane's."""
    entry, record = make(FULL)
    doubtful = replace(entry, retention=Retention(index=index, time_s=time_s, phase="non-polar"))
    assert statements(doubtful, record) == {"retention index": Grade.CAUTION}


def test_a_formula_unlike_that_of_the_replicates_is_serious() -> None:
    entry, record = make(FULL)
    wrong = replace(entry, formula_as_measured="C8H10")
    assert statements(wrong, record, [entry]) == {"formula of replicates": Grade.SERIOUS}


def test_observations_on_the_molecular_region() -> None:
    right, _ = make(FULL)
    assert cells(right)["highest ions"] == "M strong"
    assert cells(right)["ions above M"] == "none"
    shifted, _ = make({mz + 1: height for mz, height in FULL.items()})
    assert cells(shifted)["M+1 beside M"] == "very tall"
    assert cells(right)["M+1 beside M"] == "usual"
    heavier, _ = make(FULL | {107: 40.0, 122: 30.0})
    assert cells(heavier)["highest ions"] == "above M, M seen"
    lighter, _ = make({39: 20.0, 50: 30.0, 51: 40.0, 78: 100.0})
    assert cells(lighter)["highest ions"] == "unusual loss", "M − 14"
    unknown, _ = make(FULL, formula="")
    assert cells(unknown)["highest ions"] == ""


def test_bromine_clusters_are_no_ions_above_m() -> None:
    """M at nominal mass is the smallest peak of C6Br6: pattern 1:6:15:20:15:6:1, binomial for equal 79Br and 81Br."""
    cluster = {546 + 2 * n: height for n, height in enumerate((1.0, 6.0, 15.0, 20.0, 15.0, 6.0, 1.0))}
    whole = {79: 10.0, 232: 100.0, 392: 15.0} | cluster
    bromine, _ = make(whole, name="Hexabromobenzene", formula="C6Br6", smiles="Brc1c(Br)c(Br)c(Br)c(Br)c1Br")
    assert cells(bromine)["ions above M"] == "none"
    assert cells(bromine)["highest ions"] == "M strong"
    worse = {mz: height for mz, height in whole.items() if mz != 546}
    heavier, _ = make(
        worse | {590: 20.0}, name="Hexabromobenzene", formula="C6Br6", smiles="Brc1c(Br)c(Br)c(Br)c(Br)c1Br"
    )
    assert cells(heavier)["ions above M"] == "strong"


@pytest.mark.parametrize(
    ("peaks", "formula", "name"),
    [
        ({73: 47.0, 75: 10.0, 301: 87.0, 302: 26.0, 303: 16.0}, "C10H27F3Si4", "silane, M − 15 with silicon isotopes"),
        ({73: 97.0, 137: 100.0, 139: 99.0, 179: 3.2, 181: 3.7}, "C6H15BrSi", "bromide, M − 15"),
    ],
)
def test_the_isotope_peak_of_a_usual_loss_is_no_unusual_loss(peaks: dict[int, float], formula: str, name: str) -> None:
    entry, _ = make(peaks, name=name, formula=formula, smiles="")
    assert cells(entry)["highest ions"] == "usual loss"


def test_metals_and_salts_are_not_judged_by_rules_for_molecules() -> None:
    tin, _ = make({120: 100.0, 197: 70.0, 351: 90.0}, name="Tetraphenyltin", formula="C24H20Sn", smiles="")
    assert cells(tin)["nitrogen rule and rings"] == ""
    salt, record = make(
        {58: 100.0, 59: 60.0, 94: 15.0, 96: 14.0, 142: 5.0},
        name="Tetramethylammonium bromide", formula="C4H12BrN", smiles="C[N+](C)(C)C.[Br-]",
    )  # fmt: skip
    assert [cells(salt)[kind] for kind in ("highest ions", "nitrogen rule and rings")] == ["", ""]
    assert statements(salt, record) == {"salt": Grade.CAUTION}
    dimer, record = make(FULL, name="Dimer", formula="C4H8O4", smiles="OCC=O.OCC=O")
    assert "salt" not in statements(dimer, record)


def test_a_second_search_tells_shifted_masses_from_a_protonated_molecule(tmp_path: Path) -> None:
    path = tmp_path / "a.ionlib"
    shifted = {mz + 1: height for mz, height in FULL.items()}
    records = [
        build_record("RIGHT", "Toluene", FULL, formula="C7H8", smiles="Cc1ccccc1"),
        build_record("WRONG", "Tropilidene", shifted, formula="C7H8", smiles="C1C=CC=CC=C1"),
    ]
    build_test_library(path, records)
    found = {audited.accession: audited for audited in audit(path).audits}
    assert found["WRONG"].suspicion == "all m/z one too high"
    with open_library(path) as library:
        index = load_index(library, Weighting())
        right, wrong = library.get_entries([1, 2])
        observed = [
            {cell.kind: cell.cell for cell in observe_in_library(library, index, entry, leave_out={entry.id})[0]}
            for entry in (right, wrong)
        ]
    assert [cells_of["shifted by one"] for cells_of in observed] == ["", "far better"]


def test_a_molecular_ion_ten_times_too_low_is_suspected_a_typing_error() -> None:
    peaks = {77: 20.0, 111: 100.0, 113: 33.0, 139: 60.0, 141: 20.0, 156: 3.0, 158: 10.0}
    entry, _ = make(peaks, name="Chlorobenzoic acid", formula="C7H5ClO2", smiles="OC(=O)c1ccc(Cl)cc1")
    assert "ten times too low" in suspect(entry, [], [])
    good, _ = make(peaks | {156: 30.0}, name="Chlorobenzoic acid", formula="C7H5ClO2", smiles="OC(=O)c1ccc(Cl)cc1")
    assert suspect(good, [], []) == ""


def test_signs_outweighed_by_the_sum_are_notes(tmp_path: Path) -> None:
    path = tmp_path / "a.ionlib"
    records = [build_record(f"R{n}", "Toluene", FULL, formula="C7H8", smiles="Cc1ccccc1") for n in range(2)]
    build_test_library(path, records)
    report = audit(path)
    assert dict(report.by_proposal) == {"use": 2}
    assert report.by_finding == {}
    assert report.by_note["near-duplicate"] == 2
    for entry in report.audits:
        assert {finding.grade for finding in entry.findings} == {Grade.NOTE}


def test_observations_on_neighbours_and_replicates() -> None:
    entry, _ = make(FULL)
    other, _ = make(BENZENE, name="Benzene", formula="C6H6", smiles="c1ccccc1")
    same, other = replace(entry, id=2), replace(other, id=3, compound_id=9)
    twin = replace(entry, id=4, compound_id=8)
    assert cells(entry, [Neighbour(other, 0.95)])["mass of similar spectra"] == "other mass far best, near"
    assert cells(entry, [Neighbour(other, 0.8)])["mass of similar spectra"] == "other mass far best"
    assert (
        cells(entry, [Neighbour(twin, 0.95), Neighbour(other, 0.5)])["mass of similar spectra"]
        == "same mass clearly best"
    )
    assert cells(entry, [Neighbour(same, 0.99), Neighbour(other, 0.5)])["mass of similar spectra"] == "", (
        "replicates are judged as replicates only"
    )
    assert cells(entry, [], [Neighbour(same, 0.3)])["replicates"] == "strange"
    assert cells(entry, [], [Neighbour(same, 0.3), Neighbour(same, 0.96)])["replicates"] == "the same"
    assert cells(entry)["replicates"] == ""


def test_the_evidence_of_the_findings_adds_up_with_the_silent_observations() -> None:
    chosen = [Cell(kind, cell, "because") for kind, rows in WEIGHTS.items() for cell in list(rows)[:1]]
    log_odds, findings = weigh_cells(chosen)
    assert log_odds == pytest.approx(BASE_LOG_ODDS + sum(WEIGHTS[cell.kind][cell.cell] for cell in chosen))
    assert {finding.kind for finding in findings} == {
        cell.kind for cell in chosen if WEIGHTS[cell.kind][cell.cell] >= 0.5
    }
    assert weigh_cells([Cell("highest ions", "", "not assessed")]) == (BASE_LOG_ODDS, [])


def test_replicates_with_the_same_error_excuse_nothing() -> None:
    alike = Cell("replicates", "the same", "because")
    assert weigh_cells([Cell("ions above M", "none", ""), alike])[0] == pytest.approx(
        weigh_cells([Cell("ions above M", "none", "")])[0] + WEIGHTS["replicates"]["the same"]
    )
    heavier = Cell("ions above M", "strong", "because")
    assert weigh_cells([heavier, alike])[0] == weigh_cells([heavier])[0]


def test_every_cell_that_can_be_observed_is_in_the_table_or_is_rare() -> None:
    """A renamed cell would silently weigh nothing."""
    for kind in ("highest ions", "ions above M", "losses from M", "mass of similar spectra", "replicates"):
        assert len(WEIGHTS[kind]) >= 4, kind
    assert CAUTION_FROM < QUARANTINE_FROM


def test_proposals_follow_the_thresholds_and_serious_statements() -> None:
    serious = AuditFinding("x", Grade.SERIOUS, "x")
    caution = AuditFinding("x", Grade.CAUTION, "x")
    low = CAUTION_FROM - 1
    assert propose(low, []) == USE
    assert propose(CAUTION_FROM, []) == CAUTION
    assert propose(QUARANTINE_FROM, []) == QUARANTINE
    assert propose(low, [caution]) == CAUTION
    assert propose(low, [serious]) == QUARANTINE


def audit(path: Path) -> AuditReport:
    with open_library(path) as library:
        return audit_library(library, load_index(library, Weighting()))


def test_an_audit_proposes_and_a_reviewer_decides(tmp_path: Path) -> None:
    path = tmp_path / "a.ionlib"
    records = [build_record(f"R{n}", "Toluene", FULL, formula="C7H8", smiles="Cc1ccccc1") for n in range(2)]
    records.append(build_record("BAD", "Cresol", FULL, formula="C7H8O", smiles="Cc1ccccc1"))
    build_test_library(path, records)
    report = audit(path)
    by_name = {entry.accession: entry for entry in report.audits}
    assert by_name["BAD"].proposal == QUARANTINE
    assert report.to_quarantine.keys() >= {"BAD"}
    assert "formula and structure" in report.to_quarantine["BAD"]
    assert sum(report.by_proposal.values()) == 3
    kinds = {finding.kind for finding in by_name["R0"].findings}
    assert "near-duplicate" in kinds
    with open_library(path, writable=True) as library:
        quarantine_entries(library, {"BAD": report.to_quarantine["BAD"]}, who="Ben", when=WHEN, reason="audit")
        assert library.state().entries == 2
    assert {entry.accession for entry in audit(path).audits} == {"R0", "R1", "BAD"}, "quarantined ones stay visible"
    with open_library(path, writable=True) as library:
        reinstate_entry(library, "BAD", who="Cleo", when=WHEN, reason="a typing error in the formula only")
        assert read_overruled(library) == {3: "Cleo: a typing error in the formula only"}
    again = {entry.accession: entry for entry in audit(path).audits}["BAD"]
    assert (again.proposal, again.overruled) == (CAUTION, "Cleo: a typing error in the formula only")
    assert again.findings, "what was found is still said"


def test_an_index_out_of_order_within_its_homologous_series_is_found(tmp_path: Path) -> None:
    """n-Alkanes: 100 index units for each carbon, by definition of the scale; one of eight was written down wrongly."""
    path = tmp_path / "alkanes.ionlib"
    build_test_library(
        path,
        [
            build_record(
                f"R{n}", f"alkane {n}", {43: 100.0, 57: 80.0, 71: 40.0, 85: 25.0, 14 * n + 2: 3.0},
                formula=f"C{n}H{2 * n + 2}", smiles="C" * n,
                retention=Retention(index=1000.0 if n == 13 else 100.0 * n, phase="non-polar"),
            )
            for n in range(9, 17)
        ],
    )  # fmt: skip
    doubted = {
        entry.accession: finding.reason
        for entry in audit(path).audits
        for finding in entry.findings
        if finding.kind == "retention index"
    }
    assert doubted == {
        "R13": "The retention index is not used: the index is out of order within its homologous series."
    }


def test_a_withdrawn_entry_is_not_audited(library_path: Path) -> None:
    from library_builders import move

    move(library_path, 2, EntryStatus.WITHDRAWN)
    assert {entry.entry_id for entry in audit(library_path).audits} == {1, 3, 4, 5}


def test_the_suspicion_names_the_compound_a_spectrum_resembles(tmp_path: Path) -> None:
    path = tmp_path / "a.ionlib"
    many = {30 + 3 * n: 10.0 + n for n in range(20)}
    records = [
        build_record("A", "Right", many, formula="C6H14O", smiles="CCCCCCO"),
        build_record("B", "Wrong", many, formula="C9H12", smiles="CCCc1ccccc1"),
    ]
    build_test_library(path, records)
    with open_library(path) as library:
        index = load_index(library, Weighting())
        entry = library.get_entries([2])[0]
        found = audit_entry(library, index, entry)
        suspicion = suspect(entry, *look_around(library, index, entry, leave_out={2}))
    assert suspicion == "the spectrum resembles that of Right (A)"
    kinds = {finding.kind: finding for finding in found.findings}
    assert kinds["like another compound"].observed.startswith("A, Right, cosine 1.0000")


def test_every_entry_not_simply_usable_has_a_finding_that_says_why(tmp_path: Path) -> None:
    # Of the starter entries, siloxanes and glycerol are those in doubt.
    build_starter(tmp_path / "starter.ionlib", "Ada", WHEN)
    with open_library(tmp_path / "starter.ionlib") as library:
        index = load_index(library, Weighting())
        asked = [*library.find_entries(name="siloxane"), *library.find_entries(name="glycerol")]
        audits = [audit_entry(library, index, entry) for entry in asked]
    doubtful = [found for found in audits if found.proposal != USE]
    assert doubtful
    for found in doubtful:
        assert any(finding.grade is not Grade.NOTE for finding in found.findings), found.accession
    kinds = {finding.kind for found in doubtful for finding in found.findings}
    assert "many small signs" in kinds, "siloxanes: no observation by itself, all together"
