"""The pages on method and on data say what the code does: files, levels, kinds of evidence, numbers and licences are compared."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from identify.library.licences import FREE_LICENCES
from identify.ranking.claim import INDEPENDENT
from identify.records import ClaimLevel
from identify.settings import Settings

ROOT = Path(__file__).resolve().parent.parent
METHOD = (ROOT / "identify" / "METHOD.md").read_text("utf-8")
DATA = (ROOT / "libraries" / "README.md").read_text("utf-8")
NAMED = sorted(set(re.findall(r"[\w/]+/[\w]+\.(?:py|toml)|`(?:evidence|index|ranking)/`", METHOD)))


@pytest.mark.parametrize("name", NAMED)
def test_every_file_the_method_page_names_exists(name: str) -> None:
    path = name.strip("`")
    assert (ROOT / path).exists() or (ROOT / "identify" / path).exists()


def test_levels_and_independent_kinds_are_those_of_the_code() -> None:
    rows = re.findall(
        r"^\| (confirmed|[a-z ]+?) \| .* \| .* \|$", METHOD.split("## Claims")[1].split("##")[0], flags=re.M
    )
    assert [row for row in rows if row != "level"] == [level.value for level in ClaimLevel]
    listed = METHOD.split("Independent are: ")[1].split(" (`ranking/claim.py`)")[0].replace("\n", " ")
    assert {kind.strip() for kind in listed.split(",")} == INDEPENDENT


def test_the_numbers_are_the_defaults() -> None:
    settings = Settings()
    weighting = settings.weighting
    assert f"I^{weighting.intensity_power} · (m/z)^{weighting.mz_power}" in METHOD
    assert f"`claim_threshold`, {settings.claim_threshold} unless set" in METHOD
    assert f"within {settings.tolerance_ppm:g} ppm or {settings.tolerance_da:g} Da" in METHOD


def test_the_licences_called_free_are_those_the_library_takes() -> None:
    row = re.search(r"^\| `free` \(default\) \| (.*?) \|", DATA, flags=re.M)
    assert row and {name.strip() for name in row.group(1).split(",")} == FREE_LICENCES


def test_readme_leads_to_both_pages() -> None:
    readme = (ROOT / "README.md").read_text("utf-8")
    assert "`identify/METHOD.md`" in readme and "`libraries/README.md`" in readme
