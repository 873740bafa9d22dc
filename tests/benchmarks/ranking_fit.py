"""Maximum-likelihood fits of the additive log-odds: which entry, and which of compound, unlisted isomer, something else.

Two likelihoods, both with a small ridge on standardised features, both by Fisher scoring:

- *Choice among entries*: ``P(right) = Σ_right exp(s) / Σ exp(s)`` over the entries found for a query, ``s = x · w``.
- *Alternatives*: a query is one of the listed compounds (``s_c``), an isomer of one of them without an entry
  (``log Σ_{c in group} exp(s_c) + φ_g · b``), or something else (``z · d``); exactly what `identify.ranking.rank` computes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Mask = NDArray[np.bool_]
LOW = -1e30
"""Log-odds of what cannot be."""
SEEN_FROM = 1e-3
"""Answers less likely than this are left out of the curvature, never out of the likelihood."""


def maximise(
    loss: Callable[[Floats], tuple[float, Floats]],
    curvature: Callable[[Floats], Floats],
    ridge: Floats,
    start: Floats,
    tolerance: float = 0.02,
    rounds: int = 40,
) -> Floats:
    """Parameters of the smallest loss, by Fisher scoring with halved steps."""
    theta = start
    value, slope = loss(theta)
    for _ in range(rounds):
        step = np.linalg.solve(curvature(theta) + np.diag(ridge + 1e-6), -slope)
        length, found, new_slope = 1.0, value, slope
        while length > 1e-6:
            found, new_slope = loss(theta + length * step)
            if found <= value + 1e-4 * length * float(slope @ step):
                break
            length /= 2
        gained, theta, value, slope = value - found, theta + length * step, found, new_slope
        if gained < tolerance:
            break
    return theta


def fit_choice(
    x: Floats, query: Ints, right: Mask, weight: Floats, ridge: Floats, start: Floats | None = None
) -> Floats:
    """Weights of the standardised features, shape ``(n_features,)``; rows sorted by query, one weight per query.

    `x` may be of single precision, which is twice as fast.
    """
    first = np.flatnonzero(np.r_[True, query[1:] != query[:-1]])
    of_row = np.repeat(np.arange(first.size), np.diff(np.r_[first, query.size]))
    counted = weight * np.maximum.reduceat(right, first)

    def shares(w: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        s = (x @ w.astype(x.dtype)).astype(np.float64)
        e = np.exp(s - np.maximum.reduceat(s, first)[of_row])
        whole, good = np.add.reduceat(e, first), np.add.reduceat(e * right, first) + 1e-30
        return whole, good, e / whole[of_row], e * right / good[of_row]

    def loss(w: Floats) -> tuple[float, Floats]:
        whole, good, p, among_right = shares(w)
        slope = ((counted[of_row] * (among_right - p)).astype(x.dtype) @ x).astype(np.float64)
        return float(
            -(counted * (np.log(good) - np.log(whole))).sum() + 0.5 * (ridge * w * w).sum()
        ), -slope + ridge * w

    def curvature(w: Floats) -> Floats:
        p = shares(w)[2]
        seen = p > SEEN_FROM
        rows, chance, owner = x[seen].astype(np.float64), p[seen], of_row[seen]
        centre = sum_by(owner, rows * chance[:, None], first.size)
        return (rows * (counted[owner] * chance)[:, None]).T @ rows - (centre * counted[:, None]).T @ centre

    return maximise(loss, curvature, ridge, np.zeros(x.shape[1]) if start is None else start)


def sum_by(owner: Ints, values: Floats, n: int) -> Floats:
    """Sums of the rows of each owner, shape ``(n, n_columns)``; owners in ascending order."""
    sums = np.zeros((n, values.shape[1]))
    if owner.size:
        first = np.flatnonzero(np.r_[True, owner[1:] != owner[:-1]])
        sums[owner[first]] = np.add.reduceat(values, first, axis=0)
    return sums


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
    right: Mask
    phi: Floats
    group_query: Ints
    group_right: Mask
    known: Mask
    z: Floats
    else_right: Mask
    weight: Floats

    def split(self, theta: Floats) -> tuple[Floats, Floats, Floats]:
        """Parameters of candidates, groups and something else."""
        nw, nb = self.x.shape[1], self.phi.shape[1]
        return theta[:nw], theta[nw : nw + nb], theta[nw + nb :]

    def scores(self, theta: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """Log-odds of candidates, groups' unlisted isomers, something else; and each candidate's share of its group."""
        w, b, d = self.split(theta)
        s = self.x @ w
        n = self.phi.shape[0]
        top = np.full(n, -np.inf)
        np.maximum.at(top, self.group, s)
        e = np.exp(s - top[self.group])
        whole = np.bincount(self.group, e, minlength=n)
        unlisted = np.where(self.known, np.log(whole) + top + self.phi @ b, LOW)
        return s, unlisted, self.z @ d, e / whole[self.group]

    def probabilities(self, theta: Floats) -> tuple[Floats, Floats, Floats]:
        """Probabilities of candidates, of unlisted isomers of each group, and of something else."""
        s, a, o, _ = self.scores(theta)
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
        s, a, o, share = self.scores(theta)
        norm = self._log_norm(s, a, o)
        g = self._log_norm(
            np.where(self.right, s, LOW), np.where(self.group_right, a, LOW), np.where(self.else_right, o, LOW)
        )
        value = -(self.weight * (g - norm)).sum() + 0.5 * (ridge * theta * theta).sum()
        ds = self.weight[self.query] * (self.right * np.exp(s - g[self.query]) - np.exp(s - norm[self.query]))
        da = self.weight[self.group_query] * (
            self.group_right * np.exp(a - g[self.group_query]) - np.exp(a - norm[self.group_query])
        )
        do = self.weight * (self.else_right * np.exp(o - g) - np.exp(o - norm))
        slope = np.concatenate([(ds + da[self.group] * share) @ self.x, da @ self.phi, do @ self.z])
        return float(value), -slope + ridge * theta

    def curvature(self, theta: Floats) -> Floats:
        """Expected second derivatives (of the denominator: never negative), shape ``(n_parameters, n_parameters)``."""
        nw, nb = self.x.shape[1], self.phi.shape[1]
        p, u, o = self.probabilities(theta)
        share = self.scores(theta)[3]
        row, group = p > SEEN_FROM, u > SEEN_FROM
        # Candidates of the groups looked at; group numbers ascend with queries, members of a group need not.
        inside = np.flatnonzero(group[self.group] & (share > SEEN_FROM))
        inside = inside[np.argsort(self.group[inside], kind="stable")]
        means = sum_by(self.group[inside], self.x[inside] * share[inside, None], self.phi.shape[0])
        grouped = np.column_stack([means[group], self.phi[group]])
        x, chance, u = self.x[row], p[row], u[group]
        of_row, of_group = self.query[row], self.group_query[group]
        total = np.zeros((theta.size, theta.size))
        total[:nw, :nw] += (x * (self.weight[of_row] * chance)[:, None]).T @ x
        total[: nw + nb, : nw + nb] += (grouped * (self.weight[of_group] * u)[:, None]).T @ grouped
        total[nw + nb :, nw + nb :] += (self.z * (self.weight * o)[:, None]).T @ self.z
        centre = np.zeros((o.size, theta.size))
        centre[:, :nw] += sum_by(of_row, x * chance[:, None], o.size)
        centre[:, : nw + nb] += sum_by(of_group, grouped * u[:, None], o.size)
        centre[:, nw + nb :] += self.z * o[:, None]
        return total - (centre * self.weight[:, None]).T @ centre

    def fit(self, ridge: Floats, start: Floats) -> Floats:
        """Parameters of the largest likelihood."""
        return maximise(lambda theta: self.loss(theta, ridge), self.curvature, ridge, start)
