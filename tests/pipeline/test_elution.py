"""Candidates too large for their retention time lose their probability to the others; nothing else is judged."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from identify.chem.formula import parse_formula
from identify.pipeline.elution import highest_index, least_index, weigh_by_elution
from identify.records import Claim, ClaimLevel, Identification, Part, Peaks, Purity, Verdict
from identify.retention import Ladder
from identify.runs.findings import Finding, RetentionScale
from identify.runs.model import Component
from identify.settings import Settings
from tests.builders import build_candidate, build_mass_estimate, build_query

IONS = {43.0: 60.0, 57.0: 30.0, 73.0: 100.0}
SCALE = RetentionScale(Ladder((7, 8, 9), (3.0, 5.0, 8.0)), "by hand", 30.0)


def finding(minutes: float, *candidates: tuple[str, float], level=ClaimLevel.NO_CLAIM) -> Finding:
    """A finding with candidates (formula, probability), best first."""
    peaks = Peaks(np.array(list(IONS)), np.array(list(IONS.values())))
    time = 60.0 * minutes
    component = Component(1, time, time - 2, time + 2, 9.0, 9.0, 0.1, 99.0, peaks, np.ones(3), 1.0, 0.9, False)
    made = []
    for rank, (formula, probability) in enumerate(candidates, start=1):
        one = build_candidate(rank, f"compound {rank}", probability=probability)
        identity = replace(one.entry.identity, formula=formula)
        made.append(replace(one, entry=replace(one.entry, identity=identity, formula_as_measured=formula)))
    claim = Claim(level, "as ranked.", candidates[0][1], (), candidates[0][1], candidates[0][1], candidates[0][1])
    return Finding(component, Identification(build_query(IONS), build_mass_estimate(), 0.9, claim, tuple(made)))


def judge(found: Finding, scale: RetentionScale | None = SCALE) -> Identification:
    return weigh_by_elution([found], scale, Settings())[0].identification


def test_a_candidate_of_twelve_heavy_atoms_before_heptane_falls_behind() -> None:
    found = judge(finding(2.0, ("C10H20O2", 0.5), ("C5H12O", 0.4)))
    assert [c.entry.formula_as_measured for c in found.candidates] == ["C5H12O", "C10H20O2"]
    # 0.4 / (0.5 / 50 + 0.4 + 0.1), by hand.
    assert found.candidates[0].probability == pytest.approx(0.7843, abs=1e-4)
    assert [c.rank for c in found.candidates] == [1, 2]
    assert found.candidates[1].evidence[-1].verdict is Verdict.CONFLICTS
    assert found.notes[-1].startswith("Too large to elute before index 710")


def test_what_is_left_nearly_certain_is_claimed_tentatively() -> None:
    found = judge(finding(2.0, ("C10H20O2", 0.6), ("C5H12O", 0.395)))
    assert found.claim.level is ClaimLevel.TENTATIVE
    assert found.claim.members == ("compound 2",)


def test_a_claim_for_a_compound_that_cannot_elute_there_is_lowered() -> None:
    found = judge(finding(2.0, ("C10H20O2", 0.97), ("C5H12O", 0.01), level=ClaimLevel.TENTATIVE))
    assert found.claim.level is ClaimLevel.NO_CLAIM


@pytest.mark.parametrize(("minutes", "formula"), [(7.9, "C10H20"), (2.0, "C8H18"), (2.0, "C4H12Si3"), (9.0, "C20H42")])
def test_possible_silicon_and_late_compounds_are_left_alone(minutes: float, formula: str) -> None:
    before = finding(minutes, (formula, 0.5), ("C5H12O", 0.4))
    assert judge(before) is before.identification


def test_without_a_scale_nothing_is_judged() -> None:
    before = finding(2.0, ("C20H42", 0.5))
    assert judge(before, None) is before.identification


@pytest.mark.parametrize(
    ("formula", "index"),
    [
        ("C5H12", 413),
        ("C4H10O", 494),
        ("C6H14", 537),
        ("C6H14O", 602),
        ("C8H18", 690),
        ("C9H20", 773),
        ("C16H34", 1320),
        ("C6H6", 654),
    ],
)
def test_the_bound_lies_below_known_indices(formula: str, index: int) -> None:
    # Indices on non-polar columns from memory, not verified: neopentane, diethyl ether, 2,2-dimethylbutane, diisopropyl ether,
    # 2,2,4-trimethylpentane, 2,2,4,4-tetramethylpentane, 2,2,4,4,6,8,8-heptamethylnonane, benzene.
    assert least_index(parse_formula(formula)) <= index


def test_before_an_early_first_rung_the_scale_goes_on_in_a_line_and_before_a_late_one_it_does_not() -> None:
    # 50 units a minute from C7 at 3 min, and 60 of slack, by hand.
    scale = RetentionScale(Ladder((7, 8), (3.0, 5.0)), "by hand", 5.0)
    assert highest_index(1.0, scale) == pytest.approx(700.0 - 100.0 + 60.0)
    assert highest_index(2.9, scale) == highest_index(3.0, scale) == 730.0
    assert highest_index(1.0, replace(scale, ladder=Ladder((20, 21), (3.0, 5.0)))) == 2030.0
    assert judge(finding(1.0, ("C9H20", 0.5), ("C4H8O", 0.4)), scale).candidates[0].entry.identity.name == "compound 2"


def mixture(found: Finding, *formulas: str) -> Finding:
    """The finding with the doubt that its spectrum is a mixture of compounds with these formulas."""
    parts = tuple(Part(f"part {n}", f"P{n}", 0.5, formula) for n, formula in enumerate(formulas, start=1))
    doubted = replace(found.identification, purity=Purity(Verdict.CONFLICTS, "two entries.", parts, 0.8))
    return replace(found, identification=doubted)


def test_a_mixture_with_a_part_too_large_for_its_time_is_no_mixture() -> None:
    before = finding(2.0, ("C5H12O", 0.96), ("C5H10O", 0.01))
    assert judge(mixture(before, "C4H8O", "C5H12O")).claim.level is ClaimLevel.NO_CLAIM
    found = judge(mixture(before, "C10H20O2", "C5H12O"))
    assert (found.claim.level, found.claim.members) == (ClaimLevel.TENTATIVE, ("compound 1",))
    assert found.purity.verdict is Verdict.INCONCLUSIVE
    assert found.notes == ("Not the mixture that its spectrum alone suggests: too large to elute so early are part 1.",)


def test_isomers_that_are_left_nearly_certain_together_are_claimed_as_a_group() -> None:
    before = finding(2.0, ("C5H12O", 0.5), ("C10H20O2", 0.3))
    claim = replace(before.identification.claim, group_probability=0.69)
    found = judge(replace(before, identification=replace(before.identification, claim=claim)))
    # 0.69 / (1 - 0.3 * 49 / 50), by hand.
    assert (found.claim.level, round(found.claim.probability, 3)) == (ClaimLevel.ISOMER_GROUP, 0.977)
    assert found.claim.members == ("compound 1",)
