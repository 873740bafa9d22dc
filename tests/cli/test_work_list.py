"""``ionwitness search --work-list``: what to measure next, over the whole batch."""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path

from click.testing import Result

Run = Callable[..., Result]
XYLENE = "m/z,intensity\n39,10\n51,12\n65,8\n77,13\n91,100\n105,25\n106,60\n107,5\n"
"""Principal ions of a xylene, from memory (common practice): isomers share them."""


def test_what_helps_two_queries_is_one_row_with_both(run: Run, starter: Path, tmp_path: Path) -> None:
    for name in ("a", "b"):
        (tmp_path / f"{name}.csv").write_text(XYLENE, encoding="utf-8")
    target = tmp_path / "work.csv"
    result = run("search", tmp_path / "a.csv", tmp_path / "b.csv", "--library", starter, "--work-list", target)
    assert result.return_value == 0
    with target.open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert rows and [int(row["place"]) for row in rows] == list(range(1, len(rows) + 1))
    priorities = [float(row["priority"]) for row in rows]
    assert priorities == sorted(priorities, reverse=True)
    assert {row["query_ids"] for row in rows} == {"q1 | q2"} and {row["n_queries"] for row in rows} == {"2"}
    assert all(row["reasons"] and row["what_decides"] for row in rows)
