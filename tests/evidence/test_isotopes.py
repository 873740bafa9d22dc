"""Isotope pattern and carbon count against computed and published values."""

from __future__ import annotations

import pytest

from identify.chem.formula import parse_formula
from identify.chem.isotopes import isotope_pattern
from identify.evidence.facts import build_query_facts, formula_facts
from identify.evidence.isotope_cluster import LOOKED_FOR, fit_cluster
from identify.evidence.isotopes import CarbonCount, check_carbon_count, check_isotope_pattern, count_carbons
from identify.records import Verdict
from tests.builders import PUBLISHED_ACETOPHENONE


def cluster(formula: str, height: float = 60.0, **others: float) -> dict[int, float]:
    """Peaks of an isotope cluster by exact convolution, with a base peak elsewhere so that M is not clipped."""
    composition = parse_formula(formula)
    pattern = isotope_pattern(composition)
    peaks = {41: 100.0}
    for offset in range(-4, 13):
        value = height * pattern.at(offset)
        if value >= 0.05:
            peaks[composition.nominal_mass + offset] = value
    peaks.update({int(mz): value for mz, value in others.items()})
    return peaks


def facts(build, peaks):
    return build_query_facts(build.query(peaks, instrument_type="GC-EI-TOF"))


@pytest.mark.parametrize(("formula", "carbons"), [("CF3", 1), ("C4F9", 4), ("C9F20N", 9)])
def test_calibrant_ions_hold_one_four_and_nine_carbons(build, formula: str, carbons: int) -> None:
    """PFTBA m/z 69, 219, 502 (standards.md 2.3 [C]): fluorine has no heavy isotope, so M+1 is 13C alone."""
    count = count_carbons(facts(build, cluster(formula, 60.0)), formula_facts(formula))
    assert isinstance(count, CarbonCount)
    assert round(count.counted) == carbons
    assert count.low <= carbons <= count.high


def test_siloxane_207_does_not_read_nineteen_carbons(build) -> None:
    """m/z 207, C5H15O3Si3: M+1 is 20.9 % (standards.md 3.3 [C]); a naive count gives 19 carbons instead of 5."""
    query = facts(build, cluster("C5H15O3Si3"))
    assert query.at(208) / query.at(207) / 0.0108 == pytest.approx(19.3, abs=0.2), "the naive count"
    count = count_carbons(query, formula_facts("C5H15O3Si3"))
    assert isinstance(count, CarbonCount)
    assert count.counted == pytest.approx(5.0, abs=0.3)


def test_public_acetophenone_spectrum_counts_eight_carbons(build) -> None:
    query = build_query_facts(build.query(PUBLISHED_ACETOPHENONE, instrument_type="GC-EI-IT"))
    count = count_carbons(query, formula_facts("C8H8O"))
    assert isinstance(count, CarbonCount)
    assert round(count.counted) == 8
    assert check_carbon_count(query, formula_facts("C8H8O")).verdict is Verdict.AGREES


@pytest.mark.parametrize(("percent", "carbons"), [(1.1, 1), (2.2, 2), (33.0, 30)])
def test_common_practice_of_one_percent_per_carbon(build, percent: float, carbons: int) -> None:
    """Common practice: CH4 1 %, C2H6 2 %, thirty carbons a third of M."""
    formula = f"C{carbons}H{2 * carbons + 2}"
    mass = parse_formula(formula).nominal_mass
    query = facts(build, {10: 100.0, mass: 50.0, mass + 1: 50.0 * percent / 100.0})
    count = count_carbons(query, formula_facts(formula))
    assert isinstance(count, CarbonCount)
    assert count.counted == pytest.approx(carbons, rel=0.05)


def test_excess_is_explainable_in_an_amine_but_not_in_a_hydrocarbon(build) -> None:
    for formula, expected in (("C10H15N", Verdict.INCONCLUSIVE), ("C11H14", Verdict.CONFLICTS)):
        mass = parse_formula(formula).nominal_mass
        query = build_query_facts(build.query({41: 100.0, mass: 40.0, mass + 1: 30.0}))
        assert check_carbon_count(query, formula_facts(formula)).verdict is expected, formula


def test_deficit_conflicts_whatever_the_formula(build) -> None:
    query = facts(build, {41: 100.0, 219: 60.0, 220: 1.0})
    assert check_carbon_count(query, formula_facts("C15H23O")).verdict is Verdict.CONFLICTS


