"""A raw spectrum cleaned in ordered, logged steps.

Order (the table `STEPS` is the only place that knows it)::

    invalid peaks → duplicate m/z → nominal m/z → air and water → column bleed → noise floor

Profile data is refused before. Each step takes nominal peaks and gives the peaks to keep, so that a step can be added
here and nowhere else. Every removed peak is in the log with the reason; the record itself is never changed, so that
cleaning can be undone by cleaning again with other settings.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from identify.errors import SpectrumError
from identify.records import CleaningStep, CleanSpectrum, FloatArray, Peaks, SpectrumRecord
from identify.settings import CleaningSettings
from identify.spectra.nominal import is_accurate_mz, nominal_mz

Mask = NDArray[np.bool_]

MAX_PEAKS = 100_000
"""More peaks than any centroided EI spectrum has; a list this long is profile data or an attack."""
MAX_MZ = 10_000.0
"""Far above any electron-ionization spectrum; it bounds the m/z axis."""
DENSE_SPACING_DA = 0.15
DENSE_FRACTION = 0.8
DENSE_MIN_PEAKS = 60
"""So many points, and so large a share of them so near to the next, are no list of peaks (judgement)."""

SILOXANE_PATTERNS: dict[int, tuple[float, float]] = {
    207: (0.209, 0.125),
    281: (0.283, 0.177),
    355: (0.356, 0.234),
    429: (0.430, 0.298),
}
"""M+1 and M+2 relative to M of [Dn − CH3]+, n = 3–6: computed from C5H15O3Si3 … C11H33O6Si6 (standards table, [C])."""
BLEED_TOLERANCE = 0.35
"""Relative tolerance of an isotope ratio in weak bleed peaks (judgement: counting noise of a peak at 1 % of the base)."""
MAX_BLEED_SHARE = 0.5
"""A spectrum that is mostly siloxane ions is a siloxane, not bleed on something else."""
ROUNDING_STEPS = 3.0
"""Intensities below three steps of the record's own rounding are too coarse to show a noise floor."""
MAX_FLOOR_FRACTION = 0.01
"""The noise floor never takes a peak above 1 % of the base peak: a weak molecular ion is worth more than a tidy list."""


class StepResult(NamedTuple):
    """Peaks to keep, and why the others go (or why none goes)."""

    keep: Mask
    reason: str


Step = Callable[[FloatArray, FloatArray, CleaningSettings], StepResult]
"""Takes m/z (whole numbers, increasing), intensity (positive) and the settings; decides which of the peaks stay."""


def clean_spectrum(record: SpectrumRecord, settings: CleaningSettings) -> CleanSpectrum:
    """Nominal peaks (and accurate ones where the record has them) with the log of every step.

    Parameters
    ----------
    record : SpectrumRecord
        Raw peaks in file order, any sign.
    settings : CleaningSettings
        Which steps run.

    Returns
    -------
    CleanSpectrum
        At least one peak; intensities in the record's unit.

    Raises
    ------
    SpectrumError
        For profile data, more than `MAX_PEAKS` peaks, or when no usable peak is left.

    Notes
    -----
    Peaks that round to the same nominal m/z are summed. `lowest_mz` is the stated scan limit where there is one and no
    peak lies below it, else the lowest peak before any gas, bleed or noise was dropped.

    Examples
    --------
    >>> from identify.records import Source
    >>> record = SpectrumRecord(Source("a.csv"), np.array([43.018, 43.055, 0.0]), np.array([60.0, 40.0, 5.0]))
    >>> clean_spectrum(record, CleaningSettings()).nominal.intensity.tolist()
    [100.0]
    """
    where = str(record.source)
    _refuse_unusable(record, where)
    mz, intensity, steps = _usable_peaks(record)
    if mz.size == 0:
        raise SpectrumError(
            "spectrum", where=where, found="no peak with positive m/z and intensity", expected="at least one",
            hint="Check that the columns are m/z and intensity, in this order.",
        )  # fmt: skip
    assigned = np.maximum(nominal_mz(mz), 1)
    nominal, summed, rounding = _sum_at_nominal(assigned, intensity)
    steps.append(rounding)
    lowest = _lowest_mz(record, int(nominal[0]))
    for name, enabled, step in STEPS:
        if not enabled(settings):
            continue
        keep, reason = step(nominal, summed, settings)
        steps.append(_log(name, reason, nominal, summed, keep))
        nominal, summed = nominal[keep], summed[keep]
    accurate = None
    if is_accurate_mz(mz, intensity):
        in_kept = np.isin(assigned, nominal)
        accurate = Peaks(mz[in_kept], intensity[in_kept])
    return CleanSpectrum(Peaks(nominal, summed), accurate, lowest, tuple(steps))


