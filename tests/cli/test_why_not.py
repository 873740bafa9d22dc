"""``ionwitness search --why-not``: why a named compound is not the answer."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from click.testing import Result

Run = Callable[..., Result]


def test_a_candidate_is_told_where_it_falls_behind(run: Run, starter: Path, unknown: Path) -> None:
    first = run("search", unknown, "--library", starter, "--why-not", "acetone").output
    assert "It is the first candidate" in first
    other = run("search", unknown, "--library", starter, "--why-not", "2-butanone").output
    assert "Why not 2-butanone?" in other
    assert "fewer log-odds than the first candidate" in other


def test_key_and_structure_find_the_same_entry_as_the_name(run: Run, starter: Path, unknown: Path) -> None:
    for asked in ("CSCPPGACZSARQV-UHFFFAOYSA-N", "CC(C)=O", "acetone"):
        output = run("search", unknown, "--library", starter, "--why-not", asked).output.split("Why not", 1)[1]
        found = "starter: acetone" in output
        assert found == (asked != "CSCPPGACZSARQV-UHFFFAOYSA-N"), "that key is of no compound in the library"


def test_a_structure_without_an_entry_is_weighed_by_its_formula(run: Run, starter: Path, unknown: Path) -> None:
    output = run("search", unknown, "--library", starter, "--why-not", "CCCCCCCCCCCCCCCCCCCCCCCCCCCCCO").output
    assert "No entry of the libraries searched is this compound" in output
    assert "C29H60O, nominal mass 424" in output
    assert "no candidate has this formula" in output
