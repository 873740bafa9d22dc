"""Trains the small networks of the molecular mass: which of a query's candidate masses is right?

Plain numpy, because the networks are small and a run must give the same numbers everywhere: Adam with decoupled decay, a rate
that rises shortly and falls as a cosine, half of the first hidden layer dropped, intensities blurred. Without the blur the
networks learn the training spectra by heart (likelihood 0.14 against 0.62 on other compounds).
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from identify.evidence.mass_model import Network

HIDDEN, SECOND = 128, 24
EPOCHS, BATCH = 13, 64
RATE, DECAY, DROPPED = 2e-3, 1e-2, 0.5
BLUR = 0.2
"""Spread of the noise on logarithmic intensities that are not 0; 1 is the way from the floor to the base peak."""

Floats = NDArray[np.float32]


def train_network(
    inputs: Floats,
    fragments: Floats,
    right: NDArray[np.bool_],
    start: NDArray[np.int64],
    read: NDArray[np.bool_],
    blurred: slice,
    seed: int,
) -> Network:
    """A network that gives the right masses of the queries the highest likelihood.

    Parameters
    ----------
    inputs : ndarray, shape (n_rows, n_inputs)
        Candidate masses of all queries, one query after the other.
    fragments : ndarray, shape (n_queries, n_fragments)
    right : bool ndarray, shape (n_rows,)
    start : ndarray of int, shape (n_queries + 1,)
        Query q owns rows start[q] … start[q + 1].
    read : bool ndarray, shape (n_inputs,)
        Inputs the network may read.
    blurred : slice
        Inputs that are logarithmic intensities.
    seed : int

    Returns
    -------
    Network
    """
    rng = np.random.default_rng(seed)
    weights = _first_weights(rng, inputs.shape[1], fragments.shape[1])
    weights["inputs"][~read] = 0.0
    moments = {name: (np.zeros_like(value), np.zeros_like(value)) for name, value in weights.items()}
    noise = BLUR * rng.standard_normal(1 << 22, dtype=np.float32)  # drawn once: drawing takes longer than learning
    usable = np.flatnonzero(np.add.reduceat(right, start[:-1]) > 0)
    n_batches = len(usable) // BATCH
    steps = 0
    for _ in range(EPOCHS):
        order = rng.permutation(usable)
        for batch in order[: n_batches * BATCH].reshape(n_batches, BATCH):
            rows = np.concatenate([np.arange(start[q], start[q + 1]) for q in batch])
            begin = np.concatenate([[0], np.cumsum(start[batch + 1] - start[batch])])
            read_now = inputs[rows] * read
            read_now[:, blurred] = _blur(read_now[:, blurred], noise, rng)
            slopes = _slopes(weights, read_now, _blur(fragments[batch], noise, rng), right[rows], begin, rng)
            slopes["inputs"][~read] = 0.0
            steps += 1
            _descend(weights, slopes, moments, steps, steps / (EPOCHS * n_batches))
    return Network(*(weights[name].astype(np.float64) for name in Network._fields))


def _first_weights(rng: np.random.Generator, n_inputs: int, n_fragments: int) -> dict[str, Floats]:
    def drawn(rows: int, columns: int, gain: float = 1.0) -> Floats:
        return (gain * np.sqrt(2.0 / rows) * rng.standard_normal((rows, columns))).astype(np.float32)

    return {
        "inputs": drawn(n_inputs, HIDDEN, 0.7),
        "fragments": drawn(n_fragments, HIDDEN, 0.7),
        "first_bias": np.zeros(HIDDEN, np.float32),
        "second": drawn(HIDDEN, SECOND),
        "second_bias": np.zeros(SECOND, np.float32),
        "last": drawn(SECOND, 1)[:, 0],
    }


def _blur(levels: Floats, noise: Floats, rng: np.random.Generator) -> Floats:
    """Levels with noise on those that are not 0, never below 0."""
    first = int(rng.integers(0, noise.size - levels.size))
    return np.maximum(levels + noise[first : first + levels.size].reshape(levels.shape), 0.0) * (levels > 0)


def _slopes(
    weights: dict[str, Floats],
    inputs: Floats,
    fragments: Floats,
    right: NDArray[np.bool_],
    begin: NDArray[np.int64],
    rng: np.random.Generator,
) -> dict[str, Floats]:
    """Slopes of the mean negative log-likelihood of a batch."""
    owner = np.repeat(np.arange(len(begin) - 1), np.diff(begin))
    dropped = (rng.random(HIDDEN) >= DROPPED).astype(np.float32) / np.float32(1.0 - DROPPED)
    whole = fragments @ weights["fragments"] + weights["first_bias"]
    hidden = np.maximum(inputs @ weights["inputs"] + whole[owner], 0.0) * dropped
    second = np.maximum(hidden @ weights["second"] + weights["second_bias"], 0.0)
    logits = second @ weights["last"]
    left = np.empty(len(logits), np.float32)
    for first, stop in pairwise(begin.tolist()):
        raised = np.exp(logits[first:stop] - logits[first:stop].max())
        left[first:stop] = raised / raised.sum() - right[first:stop]
    left /= len(begin) - 1
    to_second = left[:, None] * weights["last"] * (second > 0)
    to_first = to_second @ weights["second"].T * (hidden > 0) * dropped
    to_whole = np.add.reduceat(to_first, begin[:-1], axis=0)
    return {
        "inputs": inputs.T @ to_first,
        "fragments": fragments.T @ to_whole,
        "first_bias": to_whole.sum(axis=0),
        "second": hidden.T @ to_second,
        "second_bias": to_second.sum(axis=0),
        "last": second.T @ left,
    }


def _descend(
    weights: dict[str, Floats],
    slopes: dict[str, Floats],
    moments: dict[str, tuple[Floats, Floats]],
    step: int,
    progress: float,
) -> None:
    """One step of Adam (Kingma & Ba 2015) with decoupled decay of the matrices (Loshchilov & Hutter 2019)."""
    rate = RATE * min(1.0, 20.0 * progress + 0.05) * 0.5 * (1.0 + np.cos(np.pi * progress))
    for name, slope in slopes.items():
        mean, square = moments[name]
        mean += 0.1 * (slope - mean)
        square += 0.001 * (slope**2 - square)
        move = (mean / (1.0 - 0.9**step)) / (np.sqrt(square / (1.0 - 0.999**step)) + 1e-8)
        if weights[name].ndim == 2:
            move = move + DECAY * weights[name]
        weights[name] -= np.float32(rate) * move.astype(np.float32)
