"""Two spectra on one m/z axis, over the range both cover. Align once, score many.

Why a range: old records start anywhere from m/z 10 to 85. A peak at m/z 43 says nothing against an entry whose scan began
at m/z 50. The common range therefore starts at the higher of the two lower limits; it has no upper limit, because nothing
above a spectrum's highest peak means "no ions there".
"""

from __future__ import annotations

import numpy as np

from identify.records import AlignedPeaks, CleanSpectrum


def align(query: CleanSpectrum, entry: CleanSpectrum) -> AlignedPeaks:
    """Peaks of both spectra at every nominal m/z either of them has, from the higher lower limit upwards.

    Parameters
    ----------
    query, entry : CleanSpectrum
        Cleaned spectra; their nominal peaks are used.

    Returns
    -------
    AlignedPeaks
        Intensities relative to each whole spectrum's base peak (= 100); 0 where one has no peak. May be empty.

    Notes
    -----
    O(n log n) in the number of peaks. Symmetric: swapping the arguments swaps the columns.
    """
    lowest = max(query.lowest_mz, entry.lowest_mz)
    query_mz, entry_mz = query.nominal.mz, entry.nominal.mz
    query_start = int(np.searchsorted(query_mz, lowest))
    entry_start = int(np.searchsorted(entry_mz, lowest))
    query_mz, entry_mz = query_mz[query_start:], entry_mz[entry_start:]
    axis = np.union1d(query_mz, entry_mz)
    query_intensity, entry_intensity = np.zeros(axis.size), np.zeros(axis.size)
    query_intensity[np.searchsorted(axis, query_mz)] = query.nominal.relative[query_start:]
    entry_intensity[np.searchsorted(axis, entry_mz)] = entry.nominal.relative[entry_start:]
    return AlignedPeaks(axis, query_intensity, entry_intensity, lowest)
