"""The peak list: m/z and intensity with their invariants. The other nouns stand in `identify.records`, which offers these too."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from identify.errors import SpectrumError

FloatArray = NDArray[np.float64]


def read_only(values: ArrayLike) -> FloatArray:
    """Float64 copy of `values`, shape ``(n,)``, that nobody can write to; `values` itself if it is such an array already."""
    if isinstance(values, np.ndarray) and values.dtype == np.float64 and values.ndim == 1:
        flags = values.flags
        if flags.owndata and not flags.writeable:
            return values
    array = np.array(values, dtype=np.float64).reshape(-1)
    array.setflags(write=False)
    return array


@dataclass(frozen=True, slots=True, eq=False)
class Peaks:
    """A usable peak list.

    Parameters
    ----------
    mz : array_like of shape (n_peaks,)
        m/z, finite, positive, strictly increasing.
    intensity : array_like of shape (n_peaks,)
        Intensity in any linear unit, finite, positive.

    Raises
    ------
    SpectrumError
        If an invariant does not hold.
    """

    mz: FloatArray
    intensity: FloatArray
    _relative: FloatArray | None = field(default=None, init=False, repr=False)

    def __post_init__(self) -> None:
        mz, intensity = read_only(self.mz), read_only(self.intensity)
        if mz.shape != intensity.shape:
            raise SpectrumError(
                "peak list", found=f"{mz.size} m/z and {intensity.size} intensities", expected="as many"
            )
        # Few, cheap reductions: thousands of entries pass here per second. NaN fails every comparison.
        if mz.size and not (
            mz[0] > 0
            and mz[-1] < np.inf
            and (mz[1:] > mz[:-1]).all()
            and intensity.min() > 0
            and intensity.max() < np.inf
        ):
            raise _bad_peaks(mz, intensity)
        object.__setattr__(self, "mz", mz)
        object.__setattr__(self, "intensity", intensity)

    def __len__(self) -> int:
        return int(self.mz.size)

    @property
    def base_peak_mz(self) -> float:
        """m/z of the most intense peak (the lowest one on a tie)."""
        return float(self.mz[int(np.argmax(self.intensity))])

    @property
    def relative(self) -> FloatArray:
        """Intensities with the base peak at 100; worked out once, for a search asks for them some five times."""
        if self._relative is None:
            relative = self.intensity * (100.0 / self.intensity.max()) if len(self) else self.intensity
            relative.setflags(write=False)
            object.__setattr__(self, "_relative", relative)
            return relative
        return self._relative

    def intensity_at(self, nominal_mz: int) -> float:
        """Intensity at an integer m/z of a nominal peak list; 0 where there is no peak."""
        position = int(np.searchsorted(self.mz, nominal_mz))
        found = position < self.mz.size and self.mz[position] == nominal_mz
        return float(self.intensity[position]) if found else 0.0


def _bad_peaks(mz: FloatArray, intensity: FloatArray) -> SpectrumError:
    if not (np.isfinite(mz).all() and np.isfinite(intensity).all()):
        return SpectrumError("peak list", found="a value that is not finite", expected="finite numbers")
    if (intensity <= 0).any():
        return SpectrumError("peak list", found="an intensity ≤ 0", expected="positive intensities")
    return SpectrumError("peak list", found="m/z out of order", expected="positive, increasing m/z")
