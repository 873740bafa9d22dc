from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from identify.ranking.alternatives import Chances
from identify.ranking.claim import make_claim, percent
from identify.ranking.model import default_model
from identify.records import Candidate, Claim, ClaimLevel, Entry, EvidenceItem, Explanation, Part, Purity, Verdict
from identify.settings import Settings
from identify.spectra.align import align
from tests.ranking.builders import XYLENE, build_entry, build_groups, build_item, build_query

ORTHO, META = "Cc1ccccc1C", "Cc1cccc(C)c1"


def claim_of(
    listed: list[float],
    unlisted: float,
    elsewhere: float,
    *,
    entries: list[Entry] | None = None,
    evidence: tuple[EvidenceItem, ...] = (),
    limit: float = 0.95,
    purity: Purity | None = None,
) -> Claim:
    """Claim for given probabilities; the first group holds all unlisted isomers."""
    entries = entries or [build_entry(n, XYLENE, smiles=ORTHO if n == 0 else META) for n in range(len(listed))]
    query = build_query(XYLENE)
    groups = build_groups(entries, [math.log(chance + 1e-9) for chance in listed])
    rest = np.zeros(len(groups.keys))
    rest[0] = unlisted
    chances = Chances(np.array(listed), rest, elsewhere, groups)
    candidates = [
        Candidate(
            n + 1, entry, "", align(query.spectrum, entry.spectrum), 0.9, 0.9, evidence if n == 0 else (), listed[n],
            Explanation("log-odds", 0.0),
        )
        for n, entry in enumerate(entries)
    ]  # fmt: skip
    model = replace(default_model(), same_class=0.5)
    return make_claim(candidates, chances, model, Settings(claim_threshold=limit), purity)


def test_a_compound_with_independent_evidence_is_supported() -> None:
    claim = claim_of([0.97], 0.02, 0.01, evidence=(build_item("molecular ion", 0.5),))
    assert claim.level is ClaimLevel.SUPPORTED
    assert claim.probability == claim.compound_probability == 0.97
    assert "molecular ion" in claim.statement and "97 %" in claim.statement
    assert (claim.msi_2007, claim.schymanski_2014) == ("2", "3")


@pytest.mark.parametrize(
    ("smiles", "said"),
    [("C[C@@H](O)[C@H](C)O", True), ("CCC(C)O", False), (ORTHO, False), ("", False), ("no structure", False)],
)
def test_a_compound_claim_says_where_stereoisomers_are_not_told_apart(smiles: str, said: bool) -> None:
    claim = claim_of([0.97], 0.02, 0.01, entries=[build_entry(0, XYLENE, smiles=smiles)])
    assert claim.level is ClaimLevel.TENTATIVE
    assert ("or a stereoisomer of it:" in claim.statement) is said


def test_an_agreeing_retention_index_is_level_2a_of_the_second_scheme() -> None:
    claim = claim_of([0.97], 0.02, 0.01, evidence=(build_item("retention index", 2.0),))
    assert (claim.level, claim.schymanski_2014) == (ClaimLevel.SUPPORTED, "2a")


@pytest.mark.parametrize(
    "evidence",
    [
        (),
        (build_item("ions missing in the query", 0.5),),
        (EvidenceItem("molecular ion", Verdict.AGREES, "worth nothing", log_odds=0.0),),
        (build_item("molecular ion", 0.5), build_item("isotope pattern", -1.0)),
        (build_item("molecular ion", 0.5), build_item("ions above M", -1.0)),
    ],
)
def test_without_independent_evidence_or_with_a_conflict_a_compound_is_tentative(
    evidence: tuple[EvidenceItem, ...],
) -> None:
    assert claim_of([0.97], 0.02, 0.01, evidence=evidence).level is ClaimLevel.TENTATIVE


def test_isomers_that_share_the_probability_are_claimed_as_a_group_with_the_unlisted_ones_counted() -> None:
    claim = claim_of([0.5, 0.4], 0.08, 0.02)
    assert claim.level is ClaimLevel.ISOMER_GROUP
    assert claim.probability == claim.group_probability == pytest.approx(0.98)
    assert claim.members == ("compound 0", "compound 1")
    # o-, m-, p-xylene and ethylbenzene: four alkylbenzenes C8H10, two of them listed here.
    assert claim.unlisted_isomers == 2
    assert "2 without an entry" in claim.statement


