"""Tables, triggers and migrations of a library file.

Nothing in a library is ever changed: rows are only added, and triggers hold everybody to it. What an entry *is* stands in
`entry` and `source_peaks`; what became of it (quarantined, withdrawn, accepted) stands in `standing`, one row per event, so
that the library as it stood after any event can be read back. `reported` remembers which entries were shown in results; it
is no part of the state a search depends on and has a chain of hashes of its own.

::

    event ◄── entry.event_seq        compound ◄── entry.compound_id      entry ◄── source_peaks, standing, reported
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Mapping
from functools import cache
from types import MappingProxyType
from typing import NamedTuple

APPLICATION_ID = 0x494F4E57
"""Marks the file as a library of this program ("IONW")."""

_TABLES_1 = """
CREATE TABLE event (
  seq INTEGER PRIMARY KEY CHECK (seq > 0),
  at TEXT NOT NULL,
  who TEXT NOT NULL,
  kind TEXT NOT NULL,
  reason TEXT NOT NULL,
  content TEXT NOT NULL,
  content_hash TEXT NOT NULL,
  previous_hash TEXT NOT NULL UNIQUE,
  hash TEXT NOT NULL UNIQUE
) STRICT;
CREATE TABLE compound (
  id INTEGER PRIMARY KEY,
  key TEXT NOT NULL UNIQUE,
  name TEXT NOT NULL,
  formula TEXT NOT NULL,
  smiles TEXT NOT NULL,
  is_labelled INTEGER NOT NULL CHECK (is_labelled IN (0, 1))
) STRICT;
CREATE TABLE entry (
  id INTEGER PRIMARY KEY,
  event_seq INTEGER NOT NULL REFERENCES event (seq) DEFERRABLE INITIALLY DEFERRED,
  compound_id INTEGER NOT NULL REFERENCES compound (id),
  initial_status TEXT NOT NULL,
  accession TEXT NOT NULL UNIQUE,
  title TEXT NOT NULL,
  name TEXT NOT NULL,
  other_names TEXT NOT NULL,
  formula TEXT NOT NULL,
  smiles TEXT NOT NULL,
  inchi TEXT NOT NULL,
  inchikey TEXT NOT NULL,
  cas TEXT NOT NULL,
  instrument TEXT NOT NULL,
  instrument_type TEXT NOT NULL,
  ionization TEXT NOT NULL,
  energy_ev REAL,
  inlet TEXT NOT NULL,
  ms_level INTEGER,
  polarity TEXT NOT NULL,
  scan_low_mz REAL,
  scan_high_mz REAL,
  retention_time_s REAL,
  retention_index REAL,
  retention_index_kind TEXT NOT NULL,
  column_name TEXT NOT NULL,
  phase TEXT NOT NULL,
  derivative_stated TEXT NOT NULL,
  measured_as TEXT NOT NULL,
  formula_as_measured TEXT NOT NULL,
  nominal_mass INTEGER,
  is_labelled INTEGER NOT NULL CHECK (is_labelled IN (0, 1)),
  licence TEXT NOT NULL,
  authors TEXT NOT NULL,
  source TEXT NOT NULL,
  splash TEXT NOT NULL,
  comments TEXT NOT NULL,
  extra TEXT NOT NULL,
  cleaning TEXT NOT NULL,
  lowest_mz INTEGER NOT NULL,
  nominal_mz BLOB NOT NULL,
  nominal_intensity BLOB NOT NULL,
  accurate_mz BLOB,
  accurate_intensity BLOB,
  content_hash TEXT NOT NULL,
  CHECK (length(nominal_mz) % 2 = 0 AND length(nominal_intensity) = 2 * length(nominal_mz)),
  CHECK (length(accurate_mz) % 8 = 0 AND length(accurate_mz) = 2 * length(accurate_intensity))
) STRICT;
CREATE TABLE source_peaks (
  entry_id INTEGER PRIMARY KEY REFERENCES entry (id),
  mz BLOB NOT NULL,
  intensity BLOB NOT NULL,
  CHECK (length(mz) % 8 = 0 AND length(mz) = length(intensity))
) STRICT;
CREATE TABLE standing (
  entry_id INTEGER NOT NULL REFERENCES entry (id),
  event_seq INTEGER NOT NULL REFERENCES event (seq) DEFERRABLE INITIALLY DEFERRED,
  status TEXT NOT NULL,
  PRIMARY KEY (entry_id, event_seq)
) STRICT, WITHOUT ROWID;
CREATE INDEX entry_by_event ON entry (event_seq, initial_status, compound_id);
CREATE INDEX entry_by_compound ON entry (compound_id);
CREATE INDEX entry_by_name ON entry (name COLLATE NOCASE);
CREATE INDEX entry_by_formula ON entry (formula_as_measured);
CREATE INDEX entry_by_mass ON entry (nominal_mass);
CREATE INDEX entry_by_inchikey ON entry (inchikey);
"""

_TABLES_2 = """
CREATE TABLE reported (
  id INTEGER PRIMARY KEY CHECK (id > 0),
  at TEXT NOT NULL,
  who TEXT NOT NULL,
  result TEXT NOT NULL,
  query_id TEXT NOT NULL,
  query_name TEXT NOT NULL,
  query_source TEXT NOT NULL,
  fingerprint TEXT NOT NULL,
  entry_id INTEGER NOT NULL REFERENCES entry (id),
  rank INTEGER NOT NULL,
  probability REAL NOT NULL,
  claim TEXT NOT NULL,
  previous_hash TEXT NOT NULL UNIQUE,
  hash TEXT NOT NULL UNIQUE
) STRICT;
CREATE INDEX reported_by_entry ON reported (entry_id);
"""


def _append_only(table: str) -> str:
    """Triggers that forbid changing or removing rows of `table`."""
    return "".join(
        f"CREATE TRIGGER {table}_no_{action.lower()} BEFORE {action} ON {table} "
        f"BEGIN SELECT RAISE(ABORT, '{table} rows are append-only'); END;\n"
        for action in ("UPDATE", "DELETE")
    )


class Migration(NamedTuple):
    """One step from the schema version before to `version`."""

    version: int
    title: str
    script: str


MIGRATIONS: tuple[Migration, ...] = (
    Migration(
        1,
        "events, compounds, entries",
        _TABLES_1 + "".join(map(_append_only, ("event", "compound", "entry", "source_peaks", "standing"))),
    ),
    Migration(2, "reported queries", _TABLES_2 + _append_only("reported")),
)
"""Every step ever released, in order; a step is never edited afterwards."""

SCHEMA_VERSION = MIGRATIONS[-1].version


def statements(script: str) -> list[str]:
    """Single SQL statements of a script (``executescript`` would commit the open transaction).

    Examples
    --------
    >>> statements("SELECT 1; SELECT 2;")
    ['SELECT 1;', 'SELECT 2;']
    """
    found: list[str] = []
    current = ""
    for piece in script.split(";"):
        current += piece + ";"
        if sqlite3.complete_statement(current):
            if current.strip(" \n;"):
                found.append(current.strip())
            current = ""
    return found


def apply_migrations(connection: sqlite3.Connection, upto: int = SCHEMA_VERSION) -> None:
    """Bring an open file from its version to `upto`, inside the caller's transaction.

    Parameters
    ----------
    connection : sqlite3.Connection
        In a transaction; version 0 is an empty file.
    upto : int
        Schema version to stop at.
    """
    (current,) = connection.execute("PRAGMA user_version").fetchone()
    for migration in MIGRATIONS:
        if current < migration.version <= upto:
            for statement in statements(migration.script):
                connection.execute(statement)
            connection.execute(f"PRAGMA user_version = {migration.version}")
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")


def schema_objects(connection: sqlite3.Connection) -> dict[str, str]:
    """Name and SQL text of every table, index and trigger of the program's own."""
    rows = connection.execute("SELECT name, sql FROM sqlite_master WHERE sql IS NOT NULL AND name NOT LIKE 'sqlite_%'")
    return {str(name): str(sql) for name, sql in rows}


def find_schema_faults(connection: sqlite3.Connection, version: int = SCHEMA_VERSION) -> Iterator[tuple[str, str]]:
    """Name of every table, index or trigger that is not as `version` made it, and what is wrong with it."""
    found, expected = schema_objects(connection), expected_objects(version)
    for name in sorted(found.keys() | expected.keys()):
        if name not in found:
            yield name, "is missing"
        elif name not in expected:
            yield name, "does not belong to a library"
        elif found[name] != expected[name]:
            yield name, "was changed"


@cache
def expected_objects(version: int = SCHEMA_VERSION) -> Mapping[str, str]:
    """What `schema_objects` gives for an intact library of `version`.

    Examples
    --------
    >>> "event_no_update" in expected_objects(1)
    True
    """
    connection = sqlite3.connect(":memory:", isolation_level=None)
    try:
        connection.execute("BEGIN")
        apply_migrations(connection, version)
        return MappingProxyType(schema_objects(connection))
    finally:
        connection.close()
