"""Fits the model of the molecular mass and writes `identify/evidence/molecular_ion_model.json`.

    python tests/benchmarks/fit_molecular_ion.py

One record of every compound plays the unknown, all entries of its compound are removed from the library. Only coefficients are
written, no spectrum and no accession. The quality printed comes from cross-fitting: no query is judged by a model that saw its
compound.
"""

from __future__ import annotations

import json
import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from evidence_data import PROVENANCE, ROOM, SEED, OpenRecords, load_open_records
from numpy.typing import NDArray

from identify.evidence.facts import formula_facts
from identify.evidence.mass_features import NEIGHBOURS, SEEN, MassProblem, all_features, dense_of
from identify.evidence.mass_model import CLIP, softmax
from identify.evidence.shifted import build_shift_table

DIRECT = ("same ", "nearest ")
ESTIMATORS = {
    "query": lambda name, group: group != "neighbours",
    "neighbours": lambda name, group: group == "neighbours" and name.startswith(DIRECT),
    "shifted": lambda name, group: group == "neighbours" and not name.startswith(DIRECT),
    "first look": lambda name, group: True,
}
"""Which features each linear estimator may use."""
KEPT = 15
TREES = {"max_iter": 160, "learning_rate": 0.07, "max_leaf_nodes": 16, "min_samples_leaf": 30, "l2_regularization": 5.0}
FOLDS = 3
LINEAR_QUERIES = 2500
"""Queries a linear estimator is fitted on; more change nothing in the second decimal."""


@dataclass(frozen=True, eq=False)
class MassData:
    """Features of all candidate masses of many queries, one after the other; query q owns rows start[q] … start[q + 1]."""

    names: list[str]
    groups: dict[str, list[str]]
    matrix: NDArray[np.float32]
    right: NDArray[np.bool_]
    start: NDArray[np.int64]
    seen: NDArray[np.bool_]
    """Whether the query shows its true molecular ion."""
    present: NDArray[np.bool_]
    """Whether the query has an ion at the candidate mass."""
    places: NDArray[np.int64]


def mass_data(records: OpenRecords, *, count: int | None = None, seed: int = SEED) -> MassData:
    """Features for one record of every compound (or of `count` of them), the compound removed from the library."""
    rng = np.random.default_rng(seed)
    first = {int(records.compounds[place]): place for place in rng.permutation(len(records.entries)).tolist()}
    places = [
        place for place in first.values() if formula_facts(records.entries[place].formula_as_measured) is not None
    ]
    matrices, rights, presents, starts, seens = [], [], [], [0], []
    groups: dict[str, list[str]] = {}
    for place in places[:count]:
        entry = records.entries[place]
        near = [
            (records.entries[other], cosine)
            for other, cosine in records.nearest(place, NEIGHBOURS, without_compound=True)
        ]
        relative = dense_of(entry.spectrum)
        problem = MassProblem(relative, build_shift_table(entry.spectrum, near, NEIGHBOURS))
        matrix, groups = all_features(problem)
        truth = formula_facts(entry.formula_as_measured).nominal_mass  # type: ignore[union-attr]
        inside = problem.masses < relative.size
        presents.append(np.where(inside, relative[np.where(inside, problem.masses, 0)], 0.0) >= SEEN)
        matrices.append(matrix.astype(np.float32))
        rights.append(problem.masses == truth)
        starts.append(starts[-1] + len(matrix))
        seens.append(truth < relative.size and relative[truth] >= SEEN)
    names = [name for group in groups.values() for name in group]
    return MassData(
        names, groups, np.concatenate(matrices), np.concatenate(rights), np.array(starts), np.array(seens),
        np.concatenate(presents), np.array(places[:count]),
    )  # fmt: skip


