"""A query made ready for scoring: weights, and the length of every tail of the spectrum."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from identify.index.segment import MAX_MZ
from identify.records import CleanSpectrum, FloatArray
from identify.settings import Weighting
from identify.spectra.weights import peak_weights


@dataclass(frozen=True, slots=True, eq=False)
class WeighedQuery:
    """Weighted peaks of a query over the m/z range it covers.

    Attributes
    ----------
    lowest_mz : int
        Lowest m/z the query covers, at most `MAX_MZ`.
    mz : int64 array of shape (n_peaks,)
        Nominal m/z, increasing, none below `lowest_mz`.
    weight : float64 array of shape (n_peaks,)
        Weights; the squares sum to 1 (before the cut at `MAX_MZ`).
    tail : float64 array of shape (n_peaks + 1,)
        ``tail[i]`` is the sum of squared weights of peak ``i`` and all above it.
    """

    lowest_mz: int
    mz: NDArray[np.int64]
    weight: FloatArray
    tail: FloatArray

    def weight_by_mz(self, highest_mz: int) -> FloatArray:
        """Weights by m/z, shape ``(highest_mz + 1,)``, 0 where there is no peak."""
        table = np.zeros(highest_mz + 1)
        end = int(np.searchsorted(self.mz, highest_mz, side="right"))
        table[self.mz[:end]] = self.weight[:end]
        return table

    def square_from(self, lowest_mz: NDArray[np.uint16]) -> FloatArray:
        """Sum of squared weights at and above each given m/z, same shape: a lookup, not a sum."""
        return self.tail[np.searchsorted(self.mz, lowest_mz)]


def weigh_query(spectrum: CleanSpectrum, weighting: Weighting) -> WeighedQuery:
    """Weighted query with the squared length of each of its tails.

    Parameters
    ----------
    spectrum : CleanSpectrum
        Its nominal peaks are used, from `lowest_mz` upwards. Peaks above `MAX_MZ` count in the lengths only: no entry of
        an index can match them.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    WeighedQuery
    """
    covered = spectrum.nominal.mz >= spectrum.lowest_mz
    mz = spectrum.nominal.mz[covered].astype(np.int64)
    weight = peak_weights(spectrum.nominal.mz[covered], spectrum.nominal.relative[covered], weighting)
    if weight.any():
        # Scaled by the largest first: the square of a tiny intensity must not underflow in the norm.
        weight = weight / weight.max()
        weight = weight / np.sqrt(np.sum(weight * weight))
    # Summed from the top down: a small tail keeps its digits.
    tail = np.concatenate([np.cumsum((weight * weight)[::-1])[::-1], [0.0]])
    n = int(np.searchsorted(mz, MAX_MZ, side="right"))
    return WeighedQuery(min(max(spectrum.lowest_mz, 0), MAX_MZ), mz[:n], weight[:n], tail[: n + 1])
