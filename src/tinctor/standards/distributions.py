"""What the package takes from scipy: Student, Fisher, chi-square and normal distributions under names that say which way they
go, and the cubic spline."""

from __future__ import annotations

import numpy as np
from scipy import special
from scipy.interpolate import CubicSpline

from tinctor.arrays import FloatArray

__all__ = ["chi_square_tail", "cubic_spline", "f_tail", "normal_quantile", "t_quantile", "t_tail_two_sided"]


def t_quantile(probability: float, degrees_of_freedom: float | FloatArray) -> FloatArray:
    """Return Student's t quantile; that of the normal distribution for infinite degrees of freedom, nan below one half.

    Examples
    --------
    >>> float(t_quantile(0.975, 4.0).round(4))
    2.7764
    """
    nu = np.asarray(degrees_of_freedom, dtype=np.float64)
    known = np.where(np.isfinite(nu) & (nu > 0), nu, 1.0)
    value = np.where(np.isinf(nu), special.ndtri(probability), special.stdtrit(known, probability))
    return np.asarray(np.where(nu > 0, value, np.nan))


def t_tail_two_sided(t: float | FloatArray, degrees_of_freedom: float | FloatArray) -> FloatArray:
    """Return the probability of |t| or more."""
    return np.asarray(2.0 * special.stdtr(degrees_of_freedom, -np.abs(t)))


def f_tail(f: float | FloatArray, between: float, within: float) -> FloatArray:
    """Return the probability of Fisher's F or more with `between` and `within` degrees of freedom.

    Examples
    --------
    >>> float(f_tail(12.24638335, 1, 7).round(6))
    0.01
    """
    return np.asarray(special.fdtrc(between, within, f))


def chi_square_tail(chi_square: float, degrees_of_freedom: float) -> float:
    """Return the probability of chi-square or more."""
    return float(special.chdtrc(degrees_of_freedom, chi_square))


def normal_quantile(probability: float) -> float:
    """Return the standard normal quantile."""
    return float(special.ndtri(probability))


def cubic_spline(x: FloatArray, y: FloatArray) -> CubicSpline[np.float64]:
    """Return the cubic spline through points; its third derivative is continuous at the second and last but one."""
    return CubicSpline(x, y)
