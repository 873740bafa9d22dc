"""Change what became of entries: one event, one row of `standing` per entry, one transaction."""

from __future__ import annotations

import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any

from identify.errors import LibraryConflict, LibraryError, UsageError, quote
from identify.library.events import Event, append_event
from identify.library.store import Library
from identify.records import Entry, EntryStatus

ALL_STATUSES = frozenset(EntryStatus)


def move_entries(
    connection: sqlite3.Connection,
    standing: Mapping[int, EntryStatus],
    *,
    kind: str,
    who: str,
    when: datetime,
    reason: str,
    content: Mapping[str, Any] | None = None,
) -> Event:
    """Event that gives entries a new standing, inside the caller's transaction.

    Parameters
    ----------
    connection : sqlite3.Connection
        In a transaction.
    standing : mapping of int to EntryStatus
        New standing by entry id.
    kind, who, reason : str
    when : datetime
    content : mapping, optional
        More JSON details.

    Returns
    -------
    Event

    Raises
    ------
    UsageError
        Without a reason, or see `append_event`.
    """
    if not reason.strip():
        raise UsageError("reason", found="none", expected="why the standing of an entry changes")
    pairs = [[entry_id, status.value] for entry_id, status in sorted(standing.items())]
    event = append_event(
        connection, kind=kind, who=who, when=when, reason=reason, content={**(content or {}), "standing": pairs}
    )
    connection.executemany(
        "INSERT INTO standing (entry_id, event_seq, status) VALUES (?, ?, ?)",
        [(entry_id, event.seq, status) for entry_id, status in pairs],
    )
    return event


def get_entry(library: Library, accession: str) -> Entry:
    """Entry with this accession, whatever its standing.

    Raises
    ------
    LibraryError
        If there is none.
    """
    found = library.find_entries(accession=accession.strip(), statuses=ALL_STATUSES) if accession.strip() else []
    if not found:
        raise LibraryError(
            "entry", where=str(library.path), found=f"no {quote(accession)}", expected="a known accession"
        )
    return found[0]


def withdraw_entry(library: Library, accession: str, *, who: str, when: datetime, reason: str) -> Event:
    """Event that takes an entry out of use; it stays in the library with its history.

    Parameters
    ----------
    library : Library
        Open for writing.
    accession : str
    who, reason : str
    when : datetime

    Returns
    -------
    Event

    Raises
    ------
    LibraryConflict
        If it is not in use: withdrawn already, refused, or waiting for review.
    LibraryError, UsageError
        If there is no such entry, or no reason.
    """
    with library.writing() as connection:
        entry = get_entry(library, accession)
        _require(entry, library, _IN_USE | {EntryStatus.QUARANTINED}, "an entry in use")
        return move_entries(
            connection, {entry.id: EntryStatus.WITHDRAWN}, kind="withdrawn", who=who, when=when, reason=reason
        )


def quarantine_entries(library: Library, reasons: Mapping[str, str], *, who: str, when: datetime, reason: str) -> Event:
    """Event that sets entries aside: visible, but not searched.

    Parameters
    ----------
    library : Library
        Open for writing.
    reasons : mapping of str to str
        What speaks against each entry, by accession.
    who, reason : str
    when : datetime

    Returns
    -------
    Event

    Raises
    ------
    LibraryConflict
        If one of them is not in use.
    UsageError
        Without entries or reason.
    LibraryError
        If one of them does not exist.
    """
    if not reasons:
        raise UsageError("quarantine", found="no entry", expected="at least one")
    with library.writing() as connection:
        entries = [get_entry(library, accession) for accession in reasons]
        for entry in entries:
            _require(entry, library, _IN_USE, "an entry in use")
        standing = dict.fromkeys((entry.id for entry in entries), EntryStatus.QUARANTINED)
        return move_entries(
            connection, standing, kind="quarantined", who=who, when=when, reason=reason,
            content={"findings": dict(reasons)},
        )  # fmt: skip


def reinstate_entry(library: Library, accession: str, *, who: str, when: datetime, reason: str) -> Event:
    """Event that puts a quarantined or withdrawn entry back into use, with the standing it had before.

    A reviewer overrules an audit with it: the entry is not proposed for quarantine again for the same findings.

    Parameters
    ----------
    library : Library
        Open for writing.
    accession : str
    who, reason : str
    when : datetime

    Returns
    -------
    Event

    Raises
    ------
    LibraryConflict
        If it is neither quarantined nor withdrawn.
    LibraryError, UsageError
        If there is no such entry, or no reason.
    """
    with library.writing() as connection:
        entry = get_entry(library, accession)
        _require(entry, library, frozenset({EntryStatus.QUARANTINED, EntryStatus.WITHDRAWN}), "an entry set aside")
        before = last_standing_in_use(connection, entry.id)
        return move_entries(connection, {entry.id: before}, kind="reinstated", who=who, when=when, reason=reason)


_IN_USE = frozenset({EntryStatus.REFERENCE, EntryStatus.OWN_STANDARD, EntryStatus.DEMONSTRATION})


def last_standing_in_use(connection: sqlite3.Connection, entry_id: int) -> EntryStatus:
    """Standing an entry had when it was last in use."""
    rows = connection.execute("SELECT status FROM standing WHERE entry_id = ? ORDER BY event_seq DESC", (entry_id,))
    for (status,) in rows:
        if status in _IN_USE:
            return EntryStatus(status)
    (initial,) = connection.execute("SELECT initial_status FROM entry WHERE id = ?", (entry_id,)).fetchone()
    return EntryStatus(initial)


def _require(entry: Entry, library: Library, allowed: frozenset[EntryStatus], expected: str) -> None:
    if entry.status not in allowed:
        raise LibraryConflict(
            "entry", where=f"{library.path}, {entry.accession}", found=f"standing '{entry.status}'", expected=expected
        )


@dataclass(frozen=True, slots=True)
class HistoryItem:
    """One event in the life of an entry."""

    event: Event
    status: EntryStatus
    """Standing of the entry after the event."""


def entry_history(library: Library, accession: str) -> tuple[HistoryItem, ...]:
    """Every event that concerns an entry, first to last.

    Parameters
    ----------
    library : Library
    accession : str

    Returns
    -------
    tuple of HistoryItem
        The first is the event the entry came with.

    Raises
    ------
    LibraryError
        If there is no such entry.
    """
    entry = get_entry(library, accession)
    with library.reading() as connection:
        came, initial = connection.execute(
            "SELECT event_seq, initial_status FROM entry WHERE id = ?", (entry.id,)
        ).fetchone()
    items: list[HistoryItem] = []
    status = EntryStatus(initial)
    for event in library.events():
        if event.seq < came:
            continue
        moved = dict(event.details.get("standing", ()))
        status = EntryStatus(moved.get(entry.id, status))
        named = entry.id in event.details.get("concerns", ())
        if event.seq == came or entry.id in moved or named:
            items.append(HistoryItem(event, status))
    return tuple(items)
