from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from identify.ranking.alternatives import ELSEWHERE_NAMES, MOST_LEAD, UNLISTED_NAMES
from identify.ranking.grouping import Match
from identify.ranking.model import default_model
from identify.ranking.rank import list_answers, rank, weigh_answers
from identify.ranking.shortlist import N_DRAFTS, shortlist
from identify.records import ClaimLevel, Explanation, Hit, Purity, Verdict
from identify.settings import Settings
from tests.ranking.builders import (
    ALCOHOL,
    NO_ION,
    XYLENE,
    build_entry,
    build_groups,
    build_item,
    build_query,
    build_ranking,
)

LIKE = {**XYLENE, 105: 35.0, 77: 20.0}
UNLIKE = {**XYLENE, 105: 5.0, 106: 20.0, 92: 60.0, 120: 20.0}


def walk(explained: Explanation) -> list[Explanation]:
    return [explained, *(found for part in explained.parts for found in walk(part))]


def test_the_entry_with_the_same_spectrum_comes_first() -> None:
    entries = [build_entry(1, UNLIKE), build_entry(2, XYLENE), build_entry(3, ALCOHOL, formula="C5H12O")]
    ranking = build_ranking(build_query(XYLENE), entries)
    assert [candidate.entry.id for candidate in ranking.candidates] == [2, 1, 3]
    assert [candidate.rank for candidate in ranking.candidates] == [1, 2, 3]


def test_probabilities_of_all_answers_add_up_to_one() -> None:
    entries = [build_entry(1, LIKE), build_entry(2, XYLENE), build_entry(3, ALCOHOL, formula="C5H12O")]
    query, model = build_query(XYLENE), default_model()
    ranking = build_ranking(query, entries)
    assert sum(c.probability for c in ranking.candidates) == pytest.approx(ranking.in_library_probability)
    assert 0.0 < ranking.in_library_probability < 1.0
    drafts = shortlist(query.spectrum, [], Settings(), model)
    assert drafts == ()


def test_chances_are_coherent_a_group_is_at_least_as_probable_as_its_members() -> None:
    rng = np.random.default_rng(3)
    query, model = build_query(XYLENE), default_model()
    for _ in range(30):
        entries = [
            build_entry(n, {mz: v * float(np.exp(rng.normal(0, 0.4))) for mz, v in XYLENE.items()}, formula=formula)
            for n, formula in enumerate(rng.choice(["C8H10", "C7H6O", "C6H6N2"], 6).tolist())
        ]
        ranking = build_ranking(query, entries)
        claim = ranking.claim
        best = ranking.candidates[0]
        same = [c for c in ranking.candidates if c.entry.formula_as_measured == best.entry.formula_as_measured]
        assert claim.compound_probability == best.probability
        assert claim.group_probability >= sum(c.probability for c in same) - 1e-12
        assert claim.group_probability <= 1.0
    assert model.provenance


def test_explanations_add_up_to_the_log_odds_of_the_probability_at_every_node() -> None:
    entries = [build_entry(1, LIKE), build_entry(2, XYLENE), build_entry(3, ALCOHOL, formula="C5H12O")]
    evidence = [(build_item("molecular ion", 0.8),), (build_item("isotope pattern", -1.2),), ()]
    for candidate in build_ranking(build_query(XYLENE), entries, evidence).candidates:
        p = candidate.probability
        assert candidate.explanation.value == pytest.approx(math.log(p / (1 - p)), abs=1e-6)
        for node in walk(candidate.explanation):
            if node.parts:
                assert sum(part.value for part in node.parts) == pytest.approx(node.value, abs=1e-9)


def test_evidence_for_a_candidate_raises_its_probability_and_evidence_against_lowers_it() -> None:
    entries = [build_entry(1, LIKE), build_entry(2, LIKE, formula="C7H6O")]
    model = replace(default_model(), evidence_weights={"molecular ion": 1.0})

    def chance(log_odds: float) -> float:
        items = [(build_item("molecular ion", log_odds),), ()] if log_odds else [(), ()]
        ranking = build_ranking(build_query(XYLENE), entries, items, model=model)
        return next(c.probability for c in ranking.candidates if c.entry.id == 1)

    assert chance(-1.0) < chance(0.0) < chance(1.0)


