"""``ionwitness compare``: what changed between two results is named with its cause, and nothing else."""

from __future__ import annotations

import copy
import csv
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from click.testing import Result

from identify.errors import FormatError, InputError, UsageError
from identify.library.store import open_library

Run = Callable[..., Result]


@pytest.fixture
def first(run: Run, lab: Path, unknown: Path, tmp_path: Path) -> Path:
    """The result for acetone."""
    path = tmp_path / "erstes.json"
    run("search", unknown, "--library", lab, "--json", path)
    return path


def edited(path: Path, change: Callable[[dict[str, Any]], None]) -> Path:
    value = json.loads(path.read_text(encoding="utf-8"))
    changed = copy.deepcopy(value)
    change(changed)
    out = path.with_name("edited.json")
    out.write_text(json.dumps(changed), encoding="utf-8")
    return out


def test_equal_results_have_no_change(run: Run, first: Path) -> None:
    lines = run("compare", first, first).output.splitlines()
    assert lines == ["same program, settings and library", "0 queries changed, 1 did not"]


def test_an_entry_withdrawn_between_the_two_is_the_cause(
    run: Run, first: Path, lab: Path, unknown: Path, tmp_path: Path
) -> None:
    with open_library(lab) as library:
        acetone = [e.accession for e in library.find_entries(name="acetone") if e.identity.name == "acetone"]
    run("library", "quarantine", lab, *acetone, "--why", "wrong lot", "--who", "anna")
    second, out = tmp_path / "zweites.json", tmp_path / "changes.csv"
    run("search", unknown, "--library", lab, "--json", second)
    lines = run("compare", first, second, "--library", lab, "--csv", out).output.splitlines()
    assert any(line.startswith(f"library: {lab}, 431 entries") and " → " in line for line in lines)
    assert any("quarantined by anna: wrong lot" in line for line in lines)
    place = lines.index("  candidate acetone: rank 1 → not among the candidates")
    assert lines[place + 1] == "    another state of the library"
    assert lines[-1] == "1 query changed, 0 did not"
    with out.open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert any(row["what"] == "candidate acetone" and row["after"] == "not among the candidates" for row in rows)


def test_a_changed_weighting_explains_changed_scores(
    run: Run, first: Path, lab: Path, unknown: Path, tmp_path: Path
) -> None:
    settings, second = tmp_path / "s.toml", tmp_path / "2.json"
    settings.write_text("[weighting]\nmz_power = 0.5\n", encoding="utf-8")
    run("search", unknown, "--library", lab, "--json", second, "--settings", settings)
    lines = run("compare", first, second).output.splitlines()
    assert lines[0] == "setting weighting.mz_power: 1.3 → 0.5"
    place = next(i for i, line in enumerate(lines) if line.startswith("  cosine of acetone: "))
    assert lines[place + 1] == "    setting weighting.mz_power"


def test_another_spectrum_is_said_to_be_another_one(
    run: Run, first: Path, lab: Path, unknown: Path, tmp_path: Path
) -> None:
    unknown.write_text(unknown.read_text(encoding="utf-8").replace("58,30", "58,90"), encoding="utf-8")
    second = tmp_path / "2.json"
    run("search", unknown, "--library", lab, "--json", second)
    lines = run("compare", first, second).output.splitlines()
    assert "  cleaned spectrum: 6 peaks → 6 peaks" in lines
    assert lines[lines.index("  cleaned spectrum: 6 peaks → 6 peaks") + 1] == "    another input file"
    assert "    the spectrum is another one" in lines


def test_a_change_nothing_explains_says_so(run: Run, first: Path) -> None:
    def change(value: dict[str, Any]) -> None:
        value["queries"][0]["hits"][0]["cosine"] = 0.5

    lines = run("compare", first, edited(first, change)).output.splitlines()
    assert "    not explained by program, settings, library or spectrum" in lines


