"""Similarity of two aligned spectra, as plain definitions: a score in [0, 1], higher is more alike.

=========================== =============================================================== =======================
function                    answers                                                         source
=========================== =============================================================== =======================
`cosine_score`              do both spectra show the same weighted pattern?                  Stein & Scott 1994
`cosine_contributions`      which peaks make the cosine?                                     its summands
`reverse_score`             is the entry's pattern inside the query?                         its cosine on entry peaks
`peak_ratio_score`          do neighbouring matched peaks keep their ratio?                  Stein & Scott 1994
`composite_score`           cosine and peak ratios, weighed by their peak counts             Stein & Scott 1994
=========================== =============================================================== =======================

All but `reverse_score` and `composite_score` are symmetric in query and entry; none changes when one spectrum is
multiplied by a constant. Where a score is not defined (a spectrum without peaks in the common m/z range, no
matched peaks) it is 0: nothing there speaks for likeness.

Notes
-----
Peak weight: ``w = intensity**a * mz**b`` with ``a, b`` from `identify.settings.Weighting`.

References
----------
Stein & Scott 1994, J. Am. Soc. Mass Spectrom. 5:859 (formulas from memory; the abstract was read).
Kim et al. 2012, Bioinformatics 28:1158 (default exponents, from memory).
"""

from __future__ import annotations

import math

import numpy as np

from identify.records import AlignedPeaks, FloatArray
from identify.settings import Weighting
from identify.spectra.weights import peak_weights


def cosine_score(aligned: AlignedPeaks, weighting: Weighting) -> float:
    """Cosine similarity of the weighted spectra, in [0, 1].

    ``Σ q e / sqrt(Σ q² · Σ e²)`` with ``q, e`` the weights of query and entry; sums over the m/z range both cover.

    Parameters
    ----------
    aligned : AlignedPeaks
        The two spectra on one m/z axis.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    float

    Examples
    --------
    Weights (intensity only) 3, 4 against 4, 3 give 24 / 25.

    >>> pair = AlignedPeaks(np.array([50.0, 51.0]), np.array([3.0, 4.0]), np.array([4.0, 3.0]), 50)
    >>> cosine_score(pair, Weighting(mz_power=0.0, intensity_power=1.0))
    0.96
    """
    query, entry = _weighted(aligned, weighting)
    return _cosine(query, entry)


def reverse_score(aligned: AlignedPeaks, weighting: Weighting) -> float:
    """Reverse-match similarity, in [0, 1]: the cosine over the entry's peaks only.

    ``Σ q e / sqrt(Σ_{e>0} q² · Σ e²)``: peaks of the query that the entry does not have do not count, so a compound
    still scores high when another one elutes with it. Never below `cosine_score`.

    Parameters
    ----------
    aligned : AlignedPeaks
        The two spectra on one m/z axis.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    float

    Examples
    --------
    >>> pair = AlignedPeaks(np.array([50.0, 51.0, 52.0]), np.array([3.0, 4.0, 99.0]), np.array([4.0, 3.0, 0.0]), 50)
    >>> reverse_score(pair, Weighting(mz_power=0.0, intensity_power=1.0))
    0.96
    """
    query, entry = _weighted(aligned, weighting)
    return _cosine(np.where(entry > 0, query, 0.0), entry)


def cosine_contributions(aligned: AlignedPeaks, weighting: Weighting) -> FloatArray:
    """What each aligned m/z adds to the cosine, shape ``(n,)``, each ≥ 0; the sum is `cosine_score`.

    Parameters
    ----------
    aligned : AlignedPeaks
        The two spectra on one m/z axis.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    array of shape (n,)
        In the order of ``aligned.mz``; all 0 where one spectrum is empty.

    Examples
    --------
    >>> pair = AlignedPeaks(np.array([50.0, 51.0]), np.array([3.0, 4.0]), np.array([4.0, 3.0]), 50)
    >>> cosine_contributions(pair, Weighting(mz_power=0.0, intensity_power=1.0)).tolist()
    [0.48, 0.48]
    """
    query, entry = _weighted(aligned, weighting)
    norm = math.sqrt(float(query @ query)) * math.sqrt(float(entry @ entry))
    return query * entry / norm if norm > 0 else np.zeros_like(query)