def _refuse_unusable(record: SpectrumRecord, where: str) -> None:
    if record.mz.size > MAX_PEAKS:
        raise SpectrumError(
            "spectrum", where=where, found=f"{record.mz.size:,} peaks", expected=f"at most {MAX_PEAKS:,}",
            hint="Centroid the spectrum (peak picking) and try again.",
        )  # fmt: skip
    if record.is_profile or _is_too_dense(record.mz):
        raise SpectrumError(
            "spectrum", where=where, found="profile data", expected="a centroided peak list",
            hint="Centroid the spectrum (peak picking) in the data system, export it and try again.",
        )  # fmt: skip


def _is_too_dense(mz: FloatArray) -> bool:
    """Whether points, in any order, lie too densely to be peaks.

    Readers look at the shape as well (`identify.readers.profile`); this holds for records from anywhere.
    """
    if mz.size < DENSE_MIN_PEAKS:
        return False
    gaps = np.diff(np.sort(mz))
    return bool(np.mean((gaps > 0) & (gaps < DENSE_SPACING_DA)) > DENSE_FRACTION)


def _usable_peaks(record: SpectrumRecord) -> tuple[FloatArray, FloatArray, list[CleaningStep]]:
    mz, intensity = record.mz, record.intensity
    valid = (mz > 0) & (mz <= MAX_MZ) & (intensity > 0)
    reason = f"m/z must be in (0, {MAX_MZ:.0f}] and intensity positive"
    steps = [_log("invalid peaks", reason, mz, intensity, valid)]
    mz, intensity = mz[valid], intensity[valid]
    order = np.lexsort((-intensity, mz))
    mz, intensity = mz[order], intensity[order]
    first = np.ones(mz.size, dtype=np.bool_)
    first[1:] = np.diff(mz) > 0
    steps.append(_log("duplicate m/z", "of peaks at the very same m/z the most intense is kept", mz, intensity, first))
    return mz[first], intensity[first], steps


def _sum_at_nominal(assigned: NDArray[np.int64], intensity: FloatArray) -> tuple[FloatArray, FloatArray, CleaningStep]:
    axis, inverse = np.unique(assigned, return_inverse=True)
    summed = np.bincount(inverse, weights=intensity, minlength=axis.size).astype(np.float64)
    reason = "m/z rounded to nominal by the spectrum's own mass defect; peaks at the same nominal m/z summed"
    return axis.astype(np.float64), summed, CleaningStep("nominal m/z", reason, assigned.size, axis.size)


def _lowest_mz(record: SpectrumRecord, lowest_peak: int) -> int:
    stated = record.acquisition.lowest_mz
    if stated is None or not 1 <= stated <= lowest_peak:
        return lowest_peak
    return int(np.ceil(stated))


def _log(name: str, reason: str, mz: FloatArray, intensity: FloatArray, keep: Mask) -> CleaningStep:
    removed = tuple((float(m), float(i)) for m, i in zip(mz[~keep], intensity[~keep], strict=True))
    return CleaningStep(name, reason, int(mz.size), int(keep.sum()), removed)


def drop_air_and_water(mz: FloatArray, intensity: FloatArray, settings: CleaningSettings) -> StepResult:
    """Peaks without residual gas, where the gas is recognised by its own ratios.

    Air is m/z 28 and 32 with 28:32 between 2 and 10 (about 4 in air, common practice) and no m/z 31 beside it (methanol,
    glycols); argon (40) and carbon dioxide (44) go with it when nothing stands beside them. Water is m/z 18 with 17 at
    10–40 % of it. A spectrum whose base peak would go is left alone: it may be the compound.

    Parameters
    ----------
    mz, intensity : ndarray of shape (n_peaks,)
        Nominal m/z, increasing, and intensity, positive.
    settings : CleaningSettings

    Returns
    -------
    StepResult

    Examples
    --------
    >>> mz, intensity = np.array([17.0, 18.0, 28.0, 32.0, 43.0]), np.array([2.0, 9.0, 40.0, 10.0, 100.0])
    >>> mz[drop_air_and_water(mz, intensity, CleaningSettings()).keep].tolist()
    [43.0]
    """
    at = {int(m): float(i) for m, i in zip(mz, intensity, strict=True)}
    gas: set[int] = set()
    oxygen = at.get(32, 0.0)
    if oxygen > 0 and 2.0 <= at.get(28, 0.0) / oxygen <= 10.0 and at.get(31, 0.0) < 0.5 * oxygen:
        gas |= {28, 32}
        for ion, neighbours in ((40, (39, 41)), (44, (43, 45))):
            if at.get(ion, 0.0) > 2.0 * max(at.get(n, 0.0) for n in neighbours):
                gas.add(ion)
    water = at.get(18, 0.0)
    if water > 0 and 0.1 <= at.get(17, 0.0) / water <= 0.4:
        gas |= {17, 18}
    keep = ~np.isin(mz, list(gas))
    if not gas:
        return StepResult(keep, "no residual gas recognised")
    if not keep.any() or intensity[~keep].max() >= intensity.max():
        return StepResult(
            np.ones(mz.size, dtype=np.bool_), "gas ions are the base peak: kept, they may be the compound"
        )
    return StepResult(keep, "residual air or water, recognised by its ion ratios")


