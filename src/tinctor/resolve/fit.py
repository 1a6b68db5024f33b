"""Weighted least squares for a batch of spectra, each with the weights of its own fitted absorbance.

For every spectrum: an unweighted fit gives the absorbance at which the noise model is evaluated (the fitted one, so that
noise does not bias the weights); the weighted normal equations are then set up and solved in the coordinates of an
orthonormal basis of the design. Their condition is that of the weights alone. Work goes through the batch in chunks
that stay in the processor's cache, and no number of one spectrum depends on another's.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.noise import LN10, NoiseModel
from tinctor.resolve.design import Design
from tinctor.resolve.small import Cholesky, packed_index, packed_pairs

__all__ = ["FitBlock", "FitColumns", "fit_columns", "fit_rows"]

#: Spectra per chunk: a handful of (CHUNK, 300) work arrays fit the cache.
CHUNK: Final = 512

LOG2_10: Final = math.log2(10.0)

#: A fitted shift changes the column it is fitted with; the weights settle in as many rounds.
SHIFT_ROUNDS: Final = 4


@dataclass(frozen=True, slots=True, eq=False)
class FitColumns:
    """Products of columns, made once per design, whose weighted sums over wavelengths are all that a fit needs.

    Coordinates are those of Q (r of them), then the shift when it is fitted (k = r or r + 1 in all).
    """

    design: Design
    weighted: FloatArray
    """(m, ...) products Q Q, Q dE/dw, with a shift dE/dw dE/dw, and a column of ones."""
    spread: FloatArray
    """(m, ...) the same without what the variance of the estimate does not need."""
    squares: FloatArray
    """(m, p(p+1)/2) products E E of the component columns."""
    slope_squares: FloatArray
    """(m, p(p+1)/2) products dE/dw dE/dw."""

    @property
    def has_shape_u(self) -> bool:
        """Whether any absorptivity has a stated uncertainty of its own."""
        return bool(self.design.shape_variance.any())

    @property
    def r(self) -> int:
        """Number of independent linear columns."""
        return int(self.design.Q.shape[1])

    @property
    def k(self) -> int:
        """Number of coordinates fitted."""
        return self.r + int(self.design.shift)


@dataclass(frozen=True, slots=True, eq=False)
class FitBlock:
    """Unconstrained weighted estimates of n spectra and the sums from which all else follows.

    Attributes
    ----------
    coordinates : array (n, k)
        In the basis of Q, then the shift in nm.
    gram : array (n, k(k+1)/2)
        Q' W Q, packed.
    noise_gram, shape_gram : arrays (n, k(k+1)/2)
        Q' W V W Q with V the variance of the readings and of the library's shape.
    slope_gram : array (n, k, p)
        Q' W dE/dw: what a shift of the axis does, per unit of each component.
    chi_square, squares, neighbours, points, weight_sum : arrays (n,)
        Weighted and plain sums of squared residuals, sum of products of neighbouring residuals, readings used, sum of
        weights.
    mean_square, mean_slope_square : arrays (n,)
        Mean square of the fitted component absorbance and of its slope per nm, over the readings used.
    smallest_pivot : array (n,)
        Near 0 where the readings left over do not determine the coefficients.
    optimality : array (n,)
        Largest |x' W r| / (|x|_W |r|_W): at rounding level at the optimum.
    """

    coordinates: FloatArray
    gram: FloatArray
    noise_gram: FloatArray
    shape_gram: FloatArray
    slope_gram: FloatArray
    chi_square: FloatArray
    squares: FloatArray
    neighbours: FloatArray
    points: FloatArray
    weight_sum: FloatArray
    mean_square: FloatArray
    mean_slope_square: FloatArray
    smallest_pivot: FloatArray
    optimality: FloatArray


def fit_columns(design: Design) -> FitColumns:
    """Return the column products of a design."""
    Q, S, p = design.Q, design.slope, design.p
    E = design.X[:, :p]
    QQ, SS = _pair_products(Q), _pair_products(S)
    QS = (Q[:, :, None] * S[:, None, :]).reshape(len(Q), -1)
    cross = [QQ, QS, SS] if design.shift else [QQ, QS]
    ones = np.ones((len(Q), 1))
    spread = np.hstack(cross) if design.shift else QQ
    return FitColumns(design, np.hstack([*cross, ones]), np.ascontiguousarray(spread), _pair_products(E), SS)


def fit_rows(
    columns: FitColumns,
    absorbance: FloatArray,
    noise: NoiseModel,
    keep: np.ndarray | None = None,
    reading_u: FloatArray | None = None,
) -> FitBlock:
    """Return the weighted least-squares fit of each row.

    Parameters
    ----------
    columns
        From `fit_columns`.
    absorbance : array (n, m)
    noise
        Noise model of the readings.
    keep : bool array (n, m), optional
        Readings to use; all where it is not given.
    reading_u : array (n, m), optional
        Standard uncertainty of each reading in place of the noise model's floor and transmittance parts.
    """
    work = _Work(min(CHUNK, len(absorbance)), absorbance.shape[1])
    parts = [
        _fit_chunk(
            columns,
            absorbance[start : start + CHUNK],
            noise,
            None if keep is None else keep[start : start + CHUNK].astype(np.float64),
            None if reading_u is None else reading_u[start : start + CHUNK],
            work,
        )
        for start in range(0, len(absorbance), CHUNK)
    ]
    if len(parts) == 1:
        return parts[0]
    return FitBlock(*(np.concatenate([getattr(part, name) for part in parts]) for name in FitBlock.__slots__))


class _Work:
    """Arrays (rows, m) that every chunk writes anew: fresh ones would cost more than the arithmetic done in them."""

    def __init__(self, rows: int, m: int) -> None:
        self.arrays = np.empty((6, rows, m))

    def of(self, n: int) -> FloatArray:
        """Return six arrays for n rows, (6, n, m)."""
        return self.arrays[:, :n]


def _fit_chunk(
    columns: FitColumns,
    A: FloatArray,
    noise: NoiseModel,
    keep: FloatArray | None,
    reading_u: FloatArray | None,
    work: _Work,
) -> FitBlock:
    design, r = columns.design, columns.r
    arrays = work.of(len(A))
    residual, variance, shape_variance, weight, D, product = arrays
    y, smallest_pivot = _first_estimate(columns, A, keep)
    shift_nm = np.zeros((len(A), 1))
    for _ in range(SHIFT_ROUNDS if design.shift else 1):
        s, sums, right = _weighted_sums(columns, A, y, shift_nm, noise, keep, reading_u, arrays)
        gram = _effective(columns, sums, s)
        factor = Cholesky(gram, columns.k)
        step = factor.solve(right)
        y, shift_nm = y + step[:, :r], step[:, r:]
    residual -= np.matmul(step[:, :r], design.Q.T, out=product)
    if design.shift:
        residual -= np.multiply(shift_nm, D, out=product)
    if keep is not None:
        residual *= keep
    points = np.full(len(A), float(A.shape[1])) if keep is None else keep.sum(axis=1)
    np.multiply(weight, residual, out=product)
    chi_square = np.vecdot(product, residual)
    optimality = _optimality(columns, product, D, gram, chi_square)
    noise_gram, shape_gram = _spread_grams(columns, s, weight, variance, shape_variance)
    return FitBlock(
        coordinates=np.column_stack([y, shift_nm]),
        gram=gram,
        noise_gram=noise_gram,
        shape_gram=shape_gram,
        slope_gram=_slope_gram(columns, sums, s),
        chi_square=chi_square,
        squares=np.vecdot(residual, residual),
        neighbours=np.einsum("ij,ij->i", residual[:, 1:], residual[:, :-1]),
        points=points,
        weight_sum=sums[:, -1].copy(),
        mean_square=_mean_quadratic(columns.squares, s, keep, points),
        mean_slope_square=_mean_quadratic(columns.slope_squares, s, keep, points),
        smallest_pivot=np.minimum(smallest_pivot, factor.smallest_pivot),
        optimality=optimality,
    )


def _weighted_sums(
    columns: FitColumns,
    A: FloatArray,
    y: FloatArray,
    shift_nm: FloatArray,
    noise: NoiseModel,
    keep: FloatArray | None,
    reading_u: FloatArray | None,
    arrays: FloatArray,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Weights at the absorbance fitted with `y`, the weighted sums of the column products, and the right-hand sides.

    Writes residual, variances, weight and slope of each reading into `arrays`.
    """
    design, r = columns.design, columns.r
    residual, variance, shape_variance, weight, D, product = arrays
    s = y @ design.Rinv[: design.p].T
    fitted = np.matmul(y, design.Q.T, out=residual)
    _reading_variance(fitted, noise, reading_u, variance)
    np.subtract(A, fitted, out=residual)
    if design.shift:  # second order of the shift found so far: its column holds the first alone
        residual -= np.matmul(0.5 * shift_nm**2 * s, design.curvature.T, out=product)
    np.matmul(s, design.slope.T, out=D)
    if columns.has_shape_u:
        np.matmul(s**2, design.shape_variance.T, out=shape_variance)
    _weights(columns, variance, shape_variance, D, noise.wavelength_nm, product, weight)
    if keep is not None:
        weight *= keep
    right = np.empty((len(A), columns.k))
    np.multiply(weight, residual, out=product)
    np.matmul(product, design.Q, out=right[:, :r])
    if design.shift:
        right[:, r] = np.vecdot(product, D)
    return s, weight @ columns.weighted, right