def test_an_unlikely_member_of_the_group_is_not_named() -> None:
    assert claim_of([0.9, 0.001], 0.09, 0.009).members == ("compound 0",)


def test_isomers_are_not_counted_where_no_structure_is_known() -> None:
    entries = [build_entry(0, XYLENE), build_entry(1, XYLENE)]
    claim = claim_of([0.5, 0.4], 0.08, 0.02, entries=entries)
    assert claim.unlisted_isomers is None and "without an entry" not in claim.statement


def test_a_structure_that_cannot_be_read_is_not_assessed_and_raises_nothing() -> None:
    entries = [build_entry(0, XYLENE, smiles="C1CC"), build_entry(1, XYLENE)]
    assert claim_of([0.5, 0.4], 0.08, 0.02, entries=entries).unlisted_isomers is None


def test_compounds_of_one_class_but_several_formulas_are_claimed_as_the_class() -> None:
    entries = [
        build_entry(0, XYLENE, smiles=ORTHO),
        build_entry(1, XYLENE, smiles="CCCc1ccccc1", formula="C9H12"),
        build_entry(2, XYLENE, smiles="Cc1ccccc1", formula="C7H8"),
    ]
    claim = claim_of([0.5, 0.3, 0.15], 0.04, 0.01, entries=entries)
    assert claim.level is ClaimLevel.CLASS
    assert claim.members == ("alkylbenzene",)
    assert claim.class_probability == pytest.approx(0.995)


def test_a_low_threshold_claims_more_and_a_high_one_less() -> None:
    assert claim_of([0.7], 0.2, 0.1, limit=0.6).level is ClaimLevel.TENTATIVE
    assert claim_of([0.7], 0.2, 0.1, limit=0.85).level is ClaimLevel.ISOMER_GROUP
    assert claim_of([0.7], 0.2, 0.1, limit=0.99).level is ClaimLevel.NO_CLAIM


def test_probably_not_in_the_library_is_an_answer() -> None:
    claim = claim_of([0.1], 0.1, 0.8)
    assert claim.level is ClaimLevel.NO_CLAIM
    assert claim.statement.startswith("Probably not in the library (90 %)")


@pytest.mark.parametrize(
    ("listed", "unlisted", "elsewhere"),
    [([1.0], 0.0, 0.0), ([0.5, 0.5], 0.0, 0.0), ([0.0], 0.0, 1.0), ([0.3, 0.3], 0.3, 0.1), ([0.96, 0.01], 0.02, 0.01)],
)
def test_no_statement_says_certain_or_impossible_or_confirmed(
    listed: list[float], unlisted: float, elsewhere: float
) -> None:
    claim = claim_of(listed, unlisted, elsewhere)
    assert claim.level is not ClaimLevel.CONFIRMED
    assert "100 %" not in claim.statement and "(0 %" not in claim.statement
    assert "confirm" not in claim.statement and claim.statement.endswith(".")


def test_percent_never_rounds_to_certainty() -> None:
    assert [percent(p) for p in (0.0, 0.0099, 0.5, 0.99, 0.9901, 1.0)] == [
        "< 1 %",
        "< 1 %",
        "50 %",
        "99 %",
        "> 99 %",
        "> 99 %",
    ]


def test_of_a_mixture_no_compound_group_or_class_is_claimed() -> None:
    parts = (Part("naphthalene", "A1", 0.7), Part("dodecane", "A2", 0.3))
    mixed = Purity(Verdict.CONFLICTS, "Two entries together explain it.", parts, explained_share=0.92)
    claim = claim_of([0.99], 0.005, 0.005, evidence=(build_item("molecular ion", 0.5),), purity=mixed)
    assert claim.level is ClaimLevel.NO_CLAIM
    assert "two entries together explain 92 % of this spectrum" in claim.statement
    assert "naphthalene (70 % of the signal) and dodecane (30 % of the signal)" in claim.statement
    assert "take a cleaner spectrum" in claim.statement
    assert claim.members == ("naphthalene", "dodecane")
    assert claim.compound_probability == 0.99, "what one compound would be given is still said"


@pytest.mark.parametrize("verdict", [Verdict.AGREES, Verdict.INCONCLUSIVE, Verdict.NOT_ASSESSED])
def test_only_a_mixture_holds_a_claim_back(verdict: Verdict) -> None:
    with_purity = claim_of([0.97], 0.02, 0.01, purity=Purity(verdict, "said"))
    assert with_purity == claim_of([0.97], 0.02, 0.01)
