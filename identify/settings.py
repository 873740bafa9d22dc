"""What can be tuned: what was asked (TOML text, options) resolves once into one frozen, complete `Settings`.

The resolved object is stored with every result, so that a result can be reproduced.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, fields, replace
from typing import Any

from identify.errors import UsageError


@dataclass(frozen=True, slots=True)
class Weighting:
    """Peak weight ``intensity**intensity_power * mz**mz_power``.

    The default is the published weighting (0.53, 1.3) of Kim et al. 2012, Bioinformatics 28:1158 (exponents from
    memory), the best single one in this project's own measurement (`tests/benchmarks/accuracy.py`).
    """

    mz_power: float = 1.3
    intensity_power: float = 0.53

    def __post_init__(self) -> None:
        if not (0.0 <= self.mz_power <= 4.0 and 0.0 < self.intensity_power <= 2.0):
            raise UsageError(
                "weighting",
                found=f"mz_power {self.mz_power}, intensity_power {self.intensity_power}",
                expected="mz_power in [0, 4] and intensity_power in (0, 2]",
            )


@dataclass(frozen=True, slots=True)
class CleaningSettings:
    """Which cleaning steps run, and their limits."""

    drop_air_and_water: bool = True
    """Drop m/z 17, 18, 28, 32, 40 and 44 where they look like residual gas."""
    drop_bleed: bool = True
    """Subtract siloxane bleed, only when its pattern is there."""
    drop_noise: bool = True
    """Drop peaks below the noise floor that the spectrum itself shows."""
    noise_fraction: float = 0.0005
    """Peaks below this fraction of the base peak are noise even when the spectrum shows no floor of its own."""

    def __post_init__(self) -> None:
        if not 0.0 <= self.noise_fraction < 1.0:
            raise UsageError("noise_fraction", found=str(self.noise_fraction), expected="a number in [0, 1)")


REFERENCE_CLEANING = CleaningSettings(drop_air_and_water=False, drop_bleed=False, drop_noise=False, noise_fraction=0.0)
"""How library entries are cleaned: what the source published is kept, only unusable peaks go."""


@dataclass(frozen=True, slots=True)
class Settings:
    """Everything that can be tuned, complete.

    Attributes
    ----------
    top : int
        Candidates reported per query, 1–200.
    search_depth : int
        Entries taken from the index by each of the two scores before ranking, 10–1000.
    claim_threshold : float
        Probability a level must reach to be claimed, in [0.5, 1).
    tolerance_ppm, tolerance_da : float
        Accurate-mass tolerance: the larger of the two applies.
    use_calibration : bool
        Use the calibration of the probabilities that a library carries (`library calibrate`); else the shipped one.
    """

    weighting: Weighting = field(default_factory=Weighting)
    cleaning: CleaningSettings = field(default_factory=CleaningSettings)
    top: int = 25
    search_depth: int = 100
    claim_threshold: float = 0.95
    tolerance_ppm: float = 10.0
    tolerance_da: float = 0.002
    prefer_own_standards: bool = True
    use_calibration: bool = True

    def __post_init__(self) -> None:
        _check_range("top", self.top, 1, 200)
        _check_range("search_depth", self.search_depth, 10, 1000)
        _check_range("claim_threshold", self.claim_threshold, 0.5, 0.9999)
        _check_range("tolerance_ppm", self.tolerance_ppm, 0.01, 500.0)
        _check_range("tolerance_da", self.tolerance_da, 0.0, 0.5)

    def as_dict(self) -> dict[str, Any]:
        """Nested plain dict, as stored with every result."""
        return asdict(self)


def _check_range(name: str, value: float, low: float, high: float) -> None:
    if not low <= value <= high:
        raise UsageError(f"setting '{name}'", found=str(value), expected=f"a value from {low} to {high}")


def _merge(base: Any, asked: Mapping[str, Any], prefix: str, where: str) -> Any:
    known = {item.name: getattr(base, item.name) for item in fields(base)}
    changes: dict[str, Any] = {}
    for name, value in asked.items():
        label = prefix + name
        if name not in known:
            raise UsageError("settings", where=where, found=f"'{label}'", expected=f"one of {', '.join(sorted(known))}")
        old = known[name]
        if isinstance(old, Weighting | CleaningSettings):
            if not isinstance(value, Mapping):
                raise UsageError("settings", where=where, found=f"'{label}' = {value!r}", expected="a table")
            changes[name] = _merge(old, value, f"{label}.", where)
        else:
            changes[name] = _coerce(label, value, old, where)
    return replace(base, **changes)


def _coerce(label: str, value: Any, old: Any, where: str) -> Any:
    kind = type(old)
    number = isinstance(value, int | float) and not isinstance(value, bool)
    if kind is float and number and abs(value) < 1e300:
        return float(value)
    if type(value) is kind:
        return value
    raise UsageError("settings", where=where, found=f"'{label}' = {value!r}", expected=f"a {kind.__name__}")


def resolve(text: str = "", *, where: str = "settings", **options: Any) -> Settings:
    """Complete settings from the defaults, TOML text, and options that were given on the command line.

    Parameters
    ----------
    text : str
        TOML with any of the fields of `Settings`; nested tables for `weighting` and `cleaning`.
    where : str
        Name of the file, for messages.
    **options
        Fields of `Settings`; None means "not asked". They win over the text.

    Returns
    -------
    Settings

    Raises
    ------
    UsageError
        For TOML that does not parse, an unknown name, a wrong type or a value out of range.

    Examples
    --------
    >>> resolve("top = 5", claim_threshold=0.9).top
    5
    """
    try:
        asked = tomllib.loads(text)
    except (ValueError, RecursionError) as error:  # also a number of thousands of digits, brackets a thousand deep
        raise UsageError("settings", where=where, found=str(error), expected="valid TOML") from None
    settings: Settings = _merge(Settings(), asked, "", where)
    given = {name: value for name, value in options.items() if value is not None}
    merged: Settings = _merge(settings, given, "", where)
    return merged
