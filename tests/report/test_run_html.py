"""A run's page: what many components would say is said once, and dates are readable."""

from __future__ import annotations

import pytest

from identify.report.run_html import REPEATED, RowContext, _said_once
from identify.report.run_words import ComponentRow, date_text


def row(*remarks: str) -> RowContext:
    return RowContext(
        "component-1-1", "", ComponentRow("1", "2.00", "", "", "9", "9 %", "x", "class", "95 %", remarks), ""
    )


def test_a_remark_of_many_components_is_said_once_and_numbered() -> None:
    rows, said = _said_once([row("common.", f"own {n}.") for n in range(REPEATED + 1)])
    assert said == ("common.",)
    assert [shown.row.remarks for shown in rows[:2]] == [("Note 1.", "own 0."), ("Note 1.", "own 1.")]


def test_a_remark_of_few_components_stays_beside_them() -> None:
    rows, said = _said_once([row("common.")] * REPEATED)
    assert (said, rows[0].row.remarks) == ((), ("common.",))


@pytest.mark.parametrize(
    ("stamp", "shown"),
    [
        ("20210304050607-0530", "2021-03-04 05:06 UTC-05:30"),
        ("20210304050607", "2021-03-04 05:06"),
        ("2021-03-04T05:06:07Z", "2021-03-04 05:06 UTC"),
        ("20211304050607", "20211304050607"),
        ("", ""),
    ],
)
def test_time_stamps_of_run_files_become_dates_or_stay_as_they_are(stamp: str, shown: str) -> None:
    assert date_text(stamp) == shown
