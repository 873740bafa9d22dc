"""Backups are complete and verified, a restore keeps what it replaces, and older libraries are migrated after a backup."""

from __future__ import annotations

import shutil
import sqlite3
from pathlib import Path

import pytest
from library_builders import WHEN, WHO, build_records, build_test_library, move

from identify.errors import LibraryBusy, LibraryConflict, LibraryDamaged, LibraryMissing, LibraryVersionError
from identify.library import backup as backup_module
from identify.library.backup import backup_library, migrate_library, restore_library
from identify.library.connection import connect
from identify.library.schema import MIGRATIONS, SCHEMA_VERSION, Migration
from identify.library.store import open_library
from identify.library.verify import verify_library
from identify.records import EntryStatus

FORMATS = Path(__file__).resolve().parents[2] / "fixtures" / "library_format"


def names(folder: Path) -> list[str]:
    return sorted(found.name for found in folder.iterdir())


def test_a_backup_equals_the_library_even_while_it_is_written(library_path: Path, tmp_path: Path) -> None:
    writer = connect(library_path, writable=True)
    writer.execute("BEGIN IMMEDIATE")
    try:
        report = backup_library(library_path, tmp_path / "copy.ionlib")
    finally:
        writer.close()
    with open_library(library_path) as library, open_library(tmp_path / "copy.ionlib") as copy:
        assert report.fingerprint == library.fingerprint == copy.fingerprint
        assert [entry.accession for entry in copy.iter_entries()] == [
            entry.accession for entry in library.iter_entries()
        ]
    assert names(tmp_path) == ["copy.ionlib", "lab.ionlib"]


def test_a_backup_overwrites_nothing_and_needs_a_library(library_path: Path, tmp_path: Path) -> None:
    with pytest.raises(LibraryConflict, match="already exists"):
        backup_library(library_path, library_path)
    with pytest.raises(LibraryMissing):
        backup_library(tmp_path / "none", tmp_path / "copy")
    assert names(tmp_path) == ["lab.ionlib"]


def test_a_damaged_library_gives_no_backup(library_path: Path, tmp_path: Path) -> None:
    raw = sqlite3.connect(library_path)
    raw.execute("DROP TRIGGER entry_no_update")
    raw.close()
    with pytest.raises(LibraryDamaged, match="entry_no_update is missing"):
        backup_library(library_path, tmp_path / "copy.ionlib")
    assert names(tmp_path) == ["lab.ionlib"]


def test_a_restore_brings_the_state_back_and_keeps_the_other(library_path: Path, tmp_path: Path) -> None:
    backup_library(library_path, tmp_path / "copy.ionlib")
    move(library_path, 2, EntryStatus.WITHDRAWN)
    later = verify_library(library_path).fingerprint
    with pytest.raises(LibraryConflict):
        restore_library(tmp_path / "copy.ionlib", library_path)
    report = restore_library(tmp_path / "copy.ionlib", library_path, replace=True)
    with open_library(library_path) as library:
        assert library.fingerprint == report.fingerprint
        assert library.state().entries == 5
    aside = tmp_path / "lab.ionlib.before-restore-1"
    assert verify_library(aside).fingerprint == later
    assert verify_library(aside).is_intact
    assert names(tmp_path) == ["copy.ionlib", "lab.ionlib", aside.name]


def test_a_damaged_backup_is_not_restored(library_path: Path, tmp_path: Path) -> None:
    copy = tmp_path / "copy.ionlib"
    backup_library(library_path, copy)
    raw = sqlite3.connect(copy)
    raw.execute("DROP TRIGGER event_no_update")
    raw.close()
    before = verify_library(library_path)
    with pytest.raises(LibraryDamaged):
        restore_library(copy, library_path, replace=True)
    assert verify_library(library_path) == before


def test_a_library_in_use_is_not_restored_over(library_path: Path, tmp_path: Path) -> None:
    backup_library(library_path, tmp_path / "copy.ionlib")
    writer = connect(library_path, writable=True)
    writer.execute("BEGIN IMMEDIATE")
    try:
        with pytest.raises(LibraryBusy):
            restore_library(tmp_path / "copy.ionlib", library_path, replace=True)
    finally:
        writer.close()
    assert verify_library(library_path).is_intact


