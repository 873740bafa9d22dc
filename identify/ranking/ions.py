"""Ion by ion: how many agree, how well, and how many are missing on either side?

Each ion of the query or of the entry falls into one cell: how strong it is, and how its intensity differs once the tilt between
the two spectra is taken out, or on which side it is missing. What a cell is worth for or against a match is fitted on replicates
(`identify.ranking.coefficients`): a strong ion that is a little off, a weak one that is far off, and one that a spectrum with a
high floor could not show all count as much as replicates of the same compound say they should.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np

from identify.ranking.features import TINY, FlatPairs, IntArray, pair_up, remove_tilt
from identify.records import CleanSpectrum, FloatArray

STRENGTHS: Final = (0.3, 1.0, 3.0, 10.0, 30.0)
"""Limits between the levels of intensity, in percent of the highest peak of the range in common; the stronger side counts."""
DEVIATIONS: Final = (0.1, 0.2, 0.4, 0.8, 1.5)
"""Limits between the levels of ``|ln(query / entry)|`` without tilt."""
LEAST_FLOOR: Final = 0.3
"""A spectrum's floor is its lowest relative intensity, in percent, at least this."""
ABOVE_FLOOR: Final = 1.5
"""An ion counts as missing above the floor when the other side shows it at this multiple of the floor."""

STATES: Final = (
    *(f"within {limit:g}" for limit in DEVIATIONS),
    f"beyond {DEVIATIONS[-1]:g}",
    "missing in the query",
    "missing in the query, below its floor",
    "missing in the entry",
    "missing in the entry, below its floor",
)
LEVELS: Final = (*(f"below {limit:g} %" for limit in STRENGTHS), f"from {STRENGTHS[-1]:g} %")
COUNTED: Final = ("ions", "ions by m/z")
"""Each ion counts once as one, once as its m/z over 100."""
ION_NAMES: Final = tuple(f"{counted} {level}, {state}" for counted in COUNTED for level in LEVELS for state in STATES)
"""Names of the cells, in the order of the columns."""
_SIZE: Final = len(LEVELS) * len(STATES)
TILT_NAMES: Final = ("tilt", "tilt, either way", "tilt, squared", "tilt unlike that of the others")
"""Slope of ``ln(query / entry)`` per 100 m/z: between two instruments it is seldom large, and the same for all right entries."""
N_OTHERS: Final = 12
"""The tilt of the others is the median of this many best entries."""
CLOSE_NAMES: Final = (*TILT_NAMES, *ION_NAMES)
"""Names of the columns of `compare_closely`."""


def compare_closely(query: CleanSpectrum, entries: Sequence[CleanSpectrum]) -> FloatArray:
    """Tilt and numbers of ions in each cell for every entry, shape ``(n_entries, len(CLOSE_NAMES))``.

    Parameters
    ----------
    query : CleanSpectrum
        With at least one peak.
    entries : sequence of CleanSpectrum
        At least one, best first.

    Returns
    -------
    array of shape (n_entries, n_columns)
        Finite. Columns as in `CLOSE_NAMES`. Only ions of the range in common count.

    Notes
    -----
    Some 1.5 ms for 50 entries of 80 peaks.
    """
    pairs = pair_up(query, entries)
    tilt = remove_tilt(pairs)
    slope = 100.0 * tilt.slope
    unlike = np.abs(slope - np.median(slope[:N_OTHERS]))
    placed = zip(_place_entry_ions(query, pairs, tilt.left), _place_query_ions(query, entries, pairs), strict=True)
    owner, mz, level, state = (np.concatenate(both) for both in placed)
    cell = (owner * len(LEVELS) + level) * len(STATES) + state
    n = len(entries)
    ones = np.bincount(cell, minlength=n * _SIZE).reshape(n, _SIZE)
    heavy = np.bincount(cell, mz / 100.0, minlength=n * _SIZE).reshape(n, _SIZE)
    tilts = np.stack([slope, np.abs(slope), slope**2, unlike], axis=1)
    return np.concatenate([tilts, ones, heavy], axis=1)


Placed = tuple[IntArray, IntArray, IntArray, IntArray]
"""Entry, m/z, level and state of ions, one array each."""


def _place_entry_ions(query: CleanSpectrum, pairs: FlatPairs, left: FloatArray) -> Placed:
    """Ions of the entries, those the query shares and those it lacks."""
    floor = max(float(query.nominal.relative.min()), LEAST_FLOOR)
    matched = pairs.query > 0
    state = np.where(
        matched,
        np.searchsorted(DEVIATIONS, np.abs(left)),
        np.where(pairs.entry >= ABOVE_FLOOR * floor, len(DEVIATIONS) + 1, len(DEVIATIONS) + 2),
    )
    return pairs.owner, pairs.mz, np.searchsorted(STRENGTHS, np.maximum(pairs.query, pairs.entry)), state


def _place_query_ions(query: CleanSpectrum, entries: Sequence[CleanSpectrum], pairs: FlatPairs) -> Placed:
    """Ions of the query that an entry lacks."""
    floors = np.maximum([float(entry.nominal.relative.min()) for entry in entries], LEAST_FLOOR)
    own_mz = query.nominal.mz.astype(np.int64)
    relative = query.nominal.intensity * pairs.scale[:, np.newaxis]
    shown = np.zeros(relative.shape, dtype=bool)
    place = np.minimum(np.searchsorted(own_mz, pairs.mz), own_mz.size - 1)
    same = own_mz[place] == pairs.mz
    shown[pairs.owner[same], place[same]] = True
    owner, column = np.nonzero(~shown & (own_mz >= pairs.cut[:, np.newaxis]) & (relative > TINY))
    seen = relative[owner, column]
    state = np.where(seen >= ABOVE_FLOOR * floors[owner], len(DEVIATIONS) + 3, len(DEVIATIONS) + 4)
    return owner, own_mz[column], np.searchsorted(STRENGTHS, seen), state
