"""Does the ranking gain or lose when the entries that the audit proposes for quarantine leave the library?

    cp all.ionlib audited.ionlib
    ionwitness library audit audited.ionlib --quarantine --who curator --why "proposals of the audit"
    python tests/benchmarks/quarantine.py audited.ionlib [--folds 1]

The queries of `ranking_data` (one record per compound with replicates, all out of the library at once) are answered by the
product's own path with the shipped parameters, from all other open records and from those without the quarantined ones.
The parameters were fitted on these records, so only the difference means something.
"""

from __future__ import annotations

import argparse
from collections.abc import Collection
from pathlib import Path

import numpy as np
from accuracy import run_product
from ranking_data import N_FOLDS, Benchmark, load_benchmark

from identify.index import SearchIndex, build_index
from identify.library.store import open_library
from identify.ranking.model import default_model
from identify.records import EntryStatus
from identify.settings import Settings


def read_quarantined(path: Path) -> frozenset[str]:
    """Accessions of the quarantined entries of a library."""
    with open_library(path) as library:
        return frozenset(entry.accession for entry in library.iter_entries({EntryStatus.QUARANTINED}))


def index_without(bench: Benchmark, settings: Settings, accessions: Collection[str]) -> SearchIndex:
    """Index of all records but the held-out ones and those named."""
    held = set(bench.queries)
    rows = [
        (entry.id, entry.spectrum.nominal, entry.spectrum.lowest_mz)
        for place, entry in enumerate(bench.entries)
        if place not in held and entry.accession not in accessions
    ]
    return build_index(rows, settings.weighting)


def main() -> None:
    """Print rank-1 and rank-3 with and without the quarantined entries, and every query whose answer changed."""
    asked = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    asked.add_argument("library", type=Path, help="open records with the proposals of the audit applied")
    asked.add_argument("--folds", type=int, default=1, help=f"folds of queries measured, of {N_FOLDS}")
    options = asked.parse_args()
    bench, settings, gone = load_benchmark(), Settings(), read_quarantined(options.library)
    places = [place for place in bench.queries if bench.fold[bench.keys[place]] < options.folds]
    models = dict.fromkeys(range(N_FOLDS), default_model())
    sound = [bench.entries[place].accession not in gone for place in places]
    lost = [
        place
        for place in places
        if all(
            bench.entries[other].accession in gone for other in bench.replicates(place) if other not in bench.queries
        )
    ]
    print(
        f"{len(gone):,} quarantined; {len(places):,} queries, {len(places) - sum(sound):,} of them quarantined themselves"
    )
    print(f"queries whose compound has no other entry left in use: {len(lost):,}")
    ranks = {}
    for title, accessions in (("all entries", frozenset[str]()), ("without quarantined", gone)):
        answers, _ = run_product(bench, index_without(bench, settings, accessions), places, models, set())
        ranks[title] = np.array([answer.rank for answer in answers])
        for name, chosen in (("all queries", [True] * len(places)), ("queries not quarantined", sound)):
            found = ranks[title][chosen]
            print(
                f"{title:22s} {name:26s} n {found.size:5d}  rank-1 {(found == 1).mean():.4f}  rank-3 {(found <= 3).mean():.4f}"
            )
    before, after = ranks.values()
    print(f"first before, not after: {((before == 1) & (after != 1)).sum()}; not before, first after: "
          f"{((before != 1) & (after == 1)).sum()}")  # fmt: skip


if __name__ == "__main__":
    main()