def _weights(
    columns: FitColumns,
    variance: FloatArray,
    shape_variance: FloatArray,
    D: FloatArray,
    wavelength_u_nm: float,
    product: FloatArray,
    weight: FloatArray,
) -> None:
    """Write 1 / (variance of the reading + of the library's shape + (wavelength_u_nm dA/dw)^2) into `weight`."""
    np.multiply(D, wavelength_u_nm, out=product)
    np.multiply(product, product, out=weight)
    weight += variance
    if columns.has_shape_u:
        weight += shape_variance
    np.divide(1.0, weight, out=weight)


def _optimality(
    columns: FitColumns, weighted_residual: FloatArray, D: FloatArray, gram: FloatArray, chi_square: FloatArray
) -> FloatArray:
    """Largest |x' W r| / (|x|_W |r|_W) over the columns fitted, (n,)."""
    gradient = weighted_residual @ columns.design.Q
    if columns.design.shift:
        gradient = np.column_stack([gradient, np.vecdot(weighted_residual, D)])
    length = np.sqrt(gram[:, np.diag(packed_index(columns.k))] * np.maximum(chi_square, np.finfo(float).tiny)[:, None])
    worst: FloatArray = np.abs(gradient / np.where(length > 0, length, 1.0)).max(axis=1, initial=0.0)
    return worst


