"""What in the library speaks against a spectrum being of the compound it is said to be."""

from __future__ import annotations

from dataclasses import dataclass

from identify.index import SearchIndex, search_index
from identify.library.drafts import DEFAULT_ENERGY_EV
from identify.library.store import Library
from identify.records import CleanSpectrum, Entry
from identify.similarity.scores import cosine_score
from identify.spectra.align import align

DISAGREES_BELOW = 0.7
"""Two good 70 eV spectra of one compound rarely have a lower weighted cosine (judgement, see `tests/benchmarks/audit.py`)."""
MATCHES_FROM = 0.9
DEPTH = 25
ENERGY_WINDOW_EV = 15.0


@dataclass(frozen=True, slots=True)
class Conflict:
    """One entry that contradicts a proposed identity."""

    kind: str
    """`replicate disagrees` or `other compound matches as well`."""
    accession: str
    name: str
    cosine: float


def find_conflicts(
    library: Library,
    index: SearchIndex,
    spectrum: CleanSpectrum,
    *,
    compound_id: int | None,
    measured_as: str,
    energy_ev: float | None,
    leave_out: int | None = None,
) -> tuple[Conflict, ...]:
    """Entries of the same compound that disagree, and other compounds that match as well, worst first.

    Parameters
    ----------
    library : Library
    index : SearchIndex
        Of the library.
    spectrum : CleanSpectrum
    compound_id : int or None
        Compound the spectrum is said to be of; None when it is new to the library.
    measured_as : str
        Derivative in normal form; only entries measured alike are compared.
    energy_ev : float or None
        Entries measured at another energy are not compared.
    leave_out : int, optional
        Entry id of the spectrum itself.

    Returns
    -------
    tuple of Conflict
    """
    same = [] if compound_id is None else library.find_entries(compound_id=compound_id)
    replicates = [
        entry
        for entry in same
        if entry.id != leave_out and entry.measured_as == measured_as and have_like_energy(entry, energy_ev)
    ]
    scores = {entry.id: cosine_score(align(spectrum, entry.spectrum), index.weighting) for entry in replicates}
    conflicts = [
        _conflict("replicate disagrees", entry, scores[entry.id])
        for entry in replicates
        if scores[entry.id] < DISAGREES_BELOW
    ]
    best = max(scores.values(), default=0.0)
    hits = [hit for hit in search_index(index, spectrum, DEPTH) if hit.entry_id not in (leave_out, *scores)]
    limit = max(MATCHES_FROM, best)
    strong = {hit.entry_id: hit.cosine for hit in hits if hit.cosine >= limit}
    for entry in library.get_entries(list(strong)):
        if entry.compound_id != compound_id:
            conflicts.append(_conflict("other compound matches as well", entry, strong[entry.id]))
    return tuple(sorted(conflicts, key=lambda c: (c.kind != "replicate disagrees", -c.cosine, c.accession)))


def _conflict(kind: str, entry: Entry, cosine: float) -> Conflict:
    return Conflict(kind, entry.accession, entry.identity.name, cosine)


def have_like_energy(entry: Entry, energy_ev: float | None) -> bool:
    """Whether an entry was measured at about the same electron energy; unstated counts as 70 eV.

    Parameters
    ----------
    entry : Entry
    energy_ev : float or None

    Returns
    -------
    bool
    """
    stated = entry.acquisition.energy_ev
    mine = DEFAULT_ENERGY_EV if energy_ev is None else energy_ev
    return abs((DEFAULT_ENERGY_EV if stated is None else stated) - mine) <= ENERGY_WINDOW_EV
