"""The best set of wavelengths: exchange for a good set, branch and bound to prove that none is better.

A node of the tree says for each of the ordered picks which candidates it may be. Its bound comes from the relaxation; a pick at
a candidate whose bound is no better than the best set known is struck out; small nodes are gone through set by set. The work is
limited by a number of nodes, never by time, so that the same request has the same answer on every machine.
"""

from __future__ import annotations

import heapq
from dataclasses import dataclass, replace
from itertools import count
from math import comb
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.plan.relaxation import Mixture, Oracle, bound_from, relax
from tinctor.plan.selection import Problem, objectives, objectives_of

__all__ = ["Found", "best_set"]

#: Nodes looked at before the search stays with what it has.
NODES: Final = 300
#: A node of no more sets than this is gone through set by set.
FEW_SETS: Final = 4000
#: With more unknowns than this fewer nodes are looked at.
CHEAP_UNKNOWNS: Final = 5
#: Smallest eigenvalue of M (1 for all candidates together) above which a rank-one update of its inverse keeps its digits.
WELL_DETERMINED: Final = 1e-7
#: Where a wavelength error counts the bound says little: this part of the nodes is spent on it.
BIASED_SHARE: Final = 5
#: There, and with no more sets than this, every set is looked at.
ALL_SETS: Final = 150_000
#: Otherwise the exchange starts from several sets: the best of so many drawn at random (the seed is fixed), and one that avoids
#: flanks.
DRAWN: Final = 400
STARTS: Final = 5
#: Sets closer than this, relative, are the same.
SAME: Final = 1e-10


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A set of k wavelengths.

    Attributes
    ----------
    chosen : int array (k,)
        Candidate numbers, ascending.
    objective, bound
        The set's, and what no set can go below.
    exact
        Whether it was proved that no allowed set is better.
    nodes
        Parts of the search tree that were looked at.
    """

    chosen: np.ndarray
    objective: float
    bound: float
    exact: bool
    nodes: int


class _Best:
    """The best set known."""

    def __init__(self, problem: Problem) -> None:
        self.problem, self.objective = problem, np.inf
        self.chosen: np.ndarray = np.zeros(0, dtype=np.intp)

    def offer(self, sets: np.ndarray) -> None:
        if len(sets) == 0:
            return
        values = objectives(self.problem, sets)
        k = int(np.argmin(values))
        if values[k] < self.objective:
            self.objective, self.chosen = float(values[k]), np.asarray(sets[k])

    @property
    def to_beat(self) -> float:
        """A bound at least this large cannot lead to a better set."""
        if self.problem.criterion == "determinant":
            return self.objective - SAME
        return self.objective * (1 - SAME)


def best_set(problem: Problem, k: int, nodes: int = NODES) -> Found | None:
    """Return the best allowed set of k candidates, or None where spacing leaves no set of that size.

    Parameters
    ----------
    problem
        Candidates and criterion.
    k
        At least `problem.unknowns`.
    nodes
        Parts of the search tree to look at; 0 for exchange alone, whose answer is then exact only by the bound of the root.
    """
    oracle = Oracle(problem, k)
    mask = np.ones((k, problem.n), dtype=bool)
    mask &= oracle.through(np.zeros(problem.n), mask) > -np.inf
    if not mask.any():
        return None
    best = _Best(problem)
    if problem.shifted is not None and comb(problem.n, k) <= ALL_SETS:
        best.offer(_all_sets(oracle, mask))
        return Found(np.sort(best.chosen), best.objective, best.objective, True, 1)
    root = Mixture(np.zeros((0, k), dtype=np.intp), np.zeros(0), np.full(len(problem.T), 1.0 / len(problem.T)))
    met = relax(problem, oracle, mask, root, np.inf)
    best.offer(np.array(met))
    for start in [best.chosen, *(_starts(problem, oracle, mask) if problem.shifted is not None else [])]:
        best.offer(_exchanged(problem, start)[None])
    bound, looked_at = _search(problem, oracle, mask, root, best, _affordable(problem, nodes))
    exact = bound >= best.to_beat
    return Found(np.sort(best.chosen), best.objective, best.objective if exact else bound, exact, looked_at)


def _affordable(problem: Problem, nodes: int) -> int:
    """Fewer nodes where each costs more, so that an answer takes seconds: they cost by the square of the unknowns."""
    share = min(1.0, (CHEAP_UNKNOWNS / problem.unknowns) ** 2)
    return int(nodes * share) if problem.shifted is None else int(nodes * share) // BIASED_SHARE


def _starts(problem: Problem, oracle: Oracle, mask: np.ndarray) -> list[np.ndarray]:
    """Sets to exchange from where a wavelength error counts: the best that takes it for noise, and the best of many drawn."""
    assert problem.shifted is not None
    noisy = np.sqrt(1.0 + (problem.shifted**2).max(axis=1))
    as_noise = replace(problem, Z=problem.Z / noisy[:, None], shifted=None)
    root = Mixture(np.zeros((0, oracle.k), dtype=np.intp), np.zeros(0), np.full(len(problem.T), 1.0 / len(problem.T)))
    met = relax(as_noise, oracle, mask, root, np.inf)
    calm = np.array(met)[np.argmin(objectives(as_noise, np.array(met)))]
    rng = np.random.default_rng(20)
    drawn = np.array([oracle.best(rng.random(problem.n), mask)[0] for _ in range(DRAWN)])
    order = np.argsort(objectives(problem, drawn), kind="stable")[:STARTS]
    return [_exchanged(as_noise, calm), *drawn[order]]


def _search(problem: Problem, oracle: Oracle, mask: np.ndarray, root: Mixture, best: _Best, nodes: int) -> tuple[float, int]:
    """Branch and bound; returns the bound reached and the number of nodes."""
    order = count()
    heap = [(root.bound, next(order), mask, root)]
    looked_at = 0
    while heap and heap[0][0] < best.to_beat and looked_at < nodes:
        _, _, mask, mixture = heapq.heappop(heap)
        looked_at += 1
        mask = _struck(problem, oracle, mask, mixture, best)
        sizes = mask.sum(axis=1)
        if not sizes.all():
            continue
        if np.prod(sizes.astype(float)) <= FEW_SETS:
            best.offer(_all_sets(oracle, mask))
            continue
        for half in _halves(mask, mixture):
            child = mixture.kept(half)
            child.bound = mixture.bound
            met = relax(problem, oracle, half, child, best.to_beat)
            best.offer(np.array(met, dtype=np.intp).reshape(-1, oracle.k))
            if child.bound < best.to_beat:
                heapq.heappush(heap, (child.bound, next(order), half, child))
    return (heap[0][0] if heap else np.inf), looked_at


def _struck(problem: Problem, oracle: Oracle, mask: np.ndarray, mixture: Mixture, best: _Best) -> np.ndarray:
    """Return the mask without picks that cannot be part of a better set."""
    if mixture.gains.size == 0:
        return mask
    through = oracle.through(mixture.gains, mask)
    bounds = bound_from(problem, mixture.limit, np.where(through > 0, through + mixture.ridge, np.nan))
    return np.asarray(mask & (np.nan_to_num(bounds, nan=np.inf) < best.to_beat))


def _halves(mask: np.ndarray, mixture: Mixture) -> list[np.ndarray]:
    """Split the pick on which the sets of a mixture agree least, at its mean; a pick all agree on, in the middle."""
    mean = mixture.shares @ mixture.sets
    spread = np.sqrt(np.maximum(mixture.shares @ (mixture.sets - mean) ** 2, 0.0))
    spread = np.where(mask.sum(axis=1) > 1, spread, -1.0)
    t = int(np.argmax(spread)) if spread.max() > 1e-9 else int(np.argmax(mask.sum(axis=1)))
    places = np.flatnonzero(mask[t])
    cut = mean[t] if places[0] <= mean[t] < places[-1] and spread[t] > 1e-9 else float(places[(places.size - 1) // 2])
    low, high = mask.copy(), mask.copy()
    low[t] &= np.arange(mask.shape[1]) <= cut
    high[t] &= np.arange(mask.shape[1]) > cut
    return [low, high]


def _all_sets(oracle: Oracle, mask: np.ndarray) -> np.ndarray:
    """Every allowed set of a mask, (N, k)."""
    sets = np.flatnonzero(mask[0])[:, None]
    for row in mask[1:]:
        places = np.flatnonzero(row)
        rows, cols = np.nonzero(oracle.previous[places][None, :] >= sets[:, -1:])
        sets = np.column_stack([sets[rows], places[cols]])
    return sets


def _exchanged(problem: Problem, chosen: np.ndarray) -> np.ndarray:
    """Exchange one wavelength at a time for the candidate that improves most, until none does (Fedorov 1972)."""
    chosen = np.asarray(chosen)
    value = float(objectives(problem, chosen[None])[0])
    while True:
        values = _exchange_values(problem, chosen)
        t, i = np.unravel_index(int(np.argmin(values)), values.shape)
        if not values[t, i] < value - 1e-12 * abs(value):
            return np.sort(chosen)
        value = float(values[t, i])
        chosen = chosen.copy()
        chosen[t] = i


def _exchange_values(problem: Problem, chosen: np.ndarray) -> FloatArray:
    """Objectives of all sets with one pick replaced, (k, n); infinite where spacing or repetition forbids it."""
    rows = problem.Z[chosen]
    M = rows.T @ rows
    values = np.full((len(chosen), problem.n), np.inf)
    for t, place in enumerate(chosen):
        others = problem.wavelength_nm[np.delete(chosen, t)]
        distance = np.abs(problem.wavelength_nm[:, None] - others).min(axis=1, initial=np.inf)
        allowed = np.flatnonzero(distance >= max(problem.spacing_nm * (1 - 1e-9), 1e-12))
        left = M - np.outer(problem.Z[place], problem.Z[place])
        if problem.shifted is None and np.linalg.eigvalsh(left)[0] > WELL_DETERMINED:
            values[t, allowed] = _with_one_more(problem, left, problem.Z[allowed])
            continue
        added = problem.Z[allowed]
        moved = None
        if problem.shifted is not None:
            rest = np.delete(chosen, t)
            moved = problem.Z[rest].T @ problem.shifted[rest] + added[:, :, None] * problem.shifted[allowed][:, None, :]
        values[t, allowed] = objectives_of(problem, left + added[:, :, None] * added[:, None, :], moved)
    return values


def _with_one_more(problem: Problem, M: FloatArray, added: FloatArray) -> FloatArray:
    """Objectives of M with one row added, (n,): the inverse of a matrix with a rank-one change (Sherman and Morrison 1950)."""
    inverse = np.linalg.inv(M)
    C = problem.T @ inverse @ problem.T.T
    Y = added @ inverse
    size = 1.0 + np.einsum("ij,ij->i", Y, added)
    lowered = Y @ problem.T.T
    if problem.criterion == "determinant":
        taken = np.einsum("ij,ij->i", lowered @ np.linalg.inv(C), lowered) / size
        return np.asarray(np.linalg.slogdet(C)[1] + np.log1p(-np.minimum(taken, 1 - 1e-15)))
    variance = np.diag(C) - lowered**2 / size[:, None]
    return np.asarray(variance.max(axis=1) if problem.criterion == "worst-relative-u" else variance.mean(axis=1))
