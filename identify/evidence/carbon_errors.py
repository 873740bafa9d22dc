"""How far carbons counted from M+1 are off, by instrument class and intensity of M.

Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled),
M at least 5 % of base and M+1 recorded, by `tests/benchmarks/fit_evidence.py carbons`. Records used:
4,204 sector, 158 time-of-flight, 68 high-resolution, 11 quadrupole.
Quadrupole and trap records are too few: those classes use the wide sector model.
"""

from __future__ import annotations

from typing import NamedTuple


class CarbonErrors(NamedTuple):
    """Quantiles of ln(counted / true carbons) at an intensity of M (% of base): 5, 25, 75 and 95 %."""

    molecular: float
    low: float
    lower: float
    upper: float
    high: float


_WIDE = (
    CarbonErrors(14.0, -0.414, -0.048, 0.233, 1.098),
    CarbonErrors(30.0, -0.719, -0.058, 0.157, 0.639),
    CarbonErrors(60.0, -0.599, -0.026, 0.166, 0.725),
    CarbonErrors(98.0, -0.631, -0.009, 0.135, 0.632),
)
_NARROW = (
    CarbonErrors(10.0, -0.479, -0.049, 0.072, 0.251),
    CarbonErrors(40.0, -0.208, -0.096, 0.012, 0.106),
)
ERRORS: dict[str, tuple[CarbonErrors, ...]] = {
    "sector": _WIDE,
    "unknown": _WIDE,
    "quadrupole": _WIDE,
    "trap": _WIDE,
    "time-of-flight": _NARROW,
    "high-resolution": _NARROW,
}
NARROW_CLASSES = frozenset({"time-of-flight", "high-resolution"})
"""By `identify.evidence.facts.instrument_class`; the first row is the floor below which M+1 does not vote."""
