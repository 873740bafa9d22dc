"""Results as JSON: valid against the shipped schema, deterministic, whole or not at all."""

from __future__ import annotations

import copy
import json
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from identify.errors import UsageError
from identify.records import EvidenceItem, Explanation, Identification, Terms, Verdict
from identify.writers.explanation_json import round_explanation
from identify.writers.results_json import (
    load_schema,
    report_to_dict,
    report_to_json,
    write_json,
)
from tests.builders import build_candidate, build_identification, build_large_report, build_report


@pytest.fixture(scope="module")
def validator() -> jsonschema.Draft202012Validator:
    schema = load_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    return jsonschema.Draft202012Validator(schema)


def test_result_is_valid_against_the_shipped_schema(validator: Any) -> None:
    validator.validate(report_to_dict(build_report()))
    validator.validate(json.loads(report_to_json(build_report())))


def test_result_without_queries_or_library_is_valid(validator: Any) -> None:
    empty = replace(build_report(), identifications=(), libraries=())
    found = report_to_dict(empty)
    validator.validate(found)
    assert found["library"] is None and len(found["rejected"]) == 2


def test_names_and_order_are_those_of_the_contract() -> None:
    """The names of design.md section 5, in its order; the result may say more between them."""
    found = report_to_dict(build_report())
    query, hit = found["queries"][0], found["queries"][0]["hits"][0]
    contract = {
        "top": (found, "schema program settings library queries rejected"),
        "library": (found["library"], "path fingerprint entries compounds"),
        "query": (query, "id source name retention_time_s retention_index cleaning molecular_ion in_library_probability "
                         "claim hits follow_up"),
        "cleaning": (query["cleaning"][0], "step reason peaks_before peaks_after removed"),
        "molecular ion": (query["molecular_ion"], "estimates not_observed_probability"),
        "estimate": (query["molecular_ion"]["estimates"][0], "nominal_mass probability basis"),
        "claim": (query["claim"], "level statement probability members levels"),
        "hit": (hit, "rank name formula measured_as inchikey smiles accession licence status cosine reverse matched_peaks "
                     "probability evidence"),
        "evidence": (hit["evidence"][0], "kind verdict reason observed expected log_odds"),
        "follow-up": (query["follow_up"][0], "action reason candidates"),
        "rejected": (found["rejected"][0], "source line found expected"),
    }  # fmt: skip
    for name, (part, words) in contract.items():
        assert [key for key in part if key in words.split()] == words.split(), name
    assert found["schema"] == "ionwitness.result/1" and "version" in found["program"]
    assert list(query["claim"]["levels"]) == ["compound", "isomer group", "class"]


def test_measured_as_is_the_derivative_or_null() -> None:
    hits = report_to_dict(build_report())["queries"][1]["hits"]
    assert hits[0]["measured_as"] is None
    assert hits[5]["measured_as"] == "1 MEOX 5 TMS"


def _mutations() -> Iterator[tuple[str, list[Any], Any]]:
    first = ["queries", 0, "hits", 0]
    yield "another schema version", ["schema"], "ionwitness.result/2"
    yield "a cosine above 1", [*first, "cosine"], 1.2
    yield "a cosine on another scale", [*first, "cosine"], 981
    yield "a negative probability", [*first, "probability"], -0.01
    yield "a probability in percent", ["queries", 0, "in_library_probability"], 98.8
    yield "a probability as text", [*first, "probability"], "96 %"
    yield "an unknown verdict", [*first, "evidence", 0, "verdict"], "maybe"
    yield "an evidence item without reason", [*first, "evidence", 0, "reason"], ""
    yield "log-odds of a check that was not assessed", [*first, "evidence", 5, "log_odds"], 0.4
    yield "unknown evidence as null", [*first, "evidence", 5, "observed"], None
    yield "an unknown claim level", ["queries", 0, "claim", "level"], "certain"
    yield "an empty derivative", [*first, "measured_as"], ""
    yield "an unknown status", [*first, "status"], "trusted"
    yield "rank 0", [*first, "rank"], 0
    yield "a half peak", ["queries", 0, "peaks", 0], [43.0]
    yield "a peak at m/z 0", ["queries", 0, "peaks", 0], [0.0, 5.0]
    yield "a fractional nominal mass", ["queries", 0, "molecular_ion", "estimates", 0, "nominal_mass"], 120.5
    yield "a field nobody described", [*first, "comment"], "x"
    yield "a negative line", ["rejected", 0, "line"], "77"


