"""What the residuals say: how many readings they are worth, and whether something is missing from the model."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.noise import NoiseModel
from tinctor.resolve.fit import FitBlock
from tinctor.resolve.quantiles import chi_square_quantile, normal_quantile
from tinctor.resolve.settings import JudgementLimits

__all__ = ["ResidualTests", "durbin_watson", "effective_points", "neighbour_correlation", "residual_tests"]

#: Fewer readings than this say nothing about correlation between neighbours.
CORRELATION_POINTS = 12


@dataclass(frozen=True, slots=True, eq=False)
class ResidualTests:
    """Two tests for an absorber that the model does not hold, both after an allowance for model error.

    Attributes
    ----------
    chi_square_limit : array (n,)
        Weighted sum of squares above which the residual is larger than noise and allowance explain; infinite without
        degrees of freedom.
    structure : array (n,)
        Root mean square of the smooth part of the residual, in absorbance: sqrt of the mean product of neighbouring
        residuals, in which independent noise cancels.
    structure_limit : array (n,)
        What noise and allowance explain of it; infinite where there are too few readings.
    too_large, structured : bool arrays (n,)
        Which test speaks.
    visible : array (n,)
        Root mean square residual, in absorbance, that the more sensitive of the two tests would notice.
    excess : array (n,)
        Root mean square residual beyond the declared noise, in absorbance: the larger of the two tests' estimates.
    """

    chi_square_limit: FloatArray
    structure: FloatArray
    structure_limit: FloatArray
    too_large: np.ndarray
    structured: np.ndarray
    visible: FloatArray
    excess: FloatArray


def neighbour_correlation(block: FitBlock) -> FloatArray:
    """Return the lag-1 autocorrelation of the residuals, (n,); 0 where there is no residual."""
    return np.divide(block.neighbours, block.squares, out=np.zeros_like(block.squares), where=block.squares > 0)


def durbin_watson(block: FitBlock) -> FloatArray:
    """Return the Durbin-Watson statistic 2 (1 - r1), (n,): 2 for independent residuals, towards 0 for smooth ones.

    Written with the lag-1 autocorrelation, which differs from the sum over differences by the two end terms alone.
    """
    return 2.0 * (1.0 - neighbour_correlation(block))


def residual_tests(block: FitBlock, unknowns: int, noise: NoiseModel, limits: JudgementLimits) -> ResidualTests:
    """Return the tests of each row.

    The allowance is a variance: (model_error_absorbance)^2 + (model_error_relative)^2 times the mean square of the fitted
    absorbance; for the structure test also (wavelength_nm)^2 times the mean square slope, as a declared error of the
    axis leaves a smooth residual too (in the chi-square it is part of the weights already).
    """
    n = np.maximum(block.points, 1.0)
    degrees = np.maximum(block.points - unknowns, 0.0)
    allowance = limits.model_error_absorbance**2 + limits.model_error_relative**2 * block.mean_square
    level = 1.0 - limits.residual_test_level
    limit = np.where(degrees > 0, chi_square_quantile(level, degrees) + block.weight_sum * allowance, np.inf)
    smooth_allowance = allowance + noise.wavelength_nm**2 * block.mean_slope_square
    chance = normal_quantile(level) * block.squares / n / np.sqrt(n)
    enough = (block.points >= CORRELATION_POINTS) & (degrees >= CORRELATION_POINTS / 2)
    structure_square = np.maximum(block.neighbours / n, 0.0)
    structure_limit_square = np.where(enough, smooth_allowance + chance, np.inf)
    weight_mean = np.where(block.weight_sum > 0, block.weight_sum, 1.0)
    excess_square = np.maximum(block.chi_square - degrees, 0.0) / weight_mean
    visible_square = np.minimum((limit - degrees) / weight_mean, structure_limit_square)
    return ResidualTests(
        chi_square_limit=limit,
        structure=np.sqrt(structure_square),
        structure_limit=np.sqrt(structure_limit_square),
        too_large=block.chi_square > limit,
        structured=structure_square > structure_limit_square,
        visible=np.sqrt(visible_square),
        excess=np.sqrt(np.maximum(excess_square, structure_square)),
    )


def effective_points(residual: FloatArray, used: np.ndarray, points: FloatArray) -> FloatArray:
    """Return how many independent readings the residuals are worth, between 1 and the number of readings, (n,).

    points / (1 + 2 sum of autocorrelations), the sum taken over Geyer's initial positive sequence (Statist. Sci. 7 (1992)
    473), which ends where the estimated autocorrelation is noise.

    Parameters
    ----------
    residual : array (n, m)
        Standardised residuals, zero where a reading is not used.
    used : bool array (n, m)
    points : array (n,)
        Readings used.
    """
    m = residual.shape[1]
    size = 1 << (2 * m - 1).bit_length()
    power = np.abs(np.fft.rfft(residual, size, axis=1)) ** 2
    pairs = np.abs(np.fft.rfft(used.astype(np.float64), size, axis=1)) ** 2
    covariance = np.fft.irfft(power, size, axis=1)[:, :m]
    count = np.fft.irfft(pairs, size, axis=1)[:, :m]
    autocovariance = covariance / np.maximum(np.round(count), 1.0)
    rho = autocovariance / np.where(autocovariance[:, :1] > 0, autocovariance[:, :1], 1.0)
    half = m // 2 * 2
    pair_sums = rho[:, 0:half:2] + rho[:, 1:half:2]
    positive = np.cumprod(pair_sums > 0, axis=1)
    # beyond a third of the spectrum an autocorrelation rests on too few pairs to be used
    positive[:, max(1, m // 6) :] = 0
    time = np.maximum(2.0 * (pair_sums * positive).sum(axis=1) - 1.0, 1.0)
    result: FloatArray = np.maximum(points / time, 1.0)
    return result
