"""One number for each spectrum: how much of the mean shape it holds.

Tests for linearity, intercept and outliers look at this number and not at each wavelength: three hundred tests on
readings that share their dilution error would be one test three hundred times over, at no known level.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.standards.line import Lines, fit_lines, linear_model
from tinctor.standards.series import Series
from tinctor.standards.settings import StandardsSettings

__all__ = ["Scores", "dilution_relative_u", "fitted_lines", "reading_variance", "scored"]

#: A spectrum that shows less than this share of the mean shape's squares (the rest saturated) has no score.
LEAST_SHOWN = 0.5


@dataclass(frozen=True, slots=True, eq=False)
class Scores:
    """Apparent amounts of n preparations.

    Attributes
    ----------
    amount : array (n,)
        Concentration times path as weighed.
    value : array (n,)
        Concentration times path as the whole spectrum shows it against the mean shape.
    variance : array (n,)
        What is declared for it: dilution, noise, placing of the cell.
    line : Lines
        Line of value on amount, one column.
    """

    amount: FloatArray
    value: FloatArray
    variance: FloatArray
    line: Lines

    @property
    def weight(self) -> FloatArray:
        """Reciprocal of the variance, (n,)."""
        return np.asarray(1.0 / self.variance)


def reading_variance(points: Series, fitted: FloatArray, settings: StandardsSettings) -> FloatArray:
    """Return the variance of each reading by noise alone, (n, m): the mean of its scans."""
    return settings.noise.reading_variance(np.minimum(fitted, 10.0)) / points.scans[:, None]


def fitted_lines(points: Series, settings: StandardsSettings, *, through_zero: bool) -> Lines:
    """Return the lines of all wavelengths, weighted at the fitted absorbance by noise, cell and dilution."""
    x, y = points.amount, points.absorbance
    used = points.used.astype(np.float64)
    lines = fit_lines(x, y, through_zero=through_zero, weight=used)
    for _ in range(2):
        slope, intercept = np.nan_to_num(lines.slope), lines.intercept
        variance = reading_variance(points, intercept + x[:, None] * slope, settings)
        variance = variance + settings.model_error_absorbance**2 + (points.amount_u[:, None] * slope) ** 2
        lines = fit_lines(x, y, through_zero=through_zero, weight=used / variance)
    return lines


def scored(points: Series, lines: Lines, settings: StandardsSettings) -> tuple[Scores, np.ndarray]:
    """Return the scores of the preparations against the shape of `lines`, and which preparations have one, bools (n,).

    The line of the scores has an intercept exactly where `lines` have.
    """
    shape = np.where(points.used.any(axis=0), np.nan_to_num(lines.slope), 0.0)
    squares = points.used @ shape**2
    shown = squares >= LEAST_SHOWN * float(shape @ shape)
    size = np.where(squares > 0, squares, 1.0)
    # the intercept's spectrum is taken off before a masked spectrum is scored, and its own score given back: else spectra with
    # other readings masked would show other amounts of it
    own = float(lines.intercept @ shape) / max(float(shape @ shape), float(np.finfo(float).tiny))
    value = (points.used * (points.absorbance - lines.intercept)) @ shape / size + own
    fitted = points.amount[:, None] * shape + lines.intercept
    noise = (points.used * reading_variance(points, fitted, settings)) @ shape**2 / size**2
    cell = (settings.model_error_absorbance * (points.used @ shape) / size) ** 2
    variance = points.amount_u**2 + noise + cell
    weight = np.where(shown, 1.0 / variance, 0.0)
    line = fit_lines(points.amount, value[:, None], through_zero=lines.through_zero, weight=weight[:, None])
    return Scores(points.amount, value, variance, line), shown


def dilution_relative_u(scores: Scores) -> float:
    """Return the relative standard deviation of the standards' amounts that brings chi-square to its expectation.

    For series of which nobody stated the dilution's uncertainty: the method of Paule and Mandel (J. Res. Natl Bur. Stand. 87
    (1982) 377) on the residuals from a quadratic, or from the line where points are few; 0 where noise and cell explain them.
    """
    x, through_zero = scores.amount, scores.line.through_zero
    used = scores.line.weight[:, 0] > 0
    x, y, variance = x[used], scores.value[used], scores.variance[used]
    powers = [1, 2] if through_zero else [0, 1, 2]
    if np.unique(x).size < len(powers) + 2:
        powers = powers[:-1]
    degrees = x.size - len(powers)
    if degrees <= 0:
        return 0.0
    X = (x[:, None] / x.max()) ** np.array(powers, dtype=np.float64)

    def excess(relative: float) -> float:
        return linear_model(X, y, 1.0 / (variance + (relative * x) ** 2)).squares - degrees

    try:
        low, high = 0.0, 1.0
        if excess(low) <= 0 or excess(high) >= 0:
            return 0.0 if excess(low) <= 0 else high
        for _ in range(40):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if excess(middle) > 0 else (low, middle)
    except ValueError:  # levels too close to tell a curve
        return 0.0
    return 0.5 * (low + high)
