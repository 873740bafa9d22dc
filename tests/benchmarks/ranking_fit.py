"""Maximum-likelihood fits of the additive log-odds: which entry, and which of compound, unlisted isomer, something else.

Two likelihoods, both with a small ridge on standardised features:

- *Choice among entries*: ``P(right) = Σ_right exp(s) / Σ exp(s)`` over the entries found for a query, ``s = x · w``.
- *Alternatives*: a query is one of the listed compounds (``s_c``), an isomer of one of them without an entry
  (``log Σ_{c in group} exp(s_c) + φ_g · b``), or something else (``z · d``); exactly what `identify.ranking.rank` computes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
LOW = -1e30
"""Log-odds of what cannot be."""


def fit_choice(x: Floats, query: Ints, right: NDArray[np.bool_], weight: Floats, ridge: float) -> Floats:
    """Weights of the standardised features, shape ``(n_features,)``; rows sorted by query, one weight per query."""
    start = np.flatnonzero(np.r_[True, query[1:] != query[:-1]])
    of_row = np.repeat(np.arange(start.size), np.diff(np.r_[start, query.size]))
    counted = weight * np.maximum.reduceat(right, start)

    def loss(w: Floats) -> tuple[float, Floats]:
        s = x @ w
        e = np.exp(s - np.maximum.reduceat(s, start)[of_row])
        whole, good = np.add.reduceat(e, start), np.add.reduceat(e * right, start) + 1e-30
        slope = (counted[of_row] * (e * right / good[of_row] - e / whole[of_row])) @ x
        return float(-(counted * (np.log(good) - np.log(whole))).sum() + 0.5 * ridge * w @ w), -slope + ridge * w

    return minimize(loss, np.zeros(x.shape[1]), jac=True, method="L-BFGS-B", options={"maxiter": 400}).x


@dataclass(eq=False)
class Alternatives:
    """Rows of the second likelihood; candidates and groups sorted by query.

    Attributes
    ----------
    x, group, query, right : candidates: features, group (global number), query, whether it is the answer
    phi, group_query, group_right, known : groups: features, query, whether the answer is an isomer of it without an entry,
        whether its formula is known (an isomer without an entry can only be spoken of then)
    z, else_right, weight : queries: features, whether the answer is something else, weight
    """

    x: Floats
    group: Ints
    query: Ints
    right: NDArray[np.bool_]
    phi: Floats
    group_query: Ints
    group_right: NDArray[np.bool_]
    known: NDArray[np.bool_]
    z: Floats
    else_right: NDArray[np.bool_]
    weight: Floats

    def scores(self, w: Floats, b: Floats, d: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """Log-odds of candidates, groups' unlisted isomers, something else; and each candidate's share of its group."""
        s = self.x @ w
        n = self.phi.shape[0]
        top = np.full(n, -np.inf)
        np.maximum.at(top, self.group, s)
        e = np.exp(s - top[self.group])
        whole = np.bincount(self.group, e, minlength=n)
        unlisted = np.where(self.known, np.log(whole) + top + self.phi @ b, LOW)
        return s, unlisted, self.z @ d, e / whole[self.group]

    def probabilities(self, w: Floats, b: Floats, d: Floats) -> tuple[Floats, Floats, Floats]:
        """Probabilities of candidates, of unlisted isomers of each group, and of something else."""
        s, a, o, _ = self.scores(w, b, d)
        norm = self._log_norm(s, a, o)
        return np.exp(s - norm[self.query]), np.exp(a - norm[self.group_query]), np.exp(o - norm)

    def _log_norm(self, s: Floats, a: Floats, o: Floats) -> Floats:
        top = o.copy()
        np.maximum.at(top, self.query, s)
        np.maximum.at(top, self.group_query, a)
        n = o.size
        total = np.exp(o - top) + np.bincount(self.query, np.exp(s - top[self.query]), minlength=n)
        total += np.bincount(self.group_query, np.exp(a - top[self.group_query]), minlength=n)
        return top + np.log(total)

    def loss(self, theta: Floats, ridge: Floats) -> tuple[float, Floats]:
        """Negative log-likelihood with ridge, and its gradient."""
        nw, nb = self.x.shape[1], self.phi.shape[1]
        w, b, d = theta[:nw], theta[nw : nw + nb], theta[nw + nb :]
        s, a, o, share = self.scores(w, b, d)
        norm = self._log_norm(s, a, o)
        good = self._log_norm(
            np.where(self.right, s, LOW), np.where(self.group_right, a, LOW), np.where(self.else_right, o, LOW)
        )
        value = -(self.weight * (good - norm)).sum() + 0.5 * (ridge * theta * theta).sum()
        g = good
        ds = self.weight[self.query] * (self.right * np.exp(s - g[self.query]) - np.exp(s - norm[self.query]))
        da = self.weight[self.group_query] * (
            self.group_right * np.exp(a - g[self.group_query]) - np.exp(a - norm[self.group_query])
        )
        do = self.weight * (self.else_right * np.exp(o - g) - np.exp(o - norm))
        slope = np.concatenate([(ds + da[self.group] * share) @ self.x, da @ self.phi, do @ self.z])
        return float(value), -slope + ridge * theta

    def fit(self, ridge: Floats, start: Floats) -> Floats:
        """Parameters of candidates, groups and something else, one after the other."""
        found = minimize(self.loss, start, args=(ridge,), jac=True, method="L-BFGS-B", options={"maxiter": 1000})
        return found.x
