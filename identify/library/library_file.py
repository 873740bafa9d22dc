"""One open library file: its connection, shared by threads and kept up to date, its events, and what became of its entries."""

from __future__ import annotations

import sqlite3
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import Self

from identify.errors import LibraryDamaged, LibraryError, UsageError, quote
from identify.library.connection import transaction, translated
from identify.library.events import Event, read_events
from identify.records import EntryStatus

_LATEST = 2**62


class LibraryFile:
    """What a library is beside its entries (those are in `identify.library.store.Library`).

    Attributes
    ----------
    path : Path
    writable : bool
    as_of : int or None
        Last event that is taken into account; None for whatever is committed.
    """

    def __init__(self, path: Path, connection: sqlite3.Connection, writable: bool, as_of: int | None) -> None:
        self.path, self.writable, self.as_of = path, writable, as_of
        self._connection = connection
        self._lock = threading.RLock()
        self._standing: dict[int, EntryStatus] = {}
        self._data_version = -1

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; a second call does nothing."""
        with self._lock, translated(self.path):
            self._connection.close()

    @contextmanager
    def reading(self) -> Iterator[sqlite3.Connection]:
        """The connection, locked to this thread: one state of the library for the whole block, whatever others commit meanwhile.

        Raises
        ------
        LibraryError
            Translated from sqlite3.
        RuntimeError
            If the block changed anything: a bug; the change is not kept.
        """
        connection = self._connection
        with self._lock, translated(self.path):
            is_outermost, n_changes = not connection.in_transaction, connection.total_changes
            if is_outermost:
                connection.execute("BEGIN")
            try:
                (version,) = connection.execute("PRAGMA data_version").fetchone()
                if version != self._data_version:
                    self._forget()
                    self._data_version = version
                yield connection
            finally:
                if is_outermost and connection.in_transaction:
                    connection.execute("ROLLBACK")
            if is_outermost and connection.total_changes != n_changes:
                raise RuntimeError("a change inside `reading`: only `writing` opens a transaction that keeps it")

    @contextmanager
    def writing(self) -> Iterator[sqlite3.Connection]:
        """The connection inside one transaction: all of the block is committed, or nothing.

        Raises
        ------
        UsageError
            If the library was opened for reading.
        LibraryBusy, LibraryError
            Translated from sqlite3.
        """
        if not self.writable:
            raise UsageError("library", where=str(self.path), found="opened for reading", expected="opened for writing")
        with self._lock, translated(self.path):
            try:
                with transaction(self._connection):
                    yield self._connection
            finally:
                self._data_version = -1

    def _forget(self) -> None:
        rows = self._connection.execute(
            "SELECT entry_id, status FROM standing WHERE event_seq <= ? ORDER BY event_seq", (self.last_event,)
        )
        self._standing = {entry_id: self._status(status) for entry_id, status in rows}

    @property
    def last_event(self) -> int:
        """Number of the last event taken into account; very large when that is whatever is committed."""
        return _LATEST if self.as_of is None else self.as_of

    def _status(self, text: str) -> EntryStatus:
        try:
            return EntryStatus(text)
        except ValueError:
            raise LibraryError(
                "entry status", where=str(self.path), found=quote(text), expected="a known standing"
            ) from None

    @property
    def fingerprint(self) -> str:
        """Hash of the last event (or of event `as_of`): 64 hexadecimal digits.

        Raises
        ------
        LibraryError
            If there is no event.
        """
        return self._hash_of_event(self.last_event)

    def _hash_of_event(self, last: int) -> str:
        """Hash of event `last`, or of the last one before it."""
        with self.reading() as connection:
            row = connection.execute(
                "SELECT hash FROM event WHERE seq <= ? ORDER BY seq DESC LIMIT 1", (last,)
            ).fetchone()
        if row is None:
            raise LibraryError("library", where=str(self.path), found="no event", expected="at least one")
        return str(row[0])

    @property
    def search_fingerprint(self) -> str:
        """Hash of the last event that changed what a search can find; names a search index.

        Raises
        ------
        LibraryError
            If there is no event.
        """
        with self.reading() as connection:
            (last,) = connection.execute(
                "SELECT max(seq) FROM (SELECT max(event_seq) AS seq FROM entry WHERE event_seq <= ?"
                " UNION ALL SELECT max(event_seq) FROM standing WHERE event_seq <= ?)",
                (self.last_event, self.last_event),
            ).fetchone()
        return self._hash_of_event(last or 1)

    def standings(self) -> dict[int, EntryStatus]:
        """Present standing of the entries that events have moved from the one they came with, by entry id."""
        with self.reading():
            return dict(self._standing)

    def events(self) -> list[Event]:
        """Events in order.

        Raises
        ------
        LibraryDamaged
            If a field of one is no text.
        """
        with self.reading() as connection:
            events = list(read_events(connection, self.as_of))
        for event in events:
            fields = (event.at, event.who, event.kind, event.reason, event.content, event.hash)
            if not all(isinstance(text, str) for text in fields):  # a flipped bit in the file
                found = f"event {event.seq} with a field that is no text"
                raise LibraryDamaged("library", where=str(self.path), found=found, expected="text")
        return events
