"""Every file in `fixtures/broken` says exactly what its ``.expected.txt`` keeps.

A new case is two files there, no code: the broken (or odd) file, and what reading it must say: the number of records
read, each rejection, and the error that ends reading, with ``{file}`` for the path.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from identify.errors import IonwitnessError
from identify.readers import read_spectra
from identify.records import Rejection

FOLDER = Path(__file__).resolve().parents[2] / "fixtures" / "broken"
SUFFIX = ".expected.txt"
CASES = sorted(path for path in FOLDER.iterdir() if not path.name.endswith(SUFFIX) and path.name[0] != ".")


def describe_reading(path: Path) -> str:
    rejected: list[Rejection] = []
    n_read, raised = 0, ""
    try:
        for _ in read_spectra(path, rejected.append):
            n_read += 1
    except IonwitnessError as error:
        raised = f"raises {type(error).__name__}: {error}\n"
    lines = [f"rejects: {item.message}\n" for item in rejected]
    return f"reads: {n_read}\n{''.join(lines)}{raised}".replace(str(path), "{file}")


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.name)
def test_a_broken_file_says_what_is_expected(path: Path) -> None:
    expected = path.with_name(path.name + SUFFIX)
    assert expected.is_file(), f"missing {expected.name}; reading says:\n{describe_reading(path)}"
    assert describe_reading(path) == expected.read_text(encoding="utf-8")


def test_every_expectation_has_its_file() -> None:
    names = {path.name for path in FOLDER.iterdir()}
    orphans = {name for name in names if name.endswith(SUFFIX) and name.removesuffix(SUFFIX) not in names}
    assert not orphans


def test_the_faults_named_in_the_plan_are_all_there() -> None:
    wanted = {"empty.txt", "binary.msp", "zip-truncated.zip", "massbank-peak-count.txt", "massbank-not-a-number.txt"}
    wanted |= {"massbank-nan.txt", "unknown-text.txt", "windows-line-ends.txt", "utf-16-le.msp", "table-signs.csv"}
    assert wanted <= {path.name for path in CASES}
