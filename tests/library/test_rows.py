"""A row whose values have lost their types (a flipped bit; found by fuzzing) is damage, told by entry and column."""

from __future__ import annotations

import sqlite3
from datetime import UTC, datetime
from typing import Any

import pytest

from identify.errors import LibraryDamaged
from identify.library.build import build_from_records
from identify.library.rows import ENTRY_COLUMNS, entry_of
from identify.library.starter import starter_records
from identify.records import EntryStatus


@pytest.fixture(scope="module")
def row(tmp_path_factory: pytest.TempPathFactory) -> tuple[Any, ...]:
    path = tmp_path_factory.mktemp("rows") / "one.ionlib"
    build_from_records(path, starter_records()[:1], origin="t", who="t", when=datetime(2026, 1, 5, tzinfo=UTC))
    connection = sqlite3.connect(path)
    try:
        found: tuple[Any, ...] = connection.execute(f"SELECT {', '.join(ENTRY_COLUMNS)} FROM entry").fetchone()
    finally:
        connection.close()
    return found


@pytest.mark.parametrize("place", range(len(ENTRY_COLUMNS)), ids=ENTRY_COLUMNS)
def test_a_value_of_another_type_is_damage(row: tuple[Any, ...], place: int) -> None:
    assert entry_of(row, EntryStatus.REFERENCE, "lab.ionlib").accession == row[2]
    odd = 7 if not isinstance(row[place], int) else "7"
    with pytest.raises(LibraryDamaged, match=f"as {ENTRY_COLUMNS[place]}, expected values as they were written"):
        entry_of((*row[:place], odd, *row[place + 1 :]), EntryStatus.REFERENCE, "lab.ionlib")
