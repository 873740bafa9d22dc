"""Numbers and foreign text as a reader meets them."""

from __future__ import annotations

import pytest

from identify.records import Verdict
from identify.report.words import (
    NO_BREAK,
    PLAIN_MARKS,
    VERDICT_MARKS,
    compound_name,
    probability_text,
    score_text,
    sentence,
    signed_text,
    visible_text,
)


@pytest.mark.parametrize(
    ("probability", "text"),
    [
        (1.0, "> 99 %"),
        (0.9951, "> 99 %"),
        (0.99, "99 %"),
        (0.0, "< 1 %"),
        (0.0099, "< 1 %"),
        (0.01, "1 %"),
        (0.5, "50 %"),
    ],
)
def test_a_probability_is_never_shown_as_certain_or_impossible(probability: float, text: str) -> None:
    assert probability_text(probability).replace(NO_BREAK, " ") == text


def test_no_probability_reads_0_or_100() -> None:
    shown = {probability_text(step / 5000) for step in range(5001)}
    assert not shown & {f"0{NO_BREAK}%", f"100{NO_BREAK}%"} and len(shown) == 101


@pytest.mark.parametrize(
    ("score", "text"), [(0.9996, "0.999"), (0.99999, "0.999"), (1.0, "1.000"), (1.0 + 1e-12, "1.000"), (0.0, "0.000")]
)
def test_only_a_perfect_score_reads_one(score: float, text: str) -> None:
    assert score_text(score) == text


def test_signs_are_true_signs_and_zero_has_none() -> None:
    assert [signed_text(value) for value in (2.346, -2.346, -0.004, 0.0)] == ["+2.35", "−2.35", "0.00", "0.00"]


@pytest.mark.parametrize(
    ("hostile", "shown"),
    [
        ("a\x1b[2Jb", "a⟨1B⟩[2Jb"),
        ("a\x00b\x7f", "a⟨00⟩b⟨7F⟩"),
        ("abc\u202ecba", "abc⟨202E⟩cba"),
        ("zero\u200bwidth", "zero⟨200B⟩width"),
        ("lone\udc80surrogate", "lone⟨DC80⟩surrogate"),
        ("two\r\nlines\tand  blanks ", "two lines and blanks"),
        ("β-カロテン é", "β-カロテン é"),
    ],
)
def test_nothing_in_a_name_is_hidden(hostile: str, shown: str) -> None:
    assert visible_text(hostile) == shown


def test_long_text_is_cut_and_says_so() -> None:
    assert visible_text("x" * 10_000_000) == "x" * 299 + "…"
    assert len(visible_text("\x00" * 1000)) == 300


def test_a_nameless_entry_is_known_by_its_accession() -> None:
    assert compound_name(" ", "A-1") == "unnamed (A-1)" and compound_name("", "") == "unnamed (no accession)"


def test_sentences_end_once() -> None:
    assert [sentence(text) for text in ("a", "a.", "why?", "")] == ["a.", "a.", "why?", ""]


def test_each_verdict_has_its_own_mark() -> None:
    for marks in (VERDICT_MARKS, PLAIN_MARKS):
        assert set(marks) == set(Verdict) and len(set(marks.values())) == 4
