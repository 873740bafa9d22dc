"""Open a library file; translate what sqlite3 raises into this program's errors."""

from __future__ import annotations

import os
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from identify.errors import (
    LibraryBusy,
    LibraryConflict,
    LibraryDamaged,
    LibraryError,
    LibraryMissing,
    LibraryVersionError,
    quote,
)
from identify.library.schema import APPLICATION_ID, SCHEMA_VERSION, find_schema_faults

BUSY_TIMEOUT_S = 5.0
MAX_ROW_BYTES = 64 * 2**20
"""No row of a library is larger; a hostile file cannot make us allocate more."""
_MAGIC = b"SQLite format 3\x00"
_MINIMUM_SQLITE = (3, 37, 0)
_NETWORK_FILE_SYSTEMS = frozenset(
    {"nfs", "nfs4", "cifs", "smb3", "smbfs", "ncpfs", "afs", "9p", "ceph", "glusterfs", "lustre", "fuse.sshfs", "davfs"}
)
_MOUNTS = Path("/proc/self/mounts")


@contextmanager
def translated(path: Path) -> Iterator[None]:
    """Turn errors of sqlite3 inside the block into errors of this program that name the file.

    Raises
    ------
    LibraryBusy, LibraryDamaged, LibraryConflict, LibraryError
    """
    try:
        yield
    except sqlite3.Error as error:
        translation = _translate(path, error)
        if translation is None:
            raise
        raise translation from error
    except OverflowError as error:  # of Python, on the way to SQLite's 64 bits
        raise LibraryError("library", where=str(path), found=str(error), expected="numbers of 64 bits") from error
    except UnicodeDecodeError as error:  # SQLite quotes the damaged text in its own message
        raise LibraryDamaged("library", where=str(path), found="text that is no text", expected="UTF-8") from error


def _translate(path: Path, error: sqlite3.Error) -> LibraryError | None:
    where, said = str(path), str(error)
    code = getattr(error, "sqlite_errorcode", 0) & 0xFF
    if code in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
        return LibraryBusy(
            "library", where=where, found="another process writing to it", expected="a free library",
            hint="Wait until the other process has finished, then try again.",
        )  # fmt: skip
    if code == sqlite3.SQLITE_FULL:
        return LibraryError(
            "library", where=where, found="no space left on the disk", expected="room to write",
            hint="Nothing was changed; free some space and try again.",
        )  # fmt: skip
    if code == sqlite3.SQLITE_READONLY:
        return LibraryError(
            "library", where=where, found="a read-only file or folder", expected="write access",
            hint="Copy the library to a folder you may write to.",
        )  # fmt: skip
    if code == sqlite3.SQLITE_CONSTRAINT:
        return LibraryConflict("library", where=where, found=said, expected="a change its rules allow")
    # Our statements are fixed: what does not compile for other reasons than their syntax is the file's fault.
    foreign = said.startswith("Could not decode") or (code == sqlite3.SQLITE_ERROR and "syntax error" not in said)
    if foreign or code in (sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB, sqlite3.SQLITE_TOOBIG):
        return LibraryDamaged(
            "library", where=where, found=said, expected="an intact file",
            hint="Run `ionwitness library verify`, and restore the last backup.",
        )  # fmt: skip
    if code in (sqlite3.SQLITE_IOERR, sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_PERM):
        return LibraryError(
            "library", where=where, found=said, expected="a file that can be read and written",
            hint="Check the disk and the permissions of the file and its folder.",
        )  # fmt: skip
    return None


@contextmanager
def transaction(connection: sqlite3.Connection) -> Iterator[None]:
    """Everything inside the block is committed together, or nothing is."""
    connection.execute("BEGIN IMMEDIATE")
    try:
        yield
        connection.execute("COMMIT")
    except BaseException:
        # A failed COMMIT (disk full) may or may not have ended the transaction itself.
        if connection.in_transaction:
            connection.execute("ROLLBACK")
        raise


def connect(path: Path, *, writable: bool, busy_timeout_s: float = BUSY_TIMEOUT_S) -> sqlite3.Connection:
    """Open connection to an existing library of the current schema version.

    Parameters
    ----------
    path : Path
    writable : bool
        False also works on read-only media and in folders without write permission.
    busy_timeout_s : float
        How long to wait for another writer.

    Returns
    -------
    sqlite3.Connection
        In autocommit mode; use `transaction`.

    Raises
    ------
    LibraryMissing
        There is no file.
    LibraryError
        Not a library, no permission, or a network share that was to be written.
    LibraryVersionError
        Another schema version.
    LibraryBusy, LibraryDamaged
    """
    connection = connect_any_version(path, writable=writable, busy_timeout_s=busy_timeout_s)
    try:
        with translated(path):
            version = read_version(connection, path)
        if version != SCHEMA_VERSION:
            raise wrong_version(path, version)
        if writable:
            with translated(path):
                _check_rules(connection, path)
                keep_log(connection)
    except BaseException:
        connection.close()
        raise
    return connection


def _check_rules(connection: sqlite3.Connection, path: Path) -> None:
    """Refuse to write where the triggers that protect what is written are gone."""
    for name, fault in find_schema_faults(connection):
        raise LibraryDamaged(
            "library", where=str(path), found=f"{name}, which {fault}", expected="the tables and rules as made",
            hint="Somebody changed the file with another program: run `ionwitness library verify`, restore a backup.",
        )  # fmt: skip


def keep_log(connection: sqlite3.Connection) -> None:
    """Switch to a write-ahead log (readers and a writer do not wait for each other), if it is not on already."""
    (mode,) = connection.execute("PRAGMA journal_mode").fetchone()
    if mode != "wal":
        connection.execute("PRAGMA journal_mode = WAL")


