"""Numbers that tell a molecular mass from other masses, for every mass a query might have.

Three groups of features, kept apart so that the agreement of estimators made of them means something:

- *peaks*: the high-mass end of the query itself (intensity at M, what lies above, isotope corrections, parity, logical losses);
- *pairs*: fragments that add up to M (an ester's acid and alkene parts), and typical terminal losses of the highest ions;
- *neighbours*: the library entries most like the query: their masses and gaps above the highest ions, and how well their
  fragments fit when they are shifted by the mass difference.

Networks read the same numbers and, one by one, the intensity at every loss and of every fragment (`network_inputs`,
`fragment_levels`).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from identify.evidence.facts import CARBON_13_PER_DA
from identify.evidence.high_mass import IMPROBABLE_LOSSES
from identify.evidence.shifted import HIGHEST, ShiftTable
from identify.records import CleanSpectrum, FloatArray

IntArray = np.ndarray[tuple[int, ...], np.dtype[np.int64]]

PAD, SIZE = 400, 3600
"""Zeros before m/z 0 and length of the padded axis, so that windows around a candidate need no bounds test."""
TOP_LEVELS = (0.0, 1.0, 5.0, 20.0)
"""The highest ion above each of these percentages of base: four meanings of 'the top of the spectrum'."""
TERMINAL_LOSSES = (
    0, 1, 2, 15, 16, 17, 18, 19, 20, 26, 27, 28, 29, 30, 31, 32, 33, 34, 35, 36, 41, 42, 43, 44, 45, 46, 47, 55, 56, 57, 58, 59,
    60, 61, 69, 71, 73, 75, 79, 80, 85, 87, 89, 90, 91, 105, 127,
)  # fmt: skip
"""Losses from M that leave one of the highest ions (`standards.md` 3.8)."""
LOSS_GROUPS = (
    (1,), (15,), (17, 18), (27, 28, 29), (31, 32, 33), (35, 36), (42, 43, 44), (45, 46), (55, 56, 57), (59, 60), (73,),
)  # fmt: skip
KEY_IONS = (31, 43, 45, 55, 57, 58, 73, 74, 77, 91, 147, 149)
LOSS_RANGE = np.arange(-2, 160)
"""Neutral losses over which spectra are compared 'from M downwards'."""
LOSSES = np.arange(-5, 171)
"""Neutral losses whose intensities a network reads one by one; negative ones are ions above M."""
FRAGMENTS = np.arange(25, 225)
"""m/z whose intensities a network reads one by one: what kind of compound it is."""
SERIES = 14
"""Mass of CH2: a network is told which remainder a mass leaves."""
FLOOR = 0.05
CARBON_13_AT_MOST = 1.15 * CARBON_13_PER_DA
"""13C of a peak per dalton of its mass, 15 % added for safety."""
NEIGHBOURS = 40
SEEN = 0.05
"""Relative intensity (% of base) from which an ion counts as observed."""
BELOW_TOP = 45
"""A molecular ion may lie this far below the highest peak (noise, bleed or a second compound above it)."""


RATIOS_FROM = 0.3
"""Relative intensity at M from which its neighbours are read as ratios to it."""


def log_level(values: FloatArray) -> FloatArray:
    """log10 of a relative intensity over 0.05 %, 0 for less."""
    return np.log10(np.maximum(values, FLOOR) / FLOOR)


@dataclass(frozen=True, eq=False)
class MassProblem:
    """A query and its shift table, ready for features.

    Parameters
    ----------
    relative : ndarray, shape (n,)
        Dense relative intensity (base peak = 100) by m/z.
    table : ShiftTable
    """

    relative: FloatArray
    table: ShiftTable

    @cached_property
    def corrected(self) -> FloatArray:
        """Intensity after the 13C of the peak one below is taken away."""
        result: FloatArray = correct_for_carbon(self.relative[None, :])[0]
        return result

    @cached_property
    def raw_pad(self) -> FloatArray:
        """`relative` on the padded axis."""
        return padded(self.relative)

    @cached_property
    def pad(self) -> FloatArray:
        """`corrected` on the padded axis."""
        return padded(self.corrected)

    @cached_property
    def levels(self) -> FloatArray:
        """Logarithmic intensity on the padded axis, 0 for nothing and 1 for the base peak."""
        result: FloatArray = log_level(self.raw_pad) / log_level(np.array(100.0))
        return result

    @cached_property
    def tops(self) -> IntArray:
        """`highest_ions` of the query, shape (4,)."""
        result: IntArray = highest_ions(self.corrected[None, :])[0]
        return result

    @cached_property
    def neighbour_tops(self) -> IntArray:
        """`highest_ions` of every neighbour, shape (n, 4)."""
        return highest_ions(correct_for_carbon(self.table.relative))

    @cached_property
    def masses(self) -> IntArray:
        """Candidate masses, increasing: high ions, high ions plus terminal losses, and what neighbours propose."""
        top = int(self.tops[0])
        present = np.flatnonzero(self.corrected > FLOOR)[::-1]
        proposed = [present[present > top - 60][:30]]
        high = np.flatnonzero(self.corrected >= 1.0)[::-1][:6]
        proposed.append((high[:, None] + np.array(TERMINAL_LOSSES)[None, :]).reshape(-1))
        proposed.append(self.table.masses[self.table.masses >= top - 12])
        for level in range(len(TOP_LEVELS)):
            moved = self.tops[level] + self.table.masses - self.neighbour_tops[:, level]
            proposed.append(moved[moved >= top - 12])
        masses = np.unique(np.concatenate(proposed).astype(np.int64))
        return masses[(masses >= max(16, top - BELOW_TOP)) & (masses <= HIGHEST)]


def padded(values: FloatArray) -> FloatArray:
    """`values` on an axis with `PAD` zeros before and many after."""
    result = np.zeros(SIZE)
    kept = min(values.size, SIZE - PAD)
    result[PAD : PAD + kept] = values[:kept]
    return result


def dense_of(spectrum: CleanSpectrum) -> FloatArray:
    """Relative intensity by m/z, shape (highest m/z + 1,), cut at `HIGHEST`."""
    mz = spectrum.nominal.mz.astype(np.int64)
    kept = mz <= HIGHEST
    dense = np.zeros(int(mz[kept][-1]) + 1 if kept.any() else 1)
    dense[mz[kept]] = spectrum.nominal.relative[kept]
    return dense


def correct_for_carbon(relative: FloatArray) -> FloatArray:
    """Rows of dense intensities after the 13C of the peak one below is taken away, never below 0."""
    corrected = relative.copy()
    corrected[:, 1:] -= relative[:, :-1] * (CARBON_13_AT_MOST * np.arange(1, corrected.shape[1]))
    return np.maximum(corrected, 0.0)


def highest_ions(corrected: FloatArray) -> IntArray:
    """Highest m/z of each row above each of `TOP_LEVELS`, shape (n, 4); 0 where there is none."""
    last = corrected.shape[1] - 1
    columns = []
    for level in TOP_LEVELS:
        above = corrected[:, ::-1] > max(level, 1e-3)
        columns.append(np.where(above.any(axis=1), last - above.argmax(axis=1), 0))
    return np.stack(columns, axis=1).astype(np.int64)


def peak_features(problem: MassProblem) -> dict[str, FloatArray]:
    """Features of the group *peaks*, each of shape (n_masses,)."""
    masses, raw, pad = problem.masses, problem.raw_pad, problem.pad
    at = masses + PAD
    here = pad[at]
    suffix_max = np.maximum.accumulate(raw[::-1])[::-1]
    suffix_sum = np.cumsum(raw[::-1])[::-1]
    window = raw[at[:, None] + np.arange(-60, 4)[None, :]]
    near, wide = window[:, -18:].max(axis=1), window.max(axis=1)
    top = int(problem.tops[0])
    even = float(problem.corrected[40 : max(top - 2, 41) : 2].sum())
    odd = float(problem.corrected[41 : max(top - 2, 42) : 2].sum())
    even_share = even / max(even + odd, 1e-6)
    parity = (masses % 2).astype(float)
    found = {
        "at M": log_level(here),
        "M present": (raw[at] > 0).astype(float),
        "tallest above M+2": log_level(suffix_max[at + 3]),
        "sum above M+1": log_level(suffix_sum[at + 2]),
        "sum above M+4": log_level(suffix_sum[at + 5]),
        "share of near ions": here / np.maximum(near, FLOOR),
        "share of wider range": np.log10(np.maximum(here, 0.02) / np.maximum(wide, FLOOR)),
        "odd mass": parity,
        "even share": np.full(masses.size, even_share),
        "odd mass, even share": parity * even_share,
        "improbable loss": log_level(pad[at[:, None] - np.array(IMPROBABLE_LOSSES)[None, :]].max(axis=1)),
        "log mass": np.log(masses.astype(float)),
    }
    for level, highest in zip(TOP_LEVELS, problem.tops.tolist(), strict=True):
        found[f"above the highest ion of {level:g} %"] = np.clip(masses - highest, -30, 150).astype(float)
    for offset in (-3, -2, -1, 1, 2):
        found[f"at M{offset:+d}"] = log_level(raw[at + offset])
    shown = raw[at] >= RATIOS_FROM
    height = np.maximum(raw[at], FLOOR)
    for offset in (-2, -1, 1, 2, 3):
        ratio = np.log10(np.maximum(raw[at + offset], FLOOR) / height)
        found[f"M{offset:+d} to M"] = np.clip(ratio, -2.0, 1.5) * shown
    found["M+1 over 13C"] = np.clip(raw[at + 1] / height / (CARBON_13_AT_MOST * masses), 0.0, 4.0) * shown
    for group in LOSS_GROUPS:
        found[f"loss of {'/'.join(map(str, group))}"] = log_level(np.max([pad[at - loss] for loss in group], axis=0))
    for mz in KEY_IONS:
        found[f"ion {mz}"] = np.full(masses.size, float(log_level(raw[PAD + mz : PAD + mz + 1])[0]))
    return found


def pair_features(problem: MassProblem) -> dict[str, FloatArray]:
    """Features of the group *pairs*: how much fragments add up to M − 1 … M + 2 more than to masses around."""
    masses, corrected = problem.masses, problem.corrected
    axis = np.arange(corrected.size)
    low = np.sqrt(corrected) * (axis >= 27)
    high = np.sqrt(corrected * axis) * (axis >= 60)
    size = 1 << (2 * corrected.size + 16).bit_length()
    spectrum = np.fft.rfft(np.stack([low, high]), n=size, axis=1)
    sums = np.zeros((2, max(size, HIGHEST + 32)))
    sums[:, :size] = np.fft.irfft(spectrum * spectrum, n=size, axis=1)
    background = np.convolve(sums[0], np.ones(15) / 15.0, mode="same")
    total = max(float(high @ high), 1e-6)
    found = {
        f"pairs to M{offset:+d}": sums[0][masses + offset] / np.maximum(background[masses + offset], 1e-6)
        for offset in (-1, 0, 1, 2)
    }
    for offset in (0, 1):
        found[f"high pairs to M{offset:+d}"] = sums[1][masses + offset] / total
    return found


def neighbour_features(problem: MassProblem) -> dict[str, FloatArray]:
    """Features of the group *neighbours*."""
    masses, table = problem.masses, problem.table
    names = _neighbour_names()
    if not table.entries:
        return {name: np.zeros(masses.size) for name in names}
    cosine = np.maximum(table.cosine, 0.0)
    broad, sharp = _votes(cosine, 4), _votes(cosine, 10)
    same = (masses[:, None] == table.masses[None, :]).astype(float)
    apart = masses[:, None] - table.masses[None, :]
    columns = [same @ broad, same @ sharp, (same * cosine).max(axis=1), np.full(masses.size, float(cosine.max()))]
    for level in range(len(TOP_LEVELS)):
        gap = table.masses - problem.neighbour_tops[:, level]
        equal = ((masses - problem.tops[level])[:, None] == gap[None, :]).astype(float)
        columns += [equal @ broad, equal @ sharp]
    for kind in (apart % 2 == 0, apart % 14 == 0):
        columns += [kind.astype(float) @ broad, kind.astype(float) @ sharp]
    for similarity in _loss_similarities(problem):
        columns += _similarity_votes(similarity, cosine, broad, sharp)
    columns += _shift_votes(problem, cosine, broad, sharp)
    return dict(zip(names, columns, strict=True))


def _neighbour_names() -> list[str]:
    names = ["same mass, broad", "same mass, sharp", "nearest of this mass", "nearest of all"]
    for level in TOP_LEVELS:
        names += [f"same gap above {level:g} %, broad", f"same gap above {level:g} %, sharp"]
    names += ["same parity, broad", "same parity, sharp", "same series, broad", "same series, sharp"]
    for kind in ("loss cosine", "loss overlap", "shifted"):
        names += [
            f"{kind}: {word}"
            for word in (
                "best",
                "five best",
                "broad",
                "sharp",
                "times cosine",
                "votes broad",
                "votes sharp",
                "lead",
                "of best",
            )
        ]
    names += ["shift gain best", "shift gain broad", "shift gain votes"]
    for power in (6, 16):
        names += [f"shifted votes {power}", f"shifted near-best {power}"]
    return [*names, "first analogue", "second analogue", "third analogue", "best shifted"]


def _votes(similarity: FloatArray, power: int) -> FloatArray:
    raised = similarity**power
    return raised / max(float(raised.sum()), 1e-12)


def _loss_similarities(problem: MassProblem) -> tuple[FloatArray, FloatArray]:
    """Cosine over neutral losses from M, and the same product over whole-spectrum norms; shape (n_masses, n)."""
    table = problem.table
    query = np.sqrt(problem.raw_pad[problem.masses[:, None] + PAD - LOSS_RANGE[None, :]])
    fragment = table.masses[:, None] - LOSS_RANGE[None, :]
    inside = (fragment >= 0) & (fragment < table.relative.shape[1])
    picked = table.relative[np.arange(len(table.masses))[:, None], np.where(inside, fragment, 0)]
    rows = np.sqrt(np.where(inside, picked, 0.0))
    totals = table.relative.sum(axis=1)
    product = np.einsum("ml,nl->mn", query, rows)  # too small for threads of a linear-algebra library to pay
    lengths = np.sqrt((query**2).sum(axis=1))[:, None] * np.sqrt((rows**2).sum(axis=1))[None, :]
    whole = np.sqrt(float(problem.relative.sum())) * np.sqrt(totals)[None, :]
    return product / np.maximum(lengths, 1e-6), product / np.maximum(whole, 1e-6)


def _similarity_votes(
    similarity: FloatArray, cosine: FloatArray, broad: FloatArray, sharp: FloatArray
) -> list[FloatArray]:
    ordered = np.sort(similarity, axis=1)[:, ::-1]
    cubed = similarity**3
    best_place, best_value = similarity.argmax(axis=0), similarity.max(axis=0)
    votes = []
    for weight in (broad, sharp):
        vote = np.zeros(len(similarity))
        np.add.at(vote, best_place, weight * best_value)
        votes.append(vote)
    mean = cubed @ broad
    return [
        ordered[:, 0],
        ordered[:, :5].mean(axis=1),
        mean,
        cubed @ sharp,
        (similarity * cosine).max(axis=1),
        *votes,
        ordered[:, 0] - ordered[:, 0].max(),
        mean / max(float(mean.max()), 1e-9),
    ]


def _shift_votes(problem: MassProblem, cosine: FloatArray, broad: FloatArray, sharp: FloatArray) -> list[FloatArray]:
    table, count = problem.table, problem.masses.size
    gain = table.gains_at(problem.masses)
    hybrid = table.direct[None, :] + gain
    columns = _similarity_votes(hybrid, cosine, broad, sharp)
    relative = gain / np.maximum(1.0 - table.direct, 0.05)[None, :]
    votes = np.zeros(count)
    np.add.at(votes, gain.argmax(axis=0), broad * gain.max(axis=0))
    columns += [(relative * table.direct[None, :] ** 2).max(axis=1), relative @ (broad * table.direct), votes]
    best, place = hybrid.max(axis=0), hybrid.argmax(axis=0)
    for power in (6, 16):
        weight = _votes(best, power)
        vote = np.zeros(count)
        np.add.at(vote, place, weight)
        columns += [vote, (hybrid / np.maximum(best, 1e-9)[None, :]) ** 4 @ weight]
    order = np.argsort(-best, kind="stable")
    for rank in range(3):
        named = np.zeros(count)
        if rank < order.size:
            named[place[order[rank]]] = best[order[rank]]
        columns.append(named)
    columns.append(np.full(count, float(best.max())))
    return columns


def all_features(problem: MassProblem) -> tuple[FloatArray, dict[str, list[str]]]:
    """Feature matrix of shape (n_masses, n_features), and the feature names of each estimator in the order of the columns."""
    groups = {
        "peaks": peak_features(problem),
        "pairs": pair_features(problem),
        "neighbours": neighbour_features(problem),
    }
    matrix = np.stack([column for group in groups.values() for column in group.values()], axis=1)
    return matrix, {name: list(group) for name, group in groups.items()}


def network_inputs(standardised: FloatArray, levels: FloatArray, masses: IntArray) -> FloatArray:
    """What the networks read of each candidate mass: its features, the intensity at every loss from it, its place in a series.

    Parameters
    ----------
    standardised : ndarray, shape (n, n_features)
    levels : ndarray
        `MassProblem.levels` of the query.
    masses : ndarray of int, shape (n,)

    Returns
    -------
    ndarray, shape (n, n_features + 176 + 14)
    """
    losses = levels[masses[:, None] + PAD - LOSSES]
    return np.concatenate([standardised, losses, np.eye(SERIES)[masses % SERIES]], axis=1)


def fragment_levels(levels: FloatArray) -> FloatArray:
    """What the networks read of the query as a whole, shape (200,): the intensity at every m/z of `FRAGMENTS`."""
    result: FloatArray = levels[FRAGMENTS + PAD]
    return result
