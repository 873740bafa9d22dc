"""``ionwitness run`` from file to report, on synthetic runs made of starter entries."""

from __future__ import annotations

import csv
import json
import re
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from click.testing import CliRunner
from referencing import Registry, Resource

from identify.cli.run import run
from identify.errors import IonwitnessError
from identify.library.reported import find_affected
from identify.library.store import open_library
from identify.writers.results_json import load_schema
from identify.writers.run_json import load_run_schema
from tests.readers.run_files import write_andi
from tests.runs.synthetic_runs import Eluting, make_run
from tests.runs.test_alkanes import alkane

NAMES = ("toluene", "naphthalene", "limonene")


@pytest.fixture(scope="session")
def spectra(built_starter: Path) -> dict[str, dict[int, float]]:
    """Spectra of three starter entries by name."""
    found = {}
    with open_library(built_starter) as library:
        for entry in library.iter_entries():
            peaks = entry.spectrum.nominal
            found[entry.identity.name.casefold()] = dict(
                zip(peaks.mz.astype(int).tolist(), peaks.intensity.tolist(), strict=True)
            )
    return {name: found[name] for name in NAMES}


def save(path: Path, compounds, n_scans: int = 400, seed: int = 1) -> Path:
    made = make_run(compounds, n_scans, seed=seed, mz_range=(35, 300))
    scans = [
        list(zip(made.mz[a:b].tolist(), made.intensity[a:b].tolist(), strict=True))
        for a, b in zip(made.first_point[:-1], made.first_point[1:], strict=True)
    ]
    return write_andi(path, scans, scan_acquisition_time=made.time_s)


@pytest.fixture
def sample(tmp_path: Path, spectra) -> Path:
    peaks = [Eluting(spectra[name], 100.0 + 80.0 * k, 40_000.0) for k, name in enumerate(NAMES)]
    return save(tmp_path / "sample <1>.cdf", peaks)


def call(*arguments: object):
    return CliRunner().invoke(run, [str(argument) for argument in arguments], standalone_mode=False)


def test_every_output_names_the_compounds_and_the_json_follows_its_schema(
    tmp_path: Path, starter: Path, sample: Path
) -> None:
    outputs = {name: tmp_path / f"out.{name}" for name in ("json", "csv", "html")}
    result = call(
        sample, "--library", starter, "--json", outputs["json"], "--csv", outputs["csv"], "--report", outputs["html"]
    )
    assert result.exception is None, result.exception
    assert result.return_value == 0
    document = json.loads(outputs["json"].read_text(encoding="utf-8"))
    registry = Registry().with_resource("urn:ionwitness:result:1", Resource.from_contents(load_schema()))
    jsonschema.Draft202012Validator(load_run_schema(), registry=registry).validate(document)
    found = {query["id"]: query["hits"][0]["name"].casefold() for query in document["result"]["queries"]}
    named = [
        found[c["query"]] for c in document["runs"][0]["components"] if c["kind"] == "compound" and c["area"] > 1e4
    ]
    assert named == list(NAMES)
    rows = list(csv.DictReader(outputs["csv"].read_text(encoding="utf-8").splitlines()))
    assert [
        row["best_name"].casefold() for row in rows if row["kind"] == "compound" and float(row["area"]) > 1e4
    ] == list(NAMES)
    page = outputs["html"].read_text(encoding="utf-8")
    assert "sample &lt;1&gt;.cdf" in page
    assert not re.search(r'(?:src|href)="(?!#|data:)', page), "the page loads nothing"
    assert "Explained" in page or "explained at class level or better" in page


def test_a_blank_marks_what_it_shows_too(tmp_path: Path, starter: Path, sample: Path, spectra) -> None:
    blank = save(tmp_path / "blank.cdf", [Eluting(spectra["naphthalene"], 180.0, 30_000.0)], seed=2)
    result = call(sample, "--library", starter, "--blank", blank, "--json", tmp_path / "o.json")
    assert result.exception is None, result.exception
    components = json.loads((tmp_path / "o.json").read_text())["runs"][0]["components"]
    assert [c["kind"] for c in components if c["area"] > 1e4] == ["compound", "also in the blank", "compound"]


@pytest.mark.parametrize("as_run", [True, False])
def test_a_ladder_as_table_or_as_alkane_run_gives_the_same_indices(
    tmp_path: Path, starter: Path, sample: Path, as_run: bool
) -> None:
    times = {8 + k: 60.0 + 0.5 * (60.0 + 60.0 * k) for k in range(5)}
    if as_run:
        ladder = save(
            tmp_path / "alkanes.cdf", [Eluting(alkane(8 + k), 60.0 + 60.0 * k, 40_000.0) for k in range(5)], seed=3
        )
    else:
        ladder = tmp_path / "ladder.txt"
        ladder.write_text("".join(f"C{n} {time / 60.0:.4f}\n" for n, time in times.items()))
    result = call(sample, "--library", starter, "--ladder", ladder, "--column", "DB-5", "--json", tmp_path / "o.json")
    assert result.exception is None, result.exception
    first = json.loads((tmp_path / "o.json").read_text())["runs"][0]
    assert first["retention_scale"]["phase"] == "non-polar"
    indices = [c["retention_index"] for c in first["components"] if c["area"] > 1e4]
    # Apexes at scans 100, 180, 260 between alkanes at 60, 120, 180, 240, 300.
    assert indices == pytest.approx([866.7, 1000.0, 1133.3], abs=1.0)


