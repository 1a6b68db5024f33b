"""Uncertainty of an absorptivity spectrum: what all wavelengths share, what each has of its own, and the interval at one.

A dilution error moves all wavelengths of a standard together. It must not be averaged away over wavelengths when the record
is used: it goes into `common_relative_u`, and only what is left goes into the uncertainty of each wavelength.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.standards.distributions import chi_square_tail, t_quantile
from tinctor.standards.line import Lines
from tinctor.standards.score import Scores, reading_variance
from tinctor.standards.series import Series
from tinctor.standards.settings import StandardsSettings
from tinctor.standards.superposition import shape_residual

__all__ = ["Spread", "blank_score_u", "spread_of"]

#: Lag-1 autocorrelation of shape residuals, in standard deviations of chance, above which it is taken into account.
SIGNIFICANT_CORRELATION = 2.5
HIGHEST_CORRELATION = 0.98


@dataclass(frozen=True, slots=True, eq=False)
class Spread:
    """Standard uncertainties.

    Attributes
    ----------
    stock_relative_u, path_relative_u : float or None
        As declared; shared by all standards.
    series_relative_u : float or None
        Of the scale, from the scatter of the standards (dilution, placing of the cell); None for one standard of which
        nothing is declared.
    series_basis
        "declared", "declared, enlarged" (the scatter is larger than declared) or "scatter".
    series_probability : float or None
        Of so large a scatter if the declared uncertainties are right.
    absorptivity_u : array (m,)
        Of each wavelength's own, to be used as independent from wavelength to wavelength.
    slope_u : array (m,)
        Standard error of the slope with that of the blank.
    interval_low, interval_high : arrays (m,)
        95 % interval of the absorptivity at each wavelength, stock and path included; nan without a degree of freedom.
    """

    stock_relative_u: float | None
    path_relative_u: float
    series_relative_u: float | None
    series_basis: str
    series_probability: float | None
    absorptivity_u: FloatArray
    slope_u: FloatArray
    interval_low: FloatArray
    interval_high: FloatArray

    @property
    def common_relative_u(self) -> float | None:
        """All that is common to the wavelengths; None where the stock or the scatter is not known."""
        if self.stock_relative_u is None or self.series_relative_u is None:
            return None
        return float(np.sqrt(self.stock_relative_u**2 + self.path_relative_u**2 + self.series_relative_u**2))


def spread_of(points: Series, lines: Lines, scores: Scores, settings: StandardsSettings) -> Spread:
    """Return the uncertainties of a fitted series."""
    series_u, basis, probability = _series_scatter(points, scores, settings)
    if series_u is not None:
        of_blank = blank_score_u(points, lines, settings) * abs(float(scores.line.share.sum())) / float(scores.line.slope[0])
        series_u = float(np.hypot(series_u, of_blank))
    blank = _blank_part(points, lines, settings)
    cell = settings.model_error_absorbance * _blank_share(points, lines)
    scatter = lines.slope_u if points.declared else np.maximum(lines.slope_u, _expected_u(points, lines, settings))
    slope_u = np.sqrt(scatter**2 + blank**2 + cell**2)
    shared = np.sqrt((settings.stock_relative_u or 0.0) ** 2 + settings.path_length_relative_u**2)
    combined = np.sqrt(slope_u**2 + (shared * lines.slope) ** 2)
    with np.errstate(divide="ignore", invalid="ignore"):
        # Welch and Satterthwaite: only the scatter has few degrees of freedom
        degrees = np.where(scatter > 0, lines.degrees_of_freedom * (combined / scatter) ** 4, np.inf)
        half = t_quantile(0.975, degrees) * combined
    return Spread(
        stock_relative_u=settings.stock_relative_u,
        path_relative_u=settings.path_length_relative_u,
        series_relative_u=series_u,
        series_basis=basis,
        series_probability=probability,
        absorptivity_u=_own(points, lines, settings, blank),
        slope_u=slope_u,
        interval_low=lines.slope - half,
        interval_high=lines.slope + half,
    )


def _series_scatter(points: Series, scores: Scores, settings: StandardsSettings) -> tuple[float | None, str, float | None]:
    """Relative standard uncertainty of the scale from the scatter of the standards, in the limit of many degrees of freedom."""
    line, slope = scores.line, float(scores.line.slope[0])
    share = line.share[:, 0]
    declared = float(np.sqrt((share**2 * scores.variance).sum())) / slope
    degrees = float(line.degrees_of_freedom[0])
    if not points.declared:
        if degrees <= 0:
            return None, "scatter", None
        # Component uncertainties are used as of a normal distribution: few degrees of freedom are paid for here
        wider = float(t_quantile(0.975, degrees)) / 1.959964
        # a scatter smaller than noise, cell and the dilution taken for it is luck
        return max(float(line.slope_u[0]) / slope * wider, declared), "scatter", None
    if degrees <= 0:
        return declared, "declared", None
    chi_square = float((line.residual[:, 0] ** 2 * np.where(line.weight[:, 0] > 0, scores.weight, 0.0)).sum())
    probability = chi_square_tail(chi_square, degrees)
    if probability >= settings.significance:
        return declared, "declared", probability
    wider = float(t_quantile(0.975, degrees)) / 1.959964  # the ratio is estimated from few degrees of freedom
    return declared * float(np.sqrt(chi_square / degrees)) * wider, "declared, enlarged", probability  # Birge's ratio


def _expected_u(points: Series, lines: Lines, settings: StandardsSettings) -> FloatArray:
    """Standard error of the slopes by noise, cell and dilution as taken, (m,); nan where the scatter has no degree of freedom."""
    slope = np.nan_to_num(lines.slope)
    variance = reading_variance(points, lines.intercept + points.amount[:, None] * slope, settings)
    variance = variance + settings.model_error_absorbance**2 + (points.amount_u[:, None] * slope) ** 2
    return np.where(lines.degrees_of_freedom > 0, np.sqrt((lines.share**2 * variance).sum(axis=0)), np.nan)


def _blank_part(points: Series, lines: Lines, settings: StandardsSettings) -> FloatArray:
    """What the noise of a blank taken off every standard does to the slope, (m,)."""
    return float(np.sqrt(settings.noise.reading_variance(0.0))) * _blank_share(points, lines)


def _blank_share(points: Series, lines: Lines) -> FloatArray:
    """What an error of 1 in each blank's reading, independent of the other blanks', does to the slope, (m,); 0 without blanks."""
    if not len(points.blanks):
        return np.zeros_like(lines.slope)
    return np.asarray(np.abs(lines.share.sum(axis=0)) / np.sqrt(len(points.blanks)))


def blank_score_u(points: Series, lines: Lines, settings: StandardsSettings) -> float:
    """Standard uncertainty of the score of the mean blank, by noise and placing of the cell; 0 where none was taken off."""
    if not len(points.blanks):
        return 0.0
    shape = np.nan_to_num(lines.slope)
    size = float(shape @ shape)
    cell = settings.model_error_absorbance * float(shape.sum()) / size
    noise = float(settings.noise.reading_variance(0.0)) / size
    return float(np.sqrt((cell**2 + noise) / len(points.blanks)))


def _own(points: Series, lines: Lines, settings: StandardsSettings, blank: FloatArray) -> FloatArray:
    """Uncertainty of each wavelength beside the scale: noise, enlarged where the shapes scatter more than noise."""
    residual, fitted = shape_residual(points, lines, settings)
    variance = reading_variance(points, fitted, settings)
    own = (lines.share**2 * variance).sum(axis=0) + blank**2
    degrees = lines.degrees_of_freedom
    if not (degrees > 0).any():
        return np.asarray(np.sqrt(own))
    standardised = residual / np.sqrt(variance)
    ratio = (standardised**2).sum(axis=0) / np.maximum(degrees, 1.0)
    return np.asarray(np.sqrt(own * np.maximum(ratio, 1.0)) * _alike(standardised))


def _alike(standardised: FloatArray) -> float:
    """Factor that makes errors alike at neighbouring wavelengths count as so many independent ones."""
    n, m = standardised.shape
    if m < 12:
        return 1.0
    squares = float((standardised**2).sum())
    correlation = float((standardised[:, 1:] * standardised[:, :-1]).sum()) / squares if squares > 0 else 0.0
    if correlation * np.sqrt(n * m) <= SIGNIFICANT_CORRELATION:
        return 1.0
    rho = min(correlation, HIGHEST_CORRELATION)
    return float(np.sqrt((1.0 + rho) / (1.0 - rho)))
