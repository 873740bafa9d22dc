"""Keep entries safely and say who added what: one SQLite file, an append-only chain of events, a rebuildable index.

The way through the room::

    schema      tables, triggers, migrations           connection  open a file, translate sqlite3's errors
    events      the chain of events                    rows        entry ↔ table row, content hash
    build       records → library                      store       library → entries
    cache       library → search index                 verify      recompute everything

Not for: reading spectrum files (`identify.readers`), scoring (`identify.similarity`, `identify.index`), judging an answer
(`identify.evidence`). Only this room imports sqlite3.
"""
