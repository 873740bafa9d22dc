from __future__ import annotations

import pytest

from identify.ranking.batch import estimate_batch_error, stands_alone
from identify.records import Candidate, Claim, ClaimLevel, Explanation, Identification
from identify.spectra.align import align
from tests.ranking.builders import NO_ION, XYLENE, build_entry, build_query


def found(
    first: float, p: float, second: float | None = None, *, formula: str = "C7H6O", group: float = 1.0
) -> Identification:
    query, candidates = build_query(XYLENE), []
    for n, (value, chance) in enumerate([(first, p)] + ([(second, 1 - p)] if second is not None else [])):
        entry = build_entry(n, XYLENE, formula="C8H10" if n == 0 else formula)
        explained = Explanation("", 0.0, parts=(Explanation("alone", value), Explanation("against", -value)))
        candidates.append(
            Candidate(n + 1, entry, "", align(query.spectrum, entry.spectrum), 0.9, 0.9, (), chance, explained)
        )
    claim = Claim(ClaimLevel.TENTATIVE, "x.", p, compound_probability=p, group_probability=group)
    return Identification(query, NO_ION, p, claim, tuple(candidates))


def test_the_expected_wrong_share_is_the_mean_doubt_of_the_accepted() -> None:
    rows = estimate_batch_error([found(5, 0.98), found(4, 0.92), found(1, 0.4)], thresholds=(0.9, 0.95))
    assert [(row.n_accepted, row.wrong_share) for row in rows] == [(2, pytest.approx(0.05)), (1, pytest.approx(0.02))]


def test_second_hits_that_stand_as_well_as_the_weakest_accepted_answer_count_as_wrong() -> None:
    batch = [found(5, 0.98, 3.5), found(3, 0.92, 1.0), found(1, 0.4, 0.9)]
    (row,) = estimate_batch_error(batch, thresholds=(0.9,))
    assert row.second_hit_share == pytest.approx(1 / 2)


def test_at_group_level_a_second_isomer_is_no_decoy() -> None:
    batch = [found(5, 0.5, 5.0, formula="C8H10", group=0.99)]
    (row,) = estimate_batch_error(batch, groups=True, thresholds=(0.95,))
    assert (row.n_accepted, row.second_hit_share) == (1, 0.0)
    assert row.wrong_share == pytest.approx(0.01)


def test_nothing_accepted_has_no_second_hit_estimate() -> None:
    (row,) = estimate_batch_error([found(1, 0.4)], thresholds=(0.9,))
    assert (row.n_accepted, row.wrong_share, row.second_hit_share) == (0, 0.0, None)
    assert estimate_batch_error([], thresholds=(0.9,))[0].n_accepted == 0


def test_stands_alone_is_the_first_part_of_the_explanation() -> None:
    assert stands_alone(found(2.5, 0.9), 0) == 2.5
