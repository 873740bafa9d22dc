"""The weight of a peak: one definition for the plain scores and for the index, which must agree to the last digit."""

from __future__ import annotations

from identify.records import FloatArray
from identify.settings import Weighting


def peak_weights(mz: FloatArray, intensity: FloatArray, weighting: Weighting) -> FloatArray:
    """Weights ``intensity**a * mz**b``, shape ``(n,)``; 0 where the intensity is 0.

    Parameters
    ----------
    mz : array of shape (n,)
        m/z, positive.
    intensity : array of shape (n,)
        Intensity in any linear unit, ≥ 0.
    weighting : Weighting
        The two exponents.

    Returns
    -------
    array of shape (n,)

    Examples
    --------
    >>> import numpy as np
    >>> peak_weights(np.array([2.0, 10.0]), np.array([9.0, 4.0]), Weighting(mz_power=1.0, intensity_power=0.5)).tolist()
    [6.0, 20.0]
    """
    weights: FloatArray = intensity**weighting.intensity_power * mz**weighting.mz_power
    return weights