def drop_bleed(mz: FloatArray, intensity: FloatArray, settings: CleaningSettings) -> StepResult:
    """Peaks without siloxane column bleed, dropped only where the siloxane isotope pattern is there.

    Needs m/z 207 *and* 281 (or 355), each with M+1 and M+2 of three or more silicon atoms. Left alone when m/z 147 is
    stronger than 207 (a silylated compound) or when siloxane ions are most of the spectrum (a siloxane).

    Parameters
    ----------
    mz, intensity : ndarray of shape (n_peaks,)
        Nominal m/z, increasing, and intensity, positive.
    settings : CleaningSettings

    Returns
    -------
    StepResult

    Examples
    --------
    >>> mz, intensity = np.array([91.0, 207, 208, 209, 281, 282, 283]), np.array([500.0, 100, 21, 12, 60, 17, 11])
    >>> mz[drop_bleed(mz, intensity, CleaningSettings()).keep].tolist()
    [91.0]
    """
    at = {int(m): float(i) for m, i in zip(mz, intensity, strict=True)}
    present = [ion for ion, pattern in SILOXANE_PATTERNS.items() if _has_pattern(at, ion, pattern)]
    everything = np.ones(mz.size, dtype=np.bool_)
    if 207 not in present or not {281, 355} & set(present):
        return StepResult(everything, "no siloxane pattern at m/z 207 and 281")
    if at.get(147, 0.0) > at[207]:
        return StepResult(everything, "siloxane ions kept: m/z 147 says the compound itself is silylated")
    bleed = np.isin(mz, [ion + shift for ion in present for shift in (0, 1, 2)])
    if intensity[bleed].sum() > MAX_BLEED_SHARE * intensity.sum():
        return StepResult(everything, "siloxane ions kept: they are most of the spectrum, it may be a siloxane")
    return StepResult(~bleed, "column bleed: siloxane isotope pattern at m/z " + ", ".join(map(str, present)))


def _has_pattern(at: dict[int, float], ion: int, pattern: tuple[float, float]) -> bool:
    base = at.get(ion, 0.0)
    if base <= 0.0:
        return False
    ratios = (at.get(ion + 1, 0.0) / base, at.get(ion + 2, 0.0) / base)
    return all(abs(seen - due) <= BLEED_TOLERANCE * due for seen, due in zip(ratios, pattern, strict=True))


def drop_noise(mz: FloatArray, intensity: FloatArray, settings: CleaningSettings) -> StepResult:
    """Peaks above the noise floor that the spectrum itself shows.

    A floor is seen when at least 40 peaks lie within a factor of 4 of each other at the bottom (lower half of the list,
    10th to 90th percentile): fragments fall off over decades, noise does not. Intensities rounded to a coarse step (many
    records hold 1, 2, 3 … of 999) look alike for another reason and show no floor. The floor is then twice the median of
    those peaks, at most 1 % of the base peak, at least `noise_fraction` of it.

    Parameters
    ----------
    mz, intensity : ndarray of shape (n_peaks,)
        Nominal m/z, increasing, and intensity, positive.
    settings : CleaningSettings

    Returns
    -------
    StepResult

    Examples
    --------
    >>> mz, intensity = np.array([43.0, 58.0, 71.0]), np.array([100.0, 30.0, 0.01])
    >>> mz[drop_noise(mz, intensity, CleaningSettings()).keep].tolist()
    [43.0, 58.0]
    """
    base = float(intensity.max())
    floor = settings.noise_fraction * base
    reason = f"below {settings.noise_fraction:.2%} of the base peak"
    bottom = np.sort(intensity)[: intensity.size // 2]
    if bottom.size >= 40:
        low, median, high = np.percentile(bottom, (10, 50, 90))
        steps = np.diff(np.unique(intensity))
        if high <= 4.0 * low and low > ROUNDING_STEPS * steps.min(initial=np.inf):
            floor = max(floor, min(2.0 * float(median), MAX_FLOOR_FRACTION * base))
            reason = f"below the noise floor of this spectrum, {floor / base:.2%} of the base peak"
    return StepResult(intensity >= floor, reason)


STEPS: tuple[tuple[str, Callable[[CleaningSettings], bool], Step], ...] = (
    ("air and water", lambda s: s.drop_air_and_water, drop_air_and_water),
    ("column bleed", lambda s: s.drop_bleed, drop_bleed),
    ("noise floor", lambda s: s.drop_noise, drop_noise),
)
