"""Spectra compared after the fragments that carry a difference are shifted by it: analogues, and votes for the molecular mass.

Two compounds that differ in one inert group share the fragments without it, while the fragments with it lie apart by its mass.
A peak list matched once directly and, where that leaves peaks over, once shifted by a mass difference finds such pairs (idea:
Moorthy et al., Anal. Chem. 2017, 89, 13261; own formulation).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from identify.evidence.facts import formula_facts
from identify.records import CleanSpectrum, Entry, FloatArray, Peaks

HIGHEST = 2000
"""Highest m/z compared."""
SPAN = 250
"""Largest mass difference looked at, in Da."""


@dataclass(frozen=True, slots=True, eq=False)
class ShiftTable:
    """Similarity of a query to each neighbour at every mass difference.

    Attributes
    ----------
    entries : tuple of Entry
        Neighbours with a known nominal mass, at most one per compound, nearest first.
    masses : ndarray of int, shape (n,)
        Their nominal masses as measured.
    cosine : ndarray, shape (n,)
        Similarity as given by the search.
    direct : ndarray, shape (n,)
        Part of the similarity from peaks at equal m/z, in [0, 1].
    shifted : ndarray, shape (n, 2 · SPAN + 1)
        What left-over peaks add when the neighbour's are moved by −SPAN … SPAN.
    relative : ndarray, shape (n, m)
        Dense relative intensity of the neighbours by m/z.
    """

    entries: tuple[Entry, ...]
    masses: np.ndarray[tuple[int, ...], np.dtype[np.int64]]
    cosine: FloatArray
    direct: FloatArray
    shifted: FloatArray
    relative: FloatArray

    def gains_at(self, masses: np.ndarray[tuple[int, ...], np.dtype[np.int64]]) -> FloatArray:
        """Shifted part for hypothetical query masses, shape (n_masses, n); 0 beyond `SPAN`."""
        shift = masses[:, None] - self.masses[None, :]
        inside = np.abs(shift) <= SPAN
        picked = self.shifted[np.arange(len(self.masses))[None, :], np.where(inside, shift, 0) + SPAN]
        return np.where(inside, picked, 0.0)


@dataclass(frozen=True, slots=True)
class ShiftedMatch:
    """One neighbour at its best mass difference (query minus neighbour); `score` in [0, 1]."""

    entry: Entry
    shift: int
    score: float
    direct: float


def dense_rows(spectra: Sequence[Peaks], size: int) -> FloatArray:
    """Relative intensity by m/z of several nominal peak lists, shape (n, size); peaks at or above `size` are left out."""
    dense = np.zeros((len(spectra), size))
    rows = np.repeat(np.arange(len(spectra)), [len(peaks) for peaks in spectra])
    mz = np.concatenate([peaks.mz for peaks in spectra]).astype(np.int64)
    relative = np.concatenate([peaks.relative for peaks in spectra])
    kept = mz < size
    dense[rows[kept], mz[kept]] = relative[kept]
    return dense


def unit_rows(relative: FloatArray) -> FloatArray:
    """Rows of length 1, weighted ``sqrt(intensity · m/z)``."""
    weighted = np.sqrt(relative * np.arange(relative.shape[1]))
    lengths = np.sqrt((weighted**2).sum(axis=1, keepdims=True))
    result: FloatArray = weighted / np.maximum(lengths, 1e-12)
    return result


def build_shift_table(spectrum: CleanSpectrum, neighbours: Sequence[tuple[Entry, float]], limit: int) -> ShiftTable:
    """Shift table of a query and its neighbours.

    Parameters
    ----------
    spectrum : CleanSpectrum
    neighbours : sequence of (Entry, cosine in [0, 1])
        Best first; entries without a formula as measured are passed over, so are further entries of a compound.
    limit : int
        Most neighbours used.

    Returns
    -------
    ShiftTable

    Notes
    -----
    One real fast Fourier transform per neighbour: O(n · m log m) for n neighbours and m the m/z range.
    """
    entries, masses, cosine = _usable(neighbours, limit)
    if not entries or not len(spectrum.nominal):
        empty = np.zeros(0)
        return ShiftTable((), np.zeros(0, np.int64), empty, empty, np.zeros((0, 2 * SPAN + 1)), np.zeros((0, 1)))
    spectra = [spectrum.nominal, *(entry.spectrum.nominal for entry in entries)]
    top = min(int(max(peaks.mz[-1] for peaks in spectra)), HIGHEST)
    size = _fast_length(top + SPAN + 1)
    relative = dense_rows(spectra, top + 1)
    weighted = unit_rows(relative)
    query, rows = weighted[0], weighted[1:]
    direct = rows @ query
    both = (rows > 0) & (query > 0)[None, :]
    query_left = np.where(both, np.maximum(query[None, :] - rows, 0.0), query[None, :])
    entry_left = np.where(both, np.maximum(rows - query[None, :], 0.0), rows)
    product = np.fft.rfft(query_left, n=size, axis=1) * np.conj(np.fft.rfft(entry_left, n=size, axis=1))
    correlation = np.fft.irfft(product, n=size, axis=1)
    shifted = np.maximum(np.concatenate([correlation[:, -SPAN:], correlation[:, : SPAN + 1]], axis=1), 0.0)
    return ShiftTable(tuple(entries), np.array(masses), np.array(cosine), direct, shifted, relative[1:])


def _fast_length(least: int) -> int:
    """Smallest length of at least `least` among 2^k and 3 · 2^k, for which transforms are fast."""
    power = 1 << (least - 1).bit_length()
    return 3 * power // 4 if 3 * power // 4 >= least else power


def _usable(neighbours: Sequence[tuple[Entry, float]], limit: int) -> tuple[list[Entry], list[int], list[float]]:
    entries: list[Entry] = []
    masses: list[int] = []
    cosines: list[float] = []
    seen: set[str] = set()
    for entry, cosine in neighbours:
        formula = formula_facts(entry.formula_as_measured)
        if formula is None or cosine <= 0 or not len(entry.spectrum.nominal):
            continue
        key = f"{entry.identity.inchikey[:14] or entry.identity.smiles or entry.identity.name} {entry.measured_as}"
        if key in seen:
            continue
        seen.add(key)
        entries.append(entry)
        masses.append(formula.nominal_mass)
        cosines.append(cosine)
        if len(entries) == limit:
            break
    return entries, masses, cosines


def match_shifted(
    spectrum: CleanSpectrum, neighbours: Sequence[tuple[Entry, float]], *, mass: int | None = None, limit: int = 40
) -> tuple[ShiftedMatch, ...]:
    """Each neighbour at its best mass difference, best first.

    Parameters
    ----------
    spectrum : CleanSpectrum
    neighbours : sequence of (Entry, cosine in [0, 1])
    mass : int, optional
        Nominal mass of the query where it is known: the difference then follows from it.
    limit : int
        Most neighbours used.

    Returns
    -------
    tuple of ShiftedMatch
        A difference of 0 means that no shift helps.
    """
    table = build_shift_table(spectrum, neighbours, limit)
    matches = []
    for place, entry in enumerate(table.entries):
        gains = table.shifted[place]
        shift = int(np.argmax(gains)) - SPAN if mass is None else mass - int(table.masses[place])
        gain = float(gains[shift + SPAN]) if abs(shift) <= SPAN else 0.0
        direct = float(table.direct[place])
        if gain < 0.02 and mass is None:
            shift, gain = 0, 0.0
        matches.append(ShiftedMatch(entry, shift, min(direct + gain, 1.0), direct))
    return tuple(sorted(matches, key=lambda match: -match.score))
