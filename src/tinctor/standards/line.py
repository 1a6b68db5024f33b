"""Weighted straight lines at every wavelength at once, and the general linear model for one response."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.resolve.design import orthonormal_factors

__all__ = ["LinearModel", "Lines", "fit_lines", "linear_model"]


@dataclass(frozen=True, slots=True, eq=False)
class Lines:
    """Straight lines y = intercept + slope x of n points at each of m wavelengths.

    Attributes
    ----------
    slope, slope_u, intercept, intercept_u : arrays (m,)
        Estimates and standard errors from the scatter about the line; nan where no degree of freedom is left.
        Through zero, intercept and its standard error are 0.
    residual_sd : array (m,)
        Standard deviation about the line, of a point of mean weight.
    degrees_of_freedom : array (m,)
    residual : array (n, m)
        0 where a point was not used.
    share : array (n, m)
        What a change of each reading by 1 changes the slope by.
    x_mean, x_squares : arrays (m,)
        Weighted mean of x (0 through zero), and sum of w (x - x_mean)^2.
    weight : array (n, m)
        Scaled to a mean of 1 over the points used.
    """

    slope: FloatArray
    slope_u: FloatArray
    intercept: FloatArray
    intercept_u: FloatArray
    residual_sd: FloatArray
    degrees_of_freedom: FloatArray
    residual: FloatArray
    share: FloatArray
    x_mean: FloatArray
    x_squares: FloatArray
    weight: FloatArray
    through_zero: bool

    @property
    def leverage_rest(self) -> FloatArray:
        """1 / sum of weights, what the mean adds to the variance of a prediction; 0 through zero, (m,)."""
        total = self.weight.sum(axis=0)
        return np.zeros_like(total) if self.through_zero else 1.0 / np.where(total > 0, total, 1.0)


def fit_lines(x: FloatArray, y: FloatArray, *, through_zero: bool, weight: FloatArray | None = None) -> Lines:
    """Return the weighted least-squares line of each column.

    Parameters
    ----------
    x : array (n,)
    y : array (n, m)
    through_zero
        y = slope x, without an intercept.
    weight : array (n, m), optional
        Only their ratios count; 0 leaves a point out.

    Examples
    --------
    >>> line = fit_lines(np.array([1.0, 2.0, 3.0]), np.array([[1.1], [1.9], [3.0]]), through_zero=True)
    >>> line.slope.round(4), line.degrees_of_freedom
    (array([0.9929]), array([2.]))
    """
    W = np.ones(y.shape) if weight is None else weight
    points = (W > 0).sum(axis=0).astype(np.float64)
    total = W.sum(axis=0)
    W = W * np.where(total > 0, points / np.where(total > 0, total, 1.0), 0.0)
    count = np.maximum(points, 1.0)
    zero = np.zeros(y.shape[1])
    x_mean = zero if through_zero else (W.T @ x) / count
    y_mean = zero if through_zero else (W * y).sum(axis=0) / count
    dx = x[:, None] - x_mean
    x_squares = (W * dx**2).sum(axis=0)
    determined = x_squares > 0
    share = np.divide(W * dx, x_squares, out=np.zeros_like(W), where=determined)
    slope = (share * (y - y_mean)).sum(axis=0)
    intercept = y_mean - slope * x_mean
    residual = np.where(W > 0, (y - y_mean) - slope * dx, 0.0)
    degrees = np.maximum(points - (1.0 if through_zero else 2.0), 0.0)
    squares = (W * residual**2).sum(axis=0)
    sd = np.sqrt(np.divide(squares, degrees, out=np.full_like(squares, np.nan), where=degrees > 0))
    spread = np.divide(1.0, x_squares, out=np.full_like(squares, np.nan), where=determined)
    return Lines(
        slope=np.where(determined, slope, np.nan),
        slope_u=sd * np.sqrt(spread),
        intercept=intercept,
        intercept_u=zero if through_zero else sd * np.sqrt(1.0 / count + x_mean**2 * spread),
        residual_sd=sd,
        degrees_of_freedom=degrees,
        residual=residual,
        share=share,
        x_mean=x_mean,
        x_squares=x_squares,
        weight=W,
        through_zero=through_zero,
    )


@dataclass(frozen=True, slots=True, eq=False)
class LinearModel:
    """Least-squares fit of one response.

    Attributes
    ----------
    coefficients, u : arrays (k,)
        Estimates and standard errors.
    residual_sd, squares, degrees_of_freedom : float
        Residual standard deviation, (weighted) sum of squared residuals, points less columns.
    residual, leverage : arrays (n,)
        Leverage is the diagonal of the hat matrix.
    """

    coefficients: FloatArray
    u: FloatArray
    residual_sd: float
    squares: float
    degrees_of_freedom: int
    residual: FloatArray
    leverage: FloatArray


def linear_model(X: FloatArray, y: FloatArray, weight: FloatArray | None = None) -> LinearModel:
    """Return the (weighted) least-squares fit of y (n,) on the columns of X (n, k), which must be independent.

    Columns are scaled to unit norm and orthonormalised twice; the projection is refined once on the residual.

    Raises
    ------
    ValueError
        When a column depends on the others to the precision of float64.

    Examples
    --------
    >>> model = linear_model(np.array([[1.0, 0.0], [1.0, 1.0], [1.0, 2.0]]), np.array([1.0, 3.0, 5.5]))
    >>> model.coefficients.round(4)
    array([0.9167, 2.25  ])
    """
    root = np.ones(y.size) if weight is None else np.sqrt(weight)
    Q, Rinv, independent = orthonormal_factors(X * root[:, None])
    if not independent.all():
        raise ValueError("a column depends on the others")
    target = y * root
    coordinates = Q.T @ target
    coordinates = coordinates + Q.T @ (target - Q @ coordinates)
    rest = target - Q @ coordinates
    degrees = y.size - X.shape[1]
    squares = float(rest @ rest)
    sd = float(np.sqrt(squares / degrees)) if degrees > 0 else float("nan")
    coefficients = Rinv @ coordinates
    return LinearModel(
        coefficients=coefficients,
        u=sd * np.sqrt((Rinv**2).sum(axis=1)),
        residual_sd=sd,
        squares=squares,
        degrees_of_freedom=degrees,
        residual=y - X @ coefficients,
        leverage=(Q**2).sum(axis=1),
    )