def peak_ratio_score(aligned: AlignedPeaks, weighting: Weighting) -> float:
    """Mean agreement of the ratios of neighbouring matched peaks, in [0, 1]; 0 with fewer than two matched peaks.

    For the matched peaks ``1 … n`` in order of m/z: ``r_i = (q_i / q_(i-1)) · (e_(i-1) / e_i)``, each ratio or its
    inverse, whichever is ≤ 1, averaged over the ``n - 1`` neighbours. The m/z factors of the weights cancel.

    Parameters
    ----------
    aligned : AlignedPeaks
        The two spectra on one m/z axis.
    weighting : Weighting
        Only its intensity power matters.

    Returns
    -------
    float

    Notes
    -----
    Stein & Scott 1994 divide the sum by ``n``; dividing by the number of ratios makes the self-match 1.

    Examples
    --------
    The query's ratio is 2, the entry's 1, so they agree to one half.

    >>> pair = AlignedPeaks(np.array([50.0, 51.0]), np.array([50.0, 100.0]), np.array([100.0, 100.0]), 50)
    >>> round(peak_ratio_score(pair, Weighting(mz_power=0.0, intensity_power=1.0)), 12)
    0.5
    """
    matched = (aligned.query > 0) & (aligned.entry > 0)
    if np.count_nonzero(matched) < 2:
        return 0.0
    logarithm = np.log(aligned.query[matched]) - np.log(aligned.entry[matched])
    ratios = np.exp(-weighting.intensity_power * np.abs(np.diff(logarithm)))
    return float(ratios.mean())


def composite_score(aligned: AlignedPeaks, weighting: Weighting) -> float:
    """Cosine and peak-ratio term weighed by their peak counts, in [0, 1].

    ``(n_query · cosine + n_matched · peak_ratio) / (n_query + n_matched)``, counted over the common m/z range.

    Parameters
    ----------
    aligned : AlignedPeaks
        The two spectra on one m/z axis.
    weighting : Weighting
        Exponents of the peak weight.

    Returns
    -------
    float

    Notes
    -----
    Stein & Scott 1994 call its gain over the cosine modest; Koo et al. 2011 measured about one point *below* it.

    Examples
    --------
    Two query peaks, both matched: (2 · 0.96 + 2 · 0.5625) / 4.

    >>> pair = AlignedPeaks(np.array([50.0, 51.0]), np.array([3.0, 4.0]), np.array([4.0, 3.0]), 50)
    >>> round(composite_score(pair, Weighting(mz_power=0.0, intensity_power=1.0)), 5)
    0.76125
    """
    n_query, n_matched = int(np.count_nonzero(aligned.query)), aligned.n_matched
    if n_query == 0:
        return 0.0
    cosine, ratio = cosine_score(aligned, weighting), peak_ratio_score(aligned, weighting)
    return (n_query * cosine + n_matched * ratio) / (n_query + n_matched)


def _weighted(aligned: AlignedPeaks, weighting: Weighting) -> tuple[FloatArray, FloatArray]:
    return (
        peak_weights(aligned.mz, aligned.query, weighting),
        peak_weights(aligned.mz, aligned.entry, weighting),
    )


def _cosine(query: FloatArray, entry: FloatArray) -> float:
    # Two square roots, not the root of a product: the product of two small norms can underflow to 0.
    norm = math.sqrt(float(query @ query)) * math.sqrt(float(entry @ entry))
    return _to_unit(float(query @ entry) / norm) if norm > 0 else 0.0


def _to_unit(value: float) -> float:
    """Clip what rounding pushed a few 1e-16 outside [0, 1]."""
    return min(1.0, max(0.0, value))
