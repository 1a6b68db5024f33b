"""Concentration from a calibration line: the exact (Fieller) interval, and the usual approximation beside it.

E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175; the approximation is that of the EURACHEM/CITAC guide CG4, example A5.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from tinctor.arrays import FloatArray
from tinctor.standards.distributions import t_quantile
from tinctor.standards.line import Lines, fit_lines

__all__ = ["CalibrationLine", "Inverse", "calibration_line", "inverse_prediction", "of_lines", "standard_addition"]


@dataclass(frozen=True, slots=True)
class CalibrationLine:
    """A line signal = intercept + slope x, and what its uncertainty needs.

    Attributes
    ----------
    slope, intercept, intercept_u, slope_u
    residual_sd
        Standard deviation of a signal of weight 1.
    degrees_of_freedom
        Infinite where the standard deviation is declared and not estimated.
    rest, x_mean, x_squares
        1 / sum of weights (0 through zero), weighted mean of x (0 through zero), sum of w (x - x_mean)^2.
    low, high
        Range of x covered by the standards (from 0 where a blank or zero holds the line).
    points
    """

    slope: float
    intercept: float
    slope_u: float
    intercept_u: float
    residual_sd: float
    degrees_of_freedom: float
    rest: float
    x_mean: float
    x_squares: float
    low: float
    high: float
    points: int


@dataclass(frozen=True, slots=True)
class Inverse:
    """A concentration (times path) from a line.

    Attributes
    ----------
    x, u
        Estimate, and its standard uncertainty by the usual first-order formula.
    exact
        Fieller interval; None where it is not bounded (the slope is not significant at this coverage).
    approximate
        x -+ t u.
    """

    x: float
    u: float
    exact: tuple[float, float] | None
    approximate: tuple[float, float]


def calibration_line(x: FloatArray, y: FloatArray, *, through_zero: bool = False) -> CalibrationLine:
    """Return the line of signals y (n,) on x (n,), all of one weight.

    Examples
    --------
    >>> import numpy as np
    >>> line = calibration_line(np.array([1.0, 2.0, 3.0]), np.array([0.11, 0.19, 0.31]))
    >>> round(line.slope, 4), round(line.intercept, 4)
    (0.1, 0.0033)
    """
    return of_lines(fit_lines(x, y[:, None], through_zero=through_zero), 0, x)


def of_lines(lines: Lines, column: int, x: FloatArray, declared_sd: float | None = None) -> CalibrationLine:
    """Return one of the lines; `declared_sd` (of a signal of weight 1) serves where no degree of freedom is left."""
    degrees = float(lines.degrees_of_freedom[column])
    sd = float(lines.residual_sd[column])
    slope_u, intercept_u = float(lines.slope_u[column]), float(lines.intercept_u[column])
    rest, squares = float(lines.leverage_rest[column]), float(lines.x_squares[column])
    mean = float(lines.x_mean[column])
    if degrees <= 0:
        if declared_sd is None:
            raise ValueError("no degree of freedom is left and no standard deviation is declared")
        sd, degrees = declared_sd, math.inf
        slope_u, intercept_u = sd / math.sqrt(squares), sd * math.sqrt(rest + mean**2 / squares)
    return CalibrationLine(
        slope=float(lines.slope[column]),
        intercept=float(lines.intercept[column]),
        slope_u=slope_u,
        intercept_u=intercept_u,
        residual_sd=sd,
        degrees_of_freedom=degrees,
        rest=rest,
        x_mean=mean,
        x_squares=squares,
        low=0.0 if lines.through_zero else float(x.min()),
        high=float(x.max()),
        points=int((lines.weight[:, column] > 0).sum()),
    )


def inverse_prediction(
    line: CalibrationLine, signal: float, replicates: int = 1, variance_ratio: float = 1.0, coverage: float = 0.95
) -> Inverse:
    """Return x for a mean signal.

    Parameters
    ----------
    signal
        Mean of the replicate signals of the unknown.
    replicates
        How many; 0 takes the signal as exact.
    variance_ratio
        Variance of one of its readings against one of weight 1.

    Examples
    --------
    >>> import numpy as np
    >>> line = calibration_line(np.array([1.0, 2.0, 3.0, 4.0]), np.array([0.11, 0.19, 0.31, 0.40]))
    >>> found = inverse_prediction(line, 0.25)
    >>> round(found.x, 3), round(found.u, 3)
    (2.475, 0.131)
    """
    reading = variance_ratio / replicates if replicates else 0.0
    distance = (signal - line.intercept) / line.slope - line.x_mean
    inside = reading + line.rest + distance**2 / line.x_squares
    u = line.residual_sd / abs(line.slope) * math.sqrt(inside)
    t = float(t_quantile(0.5 + coverage / 2.0, line.degrees_of_freedom))
    x = line.x_mean + distance
    return Inverse(x, u, _fieller(line, distance, reading, t), (x - t * u, x + t * u))


def standard_addition(line: CalibrationLine, coverage: float = 0.95) -> Inverse:
    """Return the concentration that was there before anything was added: where the line of additions meets zero signal.

    The blank must have been taken off: an offset of the signal goes into the result in full.
    """
    found = inverse_prediction(line, 0.0, 0, 0.0, coverage)
    turned = None if found.exact is None else (-found.exact[1], -found.exact[0])
    return Inverse(-found.x, found.u, turned, (-found.approximate[1], -found.approximate[0]))


def _fieller(line: CalibrationLine, distance: float, reading: float, t: float) -> tuple[float, float] | None:
    """Roots of (b (d0 - d))^2 = t^2 s^2 (reading + rest + d^2 / Sxx); None where they enclose no bounded interval."""
    ts = (t * line.residual_sd / line.slope) ** 2
    a = 1.0 - ts / line.x_squares
    if a <= 0:
        return None
    half = math.sqrt(max(distance**2 - a * (distance**2 - ts * (reading + line.rest)), 0.0))
    ends = sorted(((distance - half) / a, (distance + half) / a))
    return line.x_mean + ends[0], line.x_mean + ends[1]