def test_more_replicates_of_a_compound_change_no_probability() -> None:
    query, others = build_query(XYLENE), [build_entry(2, LIKE), build_entry(3, ALCOHOL, formula="C5H12O")]
    once = build_ranking(query, [build_entry(1, XYLENE), *others])
    key = once.candidates[0].entry.identity.inchikey[:14]
    copies = [build_entry(number, XYLENE, block=key) for number in (1, 30, 31, 32)]
    often = build_ranking(query, [*copies, *others])
    assert [c.probability for c in often.candidates] == pytest.approx([c.probability for c in once.candidates])
    assert often.candidates[0].n_entries == 4


def test_a_worse_match_is_less_likely_to_be_in_the_library() -> None:
    good = build_ranking(build_query(XYLENE), [build_entry(1, XYLENE)])
    bad = build_ranking(build_query(XYLENE), [build_entry(1, UNLIKE)])
    worst = build_ranking(build_query(XYLENE), [build_entry(1, ALCOHOL, formula="C5H12O")])
    assert good.in_library_probability > bad.in_library_probability > worst.in_library_probability


def test_without_any_hit_there_is_no_candidate_and_no_claim() -> None:
    ranking = rank(build_query(XYLENE), (), (), NO_ION, Settings())
    assert ranking.candidates == () and ranking.in_library_probability == 0.0
    assert ranking.claim.level is ClaimLevel.NO_CLAIM and ranking.claim.statement.startswith("No claim")


def test_the_shortlist_keeps_one_draft_per_compound_and_a_fixed_number() -> None:
    entries = [build_entry(n, LIKE, block=f"AAAAAAAAAAAA{chr(65 + n // 26)}{chr(65 + n % 26)}") for n in range(60)]
    ranking = build_ranking(build_query(XYLENE), [*entries, replace(entries[0], id=99)])
    assert len(ranking.candidates) == N_DRAFTS
    assert len(build_ranking(build_query(XYLENE), entries, settings=Settings(top=40)).candidates) == 40


def test_equal_compounds_keep_the_order_of_the_index() -> None:
    entries = [build_entry(n, XYLENE) for n in (5, 3, 4)]
    assert [c.entry.id for c in build_ranking(build_query(XYLENE), entries).candidates] == [5, 3, 4]


def test_groups_are_formed_by_formula_and_a_compound_without_formula_stands_alone() -> None:
    entries = [
        build_entry(1, XYLENE),
        build_entry(2, XYLENE, formula=""),
        build_entry(3, XYLENE),
        build_entry(4, XYLENE, formula=""),
    ]
    groups = build_groups(entries, [1.0, 0.5, 0.25, 0.0])
    assert groups.of_candidate.tolist() == [0, 1, 0, 2]
    assert groups.keys == ("C8H10", "", "")
    lead = UNLISTED_NAMES.index("lead over the next isomer")
    assert groups.unlisted[0, lead] == 0.75
    assert groups.unlisted[1, lead] == MOST_LEAD


def test_a_compound_without_formula_has_no_unlisted_isomers() -> None:
    query, model = build_query(XYLENE), default_model()
    ranking = build_ranking(query, [build_entry(1, XYLENE, formula="")])
    assert ranking.claim.group_probability == pytest.approx(ranking.candidates[0].probability)
    assert model.provenance


def test_all_answers_are_a_distribution_and_a_lead_counts_as_steeply_as_the_model_says() -> None:
    entries = [build_entry(1, LIKE), build_entry(2, XYLENE), build_entry(3, ALCOHOL, formula="C5H12O")]
    query = build_query(XYLENE)
    drafts = shortlist(query.spectrum, [Match(Hit(e.id, 0.9, 0.9), e) for e in entries], Settings())
    model = replace(default_model(), steepness={"any": 2.0, "derivative": 0.0, "unsaturated": -0.5})
    chances = weigh_answers(list_answers(query, drafts, [()] * 3, np.array([2.0, 1.0, -3.0]), model, None), model)
    assert chances.listed.sum() + chances.unlisted.sum() + chances.elsewhere == pytest.approx(1.0)
    assert chances.listed[0] / chances.listed[1] == pytest.approx(math.exp(1.5))  # C8H10: four rings and double bonds


