"""Class claims within a run: from candidates that agree, and from what the rest of the run shows."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from identify.pipeline.run_classes import name_class, name_classes
from identify.records import Claim, ClaimLevel, Identification, Peaks
from identify.runs.findings import Finding
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
    assert statement(found) == "Alkylbenzene, no single compound (99%)."


def test_candidates_of_different_classes_make_no_claim() -> None:
    assert statement(finding((ALKANE, 0.5, 0.95), (KETONE, 0.45, 0.95))) == "no class"


def test_a_claim_that_stands_is_not_touched() -> None:
    found = finding((XYLENE, 0.99, 0.98), level=ClaimLevel.TENTATIVE)
    assert name_class(found.identification, component(), Settings()) is found.identification


def test_among_hydrocarbons_a_likely_hydrocarbon_is_claimed_with_a_note_and_a_likely_ketone_is_not() -> None:
    run = [finding((XYLENE, 0.99, 0.98), level=ClaimLevel.TENTATIVE) for _ in range(12)]
    likely, unlikely = (
        finding((ALKANE, 0.7, 0.95), (KETONE, 0.3, 0.95)),
        finding((KETONE, 0.6, 0.95), ("CCO", 0.3, 0.95), (ALKANE, 0.02, 0.9)),
    )
    named = name_classes([*run, likely, unlikely], Settings())
    claims = [f.identification.claim for f in named[-2:]]
    assert [claim.level for claim in claims] == [ClaimLevel.CLASS, ClaimLevel.NO_CLAIM]
    # Odds 0.7/0.3 times (0.5/0.5)/(0.042/0.958) = 53, by hand: 0.9815.
    assert abs(claims[0].probability - 0.9815) < 0.001
    assert named[-2].identification.notes[-1].startswith("The class rests on the run as well: 12 of its 12 components")


def test_few_witnesses_change_nothing() -> None:
    run = [finding((XYLENE, 0.99, 0.98), level=ClaimLevel.TENTATIVE) for _ in range(5)]
    likely = finding((ALKANE, 0.7, 0.95), (KETONE, 0.3, 0.95))
    assert name_classes([*run, likely], Settings())[-1] is not None
    assert name_classes([*run, likely], Settings())[-1].identification.claim.level is ClaimLevel.NO_CLAIM


def test_a_stricter_threshold_is_kept() -> None:
    found = finding((XYLENE, 0.5, 0.98), (OTHER, 0.46, 0.97), (KETONE, 0.03, 0.7))
    strict = replace(Settings(), claim_threshold=0.99)
    assert name_class(found.identification, component(), strict).claim.level is ClaimLevel.NO_CLAIM
