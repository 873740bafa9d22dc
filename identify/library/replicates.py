"""Which entries are replicates of each other, and the spectrum they agree on."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.errors import UsageError
from identify.library.drafts import DEFAULT_ENERGY_EV
from identify.library.store import Library
from identify.records import Entry, FloatArray, read_only

ENERGY_WINDOW_EV = 15.0
"""Spectra at electron energies no further apart are alike (judgement)."""
MAD_TO_SD = 1.4826
"""Standard deviation of a normal distribution per median absolute deviation."""


def are_replicates(entry: Entry, other: Entry) -> bool:
    """Whether two entries are of one compound, measured in one form, at about the same electron energy (unstated: 70 eV).

    Parameters
    ----------
    entry, other : Entry

    Returns
    -------
    bool
    """
    stated = (found.acquisition.energy_ev for found in (entry, other))
    mine, theirs = (DEFAULT_ENERGY_EV if energy is None else energy for energy in stated)
    same_form = (entry.compound_id, entry.measured_as) == (other.compound_id, other.measured_as)
    return same_form and abs(mine - theirs) <= ENERGY_WINDOW_EV


def find_replicates(library: Library, entry: Entry) -> list[Entry]:
    """Searchable replicates of an entry, itself among them if it is one, by ascending id.

    Parameters
    ----------
    library : Library
    entry : Entry

    Returns
    -------
    list of Entry
    """
    return [other for other in library.find_entries(compound_id=entry.compound_id) if are_replicates(entry, other)]


@dataclass(frozen=True, slots=True, eq=False)
class Consensus:
    """Ions of a compound over its replicates; all arrays have shape ``(n_ions,)``.

    Attributes
    ----------
    mz : nominal m/z, increasing.
    intensity : median relative intensity (base peak of each replicate = 100) over the replicates that cover the m/z, 0
        counted for those without the peak.
    spread : robust standard deviation of the same numbers (scaled median absolute deviation; half the range for two).
    n_covering : replicates whose measured range covers the m/z.
    n_showing : replicates that have the peak.
    accessions : the replicates.
    """

    mz: FloatArray
    intensity: FloatArray
    spread: FloatArray
    n_covering: FloatArray
    n_showing: FloatArray
    accessions: tuple[str, ...]


def build_consensus(entries: Sequence[Entry]) -> Consensus:
    """Consensus of replicates, ions kept that at least half of the covering replicates show.

    Parameters
    ----------
    entries : sequence of Entry
        At least two, of one compound measured in one form at like energy.

    Returns
    -------
    Consensus

    Raises
    ------
    UsageError
        For fewer than two entries, or entries of different compounds or derivatives.
    """
    if len(entries) < 2 or len({(entry.compound_id, entry.measured_as) for entry in entries}) != 1:
        found = f"{len(entries)} entries of {len({entry.compound_id for entry in entries})} compounds"
        raise UsageError("consensus", found=found, expected="two or more replicates of one compound")
    axis = np.unique(np.concatenate([entry.spectrum.nominal.mz for entry in entries]))
    # An ion outside a replicate's range is unknown there (NaN inside this function only), not absent.
    table = np.full((len(entries), axis.size), np.nan)
    for row, entry in enumerate(entries):
        peaks = entry.spectrum.nominal
        table[row, axis >= entry.spectrum.lowest_mz] = 0.0
        table[row, np.searchsorted(axis, peaks.mz)] = peaks.relative
    n_covering, n_showing = np.isfinite(table).sum(axis=0), (table > 0).sum(axis=0)
    keep = n_showing * 2 >= n_covering
    axis, table, n_covering, n_showing = axis[keep], table[:, keep], n_covering[keep], n_showing[keep]
    middle = np.nanmedian(table, axis=0)
    spread = MAD_TO_SD * np.nanmedian(np.abs(table - middle), axis=0)
    half_range = (np.nanmax(table, axis=0) - np.nanmin(table, axis=0)) / 2.0
    spread = np.where(n_covering == 2, half_range, spread)
    return Consensus(
        read_only(axis), read_only(middle), read_only(spread), read_only(n_covering), read_only(n_showing),
        tuple(entry.accession for entry in entries),
    )  # fmt: skip
