"""The fitted model that turns features of candidate masses into probabilities: linear estimators, two small neural
networks and boosted trees.

`molecular_ion_model.json` and `molecular_ion_networks.npz` beside this module are written by
`tests/benchmarks/fit_molecular_ion.py`.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import IO, NamedTuple

import numpy as np

from identify.records import FloatArray

IntArray = np.ndarray[tuple[int, ...], np.dtype[np.int64]]


@dataclass(frozen=True, slots=True, eq=False)
class LinearEstimator:
    """Logits that are linear in some of the standardised features; `places` are their columns."""

    places: IntArray
    weights: FloatArray

    def logits(self, standardised: FloatArray) -> FloatArray:
        """Logits of every candidate mass, shape (n_masses,)."""
        result: FloatArray = standardised[:, self.places] @ self.weights
        return result


class Network(NamedTuple):
    """Two hidden layers of rectified sums, one output.

    Attributes
    ----------
    inputs : ndarray, shape (n_inputs, n_hidden)
        Weights of what is read of a candidate mass (`mass_features.network_inputs`).
    fragments : ndarray, shape (n_fragments, n_hidden)
        Weights of what is read of the query as a whole (`mass_features.fragment_levels`).
    first_bias : ndarray, shape (n_hidden,)
    second : ndarray, shape (n_hidden, n_second)
    second_bias, last : ndarray, shape (n_second,)
    """

    inputs: FloatArray
    fragments: FloatArray
    first_bias: FloatArray
    second: FloatArray
    second_bias: FloatArray
    last: FloatArray

    def logits(self, inputs: FloatArray, fragments: FloatArray) -> FloatArray:
        """Logits of candidate masses, shape (n_masses,), from their inputs and the fragments of their query."""
        hidden = np.maximum(inputs @ self.inputs + (fragments @ self.fragments + self.first_bias), 0.0)
        result: FloatArray = np.maximum(hidden @ self.second + self.second_bias, 0.0) @ self.last
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
        `neighbours`, `shifted`, and `first look` over all, which picks the masses that the others judge.
    query, everything : Network
        One sees nothing of the neighbours, the other all there is.
    trees : Trees
        Over all features. They are surer than the networks where M is seen, the networks better where it is not.
    shares : tuple of float
        Weights of the logits of `query`, `everything` and `trees` where they judge together.
    kept : int
        Candidate masses that networks and trees judge.
    """

    names: tuple[str, ...]
    mean: FloatArray
    scale: FloatArray
    estimators: dict[str, LinearEstimator]
    query: Network
    everything: Network
    trees: Trees
    shares: tuple[float, float, float]
    kept: int

    def standardise(self, matrix: FloatArray) -> FloatArray:
        """Features with mean 0 and spread 1 over the training data, clipped."""
        return np.clip((matrix - self.mean) / self.scale, -CLIP, CLIP)

    def judge(self, matrix: FloatArray, inputs: FloatArray, fragments: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Logits of candidate masses by the query alone, and by everything together.

        Parameters
        ----------
        matrix : ndarray, shape (n_masses, n_features)
            Not standardised.
        inputs, fragments : ndarray
            See `Network.logits`.
        """
        alone = self.query.logits(inputs, fragments)
        judges = (alone, self.everything.logits(inputs, fragments), self.trees.sum_over(matrix))
        return alone, np.sum([share * logits for share, logits in zip(self.shares, judges, strict=True)], axis=0)


CLIP = 6.0


@cache
def load_model() -> MassModel:
    """The model shipped with the package.

    Returns
    -------
    MassModel
    """
    room = files("identify.evidence")
    text = room.joinpath("molecular_ion_model.json").read_text(encoding="utf-8")
    with room.joinpath("molecular_ion_networks.npz").open("rb") as networks:
        return parse_model(text, networks)


def parse_model(text: str, networks: IO[bytes]) -> MassModel:
    """Model from what the fit script writes.

    Parameters
    ----------
    text : str
        JSON: everything but the networks.
    networks : binary file
        Numpy archive: the arrays of each network, named ``network/name``.

    Returns
    -------
    MassModel
    """
    table = json.loads(text)
    names = tuple(table["names"])
    places = {name: place for place, name in enumerate(names)}
    estimators = {
        name: LinearEstimator(
            np.array([places[feature] for feature in weights], np.int64), np.array(list(weights.values()))
        )
        for name, weights in table["estimators"].items()
    }
    with np.load(networks, allow_pickle=False) as arrays:
        query, everything = (
            Network(*(arrays[f"{network}/{name}"].astype(float) for name in Network._fields))
            for network in ("query", "everything")
        )
    return MassModel(
        names=names,
        mean=np.array(table["mean"]),
        scale=np.array(table["scale"]),
        estimators=estimators,
        query=query,
        everything=everything,
        trees=_parse_trees(table["trees"]),
        shares=tuple(table["shares"]),
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
