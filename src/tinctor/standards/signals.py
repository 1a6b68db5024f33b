"""From a spectrum to the signal of a calibration line: the reading at one wavelength, or the score of the whole spectrum."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import UndeterminedError
from tinctor.standards.characterise import Characterisation
from tinctor.standards.distributions import normal_quantile
from tinctor.standards.inverse import CalibrationLine, of_lines
from tinctor.standards.settings import StandardsSettings
from tinctor.standards.spread import blank_score_u

__all__ = ["Signals"]


@dataclass(frozen=True, slots=True, eq=False)
class Signals:
    """How a spectrum becomes the signal of a line.

    Parameters
    ----------
    result, settings
        The series characterised, and how.
    column
        Of the one wavelength read; None for the whole spectrum's score.
    limit
        Absorbance limit of unknowns.
    """

    result: Characterisation
    settings: StandardsSettings
    column: int | None
    limit: float = 2.0

    def line(self) -> CalibrationLine:
        """Return the line of signal on concentration times path.

        Raises
        ------
        UndeterminedError
            When the signal does not grow with concentration.
        """
        slopes = self.result.scores.line.slope if self.column is None else self.result.lines.slope
        if not (np.isfinite(slopes).all() and slopes[self.column or 0] > 0):
            raise UndeterminedError("the standards' signal does not grow with concentration: nothing can be read from their line")
        x = self.result.points.amount
        if self.column is None:
            lines, unit_sd = self.result.scores.line, _unit_sd(self.result.scores.line.weight[:, 0], self.result.scores.variance)
        else:
            lines = self.result.lines
            unit_sd = _unit_sd(lines.weight[:, self.column], self._variances())
        line = of_lines(lines, self.column or 0, x, unit_sd)
        if self.result.points.declared or line.residual_sd >= unit_sd:
            return line
        # as in `spread`: where nobody stated the dilution, a scatter smaller than what is taken for it is luck
        factor = unit_sd / line.residual_sd if line.residual_sd > 0 else 1.0
        return replace(line, residual_sd=unit_sd, slope_u=line.slope_u * factor, intercept_u=line.intercept_u * factor)

    def of(self, spectra: FloatArray) -> FloatArray:
        """Signals of spectra (k, m), the blank taken off where the line goes through zero."""
        A = spectra - (self.result.points.blanks.mean(axis=0) if len(self.result.points.blanks) else 0.0)
        if self.column is not None:
            return np.asarray(A[:, self.column])
        shape = np.nan_to_num(self.result.lines.slope)
        return np.asarray(A @ shape / (shape @ shape))

    def departure(self, absorbance: FloatArray, replicates: int) -> tuple[float, float] | None:
        """Return where a mean spectrum (m,) departs most from its share of the mean shape, beyond the Bonferroni limit."""
        if self.column is not None:
            return None
        settings, lines, points = self.settings, self.result.lines, self.result.points
        signal = float(self.of(absorbance[None, :])[0]) - float(self.result.scores.line.intercept[0])
        own = absorbance - (points.blanks.mean(axis=0) if len(points.blanks) else 0.0) - lines.intercept
        fitted = signal * np.nan_to_num(lines.slope)
        noise = settings.noise.reading_variance(np.minimum(np.abs(fitted), 10.0)) / replicates
        blank = float(settings.noise.reading_variance(0.0)) / max(len(points.blanks), 1) if len(points.blanks) else 0.0
        model = settings.model_error_absorbance**2 + (settings.model_error_relative * fitted) ** 2
        record = (signal * self.result.spread.absorptivity_u) ** 2
        limit = normal_quantile(1.0 - settings.significance / (2.0 * own.size)) * np.sqrt(noise + blank + model + record)
        excess = np.abs(own - fitted) / limit
        k = int(excess.argmax())
        return (float(self.result.wavelength_nm[k]), float((own - fitted)[k])) if excess[k] > 1.0 else None

    def blank_u(self, x: float) -> float:
        """Standard uncertainty of x from the blank taken off unknown and standards alike; it mostly cancels at mid range."""
        result, settings = self.result, self.settings
        blanks = len(result.points.blanks)
        if not blanks:
            return 0.0
        if self.column is None:
            left = 1.0 - x * float(result.scores.line.share.sum())
            return blank_score_u(result.points, result.lines, settings) * abs(left)
        u = math.sqrt((float(settings.noise.reading_variance(0.0)) + settings.model_error_absorbance**2) / blanks)
        left = 1.0 - x * float(result.lines.share[:, self.column].sum())
        return u * abs(left) / abs(float(result.lines.slope[self.column]))

    def variance_ratio(self, signal: float) -> float:
        """Variance of a reading of an unknown against that of a signal of weight 1: noise and cell, no dilution."""
        if self.column is not None:
            return self._signal_variance(signal) / _unit_sd(self.result.lines.weight[:, self.column], self._variances()) ** 2
        scores = self.result.scores
        return self._signal_variance(signal) / _unit_sd(scores.line.weight[:, 0], scores.variance) ** 2

    def reading_u(self, signal: float) -> float:
        """Standard uncertainty of x from one reading of a signal: noise and cell."""
        line = self.result.scores.line if self.column is None else self.result.lines
        return math.sqrt(self._signal_variance(signal)) / abs(float(line.slope[self.column or 0]))

    def _signal_variance(self, signal: float) -> float:
        settings, shape = self.settings, np.nan_to_num(self.result.lines.slope)
        if self.column is not None:
            return float(settings.noise.reading_variance(min(signal, 10.0))) + settings.model_error_absorbance**2
        size = float(shape @ shape)
        noise = float(settings.noise.reading_variance(np.minimum(signal * shape, 10.0)) @ shape**2) / size**2
        return noise + (settings.model_error_absorbance * float(shape.sum()) / size) ** 2

    def _variances(self) -> FloatArray:
        """Declared variances of the standards' readings at the chosen wavelength, (n,)."""
        points, lines, settings = self.result.points, self.result.lines, self.settings
        j = self.column or 0
        fitted = lines.intercept[j] + points.amount * lines.slope[j]
        noise = settings.noise.reading_variance(np.minimum(fitted, 10.0)) / points.scans
        return np.asarray(noise + settings.model_error_absorbance**2 + (points.amount_u * lines.slope[j]) ** 2)


def _unit_sd(weight: FloatArray, variance: FloatArray) -> float:
    """Declared standard deviation of a signal of weight 1: weights are reciprocal variances scaled to a mean of 1."""
    used = weight > 0
    return float(np.sqrt((weight[used] * variance[used]).mean()))
