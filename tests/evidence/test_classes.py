"""Class statements and analogues when nothing fits."""

from __future__ import annotations

import pytest

from identify.evidence.class_ions import RULES
from identify.evidence.class_model import RULE_LOG_RATIO
from identify.evidence.classes import (
    class_probability,
    describe_shift,
    find_analogues,
    find_classes,
    met_rules,
    vote_shares,
)
from identify.evidence.facts import build_query_facts
from identify.evidence.shifted import ShiftedMatch

METHYL_ESTER = {41: 30.0, 43: 40.0, 55: 30.0, 74: 100.0, 75: 18.0, 87: 62.0, 143: 14.0, 199: 10.0, 211: 6.0, 242: 8.0}


def test_methyl_ester_shows_its_rearrangement_ions(build) -> None:
    """McLafferty rearrangement 74 with 87: common practice, from memory."""
    names = {rule.compound_class for rule in met_rules(build_query_facts(build.query(METHYL_ESTER)))}
    assert "fatty acid methyl ester" in names
    assert "phthalate" not in names


def test_class_of_agreeing_neighbours_and_ions_is_probable(build) -> None:
    neighbours = [
        (build.entry(METHYL_ESTER, smiles="CCCCCCCCCCCC(=O)OC", name="methyl laurate", number=1), 0.93),
        (build.entry(METHYL_ESTER, smiles="CCCCCCCCCCCCCC(=O)OC", name="methyl myristate", number=2), 0.9),
        (build.entry({94: 100.0}, smiles="Oc1ccccc1", name="phenol", number=3), 0.2),
    ]
    found = {item.name: item for item in find_classes(build_query_facts(build.query(METHYL_ESTER)), neighbours)}
    ester = found["fatty acid methyl ester"]
    assert ester.probability > 0.9
    assert ester.neighbours[0] == "methyl laurate"
    assert "from memory" in ester.ions[0], "the source of the ions is named"
    assert "phenol" not in found


def test_votes_add_up_and_unreadable_structures_do_not_vote(build) -> None:
    shares, voters = vote_shares(
        [
            (build.entry({43: 1.0}, smiles="CCO", name="ethanol", number=1), 0.5),
            (build.entry({43: 1.0}, smiles="not a structure", number=2), 0.9),
            (build.entry({43: 1.0}, smiles="", number=3), 0.9),
        ]
    )
    assert shares["alcohol"] == pytest.approx(1.0)
    assert voters["alcohol"] == ["ethanol"]
    assert vote_shares([]) == ({}, {})


def test_probability_rises_with_votes_and_ions() -> None:
    assert class_probability(0.9, 0.8, 0.0) > class_probability(0.5, 0.8, 0.0) > class_probability(0.05, 0.8, 0.0)
    assert class_probability(0.3, 0.8, 3.0) > class_probability(0.3, 0.8, 0.0)


def test_every_rule_has_been_measured() -> None:
    assert set(RULE_LOG_RATIO) == {f"{rule.compound_class}: {rule.text}" for rule in RULES}
    assert all(rule.source for rule in RULES)


@pytest.mark.parametrize(
    ("shift", "text"),
    [
        (14, "plus CH2"),
        (-14, "minus CH2"),
        (84, "plus C6H12"),
        (0, "same mass"),
        (72, "plus trimethylsilyl (for hydrogen)"),
        (5, "+5 Da"),
    ],
)
def test_shift_in_words(shift: int, text: str) -> None:
    assert describe_shift(shift) == text


def test_analogues_are_ranked_by_their_score(build) -> None:
    one, other = build.entry({43: 1.0}, "C5H12", number=1), build.entry({57: 1.0}, "C6H14", number=2)
    odd = ShiftedMatch(one, 27, 0.9, 0.4)
    found = find_analogues([odd, ShiftedMatch(one, 28, 0.6, 0.4), ShiftedMatch(other, 14, 0.8, 0.5)])
    assert [(item.shift, item.text) for item in found] == [(14, "plus CH2"), (28, "plus C2H4 or CO")]
