"""Two explanations are compared part by part."""

from __future__ import annotations

import pytest

from identify.ranking.difference import compare_explanations
from identify.records import Explanation


def test_parts_of_the_difference_add_up_and_a_missing_part_counts_as_nothing() -> None:
    first = Explanation(
        "for", 3.0, parts=(Explanation("a", 2.0, parts=(Explanation("x", 2.0, "seen"),)), Explanation("b", 1.0))
    )
    other = Explanation(
        "for", -0.5, parts=(Explanation("a", 0.5, parts=(Explanation("x", 0.5),)), Explanation("c", -1.0))
    )
    told = compare_explanations(first, other)
    assert told.value == pytest.approx(-3.5)
    assert {part.label: part.value for part in told.parts} == {"a": -1.5, "b": -1.0, "c": -1.0}
    assert told.parts[0].parts[0].detail == "nothing instead of seen"


def test_a_candidate_compared_with_itself_differs_in_nothing() -> None:
    same = Explanation("for", 1.0, parts=(Explanation("a", 1.0),))
    assert compare_explanations(same, same).value == 0.0