def test_a_changed_verdict_and_a_moved_part_are_named(run: Run, first: Path) -> None:
    def change(value: dict[str, Any]) -> None:
        hit = value["queries"][0]["hits"][0]
        hit["probability"] = 0.1
        hit["explanation"]["parts"] = [{"label": "invented part", "value": 3.0, "detail": "", "parts": []}]
        hit["evidence"][0]["verdict"] = "conflicts" if hit["evidence"][0]["verdict"] != "conflicts" else "agrees"
        value["program"]["version"] = "99"

    output = run("compare", first, edited(first, change)).output
    assert " → 99" in output.splitlines()[0]
    assert "invented part +3.00" in output
    kind = json.loads(first.read_text(encoding="utf-8"))["queries"][0]["hits"][0]["evidence"][0]["kind"]
    assert f"  {kind} of acetone: " in output


def test_queries_of_one_result_only_are_listed(run: Run, first: Path) -> None:
    def change(value: dict[str, Any]) -> None:
        value["queries"][0]["name"] = "renamed"

    lines = run("compare", first, edited(first, change)).output.splitlines()
    assert lines[-3:] == ["only in the first: q1", "only in the second: renamed", "0 queries changed, 0 did not"]


def test_a_foreign_library_is_refused(run: Run, first: Path, tmp_path: Path) -> None:
    from datetime import UTC, datetime

    from identify.library.starter import build_starter

    other = tmp_path / "other.ionlib"
    build_starter(other, "someone", datetime(2020, 1, 1, tzinfo=UTC))
    with pytest.raises(UsageError) as error:
        run("compare", first, first, "--library", other)
    assert str(error.value) == (
        f"--library in {other}: found no event that the first result used, expected the library both results came from."
    )


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (None, "result in {path}: found no file, expected a readable JSON file."),
        ("", "result in {path}:1: found no JSON, expected a file of ionwitness.result/1. Give the file that --json wrote."),
        ("[" * 100_000, "result in {path}: found no JSON, expected a file of ionwitness.result/1. {hint}"),
        ("[]", "result in {path}: found 'list', expected ionwitness.result/1. Give the file that --json wrote."),
        ('{"schema": "x/2"}', "result in {path}: found 'x/2', expected ionwitness.result/1. {hint}"),
        (
            '{"schema": "ionwitness.result/1", "settings": 3}',
            "result in {path}, settings: found '3', expected an object.",
        ),
    ],
)  # fmt: skip
def test_what_is_no_result_is_refused_with_its_place(
    run: Run, first: Path, tmp_path: Path, text: str | None, message: str
) -> None:
    path = tmp_path / "kein Ergebnis ä.json"
    if text is not None:
        path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError) as error:
        run("compare", first, path)
    assert str(error.value) == message.format(path=path, hint="Give the file that --json wrote.")


def test_every_field_a_comparison_needs_is_checked(run: Run, first: Path) -> None:
    value = json.loads(first.read_text(encoding="utf-8"))

    def spoil(*place: str | int) -> None:
        changed = copy.deepcopy(value)
        part = changed
        for key in place[:-1]:
            part = part[key]
        part[place[-1]] = {"of": "the wrong kind"}
        path = first.with_name("spoilt.json")
        path.write_text(json.dumps(changed), encoding="utf-8")
        with pytest.raises(FormatError) as error:
            run("compare", first, path)
        assert str(error.value).startswith(f"result in {path}, ")
        assert str(place[-1]) in str(error.value)

    for name in ("libraries", "queries"):
        spoil(name)
    spoil("program", "version")
    for name in ("id", "source", "name", "peaks", "in_library_probability", "hits"):
        spoil("queries", 0, name)
    for name in ("level", "statement", "probability"):
        spoil("queries", 0, "claim", name)
    for name in ("rank", "name", "inchikey", "accession", "cosine", "reverse", "probability", "evidence"):
        spoil("queries", 0, "hits", 0, name)
    spoil("queries", 0, "hits", 0, "explanation", "parts")


def test_a_tree_too_deep_is_refused(run: Run, first: Path) -> None:
    def change(value: dict[str, Any]) -> None:
        tree: dict[str, Any] = {"label": "x", "value": 0.0, "detail": "", "parts": []}
        for _ in range(50):
            tree = {"label": "x", "value": 0.0, "detail": "", "parts": [tree]}
        value["queries"][0]["hits"][0]["explanation"] = tree

    with pytest.raises(FormatError, match="at most 20 levels"):
        run("compare", first, edited(first, change))