def fit_softmax(
    matrix: NDArray[np.float32], data: MassData, queries: NDArray[np.int64], ridge: float
) -> NDArray[np.float64]:
    """Weights of a linear model of which candidate mass of a query is right, by maximum likelihood with a ridge."""
    from scipy.optimize import minimize

    rows, owner, begin = _rows_of(data, queries[:LINEAR_QUERIES])
    chosen, right = np.ascontiguousarray(matrix[rows]), data.right[rows]
    usable = (np.add.reduceat(right.astype(float), begin) > 0)[owner]

    def loss(weights: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        scores = (chosen @ weights.astype(np.float32)).astype(np.float64)
        tallest = np.maximum.reduceat(scores, begin)[owner]
        raised = np.exp(scores - tallest)
        total = np.add.reduceat(raised, begin)[owner]
        likelihood = np.where(right & usable, scores - tallest - np.log(total), 0.0).sum()
        left = np.where(usable, right - raised / total, 0.0).astype(np.float32)
        slope = (left @ chosen).astype(np.float64)
        return -likelihood + ridge * float(weights @ weights) / 2, -slope + ridge * weights

    found = minimize(loss, np.zeros(chosen.shape[1]), jac=True, method="L-BFGS-B", options={"maxiter": 80})
    return np.asarray(found.x)


def _rows_of(
    data: MassData, queries: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    counts = np.diff(data.start)[queries]
    rows = np.concatenate([np.arange(data.start[q], data.start[q + 1]) for q in queries])
    return rows, np.repeat(np.arange(len(queries)), counts), np.concatenate([[0], np.cumsum(counts)[:-1]])


@dataclass(eq=False)
class FittedMass:
    """A fitted model and what it says about every candidate mass of the data it is asked about."""

    mean: NDArray[np.float64]
    scale: NDArray[np.float64]
    weights: dict[str, tuple[list[int], NDArray[np.float64]]]
    trees: Any

    def logits(self, data: MassData) -> dict[str, NDArray[np.float64]]:
        """Logits by estimator; `trees` is −inf outside the masses they judge."""
        standardised = np.clip((data.matrix - self.mean) / self.scale, -CLIP, CLIP)
        found = {name: standardised[:, columns] @ weights for name, (columns, weights) in self.weights.items()}
        kept = keep_best(data, found["first look"])
        trees = np.full(len(data.matrix), -np.inf)
        trees[kept] = self.trees.decision_function(data.matrix[kept])
        return {**found, "trees": trees}


def keep_best(data: MassData, logits: NDArray[np.float64]) -> NDArray[np.int64]:
    """Rows of the `KEPT` best candidate masses of every query."""
    return np.concatenate(
        [start + np.argsort(-logits[start:stop], kind="stable")[:KEPT] for start, stop in pairwise(data.start.tolist())]
    )


def fit_mass(data: MassData, queries: NDArray[np.int64]) -> FittedMass:
    """Linear estimators and trees fitted on some of the queries."""
    from sklearn.ensemble import HistGradientBoostingClassifier

    rows, _, _ = _rows_of(data, queries)
    mean, scale = data.matrix[rows].mean(axis=0), data.matrix[rows].std(axis=0) + np.float32(1e-3)
    standardised = np.clip((data.matrix - mean) / scale, -CLIP, CLIP).astype(np.float32)
    group_of = {name: group for group, names in data.groups.items() for name in names}
    weights = {}
    for estimator, admits in ESTIMATORS.items():
        columns = [place for place, name in enumerate(data.names) if admits(name, group_of[name])]
        weights[estimator] = (columns, fit_softmax(standardised[:, columns], data, queries, 10.0))
    columns, first = weights["first look"]
    kept = np.intersect1d(keep_best(data, standardised[:, columns] @ first), rows)
    trees = HistGradientBoostingClassifier(early_stopping=False, random_state=0, **TREES)
    trees.fit(data.matrix[kept], data.right[kept])
    return FittedMass(mean, scale, weights, trees)


def cross_fit(data: MassData) -> dict[str, NDArray[np.float64]]:
    """Logits of every query from a model that has not seen its compound, by estimator."""
    fold = np.arange(len(data.start) - 1) % FOLDS
    found: dict[str, NDArray[np.float64]] = {}
    for number in range(FOLDS):
        logits = fit_mass(data, np.flatnonzero(fold != number)).logits(data)
        rows, _, _ = _rows_of(data, np.flatnonzero(fold == number))
        for name, values in logits.items():
            found.setdefault(name, np.zeros(len(data.matrix)))[rows] = values[rows]
    return found


def best_temperature(data: MassData, logits: NDArray[np.float64]) -> float:
    """Divisor of the logits that makes their softmax most likely."""

    def loss(temperature: float) -> float:
        total = 0.0
        for start, stop in pairwise(data.start.tolist()):
            right = data.right[start:stop]
            scores = np.where(np.isfinite(logits[start:stop]), logits[start:stop], -1e9) / temperature
            scores = scores - scores.max()
            chance = float(np.exp(scores[right]).sum() / np.exp(scores).sum()) if right.any() else 0.0
            total -= math.log(max(chance, 1e-4))
        return total

    return min(np.arange(0.6, 4.01, 0.1).tolist(), key=loss)


def fit_molecular_ion(records: OpenRecords) -> None:
    """Write the model of the molecular mass."""
    data = mass_data(records)
    crossed = cross_fit(data)
    temperatures = {name: best_temperature(data, logits) for name, logits in crossed.items()}
    fitted = fit_mass(data, np.arange(len(data.start) - 1))
    table = {
        "provenance": f"{PROVENANCE} by tests/benchmarks/fit_molecular_ion.py: one record of each "
        f"of {len(data.start) - 1:,} compounds, that compound removed from the library; temperatures by cross-fitting.",
        "names": data.names,
        "mean": [round(float(value), 4) for value in fitted.mean],
        "scale": [round(float(value), 4) for value in fitted.scale],
        "kept": KEPT,
        "temperature": round(temperatures["trees"], 2),
        "estimators": {
            name: {
                "temperature": round(temperatures[name], 2),
                "weights": {data.names[column]: round(float(w), 4) for column, w in zip(columns, weights, strict=True)},
            }
            for name, (columns, weights) in fitted.weights.items()
        },
        "trees": [_export_tree(stage[0].nodes) for stage in fitted.trees._predictors],
    }
    text = json.dumps(table, ensure_ascii=False, separators=(",", ":"))
    text = text.replace('"trees":[', '"trees":[\n').replace("},{", "},\n{")
    (ROOM / "molecular_ion_model.json").write_text(text + "\n", encoding="utf-8")
    print_mass_quality(data, crossed)


def _export_tree(nodes: Any) -> dict[str, list[float]]:
    leaf = nodes["is_leaf"].astype(bool)
    return {
        "feature": [-1 if end else int(place) for end, place in zip(leaf, nodes["feature_idx"], strict=True)],
        "threshold": [
            0.0 if end else float(f"{edge:.6g}") for end, edge in zip(leaf, nodes["num_threshold"], strict=True)
        ],
        "left": nodes["left"].astype(int).tolist(),
        "right": nodes["right"].astype(int).tolist(),
        "value": [round(float(value), 4) if end else 0.0 for end, value in zip(leaf, nodes["value"], strict=True)],
    }


def print_mass_quality(
    data: MassData, crossed: dict[str, NDArray[np.float64]], chosen: NDArray[np.bool_] | None = None
) -> None:
    """Print how often each estimator is right on top, and how far agreement can be trusted; all from cross-fitting.

    `chosen` picks some of the queries.
    """
    chosen = np.ones(len(data.places), bool) if chosen is None else chosen
    spans = [span for span, wanted in zip(pairwise(data.start.tolist()), chosen, strict=True) if wanted]
    seen = data.seen[chosen]
    right = {
        name: data.right[[start + int(np.argmax(logits[start:stop])) for start, stop in spans]]
        for name, logits in crossed.items()
    }
    names = {
        "query": "ions and losses of the query alone",
        "neighbours": "masses of the neighbours alone",
        "shifted": "neighbours after shifting alone",
        "trees": "combined",
    }
    print(
        f"nominal mass right on top, {len(spans):,} queries          all   M seen   M not seen ({1 - seen.mean():.2f})"
    )
    for name, label in names.items():
        print(
            f"  {label:46s} {right[name].mean():.3f}    {right[name][seen].mean():.3f}    {right[name][~seen].mean():.3f}"
        )
    places = {name: [int(np.argmax(crossed[name][start:stop])) for start, stop in spans] for name in names}
    together = np.array(
        [len({places[name][n] for name in ("query", "neighbours", "shifted")}) == 1 for n in range(len(spans))]
    )
    print(f"  all three agree: coverage {together.mean():.3f}, right {right['query'][together].mean():.4f}")
    _print_confidence(data, crossed["trees"], spans, seen)


def _print_confidence(
    data: MassData, logits: NDArray[np.float64], spans: list[tuple[int, int]], seen: NDArray[np.bool_]
) -> None:
    temperature = best_temperature(data, logits)
    confident, honest = [], []
    for is_seen, (start, stop) in zip(seen.tolist(), spans, strict=True):
        chance = softmax(logits[start:stop] / temperature)
        confident.append((float(chance.max()), bool(data.right[start + int(chance.argmax())])))
        present = data.present[start:stop]
        shown = np.where(present, chance, 0.0)
        says_hidden = float(chance[~present].sum()) > shown.max(initial=0.0)
        honest.append(not is_seen if says_hidden else bool(data.right[start + int(shown.argmax())]))
    precision = np.cumsum([item[1] for item in sorted(confident, reverse=True)]) / np.arange(1, len(confident) + 1)
    for goal in (0.99, 0.95, 0.90):
        reached = np.flatnonzero(precision >= goal)
        print(f"  precision {goal:.2f} at coverage {(reached[-1] + 1) / len(spans) if reached.size else 0:.3f}")
    print(f"  precision at coverage 0.33: {precision[int(0.33 * len(spans))]:.3f}")
    said, truth = np.array([item[0] for item in confident]), np.array([item[1] for item in confident], float)
    bins = np.minimum((said * 10).astype(int), 9)
    error = sum(
        abs(said[bins == b].mean() - truth[bins == b].mean()) * (bins == b).mean()
        for b in range(10)
        if (bins == b).any()
    )
    print(f"  calibration error of the best mass, ten bins: {error:.3f}")
    print(f"  right when 'not observed' counts as an answer: {np.mean(honest):.3f}")


def is_consistent(records: OpenRecords, place: int) -> bool:
    """Whether a record's own spectrum allows its stated formula: nothing of 2 % or more lies beyond its isotope cluster."""
    entry = records.entries[place]
    formula = formula_facts(entry.formula_as_measured)
    peaks = entry.spectrum.nominal
    return (
        formula is not None and not (peaks.relative[peaks.mz > formula.nominal_mass + LAST_OFFSET_JUDGED] >= 2.0).any()
    )


LAST_OFFSET_JUDGED = 6
"""M + 6 still belongs to the cluster of common halogens and of [M+H]+."""


if __name__ == "__main__":
    fit_molecular_ion(load_open_records())
