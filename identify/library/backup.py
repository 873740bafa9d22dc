"""Copies of a library that are checked: backup while others read and write it, restore, migration to a newer schema."""

from __future__ import annotations

import os
import secrets
import sqlite3
from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from identify.errors import LibraryConflict, LibraryDamaged, LibraryError
from identify.library.connection import (
    check_not_on_network,
    connect_any_version,
    is_taken,
    read_version,
    transaction,
    translated,
    wrong_version,
)
from identify.library.events import append_event
from identify.library.new_file import hold_exclusively, remove_with_side_files, sync_to_disk
from identify.library.schema import MIGRATIONS, SCHEMA_VERSION, apply_migrations
from identify.library.verify import verify_library

CopyProgress = Callable[[int, int], None]
"""Called with pages copied and pages in all."""
_PAGES_PER_STEP = 2048


@dataclass(frozen=True, slots=True)
class BackupReport:
    """A copy that was written and verified."""

    source: str
    copy: str
    fingerprint: str
    n_events: int
    n_entries: int


@dataclass(frozen=True, slots=True)
class MigrationReport:
    """What a migration did."""

    path: str
    backup: str
    from_version: int
    to_version: int
    fingerprint: str


def backup_library(path: Path | str, target: Path | str, *, progress: CopyProgress | None = None) -> BackupReport:
    """Report on a verified copy of a library in its present state; others may read and write it meanwhile.

    Parameters
    ----------
    path : Path or str
    target : Path or str
        New file; it appears only when it is complete and verified.
    progress : callable, optional

    Returns
    -------
    BackupReport

    Raises
    ------
    LibraryConflict
        If `target` exists.
    LibraryDamaged
        If the copy does not verify: the library itself is damaged then.
    LibraryMissing, LibraryBusy, LibraryError
        If the library cannot be read or the copy not be written.
    """
    path, target = Path(path), Path(target)
    _refuse_existing(target)
    return _copy(path, target, progress)


def _refuse_existing(target: Path) -> None:
    if is_taken(target):
        raise LibraryConflict("copy", where=str(target), found="a file that already exists", expected="a new name")


def _copy(path: Path, target: Path, progress: CopyProgress | None) -> BackupReport:
    if not target.parent.is_dir():
        raise LibraryError("folder", where=str(target.parent), found="no folder", expected="an existing folder")
    temporary = target.with_name(f".{target.name}.building-{secrets.token_hex(8)}")
    try:
        source = connect_any_version(path, writable=False)
        try:
            with translated(target):
                copy = sqlite3.connect(temporary, isolation_level=None)
                try:
                    source.backup(copy, pages=_PAGES_PER_STEP, progress=_reporting(progress), sleep=0.05)
                finally:
                    copy.close()
        finally:
            source.close()
        report = verify_library(temporary)
        if not report.is_intact:
            raise LibraryDamaged(
                "library", where=str(path), found=str(report.problems[0]), expected="an intact library",
                hint="Run `ionwitness library verify`, and restore the last backup.",
            )  # fmt: skip
        sync_to_disk(temporary)
        temporary.replace(target)
        sync_to_disk(target.parent)
    finally:
        remove_with_side_files(temporary)
    return BackupReport(str(path), str(target), report.fingerprint, report.n_events, report.n_entries)


def _reporting(progress: CopyProgress | None) -> Callable[[int, int, int], None]:
    def report(_status: int, left: int, total: int) -> None:
        if progress:
            progress(total - left, total)

    return report


def restore_library(
    backup: Path | str, path: Path | str, *, replace: bool = False, progress: CopyProgress | None = None
) -> BackupReport:
    """Report on a library brought back from a backup.

    Parameters
    ----------
    backup : Path or str
    path : Path or str
        Where the library is to be. What is there now is kept beside it as ``<name>.before-restore-<n>``.
    replace : bool
        Whether a library at `path` may be moved aside.
    progress : callable, optional

    Returns
    -------
    BackupReport

    Raises
    ------
    LibraryConflict
        If `path` exists and may not be moved aside.
    LibraryDamaged
        If the backup does not verify; `path` is untouched then.
    LibraryMissing, LibraryBusy, LibraryError
        If a file cannot be read or written, or the library is in use.
    """
    backup, path = Path(backup), Path(path)
    check_not_on_network(path.parent)
    if not replace:
        _refuse_existing(path)
    if not is_taken(path):
        return _copy(backup, path, progress)
    fresh = path.with_name(f".{path.name}.building-{secrets.token_hex(8)}")
    try:
        report = _copy(backup, fresh, progress)
        with hold_exclusively(path):
            aside = _free_name(path, "before-restore")
            try:
                os.link(path, aside)
            except OSError:  # a file system without hard links: the name is free for a moment
                path.replace(aside)
            fresh.replace(path)
        sync_to_disk(path.parent)
    finally:
        remove_with_side_files(fresh)
    return BackupReport(str(backup), str(path), report.fingerprint, report.n_events, report.n_entries)


def _free_name(path: Path, word: str) -> Path:
    number = 1
    while (candidate := path.with_name(f"{path.name}.{word}-{number}")).exists():
        number += 1
    return candidate


def migrate_library(path: Path | str, *, who: str, when: datetime) -> MigrationReport:
    """Report on a library brought to the present schema version, after a verified backup beside it.

    Parameters
    ----------
    path : Path or str
        A library of an older schema version.
    who : str
    when : datetime
        With time zone.

    Returns
    -------
    MigrationReport

    Raises
    ------
    LibraryConflict
        If it already has the present version.
    LibraryVersionError
        If it is newer than this program.
    LibraryDamaged
        If it does not verify; nothing is changed then.
    LibraryMissing, LibraryBusy, LibraryError
        If it cannot be opened for writing or the backup not be written.
    """
    path = Path(path)
    connection = connect_any_version(path, writable=True)
    try:
        with translated(path):
            version = read_version(connection, path)
            if version == SCHEMA_VERSION:
                raise LibraryConflict(
                    "library", where=str(path), found=f"schema version {version}", expected="an older one to migrate"
                )
            if version > SCHEMA_VERSION:
                raise wrong_version(path, version)
            copy = _copy(path, _free_name(path, f"schema-{version}-backup"), None)
            with transaction(connection):
                if read_version(connection, path) != version:
                    raise LibraryConflict("library", where=str(path), found="a migration meanwhile", expected="none")
                apply_migrations(connection)
                titles = [step.title for step in MIGRATIONS if version < step.version]
                event = append_event(
                    connection, kind="migrated", who=who, when=when, reason="; ".join(titles),
                    content={"from_schema": version, "to_schema": SCHEMA_VERSION},
                )  # fmt: skip
    finally:
        connection.close()
    return MigrationReport(str(path), copy.copy, version, SCHEMA_VERSION, event.hash)
