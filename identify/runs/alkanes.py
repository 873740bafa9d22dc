"""n-Alkanes in a run, found by their spectra and their spacing: a retention ladder without a library.

An alkane's spectrum is the series CnH2n+1 with its neighbours and a molecular ion at 14n + 2. On non-polar columns the n-alkane
is the last of its isomers, and the spacing from one carbon number to the next changes smoothly (textbook knowledge; the limits
below are this project's).
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from identify.retention import Ladder
from identify.runs.model import Component, ComponentKind

MIN_SERIES_SHARE = 0.9
"""Share of the signal from m/z 39 in the series CnH2n+1, CnH2n and CnH2n-1, and the molecular ion."""
LEAST_PROPYL, LEAST_BUTYL, LEAST_PENTYL = 0.3, 0.15, 0.08
"""Relative intensity of C3H7+ or C4H9+, of the other one, and of C5H11+: 2,3,4-trimethylpentane has little C4H9+."""
MIN_MOLECULAR_ION = 0.002
MOST_ABOVE = 0.003
"""Smallest molecular ion, and largest ion allowed above its isotope peak; relative to the base peak."""
STRONG_SHARE = 0.02
"""An alkane run's alkanes reach this share of its largest alkane peak."""
MAX_STRETCH = 2.2
"""Largest ratio of the spacings (time per carbon) of neighbouring steps."""
TRACE_SHARE = 0.2
MIN_RUNGS = 3


def alkane_carbons(component: Component, series_share: float = MIN_SERIES_SHARE) -> int | None:
    """Carbon number of the alkane that a component's spectrum shows; 0 for an alkane without molecular ion, None for no alkane.

    Parameters
    ----------
    component : Component
    series_share : float
        Share of the signal that must lie in the alkane series, in [0, 1].

    Returns
    -------
    int or None
        From 5 to 40; branched alkanes count too.
    """
    mz = component.peaks.mz.astype(np.int64)
    relative = component.peaks.intensity / component.peaks.intensity.max()
    inside = mz >= 39
    if not inside.any() or int(mz[int(np.argmax(relative))]) not in (43, 57, 71, 85):
        return None
    mz, relative = mz[inside], relative[inside]
    values = dict(zip(mz.tolist(), relative.tolist(), strict=True))
    smaller, larger = sorted((values.get(43, 0.0), values.get(57, 0.0)))
    if smaller < LEAST_BUTYL or larger < LEAST_PROPYL or values.get(71, 0.0) < LEAST_PENTYL:
        return None
    chain = np.isin(mz % 14, (0, 1, 13))
    carbons = _from_molecular_ion(values)
    own = chain | np.isin(mz, (14 * carbons + 2, 14 * carbons + 3) if carbons else ())
    if float(relative[own].sum() / relative.sum()) < series_share:
        return None
    return carbons


def alkane_share(components: Sequence[Component]) -> float:
    """Share of the area of all compounds (solvent, gas and bleed left out) that alkanes make, in [0, 1].

    Parameters
    ----------
    components : sequence of Component

    Returns
    -------
    float
    """
    compounds = [c for c in components if c.kind is ComponentKind.COMPOUND]
    total = sum(c.area for c in compounds)
    return sum(c.area for c in compounds if alkane_carbons(c) is not None) / total if total > 0 else 0.0


def _from_molecular_ion(values: dict[int, float]) -> int:
    """Carbon number from the heaviest ion that can be an alkane's molecular ion with nothing above it; 0 without one."""
    heavy = max((mz for mz, value in values.items() if value >= MOST_ABOVE), default=0)
    for carbons in range(40, 4, -1):
        mass = 14 * carbons + 2
        if values.get(mass, 0.0) >= MIN_MOLECULAR_ION and mass <= heavy + 1 <= mass + 3:
            return carbons
    return 0


def find_alkane_ladder(components: Sequence[Component], *, alkanes_only: bool) -> Ladder | None:
    """Ladder (times in minutes) of the n-alkanes among components; None when fewer than three fit together.

    Parameters
    ----------
    components : sequence of Component
        In the order of elution.
    alkanes_only : bool
        True for an alkane run: strong alkane peaks between two rungs fill the numbers between them. False for a sample,
        where other alkanes are about: only peaks with their own molecular ion, and of each carbon number the last.

    Returns
    -------
    Ladder or None
    """
    found = [(c, n) for c in components if (n := alkane_carbons(c)) is not None]
    if not found:
        return None
    if alkanes_only:
        limit = STRONG_SHARE * max(c.area for c, _ in found)
        found = [(c, n) for c, n in found if c.area >= limit]
    rungs = _rising([(n, c.time_s / 60.0, c.area) for c, n in found if n])
    if alkanes_only:
        rungs = _fill(rungs, [c.time_s / 60.0 for c, _ in found])
    rungs = _evenly_spaced(rungs)
    if len(rungs) < MIN_RUNGS:
        return None
    return Ladder(tuple(n for n, _ in rungs), tuple(t for _, t in rungs))


def _rising(alkanes: Sequence[tuple[int, float, float]]) -> list[tuple[int, float]]:
    """Most rungs (carbon number, time) that rise in both; of isomers the last that is no trace beside the others.

    `alkanes` are (carbon number, time, area) in the order of time.
    """
    best: list[list[tuple[int, float, float]]] = []
    for alkane in alkanes:
        fitting = (chain for chain in best if chain[-1][0] < alkane[0])
        before = max(fitting, key=lambda chain: (len(chain), sum(area for *_, area in chain)), default=[])
        best.append([*before, alkane])
    chain = max(best, key=lambda chain: (len(chain), sum(area for *_, area in chain)), default=[])
    rungs = []
    for place, (carbons, time, area) in enumerate(chain):
        limit = chain[place + 1][1] if place + 1 < len(chain) else float("inf")
        isomers = [t for n, t, a in alkanes if n == carbons and time <= t < limit and a >= TRACE_SHARE * area]
        rungs.append((carbons, max(isomers)))
    return rungs


def _fill(rungs: Sequence[tuple[int, float]], times: Sequence[float]) -> list[tuple[int, float]]:
    """Rungs with the alkanes between two of them, where there are exactly as many as are missing."""
    filled = list(rungs[:1])
    for (low, early), (high, late) in pairwise(rungs):
        between = sorted(time for time in times if early + 1e-6 < time < late - 1e-6)
        if len(between) == high - low - 1:
            filled += [(low + step, time) for step, time in enumerate(between, start=1)]
        filled.append((high, late))
    return filled


def _evenly_spaced(rungs: Sequence[tuple[int, float]]) -> list[tuple[int, float]]:
    """Longest run of rungs whose spacing per carbon changes by less than `MAX_STRETCH` from step to step."""
    chains: list[list[tuple[int, float]]] = [[]]
    for rung in rungs:
        chain = chains[-1]
        if len(chain) >= 2:
            (n0, t0), (n1, t1) = chain[-2:]
            before, after = (t1 - t0) / (n1 - n0), (rung[1] - t1) / (rung[0] - n1)
            if not 1.0 / MAX_STRETCH <= after / before <= MAX_STRETCH:
                chains.append([chain[-1]])
        chains[-1].append(rung)
    return max(chains, key=len)
