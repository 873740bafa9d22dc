"""Fits the model of the molecular mass and writes `molecular_ion_model.json` and `molecular_ion_networks.npz` of the room.

    python tests/benchmarks/fit_molecular_ion.py

Every record plays the unknown, all entries of its compound are removed from the library. Only coefficients are written, no
spectrum and no accession. The quality printed comes from cross-fitting, one record of each compound: no query is judged by a
model that saw its compound.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from evidence_data import PROVENANCE, ROOM, SEED, OpenRecords, load_open_records
from mass_networks import train_network
from numpy.typing import NDArray

from identify.evidence.facts import formula_facts
from identify.evidence.mass_features import (
    LOSSES,
    NEIGHBOURS,
    SEEN,
    MassProblem,
    all_features,
    dense_of,
    fragment_levels,
    network_inputs,
)
from identify.evidence.mass_model import CLIP, Network, softmax
from identify.evidence.shifted import build_shift_table

DIRECT = ("same ", "nearest ")
ESTIMATORS = {
    "neighbours": lambda name, group: group == "neighbours" and name.startswith(DIRECT),
    "shifted": lambda name, group: group == "neighbours" and not name.startswith(DIRECT),
    "first look": lambda name, group: True,
}
"""Which features each linear estimator may use."""
KEPT = 25
TREES = {"max_iter": 160, "learning_rate": 0.07, "max_leaf_nodes": 16, "min_samples_leaf": 30, "l2_regularization": 5.0}
JUDGES = ("query", "everything", "trees")
"""What is weighed together for the combined estimate."""
FOLDS = 3
LINEAR_QUERIES = 2500
"""Queries a linear estimator is fitted on; more change nothing in the second decimal."""


@dataclass(frozen=True, eq=False)
class MassData:
    """Features of all candidate masses of many queries, one after the other; query q owns rows start[q] … start[q + 1]."""

    names: list[str]
    groups: dict[str, list[str]]
    matrix: NDArray[np.float32]
    masses: NDArray[np.int64]
    levels: NDArray[np.float32]
    """`MassProblem.levels` of every query."""
    right: NDArray[np.bool_]
    start: NDArray[np.int64]
    seen: NDArray[np.bool_]
    """Whether the query shows its true molecular ion."""
    present: NDArray[np.bool_]
    """Whether the query has an ion at the candidate mass."""
    places: NDArray[np.int64]
    folds: NDArray[np.int64]
    """Part of the compounds a query belongs to."""
    is_first: NDArray[np.bool_]
    """Whether the query is the one record of its compound that is judged; the others are there to be learned from."""


def mass_data(records: OpenRecords, places: Sequence[int] | None = None) -> MassData:
    """Features for every record with a formula (or those at `places`), the compound removed from the library."""
    rng = np.random.default_rng(SEED)
    usable = [n for n in rng.permutation(len(records.entries)).tolist() if _mass_of(records, n) is not None]
    first = {int(records.compounds[place]): place for place in usable}
    fold_of = {compound: number % FOLDS for number, compound in enumerate(first)}
    usable.sort(key=lambda place: first[int(records.compounds[place])] != place)
    chosen = usable if places is None else list(places)
    matrices, masses, levels, rights, presents, starts, seens = [], [], [], [], [], [0], []
    groups: dict[str, list[str]] = {}
    for place in chosen:
        entry, truth = records.entries[place], _mass_of(records, place)
        near = [
            (records.entries[other], cosine)
            for other, cosine in records.nearest(place, NEIGHBOURS, without_compound=True)
        ]
        relative = dense_of(entry.spectrum)
        problem = MassProblem(relative, build_shift_table(entry.spectrum, near, NEIGHBOURS))
        matrix, groups = all_features(problem)
        inside = problem.masses < relative.size
        presents.append(np.where(inside, relative[np.where(inside, problem.masses, 0)], 0.0) >= SEEN)
        matrices.append(matrix.astype(np.float32))
        masses.append(problem.masses)
        levels.append(problem.levels.astype(np.float32))
        rights.append(problem.masses == truth)
        starts.append(starts[-1] + len(matrix))
        seens.append(truth < relative.size and relative[truth] >= SEEN)
    return MassData(
        [name for group in groups.values() for name in group], groups, np.concatenate(matrices), np.concatenate(masses),
        np.stack(levels), np.concatenate(rights), np.array(starts), np.array(seens), np.concatenate(presents),
        np.array(chosen), np.array([fold_of[int(records.compounds[place])] for place in chosen]),
        np.array([first[int(records.compounds[place])] == place for place in chosen]),
    )  # fmt: skip


def _mass_of(records: OpenRecords, place: int) -> int | None:
    formula = formula_facts(records.entries[place].formula_as_measured)
    return formula.nominal_mass if formula is not None else None


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


@dataclass(frozen=True, eq=False)
class FittedMass:
    """A fitted model and what it says about every candidate mass of the data it is asked about."""

    mean: NDArray[np.float32]
    scale: NDArray[np.float32]
    weights: dict[str, tuple[list[int], NDArray[np.float64]]]
    query: Network
    everything: Network
    trees: Any

    def logits(self, data: MassData, queries: NDArray[np.int64]) -> dict[str, NDArray[np.float64]]:
        """Logits by estimator for the rows of some queries; −inf for masses that the networks do not judge."""
        rows, _, begin = _rows_of(data, queries)
        standardised = _standardise(data.matrix[rows], self.mean, self.scale)
        found = {name: standardised[:, columns] @ weights for name, (columns, weights) in self.weights.items()}
        found.update({name: np.full(len(rows), -np.inf) for name in JUDGES})
        for query, first, stop in zip(queries, begin, [*begin[1:], len(rows)], strict=True):
            kept = first + keep_best(found["first look"][first:stop])
            inputs = network_inputs(standardised[kept], data.levels[query], data.masses[rows[kept]])
            fragments = fragment_levels(data.levels[query])
            found["query"][kept] = self.query.logits(inputs, fragments)
            found["everything"][kept] = self.everything.logits(inputs, fragments)
        judged = np.isfinite(found["query"])
        found["trees"][judged] = self.trees.decision_function(data.matrix[rows[judged]])
        return found


def keep_best(logits: NDArray[np.float64]) -> NDArray[np.int64]:
    """Places of the `KEPT` best candidate masses of one query, best first."""
    return np.argsort(-logits, kind="stable")[:KEPT]


def _standardise(
    matrix: NDArray[np.float32], mean: NDArray[np.float32], scale: NDArray[np.float32]
) -> NDArray[np.float32]:
    return np.clip((matrix - mean) / scale, -CLIP, CLIP)


def fit_mass(data: MassData, queries: NDArray[np.int64]) -> FittedMass:
    """Linear estimators, networks and trees fitted on some of the queries."""
    from sklearn.ensemble import HistGradientBoostingClassifier

    rows, _, _ = _rows_of(data, queries)
    mean, scale = data.matrix[rows].mean(axis=0), data.matrix[rows].std(axis=0) + np.float32(1e-3)
    standardised = _standardise(data.matrix, mean, scale)
    group_of = {name: group for group, names in data.groups.items() for name in names}
    weights = {}
    for estimator, admits in ESTIMATORS.items():
        columns = [place for place, name in enumerate(data.names) if admits(name, group_of[name])]
        weights[estimator] = (columns, fit_softmax(standardised[:, columns], data, queries, 10.0))
    columns, look = weights["first look"]
    first = standardised[:, columns] @ look
    kept = [
        start + keep_best(first[start:stop])
        for start, stop in zip(data.start[queries], data.start[queries + 1], strict=True)
    ]
    inputs = np.concatenate(
        [
            network_inputs(standardised[some], data.levels[query], data.masses[some]).astype(np.float32)
            for query, some in zip(queries, kept, strict=True)
        ]
    )
    fragments = np.stack([fragment_levels(data.levels[query]) for query in queries])
    judged, start = np.concatenate(kept), np.cumsum([0, *map(len, kept)])
    right = data.right[judged]
    both = np.ones(inputs.shape[1], bool)
    alone = both.copy()
    alone[[place for place, name in enumerate(data.names) if group_of[name] == "neighbours"]] = False
    losses = slice(len(data.names), len(data.names) + LOSSES.size)
    query, everything = (
        train_network(inputs, fragments, right, start, read, losses, seed) for seed, read in enumerate((alone, both))
    )
    trees = HistGradientBoostingClassifier(early_stopping=False, random_state=0, **TREES)
    trees.fit(data.matrix[judged], right)
    return FittedMass(mean, scale, weights, query, everything, trees)


def cross_fit(data: MassData) -> dict[str, NDArray[np.float64]]:
    """Logits of every query from a model that has not seen its compound, by estimator."""
    found: dict[str, NDArray[np.float64]] = {}
    for number in range(FOLDS):
        asked = np.flatnonzero(data.folds == number)
        logits = fit_mass(data, np.flatnonzero(data.folds != number)).logits(data, asked)
        rows, _, _ = _rows_of(data, asked)
        for name, values in logits.items():
            found.setdefault(name, np.zeros(len(data.matrix)))[rows] = values
    found["combined"] = weigh_together(found, fit_shares(data, found))
    return found


def weigh_together(logits: dict[str, NDArray[np.float64]], shares: NDArray[np.float64]) -> NDArray[np.float64]:
    """Weighted sum of the logits of `JUDGES`; −inf for masses that they did not judge."""
    judged = np.isfinite(logits[JUDGES[0]])
    together = np.full(judged.size, -np.inf)
    together[judged] = sum(share * logits[name][judged] for name, share in zip(JUDGES, shares, strict=True))
    return together


def fit_shares(data: MassData, logits: dict[str, NDArray[np.float64]]) -> NDArray[np.float64]:
    """Weights of `JUDGES` that make the right masses most likely, from logits that did not see their compounds."""
    matrix = np.stack([np.maximum(logits[name], NOT_JUDGED) for name in JUDGES], axis=1).astype(np.float32)
    reached = np.add.reduceat(data.right & np.isfinite(logits["query"]), data.start[:-1]) > 0
    return fit_softmax(matrix, data, np.flatnonzero(reached), 1e-3)


NOT_JUDGED = -50.0
"""Logit of a candidate mass that was not among the best of the first look."""


def fit_molecular_ion(records: OpenRecords) -> None:
    """Write the model of the molecular mass."""
    data = mass_data(records)
    crossed = cross_fit(data)
    write_model(data, fit_mass(data, np.arange(len(data.places))), crossed)
    print_mass_quality(data, crossed, data.is_first)


def write_model(data: MassData, fitted: FittedMass, crossed: dict[str, NDArray[np.float64]]) -> None:
    """Write a fitted model, with the shares of its judges that cross-fitted logits ask for."""
    table = {
        "provenance": f"{PROVENANCE} by tests/benchmarks/fit_molecular_ion.py: {len(data.places):,} records of "
        f"{data.is_first.sum():,} compounds, each compound removed from the library; shares by cross-fitting.",
        "names": data.names,
        "mean": [round(float(value), 4) for value in fitted.mean],
        "scale": [round(float(value), 4) for value in fitted.scale],
        "kept": KEPT,
        "shares": [round(float(share), 3) for share in fit_shares(data, crossed)],
        "estimators": {
            name: {data.names[column]: round(float(w), 4) for column, w in zip(columns, weights, strict=True)}
            for name, (columns, weights) in fitted.weights.items()
        },
        "trees": [_export_tree(stage[0].nodes) for stage in fitted.trees._predictors],
    }
    text = json.dumps(table, ensure_ascii=False, separators=(",", ":"))
    text = text.replace('"trees":[', '"trees":[\n').replace("},{", "},\n{")
    (ROOM / "molecular_ion_model.json").write_text(text + "\n", encoding="utf-8")
    arrays = {
        f"{network}/{name}": array.astype(np.float16)
        for network, fit in (("query", fitted.query), ("everything", fitted.everything))
        for name, array in fit._asdict().items()
    }
    np.savez_compressed(ROOM / "molecular_ion_networks.npz", allow_pickle=False, **arrays)


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


def print_mass_quality(data: MassData, crossed: dict[str, NDArray[np.float64]], chosen: NDArray[np.bool_]) -> None:
    """Print how often each estimator is right on top, and how far agreement can be trusted; all from cross-fitting.

    `chosen` picks the queries.
    """
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
        "combined": "combined",
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
    _print_confidence(data, crossed["combined"], spans, seen)


def _print_confidence(
    data: MassData, logits: NDArray[np.float64], spans: list[tuple[int, int]], seen: NDArray[np.bool_]
) -> None:
    confident, honest = [], []
    for is_seen, (start, stop) in zip(seen.tolist(), spans, strict=True):
        chance = softmax(logits[start:stop])
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
