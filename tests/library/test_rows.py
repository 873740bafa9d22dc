"""A row whose values have lost their types (a flipped bit; found by fuzzing) is damage, told by entry and column."""

from __future__ import annotations

import sqlite3
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from identify.errors import LibraryDamaged
from identify.library.build import build_from_records
from identify.library.events import Event, sha256_of
from identify.library.rows import ENTRY_COLUMNS, entry_of
from identify.library.starter import starter_records
from identify.library.store import open_library
from identify.library.verify import _readable_events
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


def test_verifying_passes_over_events_whose_content_is_no_text() -> None:
    connection = sqlite3.connect(":memory:")
    columns = "seq, at, who, kind, reason, content, content_hash, previous_hash, hash"
    connection.execute(f"CREATE TABLE event ({columns})")
    for seq, content in enumerate((None, b"{}", 7, "{}"), start=1):
        values = (seq, "at", "who", "kind", "why", content, sha256_of("{}"), "", "")
        connection.execute(f"INSERT INTO event VALUES ({', '.join('?' * 9)})", values)
    assert [event.seq for event in _readable_events(connection)] == [4]
    connection.close()


def test_events_whose_fields_are_no_text_are_damage(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "one.ionlib"
    build_from_records(path, starter_records()[:1], origin="t", who="t", when=datetime(2026, 1, 5, tzinfo=UTC))
    with open_library(path) as library:
        (event, *rest) = library.events()
        odd = Event(event.seq, event.at, event.who, event.kind, None, *[""] * 4)  # type: ignore[arg-type]
        monkeypatch.setattr("identify.library.library_file.read_events", lambda *_: iter([odd, *rest]))
        with pytest.raises(LibraryDamaged, match="event 1 with a field that is no text"):
            library.events()
