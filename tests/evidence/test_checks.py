"""Single checks against textbook tables and at their edges."""

from __future__ import annotations

import pytest

from identify.chem.formula import parse_formula, rings_plus_double_bonds
from identify.evidence.composition import check_explained, check_formula_rules
from identify.evidence.facts import build_query_facts, entry_formula, formula_facts, formula_options, instrument_class
from identify.evidence.finding import Finding, weigh
from identify.evidence.fragment_isotopes import check_fragment_halogens
from identify.evidence.fragments import check_extra_ions, check_missing_ions
from identify.evidence.high_mass import (
    IMPROBABLE_LOSSES,
    check_ions_above,
    check_losses,
    check_molecular_ion,
    improbable_loss,
)
from identify.evidence.retention_check import check_retention
from identify.evidence.weights import LOG_ODDS
from identify.records import Acquisition, EntryStatus, Retention, Verdict
from identify.spectra.align import align

NITROGEN_RULE = [
    ("C3H8", True), ("C6H12O2", True), ("C6H11NO", False), ("C32H25N3O2S", False), ("C8H20N2", True), ("C7H9N", False),
    ("C3H6BrN", False), ("C9H11ClN4O2", True), ("C17H32Cl2", True),
]  # fmt: skip
"""Worked table of an exercise (ms-textbook.com, exercise 6.2; standards.md 3.5 [F]): is the nominal mass even?"""


@pytest.mark.parametrize(("formula", "even"), NITROGEN_RULE)
def test_nitrogen_rule_table(formula: str, even: bool) -> None:
    facts = formula_facts(formula)
    assert facts is not None
    assert (facts.nominal_mass % 2 == 0) is even
    assert (facts.nitrogens % 2 == 0) is even
    assert facts.saturation == int(facts.saturation), "a molecule has whole rings plus double bonds"


@pytest.mark.parametrize(
    ("formula", "expected"),
    [
        ("C6H6", 4), ("C10H8", 7), ("C8H8O", 5), ("C7H7NO", 5), ("C8H10N4O2", 6), ("C10H14N2", 5), ("C10H16", 3), ("C27H46O", 5),
        ("C12H8S", 9), ("C14H9Cl5", 8), ("C17H34O2", 1), ("C20H42", 0), ("C7H5O", 5.5), ("C9F20N", 0.5), ("C3H9Si", 0.5),
    ],
)  # fmt: skip
def test_rings_plus_double_bonds(formula: str, expected: float) -> None:
    """Standards.md 3.6 [C]."""
    assert rings_plus_double_bonds(parse_formula(formula)) == expected


@pytest.mark.parametrize(
    ("mass", "formula"),
    [(78, "C6H6"), (92, "C7H8"), (94, "C6H6O"), (108, "C7H8O"), (121, "C7H7NO"), (136, "C10H16"), (142, "C10H22")],
)
def test_rule_of_thirteen_examples(mass: int, formula: str) -> None:
    """Bright & Chen, J. Chem. Educ. 1983, 60, 557; examples of standards.md 3.7 [C]: base formula, O for CH4, N for CH2."""
    carbons, rest = divmod(mass, 13)
    base = parse_formula(f"C{carbons}H{carbons + rest}")
    target = parse_formula(formula)
    oxygen, nitrogen = target.count("O"), target.count("N")
    assert base.count("C") - oxygen - nitrogen == target.count("C")
    assert base.count("H") - 4 * oxygen - 2 * nitrogen == target.count("H")
    assert formula_facts(formula).nominal_mass == mass


def test_a_radical_formula_in_the_library_is_reported(build) -> None:
    facts = build_query_facts(build.query({77: 100.0, 105: 80.0}))
    finding = check_formula_rules(facts, formula_facts("C7H5O"))
    assert finding.verdict is Verdict.CONFLICTS
    assert "5.5" in finding.observed


def test_losses_that_molecules_hardly_undergo(build) -> None:
    """McLafferty & Turecek's list (from memory): 4–14, 21–25, 37, 38; 14 is left to the 13C correction, 33 is not on our list."""
    assert set(IMPROBABLE_LOSSES) == {*range(4, 14), *range(21, 26), 37, 38}
    entry = build.entry({120: 50.0, 105: 100.0}, "C8H8O")
    for loss in range(3, 45):
        facts = build_query_facts(build.query({120: 50.0, 77: 100.0, 120 - loss: 40.0}))
        conflicts = check_losses(facts, formula_facts("C8H8O"), entry).verdict is Verdict.CONFLICTS
        assert conflicts is (loss in IMPROBABLE_LOSSES), loss


