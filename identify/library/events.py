"""Append-only events, chained by hash: who did what, when, why.

::

    hash(n) = SHA-256( canonical JSON of seq, at, who, kind, reason, content_hash, previous_hash = hash(n−1) )

The hash of the last event, the head, is the library's fingerprint: it changes with every event, and nobody can change an
earlier event, or the content it vouches for, without changing it.
"""

from __future__ import annotations

import hashlib
import json
import sqlite3
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from identify.errors import LibraryDamaged, UsageError, quote

GENESIS = "0" * 64
"""Previous hash of the first event."""
MAX_WHO, MAX_REASON = 200, 4000
_ENCODER = json.JSONEncoder(sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


@dataclass(frozen=True, slots=True)
class Event:
    """One row of the audit chain."""

    seq: int
    at: str
    """UTC, ISO 8601 with microseconds and `Z`."""
    who: str
    kind: str
    """What was done: `created`, `imported`, `proposed`, `accepted`, `refused`, `withdrawn`, `quarantined` …"""
    reason: str
    content: str
    """Canonical JSON of the details."""
    content_hash: str
    previous_hash: str
    hash: str

    @property
    def details(self) -> dict[str, Any]:
        """The content, parsed.

        Raises
        ------
        LibraryDamaged
            If it is no JSON object: somebody, or a flipped bit, changed the file.
        """
        try:
            parsed = json.loads(self.content)
        except (ValueError, RecursionError):
            parsed = None
        if not isinstance(parsed, dict):
            raise LibraryDamaged(
                "library", found=f"event {self.seq} with content that is no JSON object", expected="an intact file",
                hint="Run `ionwitness library verify`, and restore the last backup.",
            )  # fmt: skip
        return parsed


def canonical_json(value: Any) -> str:
    """The one JSON text of a value: keys sorted, no spaces, no NaN.

    Raises
    ------
    ValueError
        For NaN or infinity.

    Examples
    --------
    >>> canonical_json({"b": 1, "a": [0.5, "µ"]})
    '{"a":[0.5,"µ"],"b":1}'
    """
    return _ENCODER.encode(value)


def sha256_of(text: str) -> str:
    """Hexadecimal SHA-256 of the UTF-8 bytes of `text`.

    Examples
    --------
    >>> sha256_of("abc")[:8]
    'ba7816bf'
    """
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def event_hash(seq: int, at: str, who: str, kind: str, reason: str, content_hash: str, previous_hash: str) -> str:
    """Hash of one event over all its fields and the hash before."""
    return sha256_of(
        canonical_json(
            {
                "seq": seq,
                "at": at,
                "who": who,
                "kind": kind,
                "reason": reason,
                "content_hash": content_hash,
                "previous_hash": previous_hash,
            }
        )
    )


def format_time(when: datetime) -> str:
    """UTC text of an aware time.

    Raises
    ------
    UsageError
        If `when` has no time zone.

    Examples
    --------
    >>> format_time(datetime(2025, 5, 1, 12, 0, tzinfo=UTC))
    '2025-05-01T12:00:00.000000Z'
    """
    if when.tzinfo is None:
        raise UsageError("time of an event", found=f"{when.isoformat()} without a time zone", expected="a UTC time")
    return when.astimezone(UTC).isoformat(timespec="microseconds").replace("+00:00", "Z")


def append_event(
    connection: sqlite3.Connection, *, kind: str, who: str, when: datetime, reason: str, content: Mapping[str, Any]
) -> Event:
    """Add an event at the head of the chain, inside the transaction of the change it records.

    Parameters
    ----------
    connection : sqlite3.Connection
        In a transaction.
    kind, who, reason : str
        `who` must name somebody.
    when : datetime
        With time zone.
    content : mapping
        JSON values.

    Returns
    -------
    Event

    Raises
    ------
    UsageError
        If nobody is named, a text is too long or not printable, or the time has no zone.
    RuntimeError
        If no transaction is open: a change and its event must be committed together.
    """
    if not connection.in_transaction:
        raise RuntimeError("an event belongs into the transaction of the change it records")
    who = _check_text("person", who, MAX_WHO)
    reason = reason.strip()
    if len(reason) > MAX_REASON:
        raise UsageError("reason", found=f"{len(reason):,} characters", expected=f"at most {MAX_REASON:,}")
    row = connection.execute("SELECT seq, hash FROM event ORDER BY seq DESC LIMIT 1").fetchone()
    last_seq, previous = row if row else (0, GENESIS)
    at, text = format_time(when), canonical_json(content)
    content_hash = sha256_of(text)
    event = Event(
        last_seq + 1, at, who, kind, reason, text, content_hash, previous,
        event_hash(last_seq + 1, at, who, kind, reason, content_hash, previous),
    )  # fmt: skip
    connection.execute(
        "INSERT INTO event (seq, at, who, kind, reason, content, content_hash, previous_hash, hash)"
        " VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
        (event.seq, at, who, kind, reason, text, content_hash, previous, event.hash),
    )
    return event


def _check_text(what: str, text: str, limit: int) -> str:
    text = text.strip()
    if not text or len(text) > limit or not text.isprintable():
        raise UsageError(what, found=quote(text), expected=f"a printable name of 1 to {limit} characters")
    return text


def read_events(connection: sqlite3.Connection, upto: int | None = None, start: int = 1) -> Iterator[Event]:
    """Events in order, from number `start` to `upto` (or the last)."""
    rows = connection.execute(
        "SELECT seq, at, who, kind, reason, content, content_hash, previous_hash, hash FROM event"
        " WHERE seq >= ? AND (? IS NULL OR seq <= ?) ORDER BY seq",
        (start, upto, upto),
    )
    for row in rows:
        yield Event(*row)


def find_chain_fault(events: Iterator[Event]) -> str:
    """First thing that is wrong with a chain, in words; empty when it is intact.

    Notes
    -----
    O(n). The first event must have number 1 and no predecessor; every later one continues the one before.
    """
    previous, number = GENESIS, 0
    for event in events:
        number += 1
        if event.seq != number:
            return f"event {number} is missing"
        texts = (event.at, event.who, event.kind, event.reason, event.content, event.content_hash, event.previous_hash)
        if not all(isinstance(text, str) for text in texts):  # a flipped bit can turn text into bytes
            return f"event {number}: a field is no text"
        if sha256_of(event.content) != event.content_hash:
            return f"event {number}: its content does not agree with its content hash"
        if event.previous_hash != previous:
            return f"event {number}: it does not continue event {number - 1}"
        stated = event_hash(
            event.seq, event.at, event.who, event.kind, event.reason, event.content_hash, event.previous_hash
        )
        if stated != event.hash:
            return f"event {number}: its hash does not agree with its fields"
        previous = event.hash
    return "" if number else "there is no event"
