"""Library → entries: open, look up, iterate. Entries never change; what became of them may.

A `Library` may be used from several threads. It sees what other processes commit; `as_of` fixes it to the state after one
event, whatever is committed later.
"""

from __future__ import annotations

import sqlite3
from collections import OrderedDict
from collections.abc import Collection, Iterator, Sequence
from pathlib import Path
from typing import Any

from identify.errors import LibraryError, UsageError, quote
from identify.library.connection import BUSY_TIMEOUT_S, connect, translated
from identify.library.library_file import LibraryFile
from identify.library.rows import ENTRY_COLUMNS, RECORD_COLUMNS, entry_of, peaks_of, record_of
from identify.records import Entry, EntryStatus, LibraryState, Peaks, SpectrumRecord

SEARCHABLE = frozenset({EntryStatus.REFERENCE, EntryStatus.OWN_STANDARD, EntryStatus.DEMONSTRATION})
"""Standings an entry needs to be found by a search."""
MAX_CACHED_ENTRIES = 20_000
_ENTRY_SELECT = f"SELECT {', '.join(ENTRY_COLUMNS)} FROM entry"  # noqa: S608  (constant column names)
_RECORD_SELECT = f"SELECT {', '.join('entry.' + name for name in RECORD_COLUMNS)}, mz, intensity FROM entry"  # noqa: S608
_BATCH = 500


def open_library(
    path: Path | str, writable: bool = False, *, as_of: int | str | None = None, busy_timeout_s: float = BUSY_TIMEOUT_S
) -> Library:
    """An open library; use it as a context manager.

    Parameters
    ----------
    path : Path or str
    writable : bool
        False works on read-only media too.
    as_of : int or str, optional
        Number of an event, or at least 8 first digits of its hash: the library as it stood after that event.
    busy_timeout_s : float
        How long to wait for another writer, in seconds.

    Returns
    -------
    Library

    Raises
    ------
    LibraryMissing, LibraryError, LibraryVersionError, LibraryBusy, LibraryDamaged
        See `identify.library.connection.connect`.
    UsageError
        If `as_of` names no event, or is combined with `writable`.
    """
    path = Path(path)
    if writable and as_of is not None:
        raise UsageError("--as-of", found="a library opened for writing", expected="reading only")
    connection = connect(path, writable=writable, busy_timeout_s=busy_timeout_s)
    try:
        with translated(path):
            upto = None if as_of is None else _find_event(connection, as_of, path)
            return Library(path, connection, writable, upto)
    except BaseException:
        connection.close()
        raise


def _marks(values: Collection[object]) -> str:
    """One placeholder per value."""
    return ", ".join("?" * len(values))


def _batches(ids: Sequence[int]) -> Iterator[Sequence[int]]:
    """Ids in lots that a statement has room for."""
    return (ids[start : start + _BATCH] for start in range(0, len(ids), _BATCH))


def _find_event(connection: sqlite3.Connection, wanted: int | str, path: Path) -> int:
    text, rows = str(wanted).strip().lower(), []
    if text.isdecimal() and len(text) < 16:
        rows = connection.execute("SELECT seq FROM event WHERE seq = ?", (int(text),)).fetchall()
    # One hash in forty begins with eight digits and no letter.
    if not rows and len(text) >= 8 and set(text) <= set("0123456789abcdef"):
        rows = connection.execute("SELECT seq FROM event WHERE substr(hash, 1, ?) = ?", (len(text), text)).fetchall()
    if len(rows) != 1:
        raise UsageError(
            "event", where=str(path), found=f"{len(rows)} events for {quote(text)}",
            expected="the number of an event, or 8 or more first digits of its hash",
            hint="`ionwitness library info` lists the events.",
        )  # fmt: skip
    return int(rows[0][0])


