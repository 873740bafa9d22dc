"""What a component is as far as the chromatogram alone can tell: named, never hidden."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TypedDict

import numpy as np

from identify.runs.model import Component, ComponentKind

AIR_IONS = (14, 16, 17, 18, 20, 28, 29, 32, 36, 40, 44)
BLEED_IONS = (73, 133, 147, 191, 207, 208, 209, 221, 267, 281, 282, 283, 295, 327, 341, 355, 356, 357, 405, 429)
"""Residual gas, and siloxanes of column and septum (standards table of interferences)."""
DOMINATES = 0.8
SILOXANE_SHARE = 0.2
"""m/z 73 alone is no siloxane: ethers show it too."""
SOLVENT_SHARE = 0.2
SOLVENT_TIMES_MEDIAN = 50.0
SAME_TIME_S = 3.0
SAME_SPECTRUM = 0.9
BLANK_AREA_SHARE = 0.2


class Kind(TypedDict):
    """Fields of a component that say what it is."""

    kind: ComponentKind
    note: str


def find_kind(component: Component, everything: Sequence[Component], blank: Sequence[Component]) -> Kind:
    """Kind and the reason for it.

    Parameters
    ----------
    component : Component
    everything : sequence of Component
        All components of the run, in the order of time.
    blank : sequence of Component
        Components of the blank run; empty without one.

    Returns
    -------
    Kind
        `compound` when nothing speaks for another kind.
    """
    if _share(component, AIR_IONS) >= DOMINATES:
        return Kind(kind=ComponentKind.AIR, note="more than 80 % of the signal at ions of air and water")
    if _share(component, BLEED_IONS) >= DOMINATES and _share(component, BLEED_IONS[1:]) >= SILOXANE_SHARE:
        return Kind(kind=ComponentKind.BLEED, note="more than 80 % of the signal at siloxane ions")
    for other in blank:
        if _is_same(component, other) and other.area >= BLANK_AREA_SHARE * component.area:
            note = (
                f"the blank shows it at {other.time_s / 60:.3f} min with {other.area / component.area:.0%} of the area"
            )
            return Kind(kind=ComponentKind.BLANK, note=note)
    areas = np.array([other.area for other in everything])
    largest = component.area >= areas.max()
    early = component.time_s <= everything[0].time_s + 0.15 * (everything[-1].time_s - everything[0].time_s)
    if (
        largest
        and early
        and component.share_of_signal >= SOLVENT_SHARE
        and (component.area >= SOLVENT_TIMES_MEDIAN * float(np.median(areas)))
    ):
        return Kind(kind=ComponentKind.SOLVENT, note="largest peak of the run, at its beginning")
    return Kind(kind=ComponentKind.COMPOUND, note=component.note)


def _is_same(one: Component, other: Component) -> bool:
    """Whether two components elute together (within 3 s) with the same spectrum (similarity ≥ 0.9)."""
    return abs(one.time_s - other.time_s) <= SAME_TIME_S and spectrum_similarity(one, other) >= SAME_SPECTRUM


def spectrum_similarity(one: Component, other: Component) -> float:
    """Cosine of the root intensities of two components, in [0, 1].

    Parameters
    ----------
    one, other : Component

    Returns
    -------
    float
    """
    axis = np.union1d(one.peaks.mz, other.peaks.mz)
    vectors = np.zeros((2, axis.size))
    for row, component in enumerate((one, other)):
        vectors[row, np.searchsorted(axis, component.peaks.mz)] = np.sqrt(component.peaks.intensity)
    lengths = np.linalg.norm(vectors, axis=1)
    return float(vectors[0] @ vectors[1] / max(1e-300, float(lengths[0] * lengths[1])))


def _share(component: Component, ions: Sequence[int]) -> float:
    inside = np.isin(component.peaks.mz, ions)
    return float(component.peaks.intensity[inside].sum() / component.peaks.intensity.sum())
