"""Is a spectrum a hydrocarbon's? From its ions alone, without any library.

Extremely randomized trees (Geurts, Ernst & Wehenkel 2006, Mach Learn 63:3) over root intensities and losses from the likely
molecular ion; fitted by `tests/benchmarks/fit_hydrocarbons.py`, coefficients in ``hydrocarbon_model.json`` with their provenance.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import lru_cache
from importlib import resources

import numpy as np
from numpy.typing import NDArray

from identify.records import FloatArray, Peaks

LOWEST, HIGHEST = 39, 180
"""m/z looked at one by one."""
MOST = 165
"""Heaviest ion of at least 1 % that the model was fitted for: hydrocarbons to C12."""
LEAST = 0.01
MIN_IONS = 4
LOSSES = (1, 2, 14, 15, 16, 17, 18, 19, 20, 26, 27, 28, 29, 30, 31, 32, 33, 41, 42, 43, 44, 45, 46, 56, 57)
HETERO_SERIES = ((31, 45, 59, 73, 87, 101, 115), (30, 44, 58, 72, 86, 100, 114), (60, 74, 88, 102, 116))
"""Ion series of alcohols and ethers, of amines, of acids and esters (textbook knowledge)."""
ISOTOPE_RATIO = 4.0
N_FEATURES = HIGHEST - LOWEST + 1 + 14 + 3 + len(LOSSES) + len(HETERO_SERIES) + 1


@dataclass(frozen=True, slots=True, eq=False)
class Forest:
    """Trees as flat arrays.

    Node ``i`` goes to ``i + 1`` when ``features[feature[i]] <= value[i]``, else to ``right[i]``; a leaf has ``right[i] == 0`` and
    its share of hydrocarbons in ``value[i]``.
    """

    roots: tuple[int, ...]
    feature: NDArray[np.int64]
    right: NDArray[np.int64]
    value: FloatArray
    library_share: float
    """Share of hydrocarbons among the records it was fitted on."""


@lru_cache(maxsize=1)
def load_forest() -> Forest:
    """The fitted model that belongs to the package.

    Returns
    -------
    Forest
    """
    stored = json.loads(resources.files("identify.runs").joinpath("hydrocarbon_model.json").read_text(encoding="ascii"))
    return Forest(
        tuple(stored["roots"]),
        np.array(stored["feature"], dtype=np.int64),
        np.array(stored["right"], dtype=np.int64),
        np.array(stored["value"]),
        float(stored["library_share"]),
    )


def hydrocarbon_probability(peaks: Peaks) -> float | None:
    """Probability that a spectrum is a hydrocarbon's, where hydrocarbons are as frequent as among the records of the fit.

    Parameters
    ----------
    peaks : Peaks
        Nominal m/z.

    Returns
    -------
    float or None
        In [0, 1]; None (not assessed) for fewer than `MIN_IONS` ions from m/z 39, or ions above m/z `MOST`.
    """
    features = ion_features(peaks)
    if features is None:
        return None
    forest = load_forest()
    votes = []
    for root in forest.roots:
        node = root
        while forest.right[node]:
            left = features[forest.feature[node]] <= forest.value[node]
            node = node + 1 if left else int(forest.right[node])
        votes.append(float(forest.value[node]))
    return sum(votes) / len(votes)


def ion_features(peaks: Peaks) -> FloatArray | None:
    """What the model looks at, shape ``(N_FEATURES,)``; None where it does not apply.

    Parameters
    ----------
    peaks : Peaks
        Nominal m/z.

    Returns
    -------
    ndarray or None
        Root of the relative intensity at each m/z; sums over m/z modulo 14; modulo 14 and 2, and height, of the likely molecular
        ion, height at its losses; shares of series with oxygen and nitrogen; the molecular ion itself.
    """
    inside = peaks.mz >= LOWEST
    if np.count_nonzero(inside) < MIN_IONS:
        return None
    mz, relative = peaks.mz[inside].astype(np.int64), peaks.intensity[inside] / peaks.intensity[inside].max()
    kept = relative >= LEAST
    if int(mz[kept][-1]) > MOST:
        return None
    root = np.zeros(max(int(mz[-1]), HIGHEST) + 1)
    root[mz] = np.sqrt(relative)
    strong = np.zeros_like(root)
    strong[mz[kept]] = root[mz[kept]]
    by_remainder = np.array([strong[rest::14].sum() for rest in range(14)])
    ion = likely_molecular_ion(mz[kept], relative[kept])
    losses = [root[ion - loss] if ion - loss >= LOWEST else 0.0 for loss in LOSSES]
    total = float(root.sum())
    hetero = [float(root[list(series)].sum()) / total for series in HETERO_SERIES]
    return np.array(
        [*strong[LOWEST : HIGHEST + 1], *by_remainder, ion % 14, ion % 2, root[ion], *losses, *hetero, float(ion)]
    )


def likely_molecular_ion(mz: NDArray[np.int64], relative: FloatArray) -> int:
    """The heaviest ion that is not the isotope peak of the one below.

    Parameters
    ----------
    mz : ndarray of int64
        Increasing, not empty.
    relative : ndarray
        In [0, 1], same shape.

    Returns
    -------
    int

    Examples
    --------
    >>> likely_molecular_ion(np.array([43, 57, 86, 87]), np.array([0.8, 1.0, 0.15, 0.01]))
    86
    """
    values = dict(zip(mz.tolist(), relative.tolist(), strict=True))
    for ion in sorted(values, reverse=True)[:6]:
        if values.get(ion - 1, 0.0) <= ISOTOPE_RATIO * values[ion]:
            return int(ion)
    return int(mz[-1])
