from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from identify.ranking.alternatives import Chances
from identify.ranking.follow_up import EFFORT, build_work_list, propose_follow_up
from identify.records import (
    Candidate,
    Claim,
    ClaimLevel,
    Entry,
    EntryStatus,
    EvidenceItem,
    Explanation,
    FollowUp,
    Identification,
    Retention,
)
from identify.spectra.align import align
from tests.ranking.builders import NO_ION, XYLENE, build_entry, build_groups, build_item, build_query


def plans_for(
    entries: list[Entry], listed: list[float], elsewhere: float = 0.0, *, index: float | None = None,
    evidence: tuple[EvidenceItem, ...] = (),
) -> tuple[FollowUp, ...]:  # fmt: skip
    query = build_query(XYLENE)
    if index is not None:
        query = replace(query, record=replace(query.record, retention=Retention(index=index, phase="non-polar")))
    groups = build_groups(entries, [math.log(chance + 1e-9) for chance in listed])
    chances = Chances(np.array(listed), np.zeros(len(groups.keys)), elsewhere, groups)
    candidates = [
        Candidate(
            n + 1, entry, "", align(query.spectrum, entry.spectrum), 0.9, 0.9, evidence if n == 0 else (), p,
            Explanation("", 0.0),
        )
        for n, (entry, p) in enumerate(zip(entries, listed, strict=True))
    ]  # fmt: skip
    return propose_follow_up(query, candidates, chances)


def plan_with(plans: tuple[FollowUp, ...], words: str) -> FollowUp | None:
    return next((plan for plan in plans if words in plan.action), None)


def test_a_standard_of_an_even_chance_is_worth_one_bit_for_its_effort() -> None:
    plans = plans_for([build_entry(1, XYLENE, name="one"), build_entry(2, XYLENE, name="two")], [0.5, 0.5])
    plan = plan_with(plans, "standard of one")
    assert plan is not None
    assert plan.priority == pytest.approx(math.log(2) / EFFORT["authentic standard"])


def test_the_laboratorys_own_standard_comes_before_one_to_buy() -> None:
    own = build_entry(1, XYLENE, name="one", status=EntryStatus.OWN_STANDARD)
    plans = plans_for([own, build_entry(2, XYLENE, name="two")], [0.5, 0.5])
    actions = [plan.action for plan in plans]
    assert actions.index("measure the laboratory's own standard of one again") < actions.index(
        "buy and measure a standard of two"
    )


def test_a_certain_answer_needs_nothing() -> None:
    assert plans_for([build_entry(1, XYLENE)], [1.0]) == ()


def test_retention_indices_are_proposed_where_known_ones_differ() -> None:
    far = [build_entry(1, XYLENE, index=866.0), build_entry(2, XYLENE, index=890.0)]
    plan = plan_with(plans_for(far, [0.5, 0.5]), "retention index")
    assert plan is not None and plan.priority == pytest.approx(math.log(2))
    near = [build_entry(1, XYLENE, index=866.0), build_entry(2, XYLENE, index=869.0)]
    assert plan_with(plans_for(near, [0.5, 0.5]), "retention index") is None


def test_a_retention_index_that_was_measured_is_not_asked_for_again() -> None:
    far = [build_entry(1, XYLENE, index=866.0), build_entry(2, XYLENE, index=890.0)]
    assert plan_with(plans_for(far, [0.5, 0.5], index=868.0), "retention index") is None


def test_accurate_mass_tells_formulas_apart_and_soft_ionization_only_masses() -> None:
    isobars = [build_entry(1, XYLENE, formula="C8H10"), build_entry(2, XYLENE, formula="C7H6O")]
    plans = plans_for(isobars, [0.5, 0.5])
    assert plan_with(plans, "accurate masses") is not None
    assert plan_with(plans, "soft ionization") is None
    masses = [build_entry(1, XYLENE, formula="C8H10"), build_entry(2, XYLENE, formula="C9H12")]
    assert plan_with(plans_for(masses, [0.5, 0.5]), "soft ionization") is not None


def test_isomers_are_told_apart_neither_by_accurate_mass_nor_by_soft_ionization() -> None:
    plans = plans_for([build_entry(1, XYLENE), build_entry(2, XYLENE)], [0.5, 0.5])
    assert plan_with(plans, "accurate") is None and plan_with(plans, "soft") is None


def test_derivatization_is_proposed_where_active_hydrogens_differ() -> None:
    entries = [
        build_entry(1, XYLENE, formula="C8H10O", smiles="COCc1ccccc1"),
        build_entry(2, XYLENE, formula="C8H10O", smiles="OCCc1ccccc1"),
    ]
    plan = plan_with(plans_for(entries, [0.5, 0.5]), "trimethylsilyl")
    assert plan is not None and "72" in plan.decides
    same = [replace(entries[1], id=3), entries[1]]
    assert plan_with(plans_for(same, [0.5, 0.5]), "trimethylsilyl") is None


def test_foreign_ions_ask_for_a_cleaner_spectrum() -> None:
    evidence = (build_item("ions only in the query", -1.0),)
    assert plan_with(plans_for([build_entry(1, XYLENE)], [0.6], 0.4, evidence=evidence), "cleaner") is not None
    assert plan_with(plans_for([build_entry(1, XYLENE)], [0.6], 0.4), "cleaner") is None


def test_the_plans_are_ordered_by_priority() -> None:
    entries = [build_entry(1, XYLENE, index=866.0), build_entry(2, XYLENE, index=890.0, formula="C7H6O")]
    priorities = [plan.priority for plan in plans_for(entries, [0.5, 0.4], 0.1)]
    assert priorities == sorted(priorities, reverse=True) and len(priorities) >= 3


def test_the_work_list_adds_up_what_helps_several_queries() -> None:
    def found(number: int, *plans: FollowUp) -> Identification:
        query = replace(build_query(XYLENE), id=f"q{number}")
        return Identification(query, NO_ION, 0.5, Claim(ClaimLevel.NO_CLAIM, "No claim.", 0.5), (), plans)

    shared = FollowUp("buy and measure a standard of one", "because", priority=0.2)
    single = FollowUp("measure accurate masses", "because", priority=0.3)
    items = build_work_list([found(1, shared), found(2, shared, single)])
    assert [(item.action, item.queries) for item in items] == [(shared.action, ("q1", "q2")), (single.action, ("q2",))]
    assert items[0].priority == pytest.approx(0.4)
