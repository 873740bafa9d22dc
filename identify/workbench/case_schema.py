"""Tables of a case file. What was read, found and decided is only ever added to: triggers refuse the rest."""

from __future__ import annotations

APPLICATION_ID = 0x494F4E43
"""``IONC`` in the file header."""
SCHEMA_VERSION = 1

TABLES = """
CREATE TABLE person (
    name TEXT PRIMARY KEY CHECK (length(name) BETWEEN 1 AND 80),
    role TEXT NOT NULL CHECK (role IN ('analyst', 'reviewer')),
    password_hash TEXT NOT NULL,
    added_at TEXT NOT NULL
) STRICT, WITHOUT ROWID;

CREATE TABLE job (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    kind TEXT NOT NULL CHECK (kind IN ('spectra', 'run', 'verify')),
    name TEXT NOT NULL,
    who TEXT NOT NULL,
    created_at TEXT NOT NULL,
    options TEXT NOT NULL,
    state TEXT NOT NULL DEFAULT 'waiting'
        CHECK (state IN ('waiting', 'running', 'done', 'failed', 'cancelled')),
    n_done INTEGER NOT NULL DEFAULT 0,
    n_total INTEGER,
    message TEXT NOT NULL DEFAULT '',
    finished_at TEXT
) STRICT;

CREATE TABLE run (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    job_id INTEGER NOT NULL UNIQUE REFERENCES job (id),
    name TEXT NOT NULL,
    at TEXT NOT NULL,
    data BLOB NOT NULL
) STRICT;

CREATE TABLE query (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    job_id INTEGER NOT NULL REFERENCES job (id),
    number INTEGER NOT NULL,
    run_id INTEGER REFERENCES run (id),
    name TEXT NOT NULL,
    source TEXT NOT NULL,
    time_s REAL,
    record BLOB NOT NULL,
    UNIQUE (job_id, number)
) STRICT;
CREATE INDEX query_by_run ON query (run_id, number);

CREATE TABLE result (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    query_id INTEGER NOT NULL REFERENCES query (id),
    made_at TEXT NOT NULL,
    who TEXT NOT NULL,
    level TEXT NOT NULL,
    statement TEXT NOT NULL,
    probability REAL NOT NULL,
    best TEXT NOT NULL,
    follow_up TEXT NOT NULL,
    document BLOB NOT NULL
) STRICT;
CREATE INDEX result_by_query ON result (query_id, id);

CREATE TABLE rejection (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    job_id INTEGER NOT NULL REFERENCES job (id),
    item TEXT NOT NULL
) STRICT;
CREATE INDEX rejection_by_job ON rejection (job_id, id);

CREATE TABLE decision (
    seq INTEGER PRIMARY KEY,
    query_id INTEGER NOT NULL REFERENCES query (id),
    result_id INTEGER NOT NULL REFERENCES result (id),
    at TEXT NOT NULL,
    who TEXT NOT NULL CHECK (who != ''),
    kind TEXT NOT NULL CHECK (kind IN ('accept', 'reject', 'follow-up', 'note', 'reopen')),
    level TEXT NOT NULL,
    compound TEXT NOT NULL,
    accession TEXT NOT NULL,
    note TEXT NOT NULL,
    previous_hash TEXT NOT NULL UNIQUE,
    hash TEXT NOT NULL UNIQUE
) STRICT;
CREATE INDEX decision_by_query ON decision (query_id, seq);
"""

KEPT = ("run", "query", "result", "rejection", "decision")
"""Tables that rows are only added to."""

TRIGGERS = "".join(
    f"CREATE TRIGGER {table}_{word.lower()} BEFORE {word} ON {table}"
    f" BEGIN SELECT RAISE(ABORT, '{table}: rows are only added'); END;\n"
    for table in KEPT
    for word in ("UPDATE", "DELETE")
)
