"""What in the library speaks against a spectrum being of the compound it is said to be."""

from __future__ import annotations

from dataclasses import dataclass

from identify.index import SearchIndex, search_index
from identify.library.replicates import find_replicates
from identify.library.store import Library
from identify.records import Entry
from identify.similarity.scores import cosine_score
from identify.spectra.align import align

DISAGREES_BELOW = 0.7
"""Two good 70 eV spectra of one compound rarely have a lower weighted cosine (judgement, see `tests/benchmarks/audit.py`)."""
MATCHES_FROM = 0.9
"""Another compound that matches no worse, and better than every replicate, contradicts (judgement)."""
DEPTH = 25
"""Hits looked at."""


@dataclass(frozen=True, slots=True)
class Conflict:
    """One entry that contradicts a proposed identity."""

    kind: str
    """`replicate disagrees` or `other compound matches as well`."""
    accession: str
    name: str
    cosine: float


def find_conflicts(library: Library, index: SearchIndex, entry: Entry) -> tuple[Conflict, ...]:
    """Replicates of an entry that disagree with it, and other compounds that match it as well, worst first.

    Parameters
    ----------
    library : Library
    index : SearchIndex
        Of the library.
    entry : Entry
        In the library, in use or not.

    Returns
    -------
    tuple of Conflict
    """
    replicates = [other for other in find_replicates(library, entry) if other.id != entry.id]
    scores = {other.id: cosine_score(align(entry.spectrum, other.spectrum), index.weighting) for other in replicates}
    conflicts = [
        _conflict("replicate disagrees", other, scores[other.id])
        for other in replicates
        if scores[other.id] < DISAGREES_BELOW
    ]
    limit = max([MATCHES_FROM, *scores.values()])
    hits = search_index(index, entry.spectrum, DEPTH)
    strong = {hit.entry_id: hit.cosine for hit in hits if hit.cosine >= limit and hit.entry_id != entry.id}
    for other in library.get_entries(list(strong)):
        if other.compound_id != entry.compound_id:
            conflicts.append(_conflict("other compound matches as well", other, strong[other.id]))
    return tuple(sorted(conflicts, key=lambda c: (c.kind != "replicate disagrees", -c.cosine, c.accession)))


def _conflict(kind: str, entry: Entry, cosine: float) -> Conflict:
    return Conflict(kind, entry.accession, entry.identity.name, cosine)