def test_isotope_peak_of_a_probable_loss_is_no_improbable_loss() -> None:
    """M − 15 at 100 % brings its own 13C at M − 14, and a silicon-rich ion one at M − 13."""
    dense = [0.0] * 240
    dense[207], dense[208], dense[222] = 100.0, 20.9, 1.0
    assert improbable_loss(tuple(dense), formula_facts("C6H18O3Si3"))[0] < 1.0


def test_chlorine_with_hydrogens_is_a_probable_loss_from_chlorides(build) -> None:
    query = build_query_facts(build.query({75: 20.0, 77: 60.0, 112: 100.0, 114: 32.0}))
    entry = build.entry({77: 60.0, 112: 100.0}, "C6H5Cl")
    assert check_losses(query, formula_facts("C6H5Cl"), entry).verdict is Verdict.AGREES
    assert check_losses(query, formula_facts("C8H16"), entry).verdict is Verdict.CONFLICTS


@pytest.mark.parametrize(
    ("own", "seen", "expected"),
    [
        (20.0, 20.0, Verdict.AGREES),
        (20.0, 0.0, Verdict.CONFLICTS),
        (60.0, 2.0, Verdict.CONFLICTS),
        (60.0, 12.0, Verdict.INCONCLUSIVE),
        (0.0, 0.0, Verdict.INCONCLUSIVE),
        (0.0, 30.0, Verdict.INCONCLUSIVE),
        (2.0, 0.0, Verdict.CONFLICTS),
    ],
)
def test_molecular_ion_is_judged_against_the_entry(build, own: float, seen: float, expected: Verdict) -> None:
    peaks = {43: 100.0, 71: 30.0, 90: 0.1, **({136: seen} if seen else {})}
    entry = build.entry({43: 100.0, 71: 30.0, **({136: own} if own else {})}, "C10H16")
    assert (
        check_molecular_ion(build_query_facts(build.query(peaks)), formula_facts("C10H16"), entry).verdict is expected
    )


def test_a_weak_molecular_ion_may_be_missing_in_a_class_that_seldom_shows_it(build) -> None:
    """Phthalates without M: common practice, and 63 % of the open records."""
    peaks = {104: 0.1, 149: 100.0, 150: 9.0, 205: 4.0, 223: 6.0}
    query, mass = build_query_facts(build.query(peaks)), formula_facts("C16H22O4")
    phthalate = build.entry({**peaks, 278: 1.0}, "C16H22O4", smiles="CCCCOC(=O)c1ccccc1C(=O)OCCCC")
    item = check_molecular_ion(query, mass, phthalate)
    assert item.verdict is Verdict.INCONCLUSIVE
    assert "63 % of the open records of its class (phthalate)" in item.reason
    ketone = build.entry({**peaks, 278: 1.0}, "C16H22O4", smiles="CCCCCC(=O)c1ccc(O)c(O)c1C(=O)CCCO")
    assert check_molecular_ion(query, mass, ketone).verdict is Verdict.CONFLICTS


def test_molecular_ion_weaker_than_anything_recorded_is_not_missed(build) -> None:
    entry = build.entry({43: 100.0, 136: 2.0}, "C10H16")
    finding = check_molecular_ion(build_query_facts(build.query({43: 100.0, 71: 5.0})), formula_facts("C10H16"), entry)
    assert finding.verdict is Verdict.INCONCLUSIVE


@pytest.mark.parametrize("highest", [130, 135])
def test_molecular_ion_beyond_the_scan_range_is_not_assessed(build, highest: int) -> None:
    entry = build.entry({43: 100.0, 136: 50.0}, "C10H16")
    facts = build_query_facts(build.query({43: 100.0, 71: 5.0}, highest_mz=highest))
    assert check_molecular_ion(facts, formula_facts("C10H16"), entry).verdict is Verdict.NOT_ASSESSED


def test_bromine_stands_at_its_tallest_isotope_peak(build) -> None:
    facts = build_query_facts(build.query({155: 40.0, 234: 51.0, 236: 100.0, 238: 49.0}))
    finding = check_molecular_ion(facts, formula_facts("C6H4Br2"), build.entry({236: 100.0, 234: 51.0}, "C6H4Br2"))
    assert finding.verdict is Verdict.AGREES
    assert "236" in finding.reason