def connect_any_version(path: Path, *, writable: bool, busy_timeout_s: float = BUSY_TIMEOUT_S) -> sqlite3.Connection:
    """As `connect`, for a library of any schema version (migration, verification).

    Raises
    ------
    LibraryMissing, LibraryError, LibraryBusy, LibraryDamaged
        As `connect`; LibraryError also for an SQLite too old for STRICT tables.
    """
    _check_file(path)
    if writable:
        _check_can_write(path)
    if sqlite3.sqlite_version_info < _MINIMUM_SQLITE:
        raise LibraryError("SQLite", found=sqlite3.sqlite_version, expected="3.37 or newer")
    with translated(path):
        connection = sqlite3.connect(
            _uri(path, writable), uri=True, isolation_level=None, timeout=busy_timeout_s, check_same_thread=False
        )
        try:
            connection.setlimit(sqlite3.SQLITE_LIMIT_LENGTH, MAX_ROW_BYTES)
            # A file from elsewhere must not run functions through its schema.
            connection.execute("PRAGMA trusted_schema = OFF")
            connection.execute("PRAGMA cell_size_check = ON")
            connection.execute("PRAGMA foreign_keys = ON")
            connection.execute(f"PRAGMA query_only = {'OFF' if writable else 'ON'}")
            connection.execute("PRAGMA synchronous = FULL")
            read_version(connection, path)
        except BaseException:
            connection.close()
            raise
    return connection


def read_version(connection: sqlite3.Connection, path: Path) -> int:
    """Schema version of an open file.

    Raises
    ------
    LibraryError
        If the file is an SQLite file of some other program.
    """
    (application,) = connection.execute("PRAGMA application_id").fetchone()
    (version,) = connection.execute("PRAGMA user_version").fetchone()
    if application != APPLICATION_ID or version < 1:
        raise LibraryError(
            "library", where=str(path), found="an SQLite file of another program", expected="a library",
            hint="Build one with `ionwitness library build`.",
        )  # fmt: skip
    return int(version)


def wrong_version(path: Path, version: int) -> LibraryVersionError:
    """The refusal of a library of another schema version, with what to do about it."""
    newer = version > SCHEMA_VERSION
    hint = (
        "Update ionwitness to open it."
        if newer
        else "Run `ionwitness library migrate`: it makes a backup, then brings the library up to date."
    )
    return LibraryVersionError(
        "library", where=str(path), found=f"schema version {version}", expected=f"version {SCHEMA_VERSION}", hint=hint
    )


def is_taken(path: Path) -> bool:
    """Whether there is a file or folder of this name.

    Parameters
    ----------
    path : Path

    Returns
    -------
    bool

    Raises
    ------
    LibraryError
        For a name that no file can have (too long, a loop of links).
    """
    try:
        return path.exists()
    except OSError as error:
        found = (error.strerror or str(error)).lower()
        raise LibraryError("library", where=quote(str(path)), found=found, expected="the name of a file") from None


def _check_file(path: Path) -> None:
    where = str(path)
    if not is_taken(path):
        raise LibraryMissing(
            "library", where=where, found="no file", expected="a library",
            hint="Build one with `ionwitness library build`, or see it work with `ionwitness demo`.",
        )  # fmt: skip
    if not path.is_file():
        raise LibraryError("library", where=where, found="a folder", expected="a library file")
    try:
        with path.open("rb") as stream:
            start = stream.read(len(_MAGIC))
    except PermissionError:
        raise LibraryError(
            "library", where=where, found="no permission to read it", expected="a readable file"
        ) from None
    if start != _MAGIC:
        raise LibraryError(
            "library", where=where, found="an empty file" if not start else "a file of another kind",
            expected="a library", hint="Build one from spectra with `ionwitness library build`.",
        )  # fmt: skip


def check_not_on_network(path: Path) -> None:
    """Refuse to write where file locks are not reliable.

    Raises
    ------
    LibraryError
        If `path` lies on a network share.
    """
    kind = file_system_of(path)
    if kind in _NETWORK_FILE_SYSTEMS:
        raise LibraryError(
            "library", where=str(path), found=f"a network share ({kind})", expected="a local disk for writing",
            hint="File locks are not reliable on network shares: keep the library on a local disk and share copies.",
        )  # fmt: skip


def _check_can_write(path: Path) -> None:
    check_not_on_network(path)
    if not (os.access(path, os.W_OK) and os.access(path.parent, os.W_OK)):
        raise LibraryError(
            "library", where=str(path), found="a read-only file or folder", expected="write access",
            hint="Copy the library to a folder you may write to.",
        )  # fmt: skip


def file_system_of(path: Path) -> str:
    """Type of the file system that holds `path` (`ext4`, `nfs`…); empty where the system does not say."""
    if not _MOUNTS.exists():
        return ""
    resolved, best, kind = str(path.resolve()), "", ""
    for line in _MOUNTS.read_text("utf-8", errors="replace").splitlines():
        fields = line.split(" ")
        if len(fields) < 3:
            continue
        mount = fields[1].replace("\\040", " ")
        inside = resolved == mount or resolved.startswith(mount.rstrip("/") + "/")
        if inside and len(mount) >= len(best):
            best, kind = mount, fields[2]
    return kind


def _uri(path: Path, writable: bool) -> str:
    base = path.resolve().as_uri()
    if writable or (os.access(path, os.W_OK) and os.access(path.parent, os.W_OK)):
        # Readers open it read-write with query_only: a mode=ro connection leaves -wal and -shm files behind.
        return f"{base}?mode=rw"
    log = path.with_name(path.name + "-wal")
    if log.exists() and log.stat().st_size:
        return f"{base}?mode=ro"
    return f"{base}?immutable=1"
