"""Class claims within a run: from candidates that agree, and from what the rest of the run shows."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from identify.pipeline.run_classes import estimate_share, name_class, name_classes
from identify.records import Claim, ClaimLevel, Identification, MassEstimate, MolecularIonEstimate, Peaks
from identify.retention import Ladder
from identify.runs.findings import Finding, RetentionScale
from identify.runs.model import Component
from identify.settings import Settings
from tests.builders import build_candidate, build_mass_estimate, build_query

PEAKS = {43.0: 100.0, 58.0: 60.0, 86.0: 12.0}
KETONE, ALKANE, XYLENE, OTHER = "CCCC(C)=O", "CCCCCC", "Cc1ccccc1C", "Cc1cccc(C)c1"


def component() -> Component:
    peaks = Peaks(np.array(sorted(PEAKS)), np.array([PEAKS[mz] for mz in sorted(PEAKS)]))
    return Component(1, 300.0, 298.0, 302.0, 100.0, 100.0, 0.1, 100.0, peaks, np.ones(3), 1.0, 0.9, False)


def finding(*candidates: tuple[str, float, float], level: ClaimLevel = ClaimLevel.NO_CLAIM) -> Finding:
    """A finding with candidates (SMILES, probability, cosine), best first."""
    made = tuple(
        build_candidate(rank, f"compound {rank}", probability=p, cosine=cosine, smiles=smiles)
        for rank, (smiles, p, cosine) in enumerate(candidates, start=1)
    )
    claim = Claim(level, "as the ranking said.", candidates[0][1], (), candidates[0][1])
    return Finding(component(), Identification(build_query(PEAKS), build_mass_estimate(), 0.9, claim, made))


def statement(found: Finding) -> str:
    claim = name_class(found.identification, component(), Settings()).claim
    return claim.statement if claim.level is ClaimLevel.CLASS else "no class"


def test_candidates_that_agree_on_a_class_make_a_claim_for_the_most_telling_one() -> None:
    found = finding((XYLENE, 0.5, 0.98), (OTHER, 0.46, 0.97), (KETONE, 0.01, 0.7))
    # 0.96 within the library, and 0.95 of the vote for the 0.03 outside it, by hand: 0.989.
    assert statement(found) == "Alkylbenzene, no single compound (99 %)."


def test_candidates_of_different_classes_make_no_claim() -> None:
    assert statement(finding((ALKANE, 0.5, 0.95), (KETONE, 0.45, 0.95))) == "no class"


def test_a_claim_that_stands_is_not_touched() -> None:
    found = finding((XYLENE, 0.99, 0.98), level=ClaimLevel.TENTATIVE)
    assert name_class(found.identification, component(), Settings()) is found.identification


ALKANE_IONS = {41: 35, 42: 25, 43: 100, 55: 14, 56: 20, 57: 14, 70: 20, 71: 30, 84: 20, 85: 70, 86: 5, 100: 6}
ETHER_IONS = {41: 15, 43: 14, 45: 12, 55: 6, 57: 30, 59: 40, 73: 100, 74: 5, 87: 8, 88: 1}


def with_ions(made: Finding, ions: dict[int, float], minutes: float = 5.0) -> Finding:
    peaks = Peaks(np.array(list(ions), float), np.array(list(ions.values()), float))
    return replace(
        made, component=replace(made.component, peaks=peaks, uncertainty=np.ones(len(ions)), time_s=60 * minutes)
    )


UNKNOWN = ((KETONE, 0.1, 0.9), ("CCOC(C)=O", 0.08, 0.9), (ALKANE, 0.02, 0.85))


def test_among_hydrocarbons_a_spectrum_like_an_alkane_is_claimed_as_hydrocarbon_and_an_ether_is_not() -> None:
    run = [with_ions(finding(*UNKNOWN), ALKANE_IONS) for _ in range(30)] + [with_ions(finding(*UNKNOWN), ETHER_IONS)]
    *alkanes, ether = name_classes(run, Settings())
    claim = alkanes[0].identification.claim
    assert claim.level is ClaimLevel.CLASS
    assert claim.statement.startswith("Hydrocarbon, no single compound")
    assert "The class rests on the run as well" in " ".join(alkanes[0].identification.notes)
    assert ether.identification.claim.level is ClaimLevel.NO_CLAIM


def test_the_same_spectrum_among_ethers_is_no_hydrocarbon() -> None:
    run = [with_ions(finding(*UNKNOWN), ETHER_IONS) for _ in range(30)] + [with_ions(finding(*UNKNOWN), ALKANE_IONS)]
    assert {f.identification.claim.level for f in name_classes(run, Settings())} == {ClaimLevel.NO_CLAIM}


def test_few_components_say_nothing_about_the_rest_of_the_run() -> None:
    run = [with_ions(finding(*UNKNOWN), ALKANE_IONS) for _ in range(5)]
    assert {f.identification.claim.level for f in name_classes(run, Settings())} == {ClaimLevel.NO_CLAIM}


def test_probable_candidates_of_another_class_stand_against_the_run() -> None:
    likely = finding(("CCOC(C)=O", 0.6, 0.95), (ALKANE, 0.02, 0.8))
    run = [with_ions(finding(*UNKNOWN), ALKANE_IONS) for _ in range(30)] + [with_ions(likely, ALKANE_IONS)]
    assert name_classes(run, Settings())[-1].identification.claim.level is ClaimLevel.NO_CLAIM


@pytest.mark.parametrize(
    ("minutes", "expected"),
    [(5.0, "Alkane with 7 carbons by ion series and molecular ion"), (2.0, "Hydrocarbon"), (9.0, "Hydrocarbon")],
)
def test_a_clear_molecular_ion_gives_the_carbon_number_where_the_order_of_elution_allows(minutes, expected) -> None:
    scale = RetentionScale(Ladder((5, 7, 9), (3.0, 5.0, 7.0)), "by hand", 5.0)
    run = [with_ions(finding(*UNKNOWN), ALKANE_IONS, minutes) for _ in range(30)]
    sure = MolecularIonEstimate((MassEstimate(100, 0.99, ()),), 0.01)
    run = [replace(f, identification=replace(f.identification, molecular_ion=sure)) for f in run]
    claim = name_classes(run, Settings(), scale)[0].identification.claim
    assert claim.statement.startswith(f"{expected}, no single compound")


BRANCHED = {41: 22, 42: 8, 43: 100, 55: 18, 56: 6, 57: 20, 58: 30, 70: 60, 71: 95, 85: 8, 114: 1}
"""A branched octane, invented, with 8 % of its signal at an ion that no alkane has."""


@pytest.mark.parametrize(("minutes", "is_named"), [(5.6, True), (3.4, False), (6.5, False)])
def test_an_alkane_with_a_strange_ion_is_named_only_where_the_order_of_elution_fits(minutes, is_named) -> None:
    made = with_ions(finding(*UNKNOWN), BRANCHED, minutes)
    scale = RetentionScale(Ladder((5, 7, 9), (3.0, 5.0, 7.0)), "by hand", 5.0)
    claim = name_class(made.identification, made.component, Settings(), scale).claim
    assert claim.statement.startswith("Alkane with 8 carbons") is is_named
    assert name_class(made.identification, made.component, Settings()).claim.level is ClaimLevel.NO_CLAIM


def test_an_alkane_of_known_carbon_number_is_not_called_a_mere_hydrocarbon() -> None:
    made = with_ions(finding((ALKANE, 0.5, 0.9), ("CC1=CCCC1", 0.48, 0.9)), BRANCHED | {58: 2}, 5.6)
    scale = RetentionScale(Ladder((5, 7, 9), (3.0, 5.0, 7.0)), "by hand", 5.0)
    for rungs, start in (
        (scale, "Alkane with 8 carbons"),
        (replace(scale, ladder=Ladder((9, 11), (3.0, 5.0))), "Hydro"),
    ):
        claim = name_class(made.identification, made.component, Settings(), rungs).claim
        assert claim.statement.startswith(start)


def test_the_share_of_a_class_is_estimated_cautiously() -> None:
    # 40 certain members of 50: the Wilson limit of 0.8 with n = 50 and z = 1.645 is 0.692, by hand.
    assert abs(estimate_share([1.0] * 40 + [0.0] * 10, 0.04) - 0.692) < 0.002


def test_a_stricter_threshold_is_kept() -> None:
    found = finding((XYLENE, 0.5, 0.98), (OTHER, 0.46, 0.97), (KETONE, 0.03, 0.7))
    strict = replace(Settings(), claim_threshold=0.99)
    assert name_class(found.identification, component(), strict).claim.level is ClaimLevel.NO_CLAIM