def test_a_second_entry_needed_changes_the_probability_and_is_named_under_something_else() -> None:
    entries = [build_entry(1, XYLENE), build_entry(2, ALCOHOL, formula="C5H12O")]
    query, settings = build_query(XYLENE), Settings()
    drafts = shortlist(query.spectrum, [Match(Hit(e.id, 0.9, 0.9), e) for e in entries], settings)
    single = Purity(Verdict.AGREES, "one entry explains it", misfit=(0.1, 0.1))
    mixed = Purity(Verdict.CONFLICTS, "two entries are needed", misfit=(0.1, 0.02))
    of_one, of_two = (rank(query, drafts, [(), ()], NO_ION, settings, purity=purity) for purity in (single, mixed))
    assert of_two.candidates[0].probability != pytest.approx(of_one.candidates[0].probability)
    names = dict(zip(ELSEWHERE_NAMES, default_model().elsewhere.weights, strict=True))
    added = sum(
        names[name] * value for name, value in (("second entry needed", 1.0), ("gain by a second entry", math.log(5.0)))
    )
    added += sum(
        names[f"{name}; unsaturated"] * value
        for name, value in (("second entry needed", 1.0), ("gain by a second entry", math.log(5.0)))
    )  # C8H10: four rings and double bonds
    told = [found.candidates[0].explanation.parts[1].parts[2] for found in (of_one, of_two)]
    assert {part.label for part in told} == {"something else"}
    purity = [float(part.detail.partition("purity of the query ")[2].partition(",")[0]) for part in told]
    assert purity[1] - purity[0] == pytest.approx(added, abs=0.011)  # both are written with two decimals


def test_corrections_by_kind_count_only_for_that_kind() -> None:
    aromatic, saturated = build_entry(1, XYLENE), build_entry(2, ALCOHOL, formula="C5H12O")
    derivative = build_entry(3, XYLENE, measured_as="1 TMS")
    column = ELSEWHERE_NAMES.index("log-odds of the best candidate; unsaturated")
    seen = [build_groups([entry], [1.5]).elsewhere[column] for entry in (aromatic, saturated, derivative)]
    assert seen == [1.5, 0.0, 0.0]
    assert build_groups([derivative], [1.5]).kinds.tolist() == [1.0, 0.0]


def test_an_entry_of_one_peak_does_not_stand_before_one_that_shares_most_of_the_spectrum() -> None:
    """Alone it is contained in any query that has its peak, and its ratios cannot be wrong."""
    query = build_query({57: 100.0, 71: 70.0, 85: 50.0, 99: 20.0, 113: 15.0, 127: 12.0, 310: 4.0}, lowest_mz=50)
    homologue = build_entry(
        1, {57: 100.0, 71: 65.0, 85: 45.0, 99: 18.0, 113: 13.0, 127: 10.0, 282: 4.0}, formula="C20H42"
    )
    butane = build_entry(2, {27: 30.0, 29: 35.0, 41: 30.0, 43: 100.0, 57: 3.0, 58: 12.0}, formula="C4H10")
    ranking = build_ranking(query, [butane, homologue])
    assert [candidate.entry.id for candidate in ranking.candidates] == [1, 2]


def test_a_formula_with_one_constitution_leaves_no_unlisted_isomer() -> None:
    """CH2Cl2 can be bound in one way only (common practice): its group is the compound."""
    peaks = {47: 20.0, 49: 100.0, 51: 30.0, 84: 60.0, 86: 38.0, 88: 6.0}
    found = build_ranking(build_query(peaks), [build_entry(1, peaks, formula="CH2Cl2")])
    assert found.claim.group_probability == pytest.approx(found.candidates[0].probability)
    several = build_ranking(build_query(peaks), [build_entry(1, peaks, formula="C2H4Cl2")])
    assert several.claim.group_probability > several.candidates[0].probability
