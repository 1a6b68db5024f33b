"""Coverage interval of a concentration, honest at zero."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.resolve.quantiles import normal_quantile

__all__ = ["non_negative_interval"]

#: Points of the table of lower limits; linear interpolation in it is good to 1e-5 of u.
TABLE_POINTS = 401


def non_negative_interval(estimate: FloatArray, u: FloatArray, coverage: float) -> tuple[FloatArray, FloatArray]:
    """Return (low, high) of the interval for a quantity that cannot be negative.

    Feldman and Cousins' unified interval for a normal estimate of a mean >= 0 (Phys. Rev. D 57 (1998) 3873). It is two-sided
    far from zero, turns into an upper limit near zero, and covers the truth with the stated probability throughout, which
    neither "estimate +- 2 u cut at zero" (chosen after looking) nor a two-sided interval for the clipped estimate does.

    An estimate below zero is treated as zero. The original makes the upper limit ever tighter the further the estimate falls
    below zero, which would turn a bad fit into a confident statement (Mandelkern and Schultz, J. Math. Phys. 41 (2000) 5701);
    holding the limit at its value for zero only raises the coverage.

    Parameters
    ----------
    estimate, u : arrays of one shape
        Unconstrained estimates and their standard uncertainties.
    coverage
        Coverage probability.

    Examples
    --------
    >>> low, high = non_negative_interval(np.array([0.0, 1.0, 2.0, 5.0]), np.ones(4), 0.95)
    >>> low.round(2), high.round(2)
    (array([0.  , 0.  , 0.35, 3.04]), array([1.96, 2.96, 3.96, 6.96]))
    """
    z = normal_quantile((1 + coverage) / 2)
    safe_u = np.where(u > 0, u, 1.0)
    x = np.maximum(estimate, 0.0) / safe_u
    measured, limit = _lower_limits(coverage)
    low = np.where(x >= 2 * z, x - z, np.interp(x, measured, limit))
    # For an observed value >= 0 the upper edge is where the acceptance region starts at it: mu - z = x.
    return np.where(u > 0, low * safe_u, np.maximum(estimate, 0.0)), np.where(u > 0, (x + z) * safe_u, np.maximum(estimate, 0.0))


@lru_cache(maxsize=16)
def _lower_limits(coverage: float) -> tuple[FloatArray, FloatArray]:
    """Upper ends x2 of the acceptance regions of means mu from 0 to z, as a table (x2, mu); x2 rises with mu.

    For mu < z the region [x1, x2] reaches below zero, where the likelihood ratio against the best non-negative mean is
    exp(mu x - mu^2 / 2); equal ratios at both ends give x1 = (mu^2 - (x2 - mu)^2) / (2 mu).
    """
    z = normal_quantile((1 + coverage) / 2)
    mu = np.linspace(0.0, z, TABLE_POINTS)
    inner = mu[1:-1]
    x2 = inner + z
    for _ in range(12):  # Newton's method on the probability of the region, from its central form
        t2 = x2 - inner
        t1 = (inner**2 - t2**2) / (2 * inner) - inner
        rise = np.exp(-(t2**2) / 2) + np.exp(-(t1**2) / 2) * t2 / inner
        excess = _cdf(t2) - _cdf(t1) - coverage
        x2 = np.maximum(x2 - excess * math.sqrt(2 * math.pi) / rise, inner)
    ends = np.concatenate([[normal_quantile(coverage)], x2, [2 * z]])
    return np.maximum.accumulate(ends), mu


def _cdf(x: FloatArray) -> FloatArray:
    return np.array([0.5 * math.erfc(-v / math.sqrt(2.0)) for v in np.ravel(x)]).reshape(np.shape(x))
