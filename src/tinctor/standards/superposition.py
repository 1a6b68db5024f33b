"""Do the spectra, each divided by its amount, agree in shape? Where not, the record holds only below.

Aggregation, a change of pH with concentration, stray light and adsorption change the shape of a spectrum, and none of them
need bend the line of a single wavelength beyond its scatter.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.standards.distributions import normal_quantile
from tinctor.standards.line import Lines
from tinctor.standards.score import fitted_lines, reading_variance, scored
from tinctor.standards.series import Series
from tinctor.standards.settings import StandardsSettings

__all__ = ["Departure", "Superposition", "agreement", "shape_residual", "superposition"]


@dataclass(frozen=True, slots=True)
class Departure:
    """One stretch of wavelengths in which one standard has not the shape of the others.

    Attributes
    ----------
    id, amount
        The standard and its concentration times path.
    low_nm, high_nm, wavelength_nm
        The stretch, and where in it the departure is largest.
    absorbance
        Largest departure, positive where the standard absorbs more than the mean shape says.
    relative
        The same as a share of the standard's highest fitted absorbance.
    """

    id: str
    amount: float
    low_nm: float
    high_nm: float
    wavelength_nm: float
    absorbance: float
    relative: float


@dataclass(frozen=True, slots=True)
class Superposition:
    """Whether the shapes agree, departures of the whole set, and the largest amount up to which a set agrees (or None)."""

    agree: bool
    departures: tuple[Departure, ...]
    holds_to: float | None


def superposition(points: Series, lines: Lines, settings: StandardsSettings) -> Superposition:
    """Return the agreement of all preparations about their lines, and of the largest set from below that agrees.

    A single preparation agrees with itself and shows nothing: then `holds_to` is None.
    """
    standards = points.amount > 0
    departures = agreement(points, lines, settings)
    if not departures:
        return Superposition(True, (), float(points.amount.max()) if _preparations(points) > 1 else None)
    for top in np.unique(points.amount[standards])[-2::-1]:
        below = points.take(np.flatnonzero(points.amount <= top))
        if _preparations(below) < 2 or (not lines.through_zero and len(below) < 3):
            break
        if not agreement(below, fitted_lines(below, settings, through_zero=lines.through_zero), settings):
            return Superposition(False, departures, float(top))
    return Superposition(False, departures, None)


def agreement(points: Series, lines: Lines, settings: StandardsSettings) -> tuple[Departure, ...]:
    """Return the departures from the mean shape of a set: beyond noise and model error at the Bonferroni limit of all readings."""
    residual, fitted = shape_residual(points, lines, settings)
    variance = reading_variance(points, fitted, settings) + settings.model_error_absorbance**2
    variance = variance + (settings.model_error_relative * fitted) ** 2
    if len(points.blanks):
        variance = variance + settings.noise.reading_variance(0.0) / len(points.blanks)
    left = np.maximum(1.0 - lines.share * (points.amount[:, None] - lines.x_mean) - lines.weight * lines.leverage_rest, 0.05)
    count = max(int(points.used.sum()), 1)
    limit = normal_quantile(1.0 - settings.significance / (2.0 * count)) * np.sqrt(variance * left)
    beyond = points.used & (np.abs(residual) > limit) & (points.amount > 0)[:, None]
    return tuple(d for k in range(len(points)) for d in _stretches(points, k, residual[k], beyond[k], float(fitted[k].max())))


def shape_residual(points: Series, lines: Lines, settings: StandardsSettings) -> tuple[FloatArray, FloatArray]:
    """Return what is left of each spectrum after its own amount of the mean shape, and that fitted absorbance, both (n, m)."""
    scores, _ = scored(points, lines, settings)
    intercept = float(scores.line.intercept[0])
    shape = np.nan_to_num(lines.slope)
    fitted = (scores.value - intercept)[:, None] * shape + lines.intercept
    return np.where(points.used, points.absorbance - fitted, 0.0), fitted


def _preparations(points: Series) -> int:
    return int((points.amount > 0).sum())


def _stretches(points: Series, row: int, residual: FloatArray, beyond: np.ndarray, highest: float) -> list[Departure]:
    """Contiguous wavelengths beyond the limit; stretches of one sign that a few readings part are one."""
    found: list[Departure] = []
    where = np.flatnonzero(beyond)
    if not where.size:
        return found
    w = points.wavelength_nm
    breaks = np.flatnonzero((np.diff(where) > 3) | (np.diff(np.sign(residual[where])) != 0)) + 1
    for part in np.split(where, breaks):
        worst = int(part[np.argmax(np.abs(residual[part]))])
        found.append(
            Departure(
                id=points.ids[row],
                amount=float(points.amount[row]),
                low_nm=float(w[part[0]]),
                high_nm=float(w[part[-1]]),
                wavelength_nm=float(w[worst]),
                absorbance=float(residual[worst]),
                relative=float(residual[worst] / highest) if highest > 0 else 0.0,
            )
        )
    return found
