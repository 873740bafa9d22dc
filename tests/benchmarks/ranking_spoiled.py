"""Queries made worse on purpose: what a real sample or another instrument does to a spectrum."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from ranking_data import Benchmark

from identify.records import CleanSpectrum, Peaks, Query

Floats = NDArray[np.float64]


NOTABLE_SHARE = 0.3
"""From this share on a neighbour counts as a right answer too: it is in the sample, and not by traces. By base peaks; by ion
current or at high m/z the smaller part is often the larger one."""


class Spoiled(NamedTuple):
    """A query made worse.

    Attributes
    ----------
    query : Query
    partner : int or None
        Place of a second record that makes at least `NOTABLE_SHARE` of the query: either compound is a right answer.
    """

    query: Query
    partner: int | None = None


Change = Callable[[Query, np.random.Generator], Spoiled]


def _changed(query: Query, mz: Floats, intensity: Floats, lowest: int | None = None) -> Spoiled:
    kept = intensity > 1e-3 * intensity.max()
    spectrum = CleanSpectrum(Peaks(mz[kept], intensity[kept]), None, lowest or query.spectrum.lowest_mz)
    return Spoiled(replace(query, spectrum=spectrum))


def with_noise(share: float) -> Change:
    """Intensities times log-normal noise, and a floor of random height added."""

    def spoil(query: Query, rng: np.random.Generator) -> Spoiled:
        peaks = query.spectrum.nominal
        factor = np.exp(rng.normal(0, share, len(peaks)))
        floor = np.abs(rng.normal(0, 0.02 * share, len(peaks))) * peaks.intensity.max()
        return _changed(query, peaks.mz, peaks.intensity * factor + floor)

    return spoil


def without_low_masses(lowest: int) -> Change:
    """Nothing below an m/z; queries that would lose all but two peaks stay as they are."""

    def spoil(query: Query, rng: np.random.Generator) -> Spoiled:
        peaks = query.spectrum.nominal
        kept = peaks.mz >= lowest
        if kept.sum() < 3:
            return Spoiled(query)
        return _changed(query, peaks.mz[kept], peaks.intensity[kept], max(lowest, query.spectrum.lowest_mz))

    return spoil


def with_tilt(share: float) -> Change:
    """Intensities changed by −share at the lowest m/z to +share at the highest."""

    def spoil(query: Query, rng: np.random.Generator) -> Spoiled:
        peaks = query.spectrum.nominal
        place = (peaks.mz - peaks.mz[0]) / max(peaks.mz[-1] - peaks.mz[0], 1.0)
        return _changed(query, peaks.mz, peaks.intensity * (1 + share * (2 * place - 1)))

    return spoil


def with_neighbour(bench: Benchmark, share: float) -> Change:
    """Another held-out record added: `share` of the sum of both, each with its base peak at 100.

    The neighbour is held out too: a compound that elutes with another has no copy of itself in the library either.
    """

    def spoil(query: Query, rng: np.random.Generator) -> Spoiled:
        places = [
            place
            for place in rng.choice(bench.queries, 2, replace=False).tolist()
            if f"e{bench.entries[place].id}" != query.id
        ]
        other, own = bench.entries[places[0]].spectrum.nominal, query.spectrum.nominal
        axis = np.union1d(own.mz, other.mz)
        total = np.zeros(axis.size)
        total[np.searchsorted(axis, own.mz)] += (1 - share) * own.relative
        total[np.searchsorted(axis, other.mz)] += share * other.relative
        kept = axis >= query.spectrum.lowest_mz
        return _changed(query, axis[kept], total[kept])._replace(partner=places[0] if share >= NOTABLE_SHARE else None)

    return spoil


def ways_to_spoil(bench: Benchmark) -> dict[str, Change]:
    """All of them, by name."""
    ways = {f"intensity noise {share:.0%}": with_noise(share) for share in (0.1, 0.3, 0.6)}
    ways |= {f"nothing below m/z {lowest}": without_low_masses(lowest) for lowest in (50, 70)}
    ways |= {f"tilt {share:+.0%}": with_tilt(share) for share in (-0.3, 0.3)}
    ways |= {f"co-elution {share:.0%}": with_neighbour(bench, share) for share in (0.1, 0.3, 0.5)}
    return ways