@pytest.mark.parametrize(("path", "value"), [pytest.param(p, v, id=name) for name, p, v in _mutations()])
def test_schema_rejects(validator: Any, path: list[Any], value: Any) -> None:
    found = copy.deepcopy(report_to_dict(build_report()))
    place: Any = found
    for step in path[:-1]:
        place = place[step]
    place[path[-1]] = value
    assert not validator.is_valid(found)


def _objects(node: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[tuple[Any, ...], dict[str, Any]]]:
    if isinstance(node, dict):
        yield path, node
        for key, value in node.items():
            yield from _objects(value, (*path, key))
    elif isinstance(node, list):
        for key, value in enumerate(node[:1]):
            yield from _objects(value, (*path, key))


ADDED_LATER = ("purity", "classes", "analogues")
"""Fields of a query that results of older versions lack; those stay valid."""


def test_result_of_an_older_version_stays_valid(validator: Any) -> None:
    found = report_to_dict(build_report())
    for query in found["queries"]:
        for name in ADDED_LATER:
            del query[name]
    validator.validate(found)


def test_mixture_classes_and_analogues_are_written_whole() -> None:
    query = report_to_dict(build_report())["queries"][2]
    assert [part["share"] for part in query["purity"]["parts"]] == [0.64, 0.36]
    assert query["purity"]["residual"] == [[94.0, 8.0], [105.0, 40.0], [120.0, 5.5]]
    assert query["classes"][0]["ions"] == ["rearrangement ion 88 with 101 (common practice)"]
    assert query["analogues"] == [
        {"name": "Ethyl hexanoate", "accession": "T002", "shift": 14, "text": "plus CH2", "score": 0.83}
    ]


def test_schema_rejects_a_result_with_any_field_missing(validator: Any) -> None:
    whole = report_to_dict(build_report())
    whole["queries"][0] |= {name: whole["queries"][2][name] for name in ADDED_LATER}
    objects = [(path, part) for path, part in _objects(whole) if path[:1] != ("settings",)]
    fields = [(path, key) for path, part in objects for key in part if key not in ADDED_LATER]
    assert len(fields) > 80
    for path, key in fields:
        found = copy.deepcopy(whole)
        place: Any = found
        for step in path:
            place = place[step]
        del place[key]
        assert not validator.is_valid(found), (path, key)


def test_schema_describes_every_field() -> None:
    def check(node: Any, path: str) -> None:
        if isinstance(node, dict):
            for name, child in node.get("properties", {}).items():
                target = child
                if "$ref" in child and "description" not in child:
                    target = load_schema()["$defs"][child["$ref"].rsplit("/", 1)[1]]
                assert len(target.get("description", "")) > 5, f"{path}/{name}"
            for name, child in node.items():
                if name not in ("if", "then"):
                    check(child, f"{path}/{name}")
        elif isinstance(node, list):
            for place, child in enumerate(node):
                check(child, f"{path}/{place}")

    check(load_schema(), "")


def _sum_of_parts_holds(node: dict[str, Any]) -> bool:
    parts = node["parts"]
    return not parts or (
        round(sum(part["value"] for part in parts), 6) == round(node["value"], 6)
        and all(map(_sum_of_parts_holds, parts))
    )


def test_parts_of_every_explanation_add_up_as_written() -> None:
    found = json.loads(report_to_json(build_large_report(4, 6)))
    hits = [hit for query in found["queries"] for hit in query["hits"]]
    assert len(hits) == 24 and all(_sum_of_parts_holds(hit["explanation"]) for hit in hits)


