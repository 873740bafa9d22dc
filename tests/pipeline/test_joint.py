"""Identifications of one run seen together: claims that contradict each other are lowered."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from identify.pipeline.joint import settle_jointly
from identify.records import Candidate, Claim, ClaimLevel, EvidenceItem, Identification, Peaks, Purity, Verdict
from identify.runs.findings import Finding
from identify.runs.model import Component
from identify.settings import Settings
from tests.builders import build_candidate, build_mass_estimate, build_query

PEAKS = {43.0: 100.0, 57.0: 60.0, 86.0: 12.0}
AGREES = EvidenceItem("retention index", Verdict.AGREES, "within the window", log_odds=1.0)


def component(number: int, minutes: float, area: float = 100.0) -> Component:
    peaks = Peaks(np.array(sorted(PEAKS)), np.array([PEAKS[mz] for mz in sorted(PEAKS)]))
    time = 60.0 * minutes
    return Component(number, time, time - 2, time + 2, area, area, 0.1, 100.0, peaks, np.ones(3), 1.0, 0.9, False)


def candidate(
    name: str, probability: float = 0.97, evidence=(), index: float | None = None, smiles: str = "CCCCC", **more
) -> Candidate:
    key = f"{name.upper():A<14.14}-UHFFFAOYSA-N"
    made = build_candidate(
        name=name, probability=probability, inchikey=key, smiles=smiles, evidence=tuple(evidence), **more
    )
    retention = replace(made.entry.retention, index=index, index_kind="linear", phase="non-polar" if index else "")
    return replace(made, entry=replace(made.entry, retention=retention))


def finding(number: int, minutes: float, best: Candidate, level=ClaimLevel.TENTATIVE, area: float = 100.0) -> Finding:
    p = best.probability
    claim = Claim(level, f"{best.entry.identity.name}.", p, (best.entry.identity.name,), p, max(p, 0.97), max(p, 0.97))
    query = build_query(PEAKS, query_id=f"q{number}")
    return Finding(component(number, minutes, area), Identification(query, build_mass_estimate(), 0.99, claim, (best,)))


def levels(findings) -> list[ClaimLevel]:
    return [f.identification.claim.level for f in settle_jointly(findings, 2.0, Settings())]


def test_one_compound_claimed_for_two_peaks_is_an_isomer_group_at_both() -> None:
    pair = [finding(1, 5.0, candidate("hexane")), finding(2, 6.0, candidate("hexane"))]
    assert levels(pair) == [ClaimLevel.ISOMER_GROUP, ClaimLevel.ISOMER_GROUP]
    notes = settle_jointly(pair, 2.0, Settings())[0].identification.notes
    assert notes == ("The same compound is the best answer for the peak at 6.00 min; it can be one of them only.",)


def test_a_compound_that_is_best_without_a_claim_elsewhere_loses_its_claim_too() -> None:
    pair = [finding(1, 5.0, candidate("hexane")), finding(2, 6.0, candidate("hexane", 0.6), ClaimLevel.NO_CLAIM)]
    assert levels(pair) == [ClaimLevel.ISOMER_GROUP, ClaimLevel.NO_CLAIM]


def test_a_retention_index_that_agrees_for_one_peak_alone_keeps_its_claim() -> None:
    pair = [
        finding(1, 5.0, candidate("hexane", evidence=[AGREES]), ClaimLevel.SUPPORTED),
        finding(2, 6.0, candidate("hexane")),
    ]
    assert levels(pair) == [ClaimLevel.SUPPORTED, ClaimLevel.ISOMER_GROUP]


def test_a_remainder_beside_its_own_peak_and_a_trace_far_away_are_no_rivals() -> None:
    beside = [finding(1, 5.0, candidate("hexane")), finding(2, 5.04, candidate("hexane"), area=10.0)]
    assert levels(beside) == [ClaimLevel.TENTATIVE, ClaimLevel.ISOMER_GROUP]
    far = [finding(1, 5.0, candidate("hexane")), finding(2, 9.0, candidate("hexane"), area=0.5)]
    assert levels(far) == [ClaimLevel.TENTATIVE, ClaimLevel.ISOMER_GROUP]


def test_different_compounds_keep_their_claims() -> None:
    assert levels([finding(1, 5.0, candidate("aaa")), finding(2, 6.0, candidate("bbb"))]) == [ClaimLevel.TENTATIVE] * 2


def test_a_claim_out_of_the_order_of_indices_is_lowered() -> None:
    rows = [("aaa", 700.0), ("bbb", 800.0), ("ccc", 650.0), ("ddd", 900.0)]
    run = [
        finding(k, 5.0 + k, candidate(name, index=index, smiles=f"C1CC{'O' * k}C1"))
        for k, (name, index) in enumerate(rows, start=1)
    ]  # fmt: skip
    assert levels(run) == [ClaimLevel.TENTATIVE, ClaimLevel.TENTATIVE, ClaimLevel.ISOMER_GROUP, ClaimLevel.TENTATIVE]


def test_indices_that_differ_by_less_than_laboratories_do_are_in_order() -> None:
    run = [
        finding(1, 5.0, candidate("aaa", index=720.0)),
        finding(2, 6.0, candidate("bbb", index=700.0, smiles="c1ccccc1")),
    ]
    assert levels(run) == [ClaimLevel.TENTATIVE] * 2


def test_longer_chains_of_a_series_elute_later() -> None:
    names = [("five", "CCCCC"), ("seven", "CCCCCCC"), ("six", "CCCCCC"), ("eight", "CCCCCCCC")]
    run = [
        finding(k, 5.0 + k, candidate(name, 0.99 if name == "seven" else 0.96, smiles=s))
        for k, (name, s) in enumerate(names, 1)
    ]
    found = levels(run)
    assert found[0] is found[3] is ClaimLevel.TENTATIVE
    assert sorted(found[1:3]) == sorted([ClaimLevel.TENTATIVE, ClaimLevel.ISOMER_GROUP])


@pytest.mark.parametrize("group", [0.97, 0.4])
def test_a_lowered_claim_is_an_isomer_group_only_when_its_probability_allows(group: float) -> None:
    pair = [finding(1, 5.0, candidate("hexane")), finding(2, 6.0, candidate("hexane"))]
    pair = [
        replace(
            f, identification=replace(f.identification, claim=replace(f.identification.claim, group_probability=group))
        )
        for f in pair
    ]
    expected = ClaimLevel.ISOMER_GROUP if group > 0.9 else ClaimLevel.NO_CLAIM
    assert levels(pair) == [expected, expected]


@pytest.mark.parametrize(("is_saturated", "expected"), [(True, ClaimLevel.ISOMER_GROUP), (False, ClaimLevel.CLASS)])
def test_only_an_overloaded_peak_is_not_held_for_a_mixture(is_saturated: bool, expected: ClaimLevel) -> None:
    one = finding(1, 5.0, candidate("hexane", 0.6), ClaimLevel.CLASS)
    doubt = Purity(Verdict.CONFLICTS, "two entries explain it better")
    one = replace(
        one,
        component=replace(one.component, is_saturated=is_saturated),
        identification=replace(one.identification, purity=doubt),
    )
    assert levels([one]) == [expected]
