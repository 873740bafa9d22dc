"""A new library file appears under its name whole or not at all.

It is written beside the target as ``.<name>.building-<random>`` and moved there when everything is on disk. A process that
dies leaves only such a file; the next build recognises it by its name, and that nobody is writing it by SQLite's own lock
(held from the first moment, freed by the operating system when the process ends), and removes it.
"""

from __future__ import annotations

import os
import secrets
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager, nullcontext, suppress
from pathlib import Path

from identify.errors import LibraryBusy, LibraryConflict, LibraryError, LibraryMissing, LibraryVersionError, UsageError
from identify.library.connection import check_not_on_network, connect_any_version, is_taken, translated
from identify.library.schema import apply_migrations

_SIDE_FILES = ("-journal", "-wal", "-shm")


@contextmanager
def new_library_file(path: Path, replace: bool) -> Iterator[sqlite3.Connection]:
    """Connection to a new, empty library inside an open transaction; on leaving the block it takes its place.

    Parameters
    ----------
    path : Path
        Where the library is to be.
    replace : bool
        Whether a library already there may be replaced.

    Yields
    ------
    sqlite3.Connection

    Raises
    ------
    LibraryConflict
        If the target exists and may not be replaced, or holds standards of this laboratory.
    LibraryBusy
        If the library to be replaced is in use.
    LibraryError
        If the folder is missing or cannot be written, or the disk is full.
    """
    folder = path.parent
    if not folder.is_dir():
        raise LibraryError("folder of the library", where=str(folder), found="no folder", expected="an existing folder")
    check_not_on_network(folder)
    _check_target(path, replace)
    remove_leftovers(path)
    temporary = folder / f".{path.name}.building-{secrets.token_hex(8)}"
    try:
        with translated(path):
            connection = _create(temporary)
            try:
                yield connection
                connection.execute("COMMIT")
                connection.execute("ANALYZE")
                connection.execute("PRAGMA locking_mode = NORMAL")
                connection.execute("PRAGMA journal_mode = WAL")
            finally:
                connection.close()
        sync_to_disk(temporary)
        with hold_exclusively(path) if replace and path.exists() else nullcontext():
            _move(temporary, path, replace)
        sync_to_disk(folder)
    finally:
        remove_with_side_files(temporary)


def _create(path: Path) -> sqlite3.Connection:
    connection = sqlite3.connect(path, isolation_level=None)
    # Nobody sees this file before it is complete: no journal, no syncing until the end.
    for pragma in ("page_size = 8192", "journal_mode = OFF", "synchronous = OFF", "locking_mode = EXCLUSIVE"):
        connection.execute(f"PRAGMA {pragma}")
    connection.execute("PRAGMA cache_size = -65536")
    connection.execute("PRAGMA foreign_keys = ON")
    connection.execute("BEGIN EXCLUSIVE")
    apply_migrations(connection)
    return connection


def remove_leftovers(path: Path) -> list[Path]:
    """Remove files that builds of `path` left behind when they were killed; what was removed.

    Parameters
    ----------
    path : Path
        Final name of the library.

    Returns
    -------
    list of Path
    """
    removed = []
    prefix = f".{path.name}.building-"
    for found in path.parent.iterdir():
        if not found.name.startswith(prefix) or found.name.endswith(_SIDE_FILES):
            continue
        if not _is_being_written(found):
            remove_with_side_files(found)
            removed.append(found)
    return removed


def _is_being_written(path: Path) -> bool:
    connection = sqlite3.connect(path, isolation_level=None, timeout=0)
    try:
        connection.execute("BEGIN EXCLUSIVE")
    except sqlite3.OperationalError as error:
        return error.sqlite_errorcode in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED)
    except sqlite3.DatabaseError:
        return False
    finally:
        connection.close()
    return False


def remove_with_side_files(path: Path) -> None:
    """Remove a database file with its journal and log, whichever of them exist."""
    for name in (path.name, *(path.name + side for side in _SIDE_FILES)):
        path.with_name(name).unlink(missing_ok=True)


def _check_target(path: Path, replace: bool) -> None:
    if not is_taken(path):
        return
    if not replace:
        raise LibraryConflict(
            "library", where=str(path), found="a file that already exists", expected="a new name",
            hint="Use --replace to build it anew.",
        )  # fmt: skip
    with suppress(LibraryMissing):
        n_events = _count_curation(path)
        if n_events:
            raise LibraryConflict(
                "library", where=str(path), found=f"{n_events} events of curation (standards, reviews)", expected="none",
                hint="They would be lost: build under another name.",
            )  # fmt: skip


def _count_curation(path: Path) -> int:
    try:
        connection = connect_any_version(path, writable=False)
    except LibraryError as error:
        if isinstance(error, LibraryBusy | LibraryVersionError):
            raise
        raise LibraryConflict(
            "target of the build", where=str(path), found=error.found, expected="a library, or no file",
            hint="Move the file away first.",
        ) from None  # fmt: skip
    try:
        with translated(path):
            (count,) = connection.execute(
                "SELECT count(*) FROM event WHERE kind NOT IN ('created', 'imported', 'migrated')"
            ).fetchone()
    finally:
        connection.close()
    return int(count)


@contextmanager
def hold_exclusively(path: Path) -> Iterator[None]:
    """Nobody else reads or writes the library inside the block, and its log is emptied into it.

    A file that takes its place must not meet the log of the one before.

    Parameters
    ----------
    path : Path

    Raises
    ------
    LibraryBusy, LibraryError
        If it is in use or cannot be opened for writing.
    """
    connection = connect_any_version(path, writable=True)
    try:
        try:
            with translated(path):
                connection.execute("PRAGMA journal_mode = DELETE")
                connection.execute("BEGIN EXCLUSIVE")
        except LibraryBusy:
            raise LibraryBusy(
                "library", where=str(path), found="another process that has it open", expected="nobody using it",
                hint="Close what uses the library (a page, a search), then try again.",
            ) from None  # fmt: skip
        yield
    finally:
        connection.close()


def _move(temporary: Path, path: Path, replace: bool) -> None:
    try:
        if replace:
            temporary.replace(path)
        else:
            # A hard link does not overwrite what somebody else put there in the meantime.
            os.link(temporary, path)
    except FileExistsError:
        raise LibraryConflict(
            "library", where=str(path), found="a file that appeared during the build", expected="no file"
        ) from None
    except OSError as error:
        if replace or path.exists():
            raise LibraryError("library", where=str(path), found=str(error), expected="a folder to write to") from None
        temporary.replace(path)  # file systems without hard links


def sync_to_disk(path: Path) -> None:
    """Return when a file's bytes (or a folder's names) are on the disk."""
    if path.is_dir() and os.name == "nt":
        return
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def write_new_file(path: Path, data: bytes, *, mode: int = 0o666) -> None:
    """Write a small file that must not exist yet, and see it onto the disk.

    Parameters
    ----------
    path : Path
    data : bytes
    mode : int
        Permissions, narrowed by the user's mask.

    Raises
    ------
    UsageError
        If the file exists or cannot be written.
    """
    try:
        descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, mode)
        try:
            with os.fdopen(descriptor, "wb") as stream:
                stream.write(data)
                stream.flush()
                os.fsync(stream.fileno())
        except BaseException:
            path.unlink()  # half a file would stand in the way of the next try
            raise
    except FileExistsError:
        raise UsageError("file", where=str(path), found="one that already exists", expected="a new name") from None
    except OSError as error:
        raise UsageError("file", where=str(path), found=str(error), expected="a place to write to") from None