def test_a_library_that_is_being_read_is_not_replaced_under_its_reader(library_path: Path, tmp_path: Path) -> None:
    backup_library(library_path, tmp_path / "copy.ionlib")
    with open_library(library_path) as reader:
        reader.state()
        with pytest.raises(LibraryBusy, match="found another process that has it open, expected nobody using it"):
            restore_library(tmp_path / "copy.ionlib", library_path, replace=True)
        assert reader.state().entries == 5
    assert verify_library(library_path).is_intact
    restore_library(tmp_path / "copy.ionlib", library_path, replace=True)


# Older schema versions


@pytest.mark.parametrize("version", range(1, SCHEMA_VERSION))
def test_a_library_of_every_earlier_version_is_migrated_after_a_backup(tmp_path: Path, version: int) -> None:
    path = tmp_path / "old.ionlib"
    shutil.copy(FORMATS / f"schema-{version}.sqlite", path)
    before = verify_library(path)
    assert before.is_intact
    with pytest.raises(LibraryVersionError) as caught:
        open_library(path)
    assert str(caught.value) == (
        f"library in {path}: found schema version {version}, expected version {SCHEMA_VERSION}."
        " Run `ionwitness library migrate`: it makes a backup, then brings the library up to date."
    )
    report = migrate_library(path, who=WHO, when=WHEN)
    assert (report.from_version, report.to_version) == (version, SCHEMA_VERSION)
    after = verify_library(path)
    assert after.is_intact
    assert (after.n_events, after.n_entries) == (before.n_events + 1, before.n_entries)
    with open_library(path) as library:
        assert library.state().entries == 4
        assert library.events()[-1].kind == "migrated"
        expected = build_records()[0]
        (record,) = library.get_records([1])
        assert (record.identity, record.mz.tolist()) == (expected.identity, expected.mz.tolist())
    assert verify_library(report.backup).fingerprint == before.fingerprint
    with pytest.raises(LibraryConflict, match="expected an older one to migrate"):
        migrate_library(path, who=WHO, when=WHEN)


def test_every_released_version_has_its_fixture() -> None:
    assert [migration.version for migration in MIGRATIONS] == list(range(1, SCHEMA_VERSION + 1))
    for version in range(1, SCHEMA_VERSION):
        assert (FORMATS / f"schema-{version}.sqlite").is_file()


def test_a_migration_that_fails_changes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "old.ionlib"
    shutil.copy(FORMATS / "schema-1.sqlite", path)
    before = verify_library(path)

    def broken(connection: sqlite3.Connection) -> None:
        connection.execute("CREATE TABLE half (a)")
        raise ZeroDivisionError

    monkeypatch.setattr(backup_module, "apply_migrations", broken)
    with pytest.raises(ZeroDivisionError):
        migrate_library(path, who=WHO, when=WHEN)
    assert verify_library(path) == before


def test_a_newer_library_is_not_migrated_down(library_path: Path) -> None:
    raw = sqlite3.connect(library_path)
    raw.execute(f"PRAGMA user_version = {SCHEMA_VERSION + 3}")
    raw.close()
    with pytest.raises(LibraryVersionError, match="Update ionwitness"):
        migrate_library(library_path, who=WHO, when=WHEN)


def test_released_migrations_are_never_edited() -> None:
    """Hash of the first step's script: an edit would leave old libraries with another schema than the program expects."""
    import hashlib

    first: Migration = MIGRATIONS[0]
    text = " ".join(first.script.split())
    assert hashlib.sha256(text.encode()).hexdigest()[:16] == "5015009308bc3b6d"


def test_the_builder_writes_the_present_version(tmp_path: Path) -> None:
    build_test_library(tmp_path / "a.ionlib")
    assert verify_library(tmp_path / "a.ionlib").schema_version == SCHEMA_VERSION
