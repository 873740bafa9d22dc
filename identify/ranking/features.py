"""How does the query compare with each of the entries found, in numbers that a model can add up?

All entries of one query are compared at once: their peaks lie one after the other in flat arrays, with the owner of each
peak beside it, so that a sum per entry is one `reduceat`. Every number is taken over the m/z range both spectra cover.
No number counts entries or replicates: a held-out compound has one entry fewer than its rivals, and a count would learn that.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from identify.records import CleanSpectrum, FloatArray
from identify.settings import Weighting

IntArray = NDArray[np.int64]

COSINES: Final = {
    "plain": Weighting(mz_power=0.0, intensity_power=1.0),
    "root": Weighting(mz_power=0.5, intensity_power=0.5),
    "soft": Weighting(mz_power=1.0, intensity_power=0.4),
    "published": Weighting(mz_power=1.3, intensity_power=0.53),
    "flat": Weighting(mz_power=1.3, intensity_power=0.3),
    "heavy": Weighting(mz_power=3.0, intensity_power=0.6),
}
ONE_SIDED: Final = ("root", "published")
TOP_LEVELS: Final = (1.0, 5.0, 20.0)
"""Relative intensities (%) above which a peak may be the highest ion."""

NAMES: Final = (
    *(f"cosine, {name}" for name in COSINES),
    *(f"reverse, {name}" for name in ONE_SIDED),
    *(f"forward, {name}" for name in ONE_SIDED),
    "cosine without tilt",
    "deviation of ratios",
    "deviation without tilt",
    "deviation at high m/z",
    "entry peaks missing",
    "query peaks missing",
    "strongest entry peak missing",
    "entry peaks",
    "query peaks",
    "peaks in common",
    *(
        f"{what} {level:g} %"
        for level in TOP_LEVELS
        for what in ("same highest ion", "query goes higher", "entry goes higher")
    ),
    "low energy",
    "range in common",
)
"""Names of the features, in the order of the columns."""

TILT_RANGE_DA: Final = 30.0
"""Ridge of the tilt: spread of m/z (square root of the weighted sum of squares) that halves the slope."""
PRIOR_DEVIATION: Final = 0.7
"""Deviation of a pair of ions not seen, that of unlike spectra: a single pair has none by construction, and says nothing."""
PRIOR_WEIGHT: Final = 10.0
"""Its weight: that of a base peak in both spectra."""
TINY: Final = 1e-12


@dataclass(frozen=True, slots=True, eq=False)
class FlatPairs:
    """Peaks of many entries beside the query's, over the range in common.

    Attributes
    ----------
    n_entries : int
    owner, mz : int arrays of shape (n_peaks,)
        Entry each peak belongs to; its m/z.
    query, entry : arrays of shape (n_peaks,)
        Intensities relative to the highest peak of the range in common (= 100); `query` is 0 where it has no peak.
    cut : int array of shape (n_entries,)
        Lowest m/z of the range in common.
    scale : array of shape (n_entries,)
        Factor that made the query's intensities relative.
    place : int array of shape (n_peaks,)
        Number of the query's peak at the same m/z; the number of its peaks where it has none.
    filled, starts : int arrays of shape (n_filled,)
        Entries with a peak in the range in common, and where the peaks of each begin.
    """

    n_entries: int
    owner: IntArray
    mz: IntArray
    query: FloatArray
    entry: FloatArray
    cut: IntArray
    scale: FloatArray
    place: IntArray
    filled: IntArray
    starts: IntArray

    def total(self, values: FloatArray) -> FloatArray:
        """Sum of per-peak values for each entry, shape ``(n_entries,)``."""
        sums = np.zeros(self.n_entries)
        sums[self.filled] = np.add.reduceat(values, self.starts) if self.starts.size else 0.0
        return sums

    def highest(self, values: FloatArray) -> FloatArray:
        """Largest per-peak value (at least 0) for each entry, 0 without a peak, shape ``(n_entries,)``."""
        best = np.zeros(self.n_entries)
        best[self.filled] = np.maximum.reduceat(values, self.starts) if self.starts.size else 0.0
        return best


class Tilt(NamedTuple):
    """Ions of many entries with and without the tilt between each of them and the query; see `remove_tilt`.

    Attributes
    ----------
    weight : array of shape (n_peaks,)
        Root of the smaller intensity; 0 where the query has no peak.
    total : array of shape (n_entries,)
        Sum of the weights.
    off, left : arrays of shape (n_peaks,)
        Logarithm of the ratio of intensities from its mean, with the tilt and without it; `left` is 0 where there is no pair.
    straight : array of shape (n_peaks,)
        The entry's intensities tilted as the query's are.
    slope : array of shape (n_entries,)
        Of ``ln(query / entry)``, per m/z.
    """

    weight: FloatArray
    total: FloatArray
    off: FloatArray
    left: FloatArray
    straight: FloatArray
    slope: FloatArray


def pair_up(query: CleanSpectrum, entries: Sequence[CleanSpectrum]) -> FlatPairs:
    """Flat arrays of all entries' peaks with the query's intensities beside them.

    Parameters
    ----------
    query : CleanSpectrum
    entries : sequence of CleanSpectrum

    Returns
    -------
    FlatPairs
    """
    n = len(entries)
    sizes = np.array([len(spectrum.nominal) for spectrum in entries], dtype=np.int64)
    owner = np.repeat(np.arange(n), sizes)
    mz = np.concatenate([spectrum.nominal.mz for spectrum in entries]).astype(np.int64)
    intensity = np.concatenate([spectrum.nominal.intensity for spectrum in entries])
    cut = np.maximum(query.lowest_mz, np.array([spectrum.lowest_mz for spectrum in entries], dtype=np.int64))
    kept = mz >= cut[owner]
    owner, mz, intensity = owner[kept], mz[kept], intensity[kept]
    own_mz, own = query.nominal.mz.astype(np.int64), query.nominal.intensity
    place_of_mz = np.full(int(max(own_mz[-1], mz.max(initial=0))) + 1, own_mz.size)
    place_of_mz[own_mz] = np.arange(own_mz.size)
    place = place_of_mz[mz]
    best_from = np.append(np.maximum.accumulate(own[::-1])[::-1], 0.0)
    best_query = best_from[np.searchsorted(own_mz, cut)]
    scale = np.where(best_query > 0, 100.0 / np.maximum(best_query, TINY), 0.0)
    starts = np.flatnonzero(np.diff(owner, prepend=-1))
    filled = owner[starts]
    best_entry = np.ones(n)
    best_entry[filled] = np.maximum.reduceat(intensity, starts) if starts.size else 1.0
    query_intensity, entry_intensity = (
        np.append(own, 0.0)[place] * scale[owner],
        intensity * (100.0 / best_entry)[owner],
    )
    return FlatPairs(n, owner, mz, query_intensity, entry_intensity, cut, scale, place, filled, starts)


def compare_with_entries(
    query: CleanSpectrum, entries: Sequence[CleanSpectrum], energies_ev: Sequence[float | None]
) -> FloatArray:
    """Features of every entry for one query, shape ``(n_entries, len(NAMES))``.

    Parameters
    ----------
    query : CleanSpectrum
        With at least one peak.
    entries : sequence of CleanSpectrum
        At least one.
    energies_ev : sequence of float or None
        Ionization energy of each entry, where stated.

    Returns
    -------
    array of shape (n_entries, n_features)
        Finite. Columns as in `NAMES`.

    Notes
    -----
    Some 3.5 ms for 150 entries of 75 peaks. With one peak list per entry ``(m, e)`` and the query's ``q`` at the same m/z:

    - cosine ``Σ w(q) w(e) / sqrt(Σ w(q)² Σ w(e)²)`` with ``w`` = intensity**a · mz**b; *reverse* over the entry's peaks
      only, times ``n / (n + 1)`` with ``n = (Σ w(e))² / Σ w(e)²``, since an entry of one peak is contained in any query that
      has it; *forward* over the query's peaks only.
    - tilt: slope of ``ln(q/e)`` over m/z, weighted by the root of the smaller intensity, shrunk towards 0; instruments differ by
      such a slope. The deviations are weighted means of what is left of ``|ln(q/e)|``.
    """
    pairs = pair_up(query, entries)
    columns = [*_cosines(query, pairs), *_ratios(query, pairs), *_missing(query, pairs), *_highest_ions(query, pairs)]
    columns.append(np.array([1.0 if energy is not None and energy < 60.0 else 0.0 for energy in energies_ev]))
    root_mz = query.nominal.mz * np.sqrt(query.nominal.intensity)
    columns.append(_from_cut(query, pairs, root_mz) / root_mz.sum())
    return np.stack(columns, axis=1)


def _from_cut(query: CleanSpectrum, pairs: FlatPairs, values: FloatArray) -> FloatArray:
    """Sum of a value per query peak over the range in common with each entry."""
    sums = np.append(np.cumsum(values[::-1])[::-1], 0.0)
    return sums[np.searchsorted(query.nominal.mz, pairs.cut)]


@dataclass(frozen=True, slots=True, eq=False)
class _Logs:
    """Logarithms of m/z and intensity of some peaks, from which the weights for any exponents follow by one `exp`."""

    mz: FloatArray
    intensity: FloatArray

    @classmethod
    def of(cls, mz: FloatArray, intensity: FloatArray) -> _Logs:
        with np.errstate(divide="ignore"):  # no peak: -inf, and its weight 0
            return cls(np.log(mz), np.log(intensity))

    def weights(self, weighting: Weighting) -> FloatArray:
        """``mz**b * intensity**a``, 0 where the intensity is 0."""
        weights: FloatArray = np.exp(weighting.mz_power * self.mz + weighting.intensity_power * self.intensity)
        return weights


def _cosines(query: CleanSpectrum, pairs: FlatPairs) -> list[FloatArray]:
    matched = (pairs.query > 0).astype(np.float64)
    other_logs = _Logs.of(pairs.mz.astype(np.float64), pairs.entry)
    query_logs = _Logs.of(query.nominal.mz, query.nominal.intensity)
    cosine, reverse, forward = [], [], []
    for name, weighting in COSINES.items():
        query_weights, other = query_logs.weights(weighting), other_logs.weights(weighting)
        own = np.append(query_weights, 0.0)[pairs.place]
        scale = pairs.scale**weighting.intensity_power
        whole = _from_cut(query, pairs, query_weights**2) * scale**2
        squares = other * other
        shared, theirs = pairs.total(own * other) * scale, pairs.total(squares)
        cosine.append(shared / np.sqrt(whole * theirs + TINY))
        if name in ONE_SIDED:
            # As many peaks as would, of equal weight, have the same ratio of these sums.
            n_peaks = pairs.total(other) ** 2 / (theirs + TINY)
            alike = shared / np.sqrt(pairs.total(own * own) * scale**2 * theirs + TINY)
            reverse.append(alike * n_peaks / (n_peaks + 1.0))
            forward.append(shared / np.sqrt(whole * pairs.total(squares * matched) + TINY))
    return [*cosine, *reverse, *forward]


def remove_tilt(pairs: FlatPairs) -> Tilt:
    """Logarithms of the intensity ratios of the ions both have, before and after the tilt between the spectra is taken out.

    Parameters
    ----------
    pairs : FlatPairs

    Returns
    -------
    Tilt

    Notes
    -----
    The slope of ``ln(query / entry)`` over m/z is fitted with the root of the smaller intensity as weight and shrunk towards 0
    (`TILT_RANGE_DA`); instruments differ by such a slope.
    """
    mz, matched, owner = pairs.mz.astype(np.float64), pairs.query > 0, pairs.owner
    ratio = np.where(matched, np.log(np.maximum(pairs.query, TINY) / np.maximum(pairs.entry, TINY)), 0.0)
    weight = np.where(matched, np.sqrt(np.minimum(pairs.query, pairs.entry)), 0.0)
    total = pairs.total(weight) + TINY
    centre, level = pairs.total(weight * mz) / total, pairs.total(weight * ratio) / total
    distance, off = mz - centre[owner], ratio - level[owner]
    slope = pairs.total(weight * distance * off) / (pairs.total(weight * distance**2) + total * TILT_RANGE_DA**2)
    tilt = slope[owner] * distance
    left = np.where(matched, off - tilt, 0.0)
    return Tilt(weight, total, off, left, pairs.entry * np.exp(np.clip(tilt, -5.0, 5.0)), slope)


def _ratios(query: CleanSpectrum, pairs: FlatPairs) -> list[FloatArray]:
    mz, (weight, total, off, left, straight, _) = pairs.mz.astype(np.float64), remove_tilt(pairs)
    own, other = np.sqrt(mz * pairs.query), np.sqrt(mz * straight)  # weights of the cosine named "root"
    whole = _from_cut(query, pairs, query.nominal.mz * query.nominal.intensity) * pairs.scale
    heavy = weight * mz
    return [
        pairs.total(own * other) / np.sqrt(whole * pairs.total(other * other) + TINY),
        _with_prior(pairs.total(weight * np.abs(off)) / total, total),
        _with_prior(pairs.total(weight * np.abs(left)) / total, total),
        _with_prior(pairs.total(heavy * np.minimum(np.abs(left), 2.0)) / (pairs.total(heavy) + TINY), total),
    ]


def _with_prior(deviation: FloatArray, weight: FloatArray) -> FloatArray:
    """Mean deviations as if one strong pair more had been seen that deviates as those of unlike spectra do."""
    return (deviation * weight + PRIOR_DEVIATION * PRIOR_WEIGHT) / (weight + PRIOR_WEIGHT)


def _missing(query: CleanSpectrum, pairs: FlatPairs) -> list[FloatArray]:
    mz, matched = pairs.mz.astype(np.float64), pairs.query > 0
    theirs, own = mz * np.sqrt(pairs.entry), mz * np.sqrt(pairs.query)
    whole = _from_cut(query, pairs, query.nominal.mz * np.sqrt(query.nominal.intensity)) * np.sqrt(pairs.scale)
    n_query = _from_cut(query, pairs, np.ones(len(query.nominal)))
    ones = np.ones(mz.size)
    return [
        pairs.total(theirs * ~matched) / (pairs.total(theirs) + TINY),
        1.0 - np.minimum(pairs.total(own) / (whole + TINY), 1.0),
        np.log1p(pairs.highest(np.where(matched, 0.0, pairs.entry))),
        np.log1p(pairs.total(ones)),
        np.log1p(n_query),
        np.log1p(pairs.total(ones * matched)),
    ]


def _highest_ions(query: CleanSpectrum, pairs: FlatPairs) -> list[FloatArray]:
    columns, relative = [], query.nominal.relative
    for level in TOP_LEVELS:
        strong = query.nominal.mz[relative >= level]
        gap = strong[-1] - pairs.highest(np.where(pairs.entry >= level, pairs.mz, 0).astype(np.float64))
        columns.append((np.abs(gap) <= 1.0).astype(np.float64))
        columns.append(np.log1p(np.maximum(gap - 1.0, 0.0)))
        columns.append(np.log1p(np.maximum(-gap - 1.0, 0.0)))
    return columns
