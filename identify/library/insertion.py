"""Put drafts of entries into an open transaction, together with the event that vouches for them."""

from __future__ import annotations

import hashlib
import sqlite3
from collections.abc import Iterable, Mapping
from datetime import datetime
from typing import Any

from identify.errors import LibraryConflict, quote
from identify.library.events import Event, append_event
from identify.library.rows import CONTENT_COLUMNS, CompoundKey, Draft

_COLUMNS = ("event_seq", "compound_id", "content_hash", *CONTENT_COLUMNS)
_INSERT = f"INSERT INTO entry ({', '.join(_COLUMNS)}) VALUES ({', '.join('?' * len(_COLUMNS))})"  # noqa: S608


class Insertion:
    """Entries that come in under one event.

    The event is written last, because it vouches for them all; its number is known before, and the foreign key is checked
    when the transaction is committed.

    Parameters
    ----------
    connection : sqlite3.Connection
        In a transaction.
    """

    def __init__(self, connection: sqlite3.Connection) -> None:
        self._connection = connection
        (last,) = connection.execute("SELECT coalesce(max(seq), 0) FROM event").fetchone()
        self._event_seq = last + 1
        self._compounds: dict[str, int] = {}
        self._hashes = hashlib.sha256()
        self.entry_ids: list[int] = []

    def add(self, draft: Draft) -> int:
        """Id of the new entry.

        Raises
        ------
        LibraryConflict
            If its accession is taken.
        """
        accession = str(draft.columns["accession"])
        if self._connection.execute("SELECT 1 FROM entry WHERE accession = ?", (accession,)).fetchone():
            raise LibraryConflict("accession", found=f"{quote(accession)} again", expected="each accession once")
        digest = draft.content_hash
        values = [draft.columns[name] for name in CONTENT_COLUMNS]
        compound = self._compound_id(draft.compound)
        cursor = self._connection.execute(_INSERT, (self._event_seq, compound, digest, *values))
        entry_id = int(cursor.lastrowid or 0)
        self._connection.execute(
            "INSERT INTO source_peaks (entry_id, mz, intensity) VALUES (?, ?, ?)",
            (entry_id, draft.source_mz, draft.source_intensity),
        )
        self._hashes.update(digest.encode())
        self.entry_ids.append(entry_id)
        return entry_id

    def _compound_id(self, compound: CompoundKey) -> int:
        known = self._compounds.get(compound.key)
        if known is not None:
            return known
        row = self._connection.execute("SELECT id FROM compound WHERE key = ?", (compound.key,)).fetchone()
        if row is None:
            cursor = self._connection.execute(
                "INSERT INTO compound (key, name, formula, smiles, is_labelled) VALUES (?, ?, ?, ?, ?)",
                (compound.key, compound.name, compound.formula, compound.smiles, int(compound.is_labelled)),
            )
            row = (int(cursor.lastrowid or 0),)
        self._compounds[compound.key] = row[0]
        return int(row[0])

    def finish(self, *, kind: str, who: str, when: datetime, reason: str, content: Mapping[str, Any]) -> Event:
        """Event that names the entries and the hash over their content hashes; ends the insertion.

        Raises
        ------
        UsageError
            See `append_event`.
        """
        entries = {
            "entries": len(self.entry_ids),
            "first_entry": self.entry_ids[0] if self.entry_ids else None,
            "last_entry": self.entry_ids[-1] if self.entry_ids else None,
            "digest": self._hashes.hexdigest(),
        }
        return append_event(
            self._connection, kind=kind, who=who, when=when, reason=reason, content={**content, **entries}
        )


def digest_of(content_hashes: Iterable[str]) -> str:
    """Hash over content hashes in order of entry id, as an event states it."""
    digest = hashlib.sha256()
    for content_hash in content_hashes:
        digest.update(content_hash.encode())
    return digest.hexdigest()
