"""Fits the penalty on a further entry of `identify.evidence.purity` and writes `identify/evidence/purity_model.py`.

    python tests/benchmarks/fit_purity.py

Spectra are mixed from replicates of the open records: the record played is never among the hits, its compound is represented by
other records. Half of the cases are mixtures, a quarter pure spectra, a quarter pure spectra whose compound has no entry. One
half of the compounds is fitted on, `tests/benchmarks/evidence.py purity` judges the other half.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from evidence_data import MAX_MZ, PROVENANCE, ROOM, SEED, OpenRecords, load_open_records
from numpy.typing import NDArray

from identify.evidence.purity import MAX_ENTRIES, leave_over, prepare, purity_features, try_parts
from identify.pipeline.query_nature import N_DRAFTS, N_OF_RESIDUAL
from identify.records import CleanSpectrum, Entry, Peaks
from identify.settings import Weighting
from identify.similarity.scores import peak_weights

SHARES = (0.1, 0.2, 0.35, 0.5)
FALSE_ALARMS = 0.01
"""Share of pure spectra, their compound in the library, that may be called a mixture."""


@dataclass(frozen=True, eq=False)
class Case:
    """One simulated query: `kind` is pure, absent or mixed; `share` that of the smaller compound; `compounds` those mixed."""

    kind: str
    share: float
    compounds: frozenset[int]
    spectrum: CleanSpectrum
    places: list[int]
    entries: list[Entry]


def simulate(records: OpenRecords, count: int, half: int) -> Iterator[Case]:
    """Cases from every second compound with replicates."""
    rng = np.random.default_rng(SEED + half)
    groups = [places for places in records.replicates.values() if len(places) >= 2][half::2]
    present = (records.matrix > 0).astype(np.float32)
    n_peaks = present.sum(axis=1)
    for _ in range(count):
        first, second = (int(rng.choice(groups[place])) for place in rng.choice(len(groups), 2, replace=False))
        kind = str(rng.choice(["pure", "absent", "mixed", "mixed"]))
        share = float(rng.choice(SHARES)) if kind == "mixed" else 0.0
        used = [first, second] if share else [first]
        if len({int(records.compounds[place]) for place in used}) < len(used):
            continue
        mixed = (1 - share) * _vector(records, first) + share * _vector(records, second)
        lowest = max(records.entries[place].spectrum.lowest_mz for place in used)
        mixed[:lowest] = 0
        mixed[mixed < 0.002 * mixed.max()] = 0
        mz = np.flatnonzero(mixed)
        if mz.size < 5:
            continue
        spectrum = CleanSpectrum(Peaks(mz.astype(float), mixed[mz]), None, lowest)
        hidden = np.isin(records.compounds, records.compounds[used]) if kind == "absent" else np.isin(
            np.arange(len(records.entries)), used
        )  # fmt: skip
        places = _hits(records, present, n_peaks, spectrum, hidden)
        yield Case(
            kind, share, frozenset(int(records.compounds[place]) for place in used), spectrum, places,
            [records.entries[place] for place in places],
        )  # fmt: skip


def _vector(records: OpenRecords, place: int) -> NDArray[np.float64]:
    peaks = records.entries[place].spectrum.nominal
    dense = np.zeros(MAX_MZ + 1)
    kept = peaks.mz <= MAX_MZ
    dense[peaks.mz[kept].astype(int)] = peaks.intensity[kept]
    return dense / dense.sum()


def _hits(
    records: OpenRecords,
    present: NDArray[np.float32],
    n_peaks: NDArray[np.float32],
    spectrum: CleanSpectrum,
    hidden: NDArray[np.bool_],
) -> list[int]:
    """Hits as `identify.pipeline.query_nature.judge_parts` gathers them: by cosine, by reverse match, and of the residual."""
    query = _unit(spectrum)
    cosine = records.matrix @ query
    reverse = cosine / np.sqrt(np.maximum(present @ query**2, 1e-9))
    reverse[n_peaks < 6] = 0.0
    taken: dict[int, int] = {}
    for scores, most in ((cosine, N_DRAFTS), (reverse, MAX_ENTRIES - N_OF_RESIDUAL)):
        _take(records, taken, np.where(hidden, -1.0, scores), most)
    left = leave_over(spectrum, [records.entries[place] for place in taken.values()])
    if left is not None:
        _take(records, taken, np.where(hidden, -1.0, records.matrix @ _unit(left)), MAX_ENTRIES)
    return list(taken.values())


def _unit(spectrum: CleanSpectrum) -> NDArray[np.float32]:
    peaks = spectrum.nominal
    kept = peaks.mz <= MAX_MZ
    query = np.zeros(MAX_MZ + 1, np.float32)
    query[peaks.mz[kept].astype(int)] = peak_weights(peaks.mz[kept], peaks.intensity[kept], Weighting())
    return query / np.linalg.norm(query)


def _take(records: OpenRecords, taken: dict[int, int], scores: NDArray[np.float64], most: int) -> None:
    for place in np.argsort(-scores)[:300].tolist():
        if len(taken) >= most:
            break
        taken.setdefault(int(records.compounds[place]), place)


def fit_penalty(records: OpenRecords) -> None:
    """Write weights and threshold of `needs_another`."""
    from sklearn.linear_model import LogisticRegression
    from sklearn.model_selection import cross_val_predict

    rows, truth, pure = [], [], []
    for case in simulate(records, 1600, half=0):
        trials = try_parts(*prepare(case.spectrum, case.entries).products())
        if len(trials) > 1 and trials[1].chance > 0:
            rows.append(purity_features(trials[0].misfit, trials[1].misfit, trials[1].share, trials[1].alike))
            truth.append(case.kind == "mixed")
            pure.append(case.kind == "pure")
    design = np.array(rows)
    model = LogisticRegression(C=10.0, max_iter=5000)
    chance = cross_val_predict(model, design, truth, cv=5, method="predict_proba")[:, 1]
    model.fit(design, truth)
    limit = float(np.quantile(chance[np.array(pure)], 1.0 - FALSE_ALARMS))
    weights = ", ".join(f"{value:.3f}" for value in [*model.intercept_, *model.coef_[0]])
    lines = [
        '"""What a further entry must bring to be called a compound of its own (see `identify.evidence.purity`).',
        "",
        f"{PROVENANCE}",
        f"by `tests/benchmarks/fit_purity.py`: {len(rows):,} spectra mixed from replicates or pure, half of the compounds.",
        '"""',
        "",
        "from __future__ import annotations",
        "",
        f"PURITY_WEIGHTS = ({weights})",
        '"""Constant, then one for each of `purity_features`."""',
        f"LEAST_CHANCE = {limit:.3f}",
        f'"""By five-fold cross-validation {FALSE_ALARMS:.0%} of the pure spectra that have an entry and a second part to try',
        'reach it."""',
        "",
    ]
    (ROOM / "purity_model.py").write_text("\n".join(lines), encoding="utf-8")


if __name__ == "__main__":
    fit_penalty(load_open_records())
