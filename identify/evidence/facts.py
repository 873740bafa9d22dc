"""What the checks need to know of a query and of a formula, computed once each.

A query is checked against some 25 candidates and a formula is met by many queries. `QueryFacts` therefore holds everything that
depends on the query alone, `FormulaFacts` (cached by formula text) everything that depends on the formula alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from identify.chem.derivatives import find_derivative, possible_formulas
from identify.chem.formula import Formula, parse_formula, rings_plus_double_bonds
from identify.chem.isotopes import isotope_pattern
from identify.chem.subformulas import reachable_nominal
from identify.errors import FormulaError
from identify.evidence.accurate import Recalibration, choose_ions, find_recalibration
from identify.records import Acquisition, CleanSpectrum, Entry, FloatArray, Query

HEADROOM = 16
"""Zeros kept above the last peak, so that a check may look past it without a bounds test."""
LAST_OFFSET = 14
"""Isotope patterns are kept from M to M + 14, and four places below M (10B, selenium and metals)."""
FIRST_OFFSET = -4
CARBON_13_PER_DA = 0.00085
"""13C of a peak per dalton of its mass: about one carbon for each 13 Da."""
LEAST_FRAGMENT = 40
"""Fragments below this m/z say little about nitrogen."""
MAX_GROUPS = 12
"""Derivative groups tried when their number is unknown (`n TMS`)."""


@dataclass(frozen=True, slots=True, eq=False)
class QueryFacts:
    """What depends on the query alone.

    Attributes
    ----------
    dense : tuple of float
        Relative intensity (base peak = 100) at every integer m/z from 0 to `top_mz` + `HEADROOM`.
    peaks : tuple of (int, float)
        m/z and relative intensity of the peaks, by m/z.
    total : float
        Sum of `dense`.
    lowest_mz, top_mz : int
        Lower end of the measured range, and the highest peak.
    highest_mz : int or None
        Stated upper end of the measured range.
    floor : float
        Smallest relative intensity this spectrum records: a peak below it could not have been seen.
    has_isotope_peaks : bool
        Whether the spectrum records isotope peaks at all (old chart readings do not).
    saturated : tuple of int
        m/z whose intensity is clipped, as far as the spectrum shows it.
    instrument_class : str
        `sector`, `quadrupole`, `trap`, `time-of-flight`, `high-resolution` or `unknown`.
    even_odd : tuple of two tuples of float
        Intensity at even and at odd m/z from 40 up to below each m/z, the 13C of the peak below taken away.
    accurate_ions : tuple of (m/z, relative intensity)
        Main ions with accurate m/z; empty for a nominal-mass query.
    recalibration : Recalibration or None
        None for a nominal-mass query.
    """

    dense: tuple[float, ...]
    peaks: tuple[tuple[int, float], ...]
    total: float
    lowest_mz: int
    top_mz: int
    highest_mz: int | None
    floor: float
    has_isotope_peaks: bool
    saturated: tuple[int, ...]
    instrument_class: str
    even_odd: tuple[tuple[float, ...], tuple[float, ...]]
    accurate_ions: tuple[tuple[float, float], ...] = ()
    recalibration: Recalibration | None = None

    def at(self, mz: int) -> float:
        """Relative intensity at an integer m/z, 0 outside the spectrum."""
        return self.dense[mz] if 0 <= mz < len(self.dense) else 0.0


@dataclass(frozen=True, eq=False)
class FormulaFacts:
    """What depends on the formula alone; isotopes and subformulas are worked out when first asked for.

    Attributes
    ----------
    formula : Formula
        As measured.
    nominal_mass : int
        M: mass numbers of the most abundant isotope of each element.
    carbons, nitrogens : int
    heavy : frozenset of str
        Elements present with a strong heavier isotope (Cl, Br, S, Si), or an unusual pattern (B, Se, metals).
    saturation : float
        Rings plus double bonds.
    """

    formula: Formula
    nominal_mass: int
    carbons: int
    nitrogens: int
    heavy: frozenset[str]
    saturation: float

    @cached_property
    def pattern(self) -> tuple[float, ...]:
        """Isotope peaks relative to M at offsets `FIRST_OFFSET` … `LAST_OFFSET`."""
        found = isotope_pattern(self.formula)
        return tuple(found.at(offset) for offset in range(FIRST_OFFSET, LAST_OFFSET + 1))

    @cached_property
    def strongest_offset(self) -> int:
        """Offset of the tallest isotope peak from M (+2 for Br2)."""
        return self.pattern.index(max(self.pattern)) + FIRST_OFFSET

    @cached_property
    def last_offset(self) -> int:
        """Highest offset with at least 0.1 % of the tallest isotope peak."""
        least = 0.001 * max(self.pattern)
        last = max((place for place, ratio in enumerate(self.pattern) if ratio >= least), default=0)
        return max(last + FIRST_OFFSET, 0)

    @cached_property
    def reachable(self) -> tuple[bool, ...]:
        """Index m is True when a subformula has nominal mass m."""
        return tuple(reachable_nominal(self.formula).tolist())

    def ratio(self, offset: int) -> float:
        """Isotope peak at M + `offset` relative to M."""
        place = offset - FIRST_OFFSET
        return self.pattern[place] if 0 <= place < len(self.pattern) else 0.0


LIGHT = frozenset({"C", "H", "N", "O", "F", "P", "I"})


@lru_cache(maxsize=20_000)
def formula_facts(text: str) -> FormulaFacts | None:
    """Facts of a formula as measured; None when there is no readable formula.

    Parameters
    ----------
    text : str
        Hill formula; empty for "not known".

    Returns
    -------
    FormulaFacts or None
    """
    if not text:
        return None
    try:
        formula = parse_formula(text)
    except FormulaError:
        return None
    if formula.nominal_mass <= 0:
        return None
    carbons = formula.count("C") + formula.count("[12C]") + formula.count("[13C]")
    symbols = {symbol for symbol, _ in formula.counts if not symbol.startswith("[")}
    return FormulaFacts(
        formula=formula,
        nominal_mass=formula.nominal_mass,
        carbons=carbons,
        nitrogens=formula.count("N") + formula.count("[15N]"),
        heavy=frozenset(symbols - LIGHT),
        saturation=rings_plus_double_bonds(formula),
    )


@lru_cache(maxsize=4_000)
def formula_options(measured_as: str, parent: str) -> tuple[tuple[int, str], ...]:
    """Formulas an entry with an unknown number of derivative groups (`n TMS`) may have been measured as.

    Parameters
    ----------
    measured_as : str
        Derivative in normal form.
    parent : str
        Formula of the underivatised compound.

    Returns
    -------
    tuple of (n_groups, Hill formula)
        Empty when the number is known or nothing can be derived.
    """
    derivative = find_derivative(measured_as) if measured_as else None
    if derivative is None or all(number is not None for _, number in derivative.groups):
        return ()
    try:
        formula = parse_formula(parent)
    except FormulaError:
        return ()
    return tuple((number, option.hill) for number, option in possible_formulas(formula, derivative, MAX_GROUPS))


def entry_formula(entry: Entry, facts: QueryFacts) -> tuple[FormulaFacts | None, int | None]:
    """Formula facts of an entry as measured; for `n TMS` the number of groups that the query's high-mass end fits best.

    Parameters
    ----------
    entry : Entry
        Library entry.
    facts : QueryFacts
        Facts of the query.

    Returns
    -------
    formula : FormulaFacts or None
        None when the entry has no readable formula.
    n_groups : int or None
        The number chosen, None when it was not searched.
    """
    known = formula_facts(entry.formula_as_measured)
    if known is not None or not entry.measured_as:
        return known, None
    best: tuple[float, int, FormulaFacts] | None = None
    for number, text in formula_options(entry.measured_as, entry.identity.formula):
        option = formula_facts(text)
        if option is None:
            continue
        score = _high_mass_fit(option.nominal_mass, facts)
        if best is None or score > best[0]:
            best = (score, number, option)
    return (best[2], best[1]) if best else (None, None)


def _high_mass_fit(mass: int, facts: QueryFacts) -> float:
    """How well a mass sits on top of the spectrum: ions at M and M − 15 count for it, ions above M + 4 against it."""
    below = facts.at(mass) + facts.at(mass - 15)
    above = sum(facts.dense[mass + 5 :])
    return float(np.log1p(below) - np.log1p(above) - 0.002 * abs(mass - facts.top_mz))


def build_query_facts(query: Query) -> QueryFacts:
    """Facts of a query, from its cleaned nominal peaks and what its record states.

    Parameters
    ----------
    query : Query
        Query with at least one peak; an empty one gives facts that leave every check `not assessed`.

    Returns
    -------
    QueryFacts
    """
    return spectrum_facts(query.spectrum, query.record.acquisition)


def spectrum_facts(spectrum: CleanSpectrum, acquisition: Acquisition) -> QueryFacts:
    """Facts of a cleaned spectrum and of how it was measured (see `build_query_facts`)."""
    mz = spectrum.nominal.mz.astype(np.int64)
    relative = spectrum.nominal.relative
    top = int(mz[-1]) if mz.size else 0
    array = np.zeros(top + HEADROOM + 1)
    array[mz] = relative
    array.setflags(write=False)
    highest = acquisition.highest_mz
    return QueryFacts(
        dense=tuple(array.tolist()),
        peaks=tuple(zip(mz.tolist(), relative.tolist(), strict=True)),
        total=float(array.sum()),
        lowest_mz=spectrum.lowest_mz,
        top_mz=top,
        highest_mz=None if highest is None else int(highest),
        floor=float(relative.min()) if mz.size else 0.0,
        has_isotope_peaks=_has_isotope_peaks(array),
        saturated=_saturated(mz, relative),
        instrument_class=instrument_class(acquisition),
        even_odd=_running_parity(array),
        accurate_ions=choose_ions(spectrum.accurate) if spectrum.accurate is not None else (),
        recalibration=find_recalibration(spectrum.accurate) if spectrum.accurate is not None else None,
    )


def _running_parity(array: FloatArray) -> tuple[tuple[float, ...], tuple[float, ...]]:
    axis = np.arange(array.size)
    left = array.copy()
    left[1:] -= array[:-1] * axis[1:] * CARBON_13_PER_DA
    left = np.where(axis >= LEAST_FRAGMENT, np.maximum(left, 0.0), 0.0)
    sums = []
    for parity in (0, 1):
        running = np.concatenate([[0.0], np.cumsum(np.where(axis % 2 == parity, left, 0.0))])
        sums.append(tuple(running.tolist()))
    return sums[0], sums[1]


def _has_isotope_peaks(array: FloatArray) -> bool:
    strong = np.flatnonzero(array[:-1] >= 30.0)
    strong = strong[strong >= 50]
    return bool(strong.size == 0 or np.count_nonzero(array[strong + 1] > 0) >= 0.5 * strong.size)


def _saturated(mz: np.ndarray[tuple[int, ...], np.dtype[np.int64]], relative: FloatArray) -> tuple[int, ...]:
    """Two or more peaks at exactly the top intensity: the mark that a clipped detector leaves."""
    full = mz[relative >= 99.95]
    return tuple(int(value) for value in full) if full.size >= 2 else ()


INSTRUMENT_WORDS = (
    ("high-resolution", ("FT", "ORBITRAP")),
    ("time-of-flight", ("TOF",)),
    ("trap", ("IT", "TRAP", "QIT")),
    ("quadrupole", ("Q", "QQ", "QQQ", "QUADRUPOLE")),
    ("sector", ("B", "BE", "EB", "EBEB", "SECTOR")),
)


def instrument_class(acquisition: Acquisition) -> str:
    """Analyser class of an acquisition, for the choice of an error model.

    Parameters
    ----------
    acquisition : Acquisition
        `instrument_type` in the separation-ionization-analyser form (`GC-EI-TOF`, `EI-B`).

    Returns
    -------
    str
        One of the names in `INSTRUMENT_WORDS`, or `unknown`.

    Examples
    --------
    >>> instrument_class(Acquisition(instrument_type="GC-EI-TOF"))
    'time-of-flight'
    >>> instrument_class(Acquisition())
    'unknown'
    """
    text = acquisition.instrument_type.upper().replace("-", " ").replace("/", " ").split()
    if not text:
        return "unknown"
    last = text[-1]
    for name, words in INSTRUMENT_WORDS:
        if last in words or (name == "time-of-flight" and last.endswith("TOF")):
            return name
    return "unknown"