def test_strong_ion_below_the_molecule_does_not_add_carbons(build) -> None:
    """methods.md 4 [C]: C10 with [M−1] twice as tall as M reads 9 carbons... its 13C falls on M, and is taken away first."""
    pattern = isotope_pattern(parse_formula("C10H14"))
    below = isotope_pattern(parse_formula("C10H13"))
    peaks = {41: 100.0, 133: 40.0, 134: 20.0 + 40.0 * below.at(1), 135: 20.0 * pattern.at(1) + 40.0 * below.at(2)}
    count = count_carbons(facts(build, peaks), formula_facts("C10H14"))
    assert isinstance(count, CarbonCount)
    assert count.counted == pytest.approx(10.0, abs=0.3)
    naive = (peaks[135] / peaks[134]) / 0.010816
    assert naive == pytest.approx(9.0, abs=0.3), "what the published table warns of"


@pytest.mark.parametrize(
    "peaks",
    [
        {41: 100.0, 120: 5.0, 121: 0.5},  # M below the floor
        {41: 100.0, 91: 100.0, 120: 100.0, 121: 9.0},  # M clipped
        {41: 100.0, 55: 90.0, 69: 60.0, 83: 50.0, 97: 40.0, 120: 50.0},  # no isotope peaks recorded
    ],
)
def test_count_is_not_assessed_where_it_cannot_be_trusted(build, peaks: dict[int, float]) -> None:
    finding = check_carbon_count(build_query_facts(build.query(peaks)), formula_facts("C8H8O"))
    assert finding.verdict is Verdict.NOT_ASSESSED
    assert finding.reason


HALOGENS = [
    ("C6H5Cl", {"Cl": 1}),
    ("C6H4Cl2", {"Cl": 2}),
    ("C6H3Cl3", {"Cl": 3}),
    ("C6Cl6", {"Cl": 6}),
    ("C6H5Br", {"Br": 1}),
    ("C6H4Br2", {"Br": 2}),
    ("C6H4BrCl", {"Br": 1, "Cl": 1}),
    ("C14H9Cl5", {"Cl": 5}),
    ("C12H6Br4O", {"Br": 4}),
]
"""Molecules of standards.md 3.4 (clusters [C*])."""


@pytest.mark.parametrize(("formula", "expected"), HALOGENS)
def test_halogens_are_counted_from_the_whole_cluster(build, formula: str, expected: dict[str, int]) -> None:
    fit = fit_cluster(facts(build, cluster(formula)), parse_formula(formula).nominal_mass)
    assert dict(fit.composition) == expected
    assert set(expected) <= set(fit.supported)


@pytest.mark.parametrize(("formula", "expected"), HALOGENS)
def test_halogens_survive_neighbouring_ions(build, formula: str, expected: dict[str, int]) -> None:
    """[M−1] at 20 % and [M+H]+ at 10 % of M shift the cluster; the fit takes them apart."""
    mass = parse_formula(formula).nominal_mass
    peaks = cluster(formula)
    mixed: dict[int, float] = {41: 100.0}
    for mz, value in peaks.items():
        if mz == 41:
            continue
        for shift, share in ((0, 1.0), (-1, 0.2), (1, 0.1)):
            mixed[mz + shift] = mixed.get(mz + shift, 0.0) + value * share
    fit = fit_cluster(facts(build, mixed), mass)
    assert dict(fit.composition) == expected
    assert fit.parts[1] == pytest.approx(0.2 / 1.3, abs=0.04)
    assert fit.parts[3] == pytest.approx(0.1 / 1.3, abs=0.04)


def test_plain_cluster_excludes_halogens_and_leaves_no_doubt(build) -> None:
    fit = fit_cluster(facts(build, cluster("C14H18O2")), 218)
    assert {"Cl", "Br", "Sn", "Se"} <= set(fit.excluded)
    assert fit.supported == ()
    assert set(fit.supported) | set(fit.excluded) | set(fit.open) == set(LOOKED_FOR)


def test_weak_cluster_and_nonsense_leave_everything_open(build) -> None:
    for peaks, mz in (
        ({41: 100.0, 120: 0.4}, 120),
        ({41: 100.0, 120: 60.0, 121: 90.0, 122: 3.0, 123: 80.0}, 120),
        ({41: 1.0}, 500),
    ):
        fit = fit_cluster(facts(build, peaks), mz)
        assert fit.open == LOOKED_FOR
        assert fit.reason


@pytest.mark.parametrize(
    ("measured", "candidate", "expected"),
    [
        ("C6H5Cl", "C6H5Cl", Verdict.AGREES),
        ("C6H4Br2", "C6H4Br2", Verdict.AGREES),
        ("C8H6S", "C8H6S", Verdict.AGREES),
        ("C6H5Cl", "C8H16", Verdict.CONFLICTS),
        ("C8H16", "C6H5Cl", Verdict.CONFLICTS),
        ("C8H6S", "C10H14", Verdict.CONFLICTS),
    ],
)
def test_pattern_of_the_formula_against_the_query(build, measured: str, candidate: str, expected: Verdict) -> None:
    finding = check_isotope_pattern(facts(build, cluster(measured)), formula_facts(candidate))
    assert finding.verdict is expected, finding
