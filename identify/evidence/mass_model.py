"""The fitted model that turns features of candidate masses into probabilities: linear estimators, and boosted trees over all.

The file `molecular_ion_model.json` beside this module is written by `tests/benchmarks/fit_evidence.py molecular-ion`.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import cache
from importlib.resources import files

import numpy as np

from identify.records import FloatArray

IntArray = np.ndarray[tuple[int, ...], np.dtype[np.int64]]


@dataclass(frozen=True, slots=True, eq=False)
class LinearEstimator:
    """Logits that are linear in some of the standardised features; `places` are their columns."""

    places: IntArray
    weights: FloatArray
    temperature: float

    def logits(self, standardised: FloatArray) -> FloatArray:
        """Logits of every candidate mass, shape (n_masses,), at the fitted temperature."""
        result: FloatArray = standardised[:, self.places] @ self.weights / self.temperature
        return result


@dataclass(frozen=True, slots=True, eq=False)
class Trees:
    """A sum of regression trees, all nodes in flat arrays; a leaf points at itself."""

    feature: IntArray
    threshold: FloatArray
    left: IntArray
    right: IntArray
    value: FloatArray
    roots: IntArray
    depth: int

    def sum_over(self, matrix: FloatArray) -> FloatArray:
        """Sum of all trees for every row of `matrix`, shape (n_rows,)."""
        # `take` on flat arrays is several times faster than indexing; one array holds both children of a node.
        values, first = np.ascontiguousarray(matrix).reshape(-1), np.arange(len(matrix))[:, None] * matrix.shape[1]
        children = np.stack([self.right, self.left], axis=1).reshape(-1)
        node = np.repeat(self.roots[None, :], len(matrix), axis=0)
        for _ in range(self.depth):
            goes_left = values.take(first + self.feature.take(node)) <= self.threshold.take(node)
            node = children.take(2 * node + goes_left)
        result: FloatArray = self.value.take(node).sum(axis=1)
        return result


@dataclass(frozen=True, slots=True, eq=False)
class MassModel:
    """Everything fitted for the molecular mass.

    Attributes
    ----------
    names : tuple of str
        Features in the order of the columns.
    mean, scale : ndarray
        For standardising; values are clipped at ± `CLIP`.
    estimators : dict of str to LinearEstimator
        `query`, `neighbours`, `shifted`, and `first look` over all, which picks the masses the trees judge.
    trees : Trees
    temperature : float
        Logits of the trees are divided by it.
    kept : int
        Candidate masses the trees judge.
    """

    names: tuple[str, ...]
    mean: FloatArray
    scale: FloatArray
    estimators: dict[str, LinearEstimator]
    trees: Trees
    temperature: float
    kept: int

    def standardise(self, matrix: FloatArray) -> FloatArray:
        """Features with mean 0 and spread 1 over the training data, clipped."""
        return np.clip((matrix - self.mean) / self.scale, -CLIP, CLIP)


CLIP = 6.0


@cache
def load_model() -> MassModel:
    """The model shipped with the package.

    Returns
    -------
    MassModel
    """
    text = files("identify.evidence").joinpath("molecular_ion_model.json").read_text(encoding="utf-8")
    return parse_model(text)


def parse_model(text: str) -> MassModel:
    """Model from the JSON text that the fit script writes.

    Parameters
    ----------
    text : str

    Returns
    -------
    MassModel
    """
    table = json.loads(text)
    names = tuple(table["names"])
    places = {name: place for place, name in enumerate(names)}
    estimators = {
        name: LinearEstimator(
            np.array([places[feature] for feature in item["weights"]], np.int64),
            np.array(list(item["weights"].values())),
            float(item["temperature"]),
        )
        for name, item in table["estimators"].items()
    }
    return MassModel(
        names=names,
        mean=np.array(table["mean"]),
        scale=np.array(table["scale"]),
        estimators=estimators,
        trees=_parse_trees(table["trees"]),
        temperature=float(table["temperature"]),
        kept=int(table["kept"]),
    )


def _parse_trees(rows: list[dict[str, list[float]]]) -> Trees:
    columns: dict[str, list[float]] = {"feature": [], "threshold": [], "left": [], "right": [], "value": []}
    roots: list[int] = []
    for tree in rows:
        start = len(columns["feature"])
        roots.append(start)
        columns["feature"] += [max(place, 0) for place in tree["feature"]]
        columns["threshold"] += tree["threshold"]
        columns["value"] += tree["value"]
        for side in ("left", "right"):
            columns[side] += [
                start + (child if tree["feature"][place] >= 0 else place) for place, child in enumerate(tree[side])
            ]
    depth = _depth(columns["left"], columns["right"], roots)
    return Trees(
        np.array(columns["feature"], np.int64),
        np.array(columns["threshold"]),
        np.array(columns["left"], np.int64),
        np.array(columns["right"], np.int64),
        np.array(columns["value"]),
        np.array(roots, np.int64),
        depth,
    )


def _depth(left: list[float], right: list[float], roots: list[int]) -> int:
    deepest, level = 0, [int(root) for root in roots]
    while level:
        level = [int(child) for node in level for child in {left[node], right[node]} if int(child) != node]
        deepest += bool(level)
    return deepest


def softmax(logits: FloatArray) -> FloatArray:
    """Probabilities that sum to 1."""
    raised = np.exp(logits - logits.max())
    result: FloatArray = raised / raised.sum()
    return result