@pytest.mark.parametrize("decimals", [0, 1, 2, 6])
def test_rounded_parts_add_up_and_stay_within_one_unit(decimals: int) -> None:
    inner = tuple(Explanation(str(i), value) for i, value in enumerate((-0.335, 1.005, 0.0049, -2.5, 0.3333)))
    middle = Explanation("middle", sum(part.value for part in inner), parts=inner)
    tree = Explanation("root", middle.value + 1 / 7, parts=(middle, Explanation("rest", 1 / 7)))
    found = round_explanation(tree, decimals)
    units = 10**decimals
    assert found.value == round(tree.value * units) / units
    assert round(sum(part.value for part in found.parts) * units) == round(found.value * units)
    assert round(sum(part.value for part in found.parts[0].parts) * units) == round(found.parts[0].value * units)
    for before, after in zip(inner, found.parts[0].parts, strict=True):
        assert abs(before.value - after.value) <= 1 / units + 1e-12


def test_a_query_without_candidates_has_no_hits() -> None:
    found = report_to_dict(build_report(replace(build_identification(), candidates=())))
    assert found["queries"][0]["hits"] == []


def test_same_report_gives_the_same_text() -> None:
    assert report_to_json(build_report()) == report_to_json(build_report())


def test_numbers_are_rounded_and_intensities_keep_their_digits() -> None:
    candidate = build_candidate(cosine=0.98123456789, probability=1 / 3)
    found = report_to_dict(build_report(replace(build_identification(), candidates=(candidate,))))["queries"][0]
    assert found["hits"][0]["cosine"] == 0.981235 and found["hits"][0]["probability"] == 0.333333
    assert found["cleaning"][1]["removed"] == [[28.0, 4120.0], [32.0, 1015.0]]


NAN = float("nan")


@pytest.mark.parametrize(
    "broken",
    [
        replace(build_identification(), in_library_probability=NAN),
        replace(build_identification(), candidates=(build_candidate(cosine=NAN),)),
        replace(
            build_identification(),
            candidates=(replace(build_candidate(), evidence=(EvidenceItem("x", Verdict.AGREES, "y", log_odds=NAN),)),),
        ),
        replace(
            build_identification(),
            candidates=(
                replace(build_candidate(), explanation=Explanation("x", NAN, parts=Terms(("a",), (NAN,), ("",)))),
            ),
        ),
    ],
    ids=["query", "candidate", "evidence", "explanation"],
)
def test_a_number_that_is_not_finite_never_reaches_a_file(tmp_path: Path, broken: Identification) -> None:
    with pytest.raises(ValueError, match=r"JSON|NaN"):
        write_json(tmp_path / "out.json", build_report(broken))
    assert list(tmp_path.iterdir()) == []


def test_hostile_names_survive_as_valid_utf8_json(tmp_path: Path) -> None:
    name = 'a"\\\x00\x1b[31m</script>\u202e\udc80 δ-キシレン'
    path = tmp_path / "out ä.json"
    write_json(path, build_report(replace(build_identification(), candidates=(build_candidate(name=name),))))
    assert json.loads(path.read_bytes().decode("utf-8"))["queries"][0]["hits"][0]["name"] == name


def test_writing_replaces_the_old_file_and_leaves_nothing_else(tmp_path: Path) -> None:
    path = tmp_path / "result.json"
    path.write_text("old")
    path.chmod(0o640)
    write_json(path, build_report())
    assert json.loads(path.read_text("utf-8"))["schema"] == "ionwitness.result/1"
    assert path.stat().st_mode & 0o777 == 0o640
    assert [item.name for item in tmp_path.iterdir()] == ["result.json"]


def test_a_failed_write_keeps_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "result.json"
    path.write_text("old")

    def full(_: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full)
    with pytest.raises(UsageError, match=r"output file in .*: found No space left on device, expected a writable file"):
        write_json(path, build_report())
    assert path.read_text() == "old"
    assert [item.name for item in tmp_path.iterdir()] == ["result.json"]


@pytest.mark.parametrize("place", ["missing/out.json", "."])
def test_a_place_that_cannot_be_written_is_a_usage_error(tmp_path: Path, place: str) -> None:
    with pytest.raises(UsageError, match="output file in"):
        write_json(tmp_path / place, build_report())
