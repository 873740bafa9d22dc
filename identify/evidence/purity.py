"""Is the query one compound? Its best explanation by one, two or three library entries, and what is left over."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from identify.evidence.fragments import BACKGROUND, NOTABLE
from identify.evidence.purity_model import LEAST_CHANCE, PURITY_WEIGHTS
from identify.evidence.shifted import dense_rows
from identify.records import CleanSpectrum, Entry, FloatArray, Part, Peaks, Purity, Verdict

MAX_ENTRIES = 30
"""Entries that are tried: hits of the query, and hits of what the best one leaves over."""
LEAST_SHARE = 0.05
"""Smallest share of the intensity that counts as a compound of its own."""
MOST_ALIKE = 0.75
"""Entries more alike than this (cosine of the weighted spectra) are one shape measured twice, not two compounds."""
NOTABLE_RESIDUAL = 2.0
"""Residual peaks below this percentage of the base peak are not offered as a new query."""
WELL_EXPLAINED, HALF_EXPLAINED, LEAST_EXPLAINED = 0.8, 0.5, 0.3
"""Explained shares: from the first on one entry is enough; below the second its compound is not among the hits; below the third
nothing is subtracted. Judgement: the intensities of one compound on two instruments often differ by a fifth."""
MOST_LEAVING = 8
"""Hits among which the one is chosen whose remainder is searched."""
SEARCHED_RESIDUAL, LEAST_PEAKS, LITTLE_LEFT = 1.0, 3, 0.05
"""A residual is searched with its peaks of at least this percentage of the base peak, from so many peaks on, unless it is less
than this share of the intensity."""
LEAST_MISFIT = 1e-4
"""Misfits below this one are equally good."""


class Trial(NamedTuple):
    """An explanation that was tried.

    Attributes
    ----------
    chosen : tuple of int
        Places of its entries.
    misfit : float
        Relative.
    share, alike : float
        Smallest share of the ion current and largest cosine among its entries; 1 and 0 for a single entry.
    chance : float
        That its last entry is needed; 0 for one with too small a share.
    """

    chosen: tuple[int, ...]
    misfit: float
    share: float = 1.0
    alike: float = 0.0
    chance: float = 1.0


class System(NamedTuple):
    """Query and entries on one axis, as relative intensities, and the weight of each m/z."""

    query: FloatArray
    matrix: FloatArray
    axis: FloatArray
    weight: FloatArray

    def products(self) -> tuple[FloatArray, FloatArray, float, FloatArray]:
        """Weighted products of the entries with each other, with the query, of the query with itself; currents of the entries."""
        weighted = self.matrix * self.weight
        total = float((self.weight * self.query**2).sum())
        return weighted @ self.matrix.T, weighted @ self.query, total, self.matrix.sum(axis=1)


def judge_purity(spectrum: CleanSpectrum, entries: Sequence[Entry]) -> Purity:
    """Best explanation of a query by up to three of its hits.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    entries : sequence of Entry
        Its hits, best first, one per compound; the first `MAX_ENTRIES` are tried. Entries found by searching the residual of an
        earlier call may be added.

    Returns
    -------
    Purity

    Notes
    -----
    Weighted non-negative least squares on intensities, ``Σ w (q − Σ a_i e_i)²`` with ``w = m/z / (f + q + 0.03 q²)``,
    f the weakest peak of the query and at least 0.5 (a list of principal ions leaves out what is weaker): errors grow
    with the square root of an intensity and, for strong peaks, in proportion to it; high m/z tells more. All pairs are
    tried, and all third entries with the best pair. An entry more costs: it is accepted when `needs_another` is at least
    `LEAST_CHANCE`, a penalty chosen by cross-validation on mixtures of open records, and when its share is at least
    `LEAST_SHARE` and its shape is not one of the others again.
    """
    usable = [entry for entry in entries[:MAX_ENTRIES] if len(entry.spectrum.nominal)]
    if not len(spectrum.nominal) or not usable:
        return Purity(Verdict.NOT_ASSESSED, "There is no hit to explain the query with.")
    system = prepare(spectrum, usable)
    gram, target, total, currents = system.products()
    trials = try_parts(gram, target, total, currents)
    chosen = [trial.chosen for trial in trials if trial.chance >= LEAST_CHANCE][-1]
    amounts = _amounts_of_notable_ions(system, chosen)
    fitted = amounts @ system.matrix[list(chosen)]
    explained = float(np.minimum(fitted, system.query).sum() / system.query.sum())
    misfits = tuple(trial.misfit for trial in trials)
    return _describe(usable, chosen, amounts, system.query - fitted, system.axis, explained, misfits)


def _amounts_of_notable_ions(system: System, chosen: tuple[int, ...]) -> FloatArray:
    """Amounts of the chosen entries, fitted without the weak ions that only entries have: who types a list leaves them out."""
    rows = system.matrix[list(chosen)]
    counted = (system.query > 0) | (rows.max(axis=0) > NOTABLE)
    weighted = rows[:, counted] * system.weight[counted]
    return _solve(weighted @ rows[:, counted].T, weighted @ system.query[counted], tuple(range(len(chosen))))


def leave_over(spectrum: CleanSpectrum, entries: Sequence[Entry]) -> CleanSpectrum | None:
    """What the best single entry leaves of a query, to be searched for a second compound; None when it is little.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    entries : sequence of Entry
        Its hits, best first; the first `MOST_LEAVING` are tried.

    Returns
    -------
    CleanSpectrum or None
    """
    usable = [entry for entry in entries[:MOST_LEAVING] if len(entry.spectrum.nominal)]
    if not len(spectrum.nominal) or not usable:
        return None
    query, matrix, axis, weight = prepare(spectrum, usable)
    products, lengths = matrix @ (weight * query), np.maximum((matrix * weight * matrix).sum(axis=1), 1e-12)
    best = int(np.argmax(products**2 / lengths))
    left = query - matrix[best] * (products[best] / lengths[best])
    kept = left >= SEARCHED_RESIDUAL
    if np.maximum(left, 0.0).sum() < LITTLE_LEFT * query.sum() or np.count_nonzero(kept) < LEAST_PEAKS:
        return None
    return CleanSpectrum(Peaks(axis[kept], left[kept]), None, spectrum.lowest_mz, spectrum.steps)


def prepare(spectrum: CleanSpectrum, entries: Sequence[Entry]) -> System:
    """Query and entries over the range that the query and its best hits cover.

    Parameters
    ----------
    spectrum : CleanSpectrum
        With at least one peak.
    entries : sequence of Entry
        At least one, each with at least one peak.

    Returns
    -------
    System
    """
    lowest = max([spectrum.lowest_mz, *(entry.spectrum.lowest_mz for entry in entries[:3])])
    lowest = min(lowest, int(spectrum.nominal.mz[-1]))
    spectra = [spectrum.nominal, *(entry.spectrum.nominal for entry in entries)]
    top = int(max(peaks.mz[-1] for peaks in spectra))
    dense = dense_rows(spectra, top + 1)
    query, axis = dense[0, lowest:], np.arange(lowest, top + 1, dtype=float)
    # A list of principal ions leaves the weak ones out: what is weaker than all it has was not seen to be missing.
    floor = max(0.5, float(spectrum.nominal.relative.min()))
    return System(query, dense[1:, lowest:], axis, axis / (floor + query + 0.03 * query**2))


def _solve(gram: FloatArray, target: FloatArray, chosen: tuple[int, ...]) -> FloatArray:
    """Amounts of the chosen entries; negative ones are set to 0 and the rest solved again."""
    active = list(chosen)
    amounts = np.zeros(len(chosen))
    while active:
        block = gram[np.ix_(active, active)] + 1e-9 * np.eye(len(active)) * gram.diagonal().max()
        solution = np.linalg.solve(block, target[active])
        if (solution >= 0).all():
            for place, value in zip(active, solution.tolist(), strict=True):
                amounts[chosen.index(place)] = value
            break
        active = [place for place, value in zip(active, solution.tolist(), strict=True) if value > 0]
    return amounts


def try_parts(gram: FloatArray, target: FloatArray, total: float, currents: FloatArray) -> list[Trial]:
    """The best single entry, the best pair, and if it is needed the best third entry with it.

    Parameters
    ----------
    gram : ndarray, shape (n, n)
        Weighted products of the entries.
    target : ndarray, shape (n,)
        Weighted products of the entries with the query.
    total : float
        Weighted product of the query with itself.
    currents : ndarray, shape (n,)
        Summed intensity of each entry over the common range.

    Returns
    -------
    list of Trial
        One to three.
    """
    norms = np.sqrt(np.maximum(gram.diagonal(), 1e-12))
    alike = gram / np.outer(norms, norms)
    singles = (total - np.maximum(target, 0.0) ** 2 / norms**2) / total
    first = int(np.argmin(singles))
    trials = [Trial((first,), max(float(singles[first]), LEAST_MISFIT))]
    for tried in (_best_pair, _best_triple):
        found = tried(gram, target, total, alike, trials[-1].chosen)
        if found is None:
            break
        misfit, chosen = max(found[0], LEAST_MISFIT), found[1]
        share = _solve(gram, target, chosen) * currents[list(chosen)]
        smallest = float(share.min() / max(share.sum(), 1e-12))
        closest = max(float(alike[one, other]) for one in chosen for other in chosen if one != other)
        chance = needs_another(trials[-1].misfit, misfit, smallest, closest) if smallest >= LEAST_SHARE else 0.0
        trials.append(Trial(chosen, misfit, smallest, closest, chance))
        if chance < LEAST_CHANCE:
            break
    return trials


def needs_another(before: float, after: float, share: float, alike: float) -> float:
    """Chance that a further entry is a compound of its own, in (0, 1).

    Parameters
    ----------
    before, after : float
        Relative misfit without and with it.
    share : float
        Smallest share of the ion current among the parts.
    alike : float
        Largest cosine among the parts.

    Returns
    -------
    float
        Fitted with as many mixtures as pure spectra, a quarter of these without an entry: good for a threshold, not a
        probability in the laboratory.
    """
    logit = PURITY_WEIGHTS[0]
    for weight, value in zip(PURITY_WEIGHTS[1:], purity_features(before, after, share, alike), strict=True):
        logit += weight * value
    return 1.0 / (1.0 + math.exp(-max(min(logit, 50.0), -50.0)))


def purity_features(before: float, after: float, share: float, alike: float) -> tuple[float, ...]:
    """What `needs_another` weighs: the misfit, its logarithmic gain, share and likeness of the parts, and two products."""
    start, gain = math.log(before), math.log(after / before)
    return start, gain, math.log(max(share, 1e-3)), alike, start * gain, gain * gain


def _best_pair(
    gram: FloatArray, target: FloatArray, total: float, alike: FloatArray, _best: tuple[int, ...]
) -> tuple[float, tuple[int, ...]] | None:
    """Pair with the smallest misfit among those that need both members, all solved at once in closed form."""
    diagonal = gram.diagonal()
    determinant = np.outer(diagonal, diagonal) - gram**2
    safe = np.where(determinant > 1e-12 * diagonal.max() ** 2, determinant, np.inf)
    first = (diagonal[None, :] * target[:, None] - gram * target[None, :]) / safe
    second = first.T
    usable = (first > 0) & (second > 0) & (alike < MOST_ALIKE)
    if not usable.any():
        return None
    misfit = np.where(usable, total - first * target[:, None] - second * target[None, :], np.inf) / total
    one, other = np.unravel_index(int(np.argmin(misfit)), misfit.shape)
    return max(float(misfit[one, other]), 0.0), (int(one), int(other))


def _best_triple(
    gram: FloatArray, target: FloatArray, total: float, alike: FloatArray, best: tuple[int, ...]
) -> tuple[float, tuple[int, ...]] | None:
    """The best pair with the third entry that cuts the misfit most among those that need all three, all solved at once."""
    # An entry is as alike as can be to itself, so the pair's own members drop out too.
    thirds = np.flatnonzero(alike[:, list(best)].max(axis=1) < MOST_ALIKE)
    if not thirds.size:
        return None
    places = np.stack([np.full(thirds.size, best[0]), np.full(thirds.size, best[1]), thirds], axis=1)
    block = gram[places[:, :, None], places[:, None, :]] + 1e-9 * gram.diagonal().max() * np.eye(3)
    wanted = target[places]
    amounts = np.linalg.solve(block, wanted[:, :, None])[:, :, 0]
    misfit = np.where((amounts > 0).all(axis=1), total - (amounts * wanted).sum(axis=1), np.inf) / total
    if not np.isfinite(misfit).any():
        return None
    winner = int(np.argmin(misfit))
    return max(float(misfit[winner]), 0.0), (*best, int(thirds[winner]))


def _describe(
    entries: Sequence[Entry],
    chosen: tuple[int, ...],
    amounts: FloatArray,
    left: FloatArray,
    axis: FloatArray,
    explained: float,
    misfits: tuple[float, ...],
) -> Purity:
    currents = amounts * np.array([float(entries[place].spectrum.nominal.relative.sum()) for place in chosen])
    shares = currents / currents.sum() if currents.sum() > 0 else currents
    parts = tuple(
        sorted(
            (_part(entries[place], float(share)) for place, share in zip(chosen, shares, strict=True)),
            key=lambda part: -part.share,
        )
    )
    # What is left of a query that nothing explains is the query itself.
    residual, background = _residual(left, axis) if explained >= LEAST_EXPLAINED else (None, ())
    names = " and ".join(f"{part.name} ({100 * part.share:.0f} %)" for part in parts)
    if len(parts) > 1:
        verdict, reason = (
            Verdict.CONFLICTS,
            f"{len(parts)} entries together explain the query far better than one, for instance {names}.",
        )
    elif explained >= WELL_EXPLAINED:
        verdict, reason = (
            Verdict.AGREES,
            f"One entry explains {100 * explained:.0f} % of the query; no second one improves that.",
        )
    elif explained >= HALF_EXPLAINED:
        verdict = Verdict.INCONCLUSIVE
        reason = (
            f"The best entry explains {100 * explained:.0f} % of the query; the rest may be the intensities of another "
            "instrument or a compound without an entry."
        )
    else:
        verdict = Verdict.INCONCLUSIVE
        reason = f"The hits explain only {100 * explained:.0f} % of the query: its compound, or a second one, is not among them."
    return Purity(verdict, reason, parts, explained, misfits, residual, background)


def _part(entry: Entry, share: float) -> Part:
    name = entry.identity.name or entry.accession
    return Part(name, entry.accession, share, entry.formula_as_measured)


def _residual(left: FloatArray, axis: FloatArray) -> tuple[Peaks | None, tuple[str, ...]]:
    notable = np.flatnonzero(left >= NOTABLE_RESIDUAL)
    known = [int(mz) in BACKGROUND for mz in axis[notable].tolist()]
    named = tuple(sorted({BACKGROUND[int(mz)] for mz in axis[notable[known]].tolist()}))
    kept = notable[~np.array(known, dtype=bool)]
    return (Peaks(axis[kept], left[kept]) if kept.size >= LEAST_PEAKS else None), named
