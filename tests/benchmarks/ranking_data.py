"""Queries and libraries for fitting and measuring the ranking: which records are held out, and what is right.

Protocol. One record of each compound with replicates is held out as a query: 60–80 eV or unstated, not isotope-labelled, and
another such record of the same compound in the same (or an unstated) derivative form stays in the library. All held-out
records leave the library at once. In the open set every compound of 3 of 8 queries leaves it too, with all its records.
Folds are by compound; seeds are fixed.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np
from evidence_data import as_query, is_usual, load_entries

from identify.index import SearchIndex, build_index, search_index
from identify.ranking.grouping import Match, compound_key
from identify.records import Entry, Query
from identify.settings import Settings

N_FOLDS = 5
ABSENT_SHARE = 3 / 8
SEED = 20250501


def same_form(a: Entry, b: Entry) -> bool:
    """Measured as the same derivative, as far as the sources say (`n TMS` fits any number of TMS groups)."""
    if a.measured_as == b.measured_as:
        return True
    (n_a, _, group_a), (n_b, _, group_b) = (x.measured_as.rpartition(" ") for x in (a, b))
    return bool(group_a) and group_a == group_b and "n" in (n_a, n_b)


@dataclass(eq=False)
class Benchmark:
    """The open records, split.

    Attributes
    ----------
    entries : list of Entry
    queries : list of int
        Places of the held-out records, one per compound.
    extra : list of int
        Places of further records of the same compounds, for training only; they stay in the library.
    fold : dict of str to int
        Fold of each compound.
    absent : set of str
        Compounds that the open-set library lacks.
    """

    entries: list[Entry]
    queries: list[int] = field(default_factory=list)
    extra: list[int] = field(default_factory=list)
    fold: dict[str, int] = field(default_factory=dict)
    absent: set[str] = field(default_factory=set)

    def __post_init__(self) -> None:
        rng = np.random.default_rng(SEED)
        self.keys = [compound_key(entry) for entry in self.entries]
        self.by_key: dict[str, list[int]] = defaultdict(list)
        for place, key in enumerate(self.keys):
            self.by_key[key].append(place)
        for key, places in self.by_key.items():
            usable = [place for place in places if is_usual(self.entries[place]) and self.replicates(place)]
            if usable:
                chosen = rng.permutation(usable)
                self.queries.append(int(chosen[0]))
                self.extra += [int(place) for place in chosen[1:3]]
                self.fold[key] = int(rng.integers(N_FOLDS))
        keys = [self.keys[place] for place in self.queries]
        self.absent = {str(key) for key in rng.permutation(keys)[: round(ABSENT_SHARE * len(keys))]}
        self.by_id = {entry.id: entry for entry in self.entries}
        self.key_of = {entry.id: key for entry, key in zip(self.entries, self.keys, strict=True)}

    def replicates(self, place: int) -> list[int]:
        """Other records of the same compound that count as replicates of this one."""
        entry = self.entries[place]
        others = [other for other in self.by_key[self.keys[place]] if other != place]
        return [other for other in others if is_usual(self.entries[other]) and same_form(entry, self.entries[other])]

    def build_index(self, settings: Settings, without: Iterable[str] = ()) -> SearchIndex:
        """Index of all records but the held-out ones and those of some compounds."""
        held, gone = set(self.queries), set(without)
        rows = [
            (entry.id, entry.spectrum.nominal, entry.spectrum.lowest_mz)
            for place, entry in enumerate(self.entries)
            if place not in held and self.keys[place] not in gone
        ]
        return build_index(rows, settings.weighting)

    def query(self, place: int) -> Query:
        """A record played as an unknown."""
        return as_query(self.entries[place])

    def find(self, index: SearchIndex, query: Query, settings: Settings, skip: Sequence[int] = ()) -> list[Match]:
        """Matches of a query, without some entries."""
        hits = search_index(index, query.spectrum, settings.search_depth)
        return [Match(hit, self.by_id[hit.entry_id]) for hit in hits if hit.entry_id not in skip]


def load_benchmark() -> Benchmark:
    """The open records, split as the module says."""
    return Benchmark(load_entries())
