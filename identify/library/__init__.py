"""Keep entries safely and say who added what: one SQLite file, an append-only chain of events, a rebuildable index.

The way through the room::

    the file    schema       tables, triggers, migrations       connection   open it, translate sqlite3's errors
                library_file one open file, its events          store        library → entries
                rows, blobs  entry ↔ table row, its hash        events       the chain of events
                new_file     a new file, whole or not at all    verify       recompute everything
                backup       copies, restore, migration         sign         a signed head to keep outside
    filling it  drafts       is a record an entry?              insertion    drafts → rows under one event
                intake       the records of one source          build        sources → library
                fetch        download what a recipe names       recipe, licences, shipped, starter
    curating    standards    propose, review, supersede         identities   which compound is it?
                conflicts    what speaks against it             standing     quarantine, withdraw, reinstate
                replicates   entries that should agree          audit        every entry judged (with `audit_*`)
                reported     which results showed an entry
    using it    cache        library → search index             shards       libraries too big for one index
                export       entries → open formats             calibration, info

Not for: reading spectrum files (`identify.readers`), scoring (`identify.similarity`, `identify.index`), judging an answer
(`identify.evidence`). Only this room imports sqlite3.
"""
