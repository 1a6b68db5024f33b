"""Non-negative least squares for a batch, exactly.

For few sign-constrained coefficients every support is tried (2**k of them), and the feasible one with the smallest
objective is taken: no iteration, no tolerance, nothing that can fail to converge. Beyond `ENUMERATED` of them the
active-set method of Lawson and Hanson (Solving Least Squares Problems, 1974, chapter 23) runs for all rows at once,
each row with its own passive set.

Two problems are solved here:

    minimise |X z - a|                       `nonnegative_least_squares`: one design for the whole batch
    minimise (z - z^)' C^-1 (z - z^)         `nearest_nonnegative`: every row with its own covariance C, from an
                                             unconstrained weighted estimate z^ (the same optimum, in q dimensions)
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from tinctor.arrays import FloatArray, finite_array
from tinctor.errors import InputError
from tinctor.resolve.small import Cholesky, packed_pairs

__all__ = ["ENUMERATED", "NonNegativeFit", "nearest_nonnegative", "nonnegative_least_squares"]

#: Up to this many sign-constrained coefficients all supports are enumerated.
ENUMERATED = 6

#: Rank tolerance of a support's columns, in units of the largest singular value.
RANK = 1e-13


@dataclass(frozen=True, slots=True, eq=False)
class NonNegativeFit:
    """Non-negative least squares of n data rows on one design.

    Attributes
    ----------
    coefficients : array (n, q)
    residual_norm : array (n,)
        |X z - a|, recomputed from the data.
    optimality : array (n,)
        Largest violation of the Karush-Kuhn-Tucker conditions, relative to |x_j| |a|: at rounding level when optimal.
    """

    coefficients: FloatArray
    residual_norm: FloatArray
    optimality: FloatArray


def nonnegative_least_squares(X: FloatArray, a: FloatArray, free: np.ndarray | None = None) -> NonNegativeFit:
    """Return the z >= 0 that minimise |X z - a|, row by row.

    Parameters
    ----------
    X : array (m, q)
        Design; columns may be collinear or zero, and of any scale.
    a : array (n, m)
        Data, one problem per row.
    free : bool array (q,), optional
        Coefficients that may take either sign.

    Raises
    ------
    InputError
        When an element is not finite or the shapes do not match.

    Examples
    --------
    The 4 by 2 example with an active constraint of Lawson and Hanson's method:

    >>> X = np.array([[0.0372, 0.2869], [0.6861, 0.7071], [0.6233, 0.6245], [0.6344, 0.6170]])
    >>> fit = nonnegative_least_squares(X, np.array([[0.8587, 0.1781, 0.0747, 0.8405]]))
    >>> fit.coefficients.round(4), fit.residual_norm.round(4)
    (array([[0.    , 0.6929]]), array([0.9118]))
    """
    X, a = finite_array(X, "X", ndim=2), finite_array(a, "a", ndim=2)
    if a.shape[1] != X.shape[0]:
        raise InputError.single("wrong-shape", ".a", f"a must have {X.shape[0]} columns, one per row of X, found {a.shape[1]}")
    norm = _norms(X.T)
    scale = np.where(norm > 0, norm, 1.0)
    size = _norms(a)
    size = np.where(size > 0, size, 1.0)
    signed = ~(np.zeros(X.shape[1], dtype=bool) if free is None else free)
    T, d = _reduced(X / scale, a / size[:, None])
    z = _enumerated(T, d, signed) if signed.sum() <= ENUMERATED else _polished(T, d, signed)
    coefficients = z * size[:, None] / scale
    residual = a - coefficients @ X.T
    gradient = (residual / size[:, None]) @ (X / scale)
    return NonNegativeFit(coefficients, _norms(residual), _violation(gradient, z, signed))


def nearest_nonnegative(estimate: FloatArray, covariance: FloatArray, signed: np.ndarray) -> FloatArray:
    """Return the z >= 0 nearest to unconstrained estimates in the metric of their own covariance.

    Parameters
    ----------
    estimate : array (n, q)
        Unconstrained weighted least-squares estimates.
    covariance : array (n, q, q)
        (X' W X)^-1, positive definite, of each row.
    signed : bool array (q,)
        Coefficients that may not be negative.

    Returns
    -------
    array (n, q)
        The weighted non-negative least-squares estimates.

    Examples
    --------
    >>> C = np.array([[[1.0, -0.9], [-0.9, 1.0]]])
    >>> nearest_nonnegative(np.array([[-1.0, 5.0]]), C, np.array([True, True])).round(12) + 0.0
    array([[0. , 4.1]])
    """
    result = np.array(estimate)
    rows = np.flatnonzero((estimate[:, signed] < 0).any(axis=1))
    if rows.size == 0:
        return result
    # a coefficient without variance belongs to a column left out as dependent: it is zero and stays so
    free = np.flatnonzero((np.einsum("nii->ni", covariance[rows]) > 0).any(axis=0))
    z, C, signed = estimate[np.ix_(rows, free)], covariance[np.ix_(rows, free, free)], signed[free]
    if signed.sum() <= ENUMERATED:
        found = _nearest_enumerated(z, C, signed)
    else:
        unit = np.sqrt(np.einsum("nii->ni", C))
        # the pseudo-inverse, as nearly collinear columns may leave the metric singular to rounding
        metric = np.linalg.pinv(C / (unit[:, :, None] * unit[:, None, :]), rcond=1e-15, hermitian=True)
        found = _lawson_hanson(metric, np.einsum("nij,nj->ni", metric, z / unit), signed) * unit
    result[np.ix_(rows, free)] = found
    return result


def _nearest_enumerated(estimate: FloatArray, covariance: FloatArray, signed: np.ndarray) -> FloatArray:
    """Set each possible group N of signed coefficients to zero; the others move by C_SN C_NN^-1 z_N.

    The objective rises by z_N' C_NN^-1 z_N; among the feasible groups the smallest rise is the optimum.
    """
    best, z = np.full(len(estimate), np.inf), np.zeros_like(estimate)
    for zero in _subsets(np.flatnonzero(signed)):
        if not zero.size:
            continue  # the unconstrained estimate itself is negative somewhere
        rows, columns = packed_pairs(zero.size)
        factor = Cholesky(covariance[:, zero[rows], zero[columns]], zero.size)
        weight = factor.solve(estimate[:, zero])
        rise = np.einsum("ij,ij->i", estimate[:, zero], weight)
        trial = estimate - np.einsum("nij,nj->ni", covariance[:, :, zero], weight)
        trial[:, zero] = 0.0
        better = (trial[:, signed] >= 0).all(axis=1) & (rise < best)
        best[better], z[better] = rise[better], trial[better]
    return z


def _subsets(columns: np.ndarray) -> Iterator[np.ndarray]:
    for size in range(columns.size + 1):
        for chosen in combinations(columns.tolist(), size):
            yield np.array(chosen, dtype=np.intp)


def _reduced(unit: FloatArray, data: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return a square problem with the same solutions: T of at most q rows, d = Q' a."""
    if unit.shape[0] <= unit.shape[1]:
        return unit, data
    Q, R = np.linalg.qr(unit)
    return R, data @ Q


def _enumerated(T: FloatArray, d: FloatArray, signed: np.ndarray) -> FloatArray:
    free = np.flatnonzero(~signed)
    best, z = np.full(len(d), np.inf), np.zeros((len(d), T.shape[1]))
    for chosen in _subsets(np.flatnonzero(signed)):
        support = np.sort(np.concatenate([free, chosen]))
        columns = T[:, support]
        if chosen.size and np.linalg.matrix_rank(columns, tol=RANK * np.sqrt(support.size)) < support.size:
            continue  # a smaller support reaches the same objective
        trial = d @ np.linalg.pinv(columns).T
        left = d - trial @ columns.T
        objective = np.einsum("ij,ij->i", left, left)
        better = (trial[:, signed[support]] >= 0).all(axis=1) & (objective < best)
        rows = np.flatnonzero(better)
        best[rows] = objective[rows]
        z[rows] = 0.0
        z[np.ix_(rows, support)] = trial[rows]
    return z


def _polished(T: FloatArray, d: FloatArray, signed: np.ndarray) -> FloatArray:
    """Lawson-Hanson, then one orthogonal solution per distinct support so that nothing is lost by squaring."""
    metric = np.broadcast_to(T.T @ T, (len(d), T.shape[1], T.shape[1]))
    z = _lawson_hanson(metric, d @ T, signed)
    supports, group = np.unique((z != 0) | ~signed, axis=0, return_inverse=True)
    for k, support in enumerate(supports):
        rows = np.flatnonzero(group.ravel() == k)
        trial = d[rows] @ np.linalg.pinv(T[:, support]).T
        sound = (trial[:, signed[support]] >= 0).all(axis=1)
        z[np.ix_(rows[sound], np.flatnonzero(support))] = trial[sound]
    return z


def _lawson_hanson(metric: FloatArray, target: FloatArray, signed: np.ndarray) -> FloatArray:
    """Minimise z' H z / 2 - h' z with z >= 0 where `signed`, for every row; H has a unit-sized diagonal."""
    n, q = target.shape
    passive = np.tile(~signed, (n, 1))
    z = np.where(passive, _masked_solution(metric, target, passive), 0.0)
    tolerance = 1e-12 * np.maximum(np.abs(target).max(axis=1), np.finfo(float).tiny)
    barred = np.zeros((n, q), dtype=bool)
    for _ in range(10 * q + 10):
        gradient = target - np.einsum("nij,nj->ni", metric, z)
        candidates = np.where(passive | barred, -np.inf, gradient)
        enters = candidates.argmax(axis=1)
        active = np.flatnonzero(candidates[np.arange(n), enters] > tolerance)
        if active.size == 0:
            break
        passive[active, enters[active]] = True
        moved = _inner(metric[active], target[active], passive, z, active, signed)
        # a column that comes straight back out again (collinear to rounding) is not tried twice running
        barred[active] = False
        stuck = active[~moved]
        barred[stuck, enters[stuck]] = True
    return z


def _inner(
    metric: FloatArray, target: FloatArray, passive: np.ndarray, z: FloatArray, rows: np.ndarray, signed: np.ndarray
) -> np.ndarray:
    """Step from z towards the solution on the passive set, letting go what would turn negative; changes both in place."""
    before = z[rows].copy()
    pending = np.arange(rows.size)
    for _ in range(z.shape[1] + 1):
        here = rows[pending]
        trial = _masked_solution(metric[pending], target[pending], passive[here])
        wrong = passive[here] & signed & (trial <= 0)
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio = np.where(wrong, z[here] / (z[here] - trial), np.inf)
        step = np.minimum(np.nan_to_num(ratio, nan=0.0, posinf=np.inf).min(axis=1), 1.0)
        z[here] += step[:, None] * (trial - z[here])
        leaves = wrong & (ratio <= step[:, None] * (1 + 1e-12))
        z[here] = np.where(leaves | ~passive[here], 0.0, z[here])
        passive[here] &= ~leaves
        pending = pending[wrong.any(axis=1)]
        if pending.size == 0:
            break
    moved: np.ndarray = (z[rows] != before).any(axis=1)
    return moved


def _masked_solution(metric: FloatArray, target: FloatArray, passive: np.ndarray) -> FloatArray:
    """Solve H z = h on each row's passive set; zero elsewhere. A trace of ridge keeps exact duplicates finite."""
    q = target.shape[1]
    mask = passive[:, :, None] & passive[:, None, :]
    H = np.where(mask, metric, 0.0)
    diagonal = np.arange(q)
    H[:, diagonal, diagonal] = np.where(passive, H[:, diagonal, diagonal] * (1 + 1e-15), 1.0)
    right = np.where(passive, target, 0.0)[..., None]
    try:
        return np.linalg.solve(H, right)[..., 0]
    except np.linalg.LinAlgError:
        H[:, diagonal, diagonal] += 1e-12
        return np.linalg.solve(H, right)[..., 0]


def _violation(gradient: FloatArray, z: FloatArray, signed: np.ndarray) -> FloatArray:
    at_zero = signed & (z == 0)
    wrong = np.where(at_zero, np.maximum(gradient, 0.0), np.abs(gradient))
    return wrong.max(axis=1) if z.shape[1] else np.zeros(len(z))


def _norms(rows: FloatArray) -> FloatArray:
    """Euclidean norms of rows without overflow or underflow."""
    largest = np.abs(rows).max(axis=1) if rows.shape[1] else np.zeros(len(rows))
    scale = np.where(largest > 0, largest, 1.0)
    scaled = rows / scale[:, None]
    norms: FloatArray = scale * np.sqrt(np.einsum("ij,ij->i", scaled, scaled))
    return norms
