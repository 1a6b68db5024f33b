"""Normal and chi-square quantiles from `math` alone.

scipy.special has both, and importing it takes as long as all else that a cold start of the command line imports.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from tinctor.arrays import FloatArray

__all__ = ["chi_square_quantile", "normal_quantile"]


def normal_quantile(probability: float) -> float:
    """Return the standard normal quantile of a probability between 1e-9 and 1 - 1e-9.

    Examples
    --------
    >>> round(normal_quantile(0.975), 6)
    1.959964
    """
    x = 0.0
    for _ in range(100):  # Newton's method on the distribution function, the step held to 1
        excess = 0.5 * math.erfc(-x / math.sqrt(2.0)) - probability
        step = excess * math.sqrt(2.0 * math.pi) * math.exp(x * x / 2.0)
        x -= max(-1.0, min(1.0, step))
        if abs(step) < 1e-15 * max(abs(x), 1.0):
            break
    return x


def chi_square_quantile(probability: float, degrees_of_freedom: FloatArray) -> FloatArray:
    """Return chi-square quantiles for whole degrees of freedom, shape as given; 0 where there are none.

    Newton's method on the regularised incomplete gamma function from Wilson and Hilferty's cube-root start
    (Proc. Natl Acad. Sci. 17 (1931) 684), once per distinct number of degrees of freedom.

    Examples
    --------
    >>> chi_square_quantile(0.99, np.array([1.0, 296.0])).round(4)
    array([  6.6349, 355.5251])
    """
    distinct, where = np.unique(degrees_of_freedom, return_inverse=True)
    values = np.array([_quantile(probability, float(k)) if k > 0 else 0.0 for k in distinct])
    return values[where.reshape(np.shape(degrees_of_freedom))]


@lru_cache(maxsize=4096)
def _quantile(probability: float, k: float) -> float:
    c = 2.0 / (9.0 * k)
    x = max(k * (1.0 - c + normal_quantile(probability) * math.sqrt(c)) ** 3, 1e-3)
    for _ in range(50):
        density = math.exp((k / 2 - 1) * math.log(x / 2) - x / 2 - math.lgamma(k / 2)) / 2
        step = (_lower_gamma(k / 2, x / 2) - probability) / density
        x = max(x - step, x / 4)
        if abs(step) < 1e-12 * x:
            break
    return x


def _lower_gamma(a: float, x: float) -> float:
    """Regularised lower incomplete gamma function by its power series (all terms positive)."""
    term = total = 1.0 / a
    n = 0
    while term > total * 1e-17:
        n += 1
        term *= x / (a + n)
        total += term
    return total * math.exp(a * math.log(x) - x - math.lgamma(a))