def _spread_grams(
    columns: FitColumns, s: FloatArray, weight: FloatArray, variance: FloatArray, shape_variance: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Q' W V W Q for the variance of the readings and of the library's shape; overwrites all three arrays."""
    np.multiply(weight, weight, out=weight)
    variance *= weight
    noise_gram = _effective(columns, variance @ columns.spread, s)
    if not columns.has_shape_u:
        return noise_gram, np.zeros_like(noise_gram)
    shape_variance *= weight
    return noise_gram, _effective(columns, shape_variance @ columns.spread, s)


def _first_estimate(columns: FitColumns, A: FloatArray, keep: FloatArray | None) -> tuple[FloatArray, FloatArray]:
    """Unweighted least squares on the readings used: only to have an absorbance at which to evaluate the noise."""
    Q, r = columns.design.Q, columns.r
    if keep is None:
        return A @ Q, np.ones(len(A))
    pairs = r * (r + 1) // 2
    factor = Cholesky(keep @ columns.weighted[:, :pairs], r)
    return factor.solve((keep * A) @ Q), factor.smallest_pivot


def _reading_variance(fitted: FloatArray, noise: NoiseModel, reading_u: FloatArray | None, out: FloatArray) -> None:
    """Write the variance of the readings at their fitted absorbance into `out`."""
    if reading_u is not None:
        np.multiply(reading_u, reading_u, out=out)
        return
    # floor^2 + (transmittance 10^A / ln 10)^2; the fit may run high where readings are masked
    np.minimum(fitted, 10.0, out=out)
    out *= 2 * LOG2_10
    np.exp2(out, out=out)  # half the time of exp on the same processors
    out *= (noise.transmittance / LN10) ** 2
    out += noise.floor**2


def _effective(columns: FitColumns, sums: FloatArray, s: FloatArray) -> FloatArray:
    """Weighted normal matrix, packed, in the coordinates fitted; with a shift its column is dA/dw = s . dE/dw."""
    r, p = columns.r, columns.design.p
    pairs = r * (r + 1) // 2
    if not columns.design.shift:
        return sums[:, :pairs]
    index = packed_index(r + 1)
    packed = np.empty((len(sums), (r + 1) * (r + 2) // 2))
    rows, cols = packed_pairs(r)
    packed[:, index[rows, cols]] = sums[:, :pairs]
    QS = sums[:, pairs : pairs + r * p].reshape(-1, r, p)
    packed[:, index[np.arange(r), r]] = np.einsum("nij,nj->ni", QS, s)
    packed[:, index[r, r]] = _quadratic(sums[:, pairs + r * p : pairs + r * p + p * (p + 1) // 2], s)
    return packed


def _slope_gram(columns: FitColumns, sums: FloatArray, s: FloatArray) -> FloatArray:
    r, p = columns.r, columns.design.p
    pairs = r * (r + 1) // 2
    QS = sums[:, pairs : pairs + r * p].reshape(-1, r, p)
    if not columns.design.shift:
        return QS
    SS = sums[:, pairs + r * p : pairs + r * p + p * (p + 1) // 2][:, packed_index(p).ravel()].reshape(-1, p, p)
    return np.concatenate([QS, np.einsum("nij,nj->ni", SS, s)[:, None, :]], axis=1)


def _quadratic(packed: FloatArray, s: FloatArray) -> FloatArray:
    """s' M s for packed symmetric M, one per row or one for all."""
    rows, cols = packed_pairs(s.shape[1])
    terms = s[:, rows] * s[:, cols] * np.where(rows == cols, 1.0, 2.0)
    return np.asarray((terms * packed).sum(axis=1))


def _mean_quadratic(products: FloatArray, s: FloatArray, keep: FloatArray | None, points: FloatArray) -> FloatArray:
    total = products.sum(axis=0) if keep is None else keep @ products
    return np.maximum(_quadratic(total, s), 0.0) / np.maximum(points, 1.0)


def _pair_products(columns: FloatArray) -> FloatArray:
    rows, cols = packed_pairs(columns.shape[1])
    return np.ascontiguousarray(columns[:, rows] * columns[:, cols])