class Library(LibraryFile):
    """Entries of one library file; made by `open_library`."""

    def __init__(self, path: Path, connection: sqlite3.Connection, writable: bool, as_of: int | None) -> None:
        super().__init__(path, connection, writable, as_of)
        self._cache: OrderedDict[int, Entry] = OrderedDict()

    def _forget(self) -> None:
        self._cache.clear()
        super()._forget()

    def state(self) -> LibraryState:
        """Fingerprint, and how many searchable entries and compounds there are."""
        with self.reading() as connection:
            n_entries, n_compounds = connection.execute(
                "SELECT count(*), count(DISTINCT compound_id) FROM entry"  # noqa: S608  (placeholders only)
                f" WHERE event_seq <= ? AND initial_status IN ({_marks(SEARCHABLE)})",
                (self.last_event, *SEARCHABLE),
            ).fetchone()
            before, after = self._moved_compounds(connection)
            n_entries += len(after) - len(before)
            n_compounds += len(set(after)) - len(set(before))
            return LibraryState(str(self.path), self.fingerprint, n_entries, n_compounds)

    def _moved_compounds(self, connection: sqlite3.Connection) -> tuple[list[int], list[int]]:
        """Compound of every searchable entry, as the entries came and as they stand, for the compounds that changed."""
        before, after, compounds = list[int](), list[int](), set[int]()
        for batch in _batches(list(self._standing)):
            rows = connection.execute(f"SELECT compound_id FROM entry WHERE id IN ({_marks(batch)})", batch)  # noqa: S608
            compounds.update(row[0] for row in rows)
        for compound in compounds:
            rows = connection.execute(
                "SELECT id, initial_status FROM entry WHERE compound_id = ? AND event_seq <= ?",
                (compound, self.last_event),
            )
            for entry, status in rows:
                before += [compound] * (status in SEARCHABLE)
                after += [compound] * (self._standing.get(entry, status) in SEARCHABLE)
        return before, after

    def entry_ids(self, statuses: Collection[EntryStatus] = SEARCHABLE) -> list[int]:
        """Ids of the entries with one of these standings, ascending."""
        with self.reading() as connection:
            rows = connection.execute(
                "SELECT id, initial_status FROM entry INDEXED BY entry_by_event WHERE event_seq <= ?",
                (self.last_event,),
            )
            moved = self._standing
            return sorted(entry for entry, status in rows if moved.get(entry, status) in statuses)

    def get_entries(self, ids: Sequence[int]) -> list[Entry]:
        """Entries in the order of `ids`, whatever their standing.

        Parameters
        ----------
        ids : sequence of int

        Returns
        -------
        list of Entry

        Raises
        ------
        LibraryError
            If an id is unknown (at the event the library is opened at).
        LibraryDamaged
            If an entry cannot be decoded.
        """
        with self.reading() as connection:
            cache = self._cache
            wanted = [entry_id for entry_id in ids if entry_id not in cache]
            found = {entry_id: cache[entry_id] for entry_id in ids if entry_id in cache}
            for batch in _batches(wanted):
                rows = connection.execute(
                    f"{_ENTRY_SELECT} WHERE id IN ({_marks(batch)}) AND event_seq <= ?", (*batch, self.last_event)
                )
                for row in rows:
                    found[row[0]] = self._decode(row)
            missing = [entry_id for entry_id in ids if entry_id not in found]
            if missing:
                raise LibraryError("entry", where=str(self.path), found=f"no entry {missing[0]}", expected="a known id")
            for entry_id, entry in found.items():
                cache[entry_id] = entry
                cache.move_to_end(entry_id)
            while len(cache) > MAX_CACHED_ENTRIES:
                cache.popitem(last=False)
            return [found[entry_id] for entry_id in ids]

    def _decode(self, row: Sequence[Any]) -> Entry:
        status = self._standing.get(row[0])
        return entry_of(row, self._status(row[-1]) if status is None else status, str(self.path))

    def iter_entries(self, statuses: Collection[EntryStatus] = SEARCHABLE) -> Iterator[Entry]:
        """Entries with one of these standings, by ascending id, not cached.

        Raises
        ------
        LibraryDamaged
            If an entry cannot be decoded.
        """
        for batch in _batches(self.entry_ids(statuses)):
            with self.reading() as connection:
                rows = connection.execute(
                    f"{_ENTRY_SELECT} WHERE id IN ({_marks(batch)}) ORDER BY id", batch
                ).fetchall()
                entries = [self._decode(row) for row in rows]
            yield from entries

    def iter_peaks(self, ids: Sequence[int] | None = None) -> Iterator[tuple[int, Peaks, int]]:
        """Entry id, nominal peaks and lowest m/z of entries, by ascending id: what an index is built from.

        Parameters
        ----------
        ids : sequence of int, optional
            Ascending; all searchable entries by default.

        Raises
        ------
        LibraryDamaged
            If the peaks cannot be decoded.
        """
        for batch in _batches(self.entry_ids() if ids is None else ids):
            with self.reading() as connection:
                rows = connection.execute(
                    "SELECT id, nominal_mz, nominal_intensity, lowest_mz FROM entry"  # noqa: S608
                    f" WHERE id IN ({_marks(batch)}) ORDER BY id",
                    batch,
                ).fetchall()
            for entry_id, mz, intensity, lowest_mz in rows:
                yield entry_id, peaks_of(mz, intensity, f"{self.path}, entry {entry_id}"), lowest_mz

    def get_records(self, ids: Sequence[int]) -> list[SpectrumRecord]:
        """Records the entries were made of, in the order of `ids`: source peaks and metadata as stated.

        Raises
        ------
        LibraryError
            If an id is unknown.
        LibraryDamaged
            If a record cannot be decoded.
        """
        records = []
        with self.reading() as connection:
            for entry_id in ids:
                row = connection.execute(
                    f"{_RECORD_SELECT} JOIN source_peaks ON entry_id = entry.id WHERE entry.id = ? AND event_seq <= ?",
                    (entry_id, self.last_event),
                ).fetchone()
                if row is None:
                    raise LibraryError(
                        "entry", where=str(self.path), found=f"no entry {entry_id}", expected="a known id"
                    )
                records.append(record_of(row[:-2], row[-2], row[-1], f"{self.path}, entry {entry_id}"))
        return records

    def find_entries(
        self,
        *,
        name: str = "",
        formula: str = "",
        nominal_mass: int | None = None,
        accession: str = "",
        inchikey: str = "",
        compound_id: int | None = None,
        statuses: Collection[EntryStatus] = SEARCHABLE,
        limit: int = 1000,
    ) -> list[Entry]:
        """Entries that fulfil every condition given, by ascending id.

        Parameters
        ----------
        name : str
            Part of the name, in any case.
        formula : str
            Formula as measured, in Hill order.
        nominal_mass : int, optional
            Of the formula as measured.
        accession : str
            Whole accession.
        inchikey : str
            Whole key, or its first block.
        compound_id : int, optional
        statuses : collection of EntryStatus
        limit : int
            Most entries returned.

        Returns
        -------
        list of Entry

        Raises
        ------
        UsageError
            Without any condition.
        """
        escaped = name.replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_")
        upper = inchikey + "\uffff"
        conditions: list[tuple[bool, str, tuple[Any, ...]]] = [
            (bool(name), "name LIKE ? ESCAPE '\\'", (f"%{escaped}%",)),
            (bool(formula), "formula_as_measured = ?", (formula,)),
            (nominal_mass is not None, "nominal_mass = ?", (nominal_mass,)),
            (bool(accession), "accession = ?", (accession,)),
            (bool(inchikey), "inchikey >= ? AND inchikey < ?", (inchikey, upper)),
            (compound_id is not None, "compound_id = ?", (compound_id,)),
        ]
        used = [(text, values) for asked, text, values in conditions if asked]
        if not used:
            raise UsageError("entry look-up", found="no condition", expected="a name, formula, mass or accession")
        clause = " AND ".join(text for text, _ in used)
        values = [value for _, some in used for value in some]
        with self.reading() as connection:
            rows = connection.execute(
                f"{_ENTRY_SELECT} WHERE {clause} AND event_seq <= ? ORDER BY id", (*values, self.last_event)
            )
            found = []
            for row in rows:
                entry = self._decode(row)
                if entry.status in statuses:
                    found.append(entry)
                if len(found) >= limit:
                    break
            return found
