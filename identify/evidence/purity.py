"""Is the query one compound? Its best explanation by one, two or three library entries, and what is left over."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from identify.evidence.fragments import BACKGROUND
from identify.records import CleanSpectrum, Entry, FloatArray, Part, Peaks, Purity, Verdict

MAX_ENTRIES = 30
"""Entries of the hit list that are tried; a co-eluting compound below them is found by searching the residual spectrum."""
PENALTY = 0.5
"""An entry more must cut the misfit to this fraction or below (see `tests/benchmarks/fit_evidence.py purity`)."""
LEAST_SHARE = 0.05
"""Smallest share of the intensity that counts as a compound of its own."""
MOST_ALIKE = 0.75
"""Entries more alike than this (cosine of the weighted spectra) are one shape measured twice, not two compounds."""
NOTABLE_RESIDUAL = 2.0
"""Residual peaks below this percentage of the base peak are not offered as a new query."""


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
    Weighted non-negative least squares on intensities, ``Σ w (q − Σ a_i e_i)²`` with ``w = m/z / (q + 1)``: errors grow with the
    square root of intensity and high m/z tells more. All pairs are tried, and all third entries with the best pair. An entry
    more is accepted only when it cuts the misfit to `PENALTY` of what it was, has at least `LEAST_SHARE`, and is not the same
    shape again.
    """
    usable = [entry for entry in entries[:MAX_ENTRIES] if len(entry.spectrum.nominal)]
    if not len(spectrum.nominal) or not usable:
        return Purity(Verdict.NOT_ASSESSED, "There is no hit to explain the query with.")
    query, matrix, axis = _common_axis(spectrum, usable)
    weight = axis / (query + 1.0)
    gram = (matrix * weight) @ matrix.T
    target = (matrix * weight) @ query
    total = float((weight * query**2).sum())
    chosen, misfits = _choose(gram, target, total)
    amounts = _solve(gram, target, chosen)
    fitted = amounts @ matrix[list(chosen)]
    explained = float(np.minimum(fitted, query).sum() / query.sum())
    return _describe(usable, chosen, amounts, query - fitted, axis, explained, misfits)


def _common_axis(spectrum: CleanSpectrum, entries: Sequence[Entry]) -> tuple[FloatArray, FloatArray, FloatArray]:
    lowest = max([spectrum.lowest_mz, *(entry.spectrum.lowest_mz for entry in entries[:3])])
    top = int(max([spectrum.nominal.mz[-1], *(entry.spectrum.nominal.mz[-1] for entry in entries)]))
    dense = np.zeros((len(entries) + 1, top + 1))
    for row, peaks in enumerate([spectrum.nominal, *(entry.spectrum.nominal for entry in entries)]):
        dense[row, peaks.mz.astype(int)] = peaks.relative
    lowest = min(lowest, int(spectrum.nominal.mz[-1]))
    return dense[0, lowest:], dense[1:, lowest:], np.arange(lowest, top + 1, dtype=float)


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


def _misfit(gram: FloatArray, target: FloatArray, total: float, chosen: tuple[int, ...]) -> float:
    amounts = _solve(gram, target, chosen)
    block = gram[np.ix_(chosen, chosen)]
    return max(float(total - 2.0 * amounts @ target[list(chosen)] + amounts @ block @ amounts), 0.0) / total


def _choose(gram: FloatArray, target: FloatArray, total: float) -> tuple[tuple[int, ...], tuple[float, ...]]:
    norms = np.sqrt(np.maximum(gram.diagonal(), 1e-12))
    alike = gram / np.outer(norms, norms)
    singles = (total - np.maximum(target, 0.0) ** 2 / norms**2) / total
    best: tuple[int, ...] = (int(np.argmin(singles)),)
    misfits = [max(float(singles[best[0]]), 0.0)]
    for tried in (_best_pair, _best_triple):
        found = tried(gram, target, total, alike, best)
        if found is None:
            break
        misfit, winner = found
        misfits.append(misfit)
        amounts = _solve(gram, target, winner)
        if misfit > PENALTY * misfits[-2] or amounts.min() < LEAST_SHARE * amounts.sum():
            break
        best = winner
    return best, tuple(misfits)


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
    """The best pair with the third entry that cuts the misfit most."""
    thirds = [
        place
        for place in range(len(target))
        if place not in best and all(alike[place, other] < MOST_ALIKE for other in best)
    ]
    if not thirds:
        return None
    return min((_misfit(gram, target, total, (*best, place)), (*best, place)) for place in thirds)


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
    residual, background = _residual(left, axis)
    names = " and ".join(f"{part.name} ({100 * part.share:.0f} %)" for part in parts)
    if len(parts) > 1:
        verdict, reason = (
            Verdict.CONFLICTS,
            f"{len(parts)} entries together explain the query far better than one: {names}.",
        )
    elif explained >= 0.8:
        verdict, reason = (
            Verdict.AGREES,
            f"One entry explains {100 * explained:.0f} % of the query; no second one improves that.",
        )
    else:
        verdict = Verdict.INCONCLUSIVE
        reason = f"The hits explain only {100 * explained:.0f} % of the query; a second compound may not be among them."
    return Purity(verdict, reason, parts, explained, misfits, residual, background)


def _part(entry: Entry, share: float) -> Part:
    return Part(entry.identity.name or entry.accession, entry.accession, share)


def _residual(left: FloatArray, axis: FloatArray) -> tuple[Peaks | None, tuple[str, ...]]:
    notable = left >= NOTABLE_RESIDUAL
    known = np.array([int(mz) in BACKGROUND for mz in axis.tolist()], dtype=bool)
    named = tuple(sorted({BACKGROUND[int(mz)] for mz in axis[notable & known].tolist()}))
    kept = notable & ~known
    if np.count_nonzero(kept) < 3:
        return None, named
    return Peaks(axis[kept], left[kept]), named
