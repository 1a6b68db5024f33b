"""Limits of what a model was taught, computed once when it is trained (scipy is loaded here) and kept with the model as numbers."""

from __future__ import annotations

from math import sqrt
from typing import Final

from scipy import special

from tinctor.arrays import FloatArray

__all__ = ["f_quantile", "q_limit", "t2_limit_new", "t2_limit_training", "t_quantile"]

#: The power h0 of Jackson and Mudholkar is kept this far from 0, where their formula tends to an exponential.
SMALLEST_POWER: Final = 1e-4


def f_quantile(probability: float, between: float, within: float) -> float:
    """Return Fisher's F below which lies this probability.

    Examples
    --------
    >>> round(f_quantile(0.75, 50, 50), 6)
    1.211521
    """
    return float(special.fdtri(between, within, probability))


def t_quantile(probability: float, degrees_of_freedom: float) -> float:
    """Return Student's t quantile.

    Examples
    --------
    >>> round(t_quantile(0.975, 4.0), 4)
    2.7764
    """
    return float(special.stdtrit(degrees_of_freedom, probability))


def t2_limit_training(probability: float, samples: int, components: int) -> float:
    """Return the limit of Hotelling's T2 of training samples: A (n - 1) / (n - A) F(A, n - A).

    Examples
    --------
    >>> round(t2_limit_training(0.95, 24, 2), 6)
    7.199746
    """
    n, a = samples, components
    return a * (n - 1) / (n - a) * f_quantile(probability, a, n - a)


def t2_limit_new(probability: float, samples: int, components: int) -> float:
    """Return the limit of Hotelling's T2 of a sample that the model has not seen: A (n^2 - 1) / (n (n - A)) F(A, n - A).

    Examples
    --------
    >>> round(t2_limit_new(0.95, 24, 2), 6)
    7.499735
    """
    n, a = samples, components
    return a * (n * n - 1) / (n * (n - a)) * f_quantile(probability, a, n - a)


def q_limit(probability: float, residual_eigenvalues: FloatArray) -> float:
    """Return the limit of the squared residual of a spectrum, 0 without residual.

    Jackson and Mudholkar, Technometrics 21 (1979) 341.

    Parameters
    ----------
    residual_eigenvalues : array
        Of the covariance of the training residuals.

    Examples
    --------
    >>> import numpy as np
    >>> round(q_limit(0.95, np.array([0.5, 0.3, 0.2, 0.1])), 6)
    2.871787
    """
    theta1, theta2, theta3 = (float((residual_eigenvalues**power).sum()) for power in (1, 2, 3))
    if theta1 <= 0:
        return 0.0
    h0 = 1 - 2 * theta1 * theta3 / (3 * theta2**2)
    # the normal deviate has the sign of h0; written with sqrt(h0^2), as it often is, the limit is wrong where h0 is negative
    h0 = h0 if abs(h0) > SMALLEST_POWER else SMALLEST_POWER
    c = float(special.ndtri(probability))
    inner = c * h0 * sqrt(2 * theta2) / theta1 + 1 + theta2 * h0 * (h0 - 1) / theta1**2
    return float(theta1 * max(inner, 0.0) ** (1 / h0))
