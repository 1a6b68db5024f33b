"""Decision, detection and quantification limits of a calibration line, by each published definition, named."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.standards.distributions import normal_quantile, t_quantile
from tinctor.standards.inverse import CalibrationLine

__all__ = ["Limits", "blank_limits", "calibration_limits", "ich_limits", "known_sigma_limits"]


@dataclass(frozen=True, slots=True)
class Limits:
    """Limits in the units of x by one definition; None where the definition has none."""

    definition: str
    decision: float | None
    detection: float | None
    quantification: float | None


def calibration_limits(
    line: CalibrationLine, alpha: float = 0.05, k: float = 3.0, replicates: int = 1, variance_ratio: float = 1.0
) -> Limits:
    """Return the limits of DIN 32645 and ISO 11843-2 from the line: alpha = beta, k the reciprocal relative half-width.

    The quantification limit is where the two-sided interval at 1 - alpha is 1/k of the value; its equation is solved, not
    approximated by putting k times the decision limit under the root.
    """
    scale = line.residual_sd / abs(line.slope)
    reading = variance_ratio / replicates
    one_sided = float(t_quantile(1.0 - alpha, line.degrees_of_freedom))
    two_sided = float(t_quantile(1.0 - alpha / 2.0, line.degrees_of_freedom))
    decision = one_sided * scale * math.sqrt(reading + line.rest + line.x_mean**2 / line.x_squares)
    return Limits(
        f"calibration line, DIN 32645 and ISO 11843-2, alpha = beta = {alpha:g}, k = {k:g}",
        decision,
        2.0 * decision,
        _quantification(k * two_sided * scale, reading + line.rest, line),
    )


def _quantification(factor: float, at_mean: float, line: CalibrationLine) -> float | None:
    """x = factor sqrt(at_mean + (x - x_mean)^2 / Sxx): a quadratic; None where the interval never becomes so narrow."""
    c = factor**2 / line.x_squares
    a, b = 1.0 - c, 2.0 * c * line.x_mean
    rest = -(factor**2) * at_mean - c * line.x_mean**2
    if a <= 0:
        return None
    return (-b + math.sqrt(b**2 - 4.0 * a * rest)) / (2.0 * a)


def blank_limits(line: CalibrationLine, blanks: FloatArray, alpha: float = 0.05, replicates: int = 1) -> Limits | None:
    """Return the limits of DIN 32645 from the scatter of at least two blank signals (n,); None for fewer."""
    n = blanks.size
    if n < 2:
        return None
    t = float(t_quantile(1.0 - alpha, float(n - 1)))
    decision = t * float(np.std(blanks, ddof=1)) / abs(line.slope) * math.sqrt(1.0 / replicates + 1.0 / n)
    return Limits(f"blank readings ({n}), DIN 32645, alpha = beta = {alpha:g}", decision, 2.0 * decision, None)


def known_sigma_limits(sd_at_zero: float, alpha: float = 0.05) -> Limits:
    """Return the limits of Currie (Pure Appl. Chem. 67 (1995) 1699) for a known standard deviation at zero."""
    z = normal_quantile(1.0 - alpha)
    return Limits(
        f"known standard deviation, Currie 1995, alpha = beta = {alpha:g}", z * sd_at_zero, 2 * z * sd_at_zero, 10 * sd_at_zero
    )


def ich_limits(line: CalibrationLine, intercept: bool = True) -> tuple[Limits, ...]:
    """Return the limits of ICH Q2(R2), 3.3 and 10 sigma/slope, for both its sigmas: they differ, so each is named."""
    choices = [("residual standard deviation", line.residual_sd)]
    if intercept:
        choices.append(("standard deviation of the intercept", line.intercept_u))
    b = abs(line.slope)
    return tuple(Limits(f"ICH Q2(R2), sigma = {name}", None, 3.3 * sigma / b, 10.0 * sigma / b) for name, sigma in choices)
