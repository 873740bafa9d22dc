"""The nouns of a run: scans over time, ion traces, and the components found in them."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from identify.errors import FormatError
from identify.records import FloatArray, Peaks, Source

Float32Array = NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class Run:
    """Centroided full scans over time, flat arrays.

    Parameters
    ----------
    source : Source
    title, instrument, acquired : str
        As the file states them; empty where it is silent.
    time_s : ndarray of shape (n_scans,)
        Acquisition time of each scan in seconds, strictly increasing.
    first_point : ndarray of int64, shape (n_scans + 1,)
        Scan ``i`` owns the points ``first_point[i]:first_point[i + 1]``.
    mz, intensity : ndarray of float32, shape (n_points,)
        Positive m/z, intensity ≥ 0, in any order within a scan.
    notes : tuple of str
        What the reader had to decide, in words.

    Raises
    ------
    FormatError
        If the arrays do not fit together or time does not increase.
    """

    source: Source
    title: str
    instrument: str
    acquired: str
    time_s: FloatArray
    first_point: NDArray[np.int64]
    mz: Float32Array
    intensity: Float32Array
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        where = str(self.source)
        if self.time_s.size < 2:
            raise FormatError(
                "run", where=where, found=f"{self.time_s.size} scan(s)", expected="at least 2 scans",
                hint="A single spectrum is searched with `ionwitness search`.",
            )  # fmt: skip
        if (np.diff(self.time_s) <= 0).any():
            raise FormatError("run", where=where, found="scan times that do not increase", expected="increasing times")
        fits = self.first_point.size == self.time_s.size + 1 and self.mz.shape == self.intensity.shape
        if not fits or self.first_point[-1] != self.mz.size or (np.diff(self.first_point) < 0).any():
            raise FormatError("run", where=where, found="scans that overlap or miss points", expected="each point once")

    @property
    def n_scans(self) -> int:
        """Number of scans."""
        return int(self.time_s.size)


@dataclass(frozen=True, slots=True, eq=False)
class IonMatrix:
    """Intensity of every nominal m/z in every scan.

    Parameters
    ----------
    time_s : ndarray of shape (n_scans,)
    mz : ndarray of int64, shape (n_ions,)
        Nominal m/z, increasing; only those that occur.
    intensity : ndarray of float32, shape (n_scans, n_ions)
    """

    time_s: FloatArray
    mz: NDArray[np.int64]
    intensity: Float32Array

    @property
    def scan_time_s(self) -> float:
        """Median time from scan to scan, in seconds."""
        return float(np.median(np.diff(self.time_s)))


@dataclass(frozen=True, slots=True)
class NoiseModel:
    """Variance of one intensity reading: ``constant + per_count * intensity`` (MacCoss et al. 2001, Anal Chem 73:2976)."""

    constant: float
    per_count: float
    smallest: float
    """Smallest intensity the file holds: what is below was not written."""

    def sigma(self, intensity: FloatArray) -> FloatArray:
        """Standard deviation at each intensity, same shape and unit.

        Parameters
        ----------
        intensity : ndarray

        Returns
        -------
        ndarray
        """
        return np.sqrt(self.constant + self.per_count * np.maximum(intensity, 0.0))


class ComponentKind(StrEnum):
    """What a component is, as far as the chromatogram alone can tell."""

    COMPOUND = "compound"
    SOLVENT = "solvent front"
    AIR = "air or water"
    BLEED = "column or septum bleed"
    BLANK = "also in the blank"


@dataclass(frozen=True, slots=True, eq=False)
class Component:
    """One compound's spectrum extracted from a run.

    Parameters
    ----------
    number : int
        From 1 in the order of elution.
    time_s, start_s, end_s : float
        Apex and limits, in seconds.
    height, area : float
        Of the summed ions: intensity units, and intensity units × seconds.
    share_of_signal : float
        Share of all signal above background in the run, in [0, 1].
    signal_to_noise : float
        Of the summed ions at the apex.
    peaks : Peaks
        Nominal m/z and the fitted intensity at the apex.
    uncertainty : ndarray of shape (n_peaks,)
        Standard deviation of each intensity, same unit.
    shape_quality : float
        Share of the variance of its own ions that the peak shape explains, in [0, 1].
    purity : float
        Share of the signal above background within its width that is its own, in [0, 1].
    is_saturated : bool
        Some ion stands at the detector's ceiling: its ratios are not to be trusted.
    """

    number: int
    time_s: float
    start_s: float
    end_s: float
    height: float
    area: float
    share_of_signal: float
    signal_to_noise: float
    peaks: Peaks
    uncertainty: FloatArray
    shape_quality: float
    purity: float
    is_saturated: bool
    kind: ComponentKind = ComponentKind.COMPOUND
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Decomposition:
    """A run taken apart.

    Parameters
    ----------
    components : tuple of Component
        In the order of elution.
    time_s : ndarray of shape (n_scans,)
    total, background, unassigned : ndarray of shape (n_scans,)
        Per scan: all intensity, slow background, and signal above background and noise that belongs to no component.
    width_scans : float
        Typical full width at half height of a peak.
    skew_scans_per_mz : float
        Scan skew that was corrected; 0 when the run shows none.
    notes : tuple of str
        What was left out to keep the work bounded, in words.
    """

    components: tuple[Component, ...]
    time_s: FloatArray
    total: FloatArray
    background: FloatArray
    unassigned: FloatArray
    width_scans: float
    skew_scans_per_mz: float
    notes: tuple[str, ...] = ()

    @property
    def scan_time_s(self) -> float:
        """Median time from scan to scan, in seconds."""
        return float(np.median(np.diff(self.time_s)))