def test_the_same_compound_in_two_runs_is_one_unknown(tmp_path: Path, starter: Path, sample: Path, spectra) -> None:
    other = save(tmp_path / "other.cdf", [Eluting(spectra["naphthalene"], 180.6, 9_000.0)], seed=4)
    result = call(sample, other, "--library", starter, "--json", tmp_path / "o.json", "--report", tmp_path / "o.html")
    assert result.exception is None, result.exception
    document = json.loads((tmp_path / "o.json").read_text())
    assert len(document["unknowns"]) == 1
    members = document["unknowns"][0]["members"]
    assert [member["run"] for member in members] == [1, 2]
    assert "In several runs" in (tmp_path / "o.html").read_text(encoding="utf-8")


def test_a_run_that_cannot_be_read_among_several_is_listed_with_exit_code_1(
    tmp_path: Path, starter: Path, sample: Path
) -> None:
    (tmp_path / "broken.cdf").write_bytes(b"CDF\x01 nothing")
    result = call(sample, tmp_path / "broken.cdf", "--library", starter)
    assert result.exception is None, result.exception
    assert result.return_value == 1
    with pytest.raises(IonwitnessError):
        raise call(tmp_path / "broken.cdf", "--library", starter).exception


def test_a_spectrum_taken_by_hand_is_searched(tmp_path: Path, starter: Path, sample: Path) -> None:
    minutes = (60.0 + 0.5 * 180) / 60.0
    result = call(
        sample,
        "--library",
        starter,
        "--at",
        minutes,
        "--background",
        f"{minutes - 0.2},{minutes + 0.2}",
        "--json",
        tmp_path / "o.json",
    )
    assert result.exception is None, result.exception
    document = json.loads((tmp_path / "o.json").read_text())
    assert document["schema"] == "ionwitness.result/1"
    assert document["queries"][0]["hits"][0]["name"].casefold() == "naphthalene"


def test_an_alkane_run_among_the_runs_gives_the_scale(tmp_path: Path, starter: Path, sample: Path) -> None:
    alkanes = save(
        tmp_path / "alkanes.cdf", [Eluting(alkane(8 + k), 60.0 + 60.0 * k, 40_000.0) for k in range(5)], seed=3
    )
    result = call(sample, alkanes, "--library", starter, "--json", tmp_path / "o.json")
    assert result.exception is None, result.exception
    first = json.loads((tmp_path / "o.json").read_text())["runs"][0]
    assert "alkanes.cdf, found among the runs" in first["retention_scale"]["origin"]
    indices = [c["retention_index"] for c in first["components"] if c["area"] > 1e4]
    assert indices == pytest.approx([866.7, 1000.0, 1133.3], abs=1.0)


def test_a_result_file_is_remembered_in_the_library_and_no_record_leaves_it_alone(
    tmp_path: Path, starter: Path, sample: Path
) -> None:
    def remembered() -> set[str]:
        with open_library(starter) as library:
            (naphthalene,) = [e for e in library.iter_entries() if e.identity.name.casefold() == "naphthalene"]
            return {row.result for row in find_affected(library, naphthalene.accession)}

    call(sample, "--library", starter, "--json", tmp_path / "o.json", "--no-record")
    call(sample, "--library", starter)
    assert remembered() == set()
    result = call(sample, "--library", starter, "--json", tmp_path / "o.json", "--who", "anna")
    assert result.exception is None, result.exception
    assert remembered() == {str(tmp_path / "o.json")}
    assert "no result file" in str(call(sample, "--library", starter, "--record").exception)


def test_an_output_over_an_input_or_without_a_folder_is_refused_before_any_work(
    tmp_path: Path, starter: Path, sample: Path
) -> None:
    content = sample.read_bytes()
    assert "a file that this command reads" in str(call(sample, "--library", starter, "--json", sample).exception)
    assert sample.read_bytes() == content
    missing = tmp_path / "nowhere" / "o.json"
    assert "no such folder" in str(call(sample, "--library", starter, "--report", missing).exception)


def test_a_ladder_that_is_no_text_or_not_there_says_so(tmp_path: Path, starter: Path, sample: Path) -> None:
    (tmp_path / "ladder.bin").write_bytes(b"\xff\xfe\x00C8")
    assert "no UTF-8 text" in str(call(sample, "--library", starter, "--ladder", tmp_path / "ladder.bin").exception)
    assert "no file" in str(call(sample, "--library", starter, "--ladder", tmp_path / "none.txt").exception)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (["--background", "1.0"], "--background: found no --at"),
        (["--at", "1.0,x"], "minutes separated by commas"),
        (["--at", "nan"], "minutes separated by commas"),
        (["--at", "50"], "a time within the run"),
        (["--column", "a column"], "phase class is known. Such as DB-5"),
    ],
)
def test_options_that_make_no_sense_say_so(starter: Path, sample: Path, options: list[str], message: str) -> None:
    assert message in str(call(sample, "--library", starter, *options).exception)


def test_a_ladder_out_of_order_says_which_alkane(tmp_path: Path, starter: Path, sample: Path) -> None:
    (tmp_path / "ladder.txt").write_text("C8 1.0\nC9 3.0\nC10 2.0\n")
    error = call(sample, "--library", starter, "--ladder", tmp_path / "ladder.txt").exception
    assert "C10 at 2 after C9 at 3" in str(error)


def test_an_alkane_run_without_alkanes_asks_for_a_table(starter: Path, sample: Path) -> None:
    error = call(sample, "--library", starter, "--ladder", sample).exception
    assert "no series of n-alkanes" in str(error)


def test_the_table_on_the_terminal_fits_80_columns(starter: Path, sample: Path) -> None:
    result = call(sample, "--library", starter)
    assert result.exception is None, result.exception
    lines = [line for line in result.output.splitlines() if str(starter) not in line]  # paths stay whole
    assert max(len(line) for line in lines) <= 80
    for name in NAMES:
        assert name in result.output.casefold()
    assert np.char.count(result.output, "explained at class level or") == 1