def test_ions_above_the_molecule_except_isotopes_and_protonated(build) -> None:
    entry = build.entry({105: 100.0, 120: 30.0}, "C8H8O")
    formula = formula_facts("C8H8O")
    isotopes = build.query({105: 100.0, 120: 30.0, 121: 2.7, 122: 0.3})
    protonated = build.query({105: 100.0, 120: 30.0, 121: 12.0, 122: 1.1})
    foreign = build.query({105: 100.0, 120: 30.0, 134: 15.0})
    assert check_ions_above(build_query_facts(isotopes), formula, entry).verdict is Verdict.AGREES
    assert check_ions_above(build_query_facts(protonated), formula, entry).verdict is Verdict.AGREES
    assert check_ions_above(build_query_facts(foreign), formula, entry).verdict is Verdict.CONFLICTS
    same = build.entry({105: 100.0, 120: 30.0, 134: 14.0}, "C8H8O")
    assert check_ions_above(build_query_facts(foreign), formula, same).verdict is Verdict.INCONCLUSIVE, (
        "the entry shows it too"
    )


def test_intensity_no_subformula_reaches_is_listed(build) -> None:
    """C8H9 (105) and C3H7O (59) need more hydrogen, or oxygen, than naphthalene has."""
    facts = build_query_facts(build.query({77: 100.0, 105: 80.0, 120: 30.0, 59: 40.0}))
    finding = check_explained(facts, formula_facts("C10H8"))
    assert finding.verdict is Verdict.CONFLICTS
    assert finding.observed.endswith("not: m/z 105, 59")
    benzoyl = build_query_facts(build.query({51: 30.0, 77: 80.0, 105: 100.0, 120: 30.0}))
    assert check_explained(benzoyl, formula_facts("C8H8O")).verdict is Verdict.AGREES


def test_one_sided_ions_are_sorted_into_background_and_contradiction(build) -> None:
    entry = build.entry({77: 80.0, 105: 100.0, 120: 30.0}, "C8H8O")
    formula = formula_facts("C8H8O")

    def extra(peaks: dict[int, float]) -> Finding:
        query = build.query(peaks)
        return check_extra_ions(build_query_facts(query), align(query.spectrum, entry.spectrum), formula)

    base = {77: 80.0, 105: 100.0, 120: 30.0}
    assert extra(base).verdict is Verdict.AGREES
    bleed = extra({**base, 207: 20.0})
    assert bleed.verdict is Verdict.AGREES
    assert "siloxane" in bleed.reason
    second = extra({**base, 99: 60.0, 113: 40.0})
    assert second.verdict is Verdict.CONFLICTS
    assert "113" in second.reason

    query = build.query({105: 100.0, 106: 2.0})
    missing = check_missing_ions(build_query_facts(query), align(query.spectrum, entry.spectrum))
    assert missing.verdict is Verdict.CONFLICTS
    assert "120" in missing.reason
    coarse = build.query({105: 100.0, 77: 79.0})
    silent = check_missing_ions(build_query_facts(coarse), align(coarse.spectrum, entry.spectrum))
    assert silent.verdict is Verdict.AGREES, "a spectrum that records nothing below 79 % cannot miss an ion of 30 %"


def test_halogens_in_fragments_speak_when_the_molecule_is_silent(build) -> None:
    """A CHCl2 fragment at 83, 85, 87 (9:6:1) without a molecular ion."""
    facts = build_query_facts(build.query({47: 15.0, 48: 10.0, 83: 100.0, 84: 1.2, 85: 64.0, 87: 10.3, 119: 0.5}))
    assert check_fragment_halogens(facts, formula_facts("CHCl3")).verdict is Verdict.AGREES
    assert check_fragment_halogens(facts, formula_facts("CH2BrCl")).verdict is Verdict.CONFLICTS
    assert check_fragment_halogens(facts, formula_facts("C6H12O")).verdict is Verdict.CONFLICTS


def test_alkyl_series_is_no_halogen(build) -> None:
    """Hydrocarbon clusters 41/43, 55/57, 69/71, 83/85 mimic one chlorine or bromine (common practice)."""
    alkyl = {
        41: 40.0,
        43: 100.0,
        55: 35.0,
        57: 80.0,
        69: 25.0,
        71: 50.0,
        83: 18.0,
        85: 30.0,
        97: 9.0,
        99: 8.5,
        111: 5.0,
        113: 4.8,
    }
    facts = build_query_facts(build.query(alkyl))
    assert check_fragment_halogens(facts, formula_facts("C16H34")).verdict is Verdict.NOT_ASSESSED


