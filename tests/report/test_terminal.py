"""The report on a terminal: claim first, cautions last, plain when piped, safe with hostile names."""

from __future__ import annotations

import io
from dataclasses import replace

import pytest
from rich.cells import cell_len
from rich.console import Console

from identify.records import Report
from identify.report.terminal import render_terminal
from identify.report.words import CAUTIONS
from tests.builders import build_candidate, build_identification, build_open_identification, build_query, build_report


def _print(report: Report, width: int = 80, encoding: str = "utf-8", **options: bool) -> str:
    raw = io.BytesIO()
    stream = io.TextIOWrapper(raw, encoding=encoding, newline="\n")
    render_terminal(report, Console(file=stream, width=width, **options))  # type: ignore[arg-type]
    stream.flush()
    return raw.getvalue().decode(encoding)


def _hostile(name: str) -> Report:
    found = build_identification()
    query = build_query({77: 3.0, 105: 9.0}, name)
    candidate = build_candidate(name=name, formula=name, measured_as=name)
    claim = replace(found.claim, statement=name)
    return build_report(replace(found, query=query, candidates=(candidate,), claim=claim, notes=(name,)))


@pytest.mark.parametrize("width", [80, 100, 132, 200])
def test_no_line_is_wider_than_the_terminal(width: int) -> None:
    text = _print(build_report(), width)
    assert max(cell_len(line) for line in text.splitlines()) <= width
    assert "Acetophenone" in text and "> 99 %" in text


def test_piped_output_is_plain_text() -> None:
    text = _print(build_report())
    assert "\x1b" not in text and "\u00a0" not in text


def test_colours_appear_on_a_terminal_only() -> None:
    assert "\x1b[" in _print(build_report(), force_terminal=True)


def test_claim_stands_above_the_candidates_and_cautions_stand_last() -> None:
    lines = _print(build_report(), 200).splitlines()
    claim = next(place for place, line in enumerate(lines) if "supported by the library match" in line)
    table = next(place for place, line in enumerate(lines) if "cosine" in line)
    assert claim < table
    assert [line.removeprefix("Caution: ") for line in lines[-len(CAUTIONS) :]] == list(CAUTIONS)


def test_scores_and_probabilities_have_their_own_columns_and_a_legend() -> None:
    text = " ".join(_print(build_report()).split())
    assert "# name formula cosine reverse prob. evidence" in text
    assert "1 Acetophenone C8H8O 0.981 0.985 96 % 5✓ 0✗ 1≈ 1○" in text
    assert "✓ agrees ✗ conflicts ≈ inconclusive ○ not assessed" in text
    assert "scores of likeness from 0 to 1, not probabilities" in text


def test_derivative_is_shown_at_any_width() -> None:
    wide, narrow = _print(build_report(), 140), _print(build_report(), 80)
    assert "measured as" in wide and "n TMS" in wide and "n TMS" in narrow


def test_candidates_beyond_the_shown_are_counted() -> None:
    raw = io.StringIO()
    render_terminal(build_report(), Console(file=raw, width=80), candidates_shown=2)
    assert "and 2 more candidates in the full result" in raw.getvalue()
    assert "Phenylacetaldehyde" not in raw.getvalue()


def test_rejected_inputs_are_listed_with_found_and_expected() -> None:
    text = " ".join(_print(build_report()).split())
    assert "Not used: 2 inputs" in text
    assert (
        "unknowns.jdx:77: peak count does not match: found 43 peaks, expected 44 peaks (##NPOINTS). Mend the block."
        in text
    )


@pytest.mark.parametrize("hostile", ["\x1b[2J\x1b]0;x\x07", "\u202etxt.exe", "a\x00b", "\udc80", "\r\nfake line"])
def test_control_characters_of_names_never_reach_the_terminal(hostile: str) -> None:
    text = _print(_hostile(hostile))
    assert not [character for character in text if character != "\n" and not character.isprintable()]


def test_names_are_text_not_markup() -> None:
    text = _print(_hostile("[red]x[/red] [link=file:///etc/passwd]y[/]"), 300)
    assert "[red]x[/red] [link=file:///etc/passwd]y[/]" in text


@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "cp437"])
def test_a_terminal_without_the_marks_gets_letters(encoding: str) -> None:
    text = _print(build_report(), encoding=encoding)
    assert "5y 0x 1? 1o" in text and "y agrees" in text


def test_a_report_without_queries_says_what_was_rejected() -> None:
    text = _print(replace(build_report(), identifications=()))
    assert text.startswith("Not used: 2 inputs") and "Evidence:" not in text


def test_mixture_class_and_analogue_are_told_in_a_line_each() -> None:
    text = " ".join(_print(build_report(build_open_identification())).split())
    assert "Two entries together" not in text, "the claim has said it already"
    assert "Left over, to be searched as a query of its own: m/z 105 (40 %), 94 (8.0 %), 120 (5.5 %)." in text
    assert "Known background among what is left over: siloxane." in text
    assert "Class ester (71 %): neighbours Ethyl hexanoate" in text
    assert "Like Ethyl hexanoate, plus CH2 (+14 Da); similarity after shifting 0.830." in text
