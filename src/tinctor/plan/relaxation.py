"""Lower bounds on what any allowed set of wavelengths can reach.

Let wavelengths be mixed: w_i between 0 and 1, the mixture being an average of allowed sets. The criteria are convex in the
information M = sum w_i z_i z_i', so that the tangent at any mixture lies below every set's value (Frank and Wolfe 1956; for
designs Kiefer and Wolfowitz 1960). With G = M^-1 T' L T M^-1 and gains h_i = z_i' G z_i, and H the largest sum of gains of an
allowed set, homogeneity sharpens the tangent to

    trace, worst (with weights on the components):   f(S) >= f^2 / H
    determinant:                                     f(S) >= f + p log(p / H)

The largest sum under minimum spacing is found by dynamic programming over the ordered picks of a set.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.plan.selection import RIDGE, Problem

__all__ = ["Mixture", "Oracle", "bound_from", "relax"]

#: Rounds of mixing at one node.
ROUNDS: Final = 8
#: Reweighings of the sets of a mixture in each round.
REWEIGHINGS: Final = 3
#: Relative distance of bound and mixture at which mixing stops.
CLOSE: Final = 1e-7
#: Smallest eigenvalue of M (1 for all candidates together) below which a mixture does not determine every coefficient.
SINGULAR: Final = 1e-9
#: No component's priority falls below this: it could not rise again.
SMALLEST_PRIORITY: Final = 1e-4


class Oracle:
    """Best sums of gains over sets in which the t-th wavelength lies in a mask of its own."""

    def __init__(self, problem: Problem, k: int) -> None:
        self.k = k
        self.previous = problem.previous()
        n = problem.n
        # the first candidate that may follow i: the smallest j whose `previous` reaches i
        self.following = np.searchsorted(self.previous, np.arange(n), side="left")

    def through(self, gains: FloatArray, mask: np.ndarray) -> FloatArray:
        """Return the largest sum of gains of an allowed set whose t-th wavelength is candidate i, (k, n); -inf where none."""
        forward, backward = self._forward(gains, mask), self._backward(gains, mask)
        return np.where(mask, forward + backward - gains, -np.inf)

    def best(self, gains: FloatArray, mask: np.ndarray) -> tuple[np.ndarray, float]:
        """Return the allowed set with the largest sum of gains, and the sum; -inf where there is none."""
        exact = self._forward(gains, mask)
        chosen = np.empty(self.k, dtype=np.intp)
        end = len(gains) - 1
        for t in range(self.k - 1, -1, -1):
            chosen[t] = int(np.argmax(exact[t, : end + 1])) if end >= 0 else 0
            if end < 0 or exact[t, chosen[t]] == -np.inf:
                return chosen, -np.inf
            end = int(self.previous[chosen[t]])
        return chosen, float(exact[-1, chosen[-1]])

    def _forward(self, gains: FloatArray, mask: np.ndarray) -> FloatArray:
        """(k, n): best sum of picks 0..t with pick t at candidate i."""
        exact = np.empty(mask.shape)
        exact[0] = np.where(mask[0], gains, -np.inf)
        for t in range(1, self.k):
            before = np.maximum.accumulate(exact[t - 1])
            reached = np.where(self.previous >= 0, before[self.previous], -np.inf)
            exact[t] = np.where(mask[t], reached + gains, -np.inf)
        return exact

    def _backward(self, gains: FloatArray, mask: np.ndarray) -> FloatArray:
        """(k, n): best sum of picks t..k-1 with pick t at candidate i."""
        n = len(gains)
        exact = np.empty(mask.shape)
        exact[-1] = np.where(mask[-1], gains, -np.inf)
        inside = self.following < n
        for t in range(self.k - 2, -1, -1):
            after = np.maximum.accumulate(exact[t + 1][::-1])[::-1]
            reached = np.where(inside, after[np.minimum(self.following, n - 1)], -np.inf)
            exact[t] = np.where(mask[t], reached + gains, -np.inf)
        return exact


@dataclass(slots=True, eq=False)
class Mixture:
    """Sets and their shares, and what was learned from mixing them.

    Attributes
    ----------
    sets : int array (v, k)
    shares : array (v,)
    priorities : array (p,)
        Weights on the components, for the criterion of the worst.
    bound
        No allowed set has a smaller objective.
    gains : array (n,)
        At the mixture that gave the bound.
    limit
        f at that mixture: `f ** 2 / H` and its like follow from it.
    ridge
        What the objectives' ridge adds to each sum of gains.
    """

    sets: np.ndarray
    shares: FloatArray
    priorities: FloatArray
    bound: float = -np.inf
    gains: FloatArray = field(default_factory=lambda: np.zeros(0))
    limit: float = np.nan
    ridge: float = 0.0

    def kept(self, mask: np.ndarray) -> Mixture:
        """Return the mixture of those sets that a mask allows."""
        inside = mask[np.arange(mask.shape[0]), self.sets].all(axis=1)
        shares = self.shares[inside]
        total = shares.sum()
        return Mixture(self.sets[inside], shares / total if total > 0 else shares + 1.0 / max(len(shares), 1), self.priorities)


def relax(problem: Problem, oracle: Oracle, mask: np.ndarray, mixture: Mixture, stop_at: float) -> list[np.ndarray]:
    """Mix allowed sets until the bound is close or reaches `stop_at`; changes `mixture` and returns the sets met on the way."""
    met = _enriched(problem, oracle, mask, mixture)
    if len(mixture.sets) == 0:
        mixture.bound = np.inf
        return met
    informations = _informations(problem, mixture.sets)
    for _ in range(ROUNDS):
        informations = _reweigh(problem, mixture, informations)
        value, G, _ = _tangent(problem, np.tensordot(mixture.shares, informations, 1), mixture.priorities)
        gains = np.einsum("ij,ij->i", problem.Z @ G, problem.Z)
        chosen, total = oracle.best(gains, mask)
        ridge = RIDGE * float(np.trace(G))  # the objectives' own: without it the bound would be a hair too high
        bound = float(bound_from(problem, value, np.asarray(total + ridge)))
        if bound > mixture.bound:
            mixture.bound, mixture.gains, mixture.limit, mixture.ridge = bound, gains, value, ridge
        if bound >= stop_at or value - bound <= CLOSE * max(abs(value), 1e-300):
            break
        if not (mixture.sets == chosen).all(axis=1).any():
            met.append(chosen)
            mixture.sets = np.vstack([mixture.sets, chosen])
            mixture.shares = np.append(mixture.shares * (1 - 1 / 8), 1 / 8)
            informations = np.concatenate([informations, _informations(problem, chosen[None])])
    return met


def _enriched(problem: Problem, oracle: Oracle, mask: np.ndarray, mixture: Mixture) -> list[np.ndarray]:
    """Give a mixture that does not determine every coefficient the sets that are best for each; returns the sets added."""
    if len(mixture.sets):
        M = np.tensordot(mixture.shares, _informations(problem, mixture.sets), 1)
        if np.linalg.eigvalsh(M)[0] > SINGULAR:
            return []
    squares = problem.Z**2
    found = [oracle.best(gains, mask) for gains in (squares.sum(axis=1), *squares.T)]
    added = [chosen for chosen, total in found if total > -np.inf]
    if added:
        mixture.sets = np.unique(np.vstack([mixture.sets, *added]), axis=0)
        mixture.shares = np.full(len(mixture.sets), 1.0 / len(mixture.sets))
    return added


def bound_from(problem: Problem, value: float, total: FloatArray) -> FloatArray:
    """Return the lower bounds for sets with these largest sums of gains."""
    p = len(problem.T)
    with np.errstate(divide="ignore"):
        return np.asarray(value + p * np.log(p / total) if problem.criterion == "determinant" else value**2 / total)


def _informations(problem: Problem, sets: np.ndarray) -> FloatArray:
    rows = problem.Z[sets]
    return np.asarray(np.swapaxes(rows, 1, 2) @ rows)


def _tangent(problem: Problem, M: FloatArray, priorities: FloatArray) -> tuple[float, FloatArray, FloatArray]:
    """Return the value at M, the matrix G of its gains, and the relative variances of the components."""
    inverse = np.linalg.inv(M + RIDGE * np.eye(len(M)))
    half = problem.T @ inverse
    C = half @ problem.T.T
    variances = np.abs(np.diag(C))
    if problem.criterion == "determinant":
        return float(np.linalg.slogdet(C)[1]), half.T @ np.linalg.solve(C, half), variances
    weights = priorities if problem.criterion == "worst-relative-u" else np.full(len(C), 1.0 / len(C))
    return float(weights @ variances), (half.T * weights) @ half, variances


def _reweigh(problem: Problem, mixture: Mixture, informations: FloatArray) -> FloatArray:
    """Multiplicative updates of shares and priorities (Silvey, Titterington and Torsney 1978); sets of no weight are dropped."""
    power = 1.0 if problem.criterion == "determinant" else 0.5
    for _ in range(REWEIGHINGS):
        M = np.tensordot(mixture.shares, informations, 1)
        _, G, variances = _tangent(problem, M, mixture.priorities)
        if problem.criterion == "worst-relative-u":
            raised = np.maximum(mixture.priorities * variances / variances.max(), SMALLEST_PRIORITY)
            mixture.priorities = raised / raised.sum()
        whole = float((M * G).sum())
        if not 1e-100 < whole < 1e100:  # a mixture that all but leaves a coefficient undetermined: no share is better than another
            break
        pull = np.clip(np.einsum("vij,ij->v", informations, G) / whole, 1e-12, 1e12)
        mixture.shares = mixture.shares * pull**power
        mixture.shares /= mixture.shares.sum()
    keep = mixture.shares > 1e-6
    if keep.all():
        return informations
    mixture.sets, mixture.shares = mixture.sets[keep], mixture.shares[keep] / mixture.shares[keep].sum()
    return informations[keep]