@pytest.mark.parametrize(
    ("index", "status", "expected"),
    [
        (1020.0, EntryStatus.REFERENCE, Verdict.AGREES),
        (1020.1, EntryStatus.REFERENCE, Verdict.INCONCLUSIVE),
        (1050.0, EntryStatus.REFERENCE, Verdict.INCONCLUSIVE),
        (1050.1, EntryStatus.REFERENCE, Verdict.CONFLICTS),
        (1008.0, EntryStatus.OWN_STANDARD, Verdict.AGREES),
        (1015.0, EntryStatus.OWN_STANDARD, Verdict.INCONCLUSIVE),
        (1021.0, EntryStatus.OWN_STANDARD, Verdict.CONFLICTS),
    ],
)
def test_retention_window_ends(build, index: float, status: EntryStatus, expected: Verdict) -> None:
    """± 20 corroborates, beyond ± 50 rejects (PDA J. 2025, 79(6), 568, standards.md 4.3 [F]); own standards tighter."""
    query = build.query({93: 100.0}, retention=Retention(index=1000.0, column="DB-5"))
    entry = build.entry({93: 100.0}, "C10H16", retention=Retention(index=index, column="HP-5MS"), status=status)
    assert check_retention(query, entry).verdict is expected


@pytest.mark.parametrize(
    ("query_side", "entry_side", "word"),
    [
        (Retention(), Retention(index=1000.0), "query states no"),
        (Retention(index=1000.0), Retention(), "entry states no"),
        (Retention(index=1000.0, column="DB-5"), Retention(index=0.0, column="DB-5"), "is 0"),
        (Retention(index=1000.0, column="DB-5"), Retention(index=910.38, time_s=910.38), "equals the retention time"),
        (Retention(index=1000.0, column="DB-5"), Retention(index=1000.0, column="DB-WAX"), "cannot be compared"),
    ],
)
def test_retention_is_not_assessed_with_the_reason(
    build, query_side: Retention, entry_side: Retention, word: str
) -> None:
    finding = check_retention(
        build.query({93: 100.0}, retention=query_side), build.entry({93: 100.0}, "C10H16", retention=entry_side)
    )
    assert finding.verdict is Verdict.NOT_ASSESSED
    assert word in finding.reason


def test_unknown_phase_decides_nothing(build) -> None:
    query = build.query({93: 100.0}, retention=Retention(index=1000.0))
    entry = build.entry({93: 100.0}, "C10H16", retention=Retention(index=1001.0, column="DB-5"))
    assert check_retention(query, entry).verdict is Verdict.INCONCLUSIVE


def test_number_of_groups_is_searched_for_n_tms(build) -> None:
    options = dict(formula_options("n TMS", "C6H12O6"))
    assert options[5] == "C21H52O6Si5"
    facts = build_query_facts(build.query({73: 100.0, 204: 60.0, 217: 30.0, 525: 1.0}))
    entry = build.entry({73: 100.0, 204: 60.0, 525: 1.0}, "", measured_as="n TMS", parent="C6H12O6")
    formula, groups = entry_formula(entry, facts)
    assert groups == 5
    assert formula is not None
    assert formula.nominal_mass == 540
    finding = check_molecular_ion(facts, formula, entry, groups)
    assert finding.verdict is Verdict.INCONCLUSIVE
    assert "5 groups" in finding.reason


@pytest.mark.parametrize(
    ("code", "expected"),
    [
        ("GC-EI-TOF", "time-of-flight"), ("GC-EI-QTOF", "time-of-flight"), ("EI-B", "sector"), ("EI-EBEB", "sector"),
        ("GC-EI-Q", "quadrupole"), ("GC-EI-QQ", "quadrupole"), ("GC-EI-FT", "high-resolution"), ("", "unknown"),
        ("X-Y", "unknown"),
    ],
)  # fmt: skip
def test_instrument_class_of_record_codes(code: str, expected: str) -> None:
    assert instrument_class(Acquisition(instrument_type=code)) == expected


def test_verdicts_never_carry_the_opposite_sign() -> None:
    for kind, cells in LOG_ODDS.items():
        for cell in cells:
            assert weigh(Finding(kind, Verdict.AGREES, "Reason.", cell)).log_odds >= 0.0
            assert weigh(Finding(kind, Verdict.CONFLICTS, "Reason.", cell)).log_odds <= 0.0
            assert weigh(Finding(kind, Verdict.INCONCLUSIVE, "Reason.", cell)).log_odds == 0.0


def test_unmeasured_cell_weighs_nothing() -> None:
    assert weigh(Finding("molecular ion", Verdict.CONFLICTS, "Reason.", "no such cell")).log_odds == 0.0
