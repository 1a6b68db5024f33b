"""Concentration of unknowns of one substance from its calibration line, or by standard addition."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import SAME_WAVELENGTH_NM
from tinctor.errors import InputError
from tinctor.spectrum import Spectrum
from tinctor.standards.characterise import Characterisation, characterise
from tinctor.standards.distributions import normal_quantile, t_quantile
from tinctor.standards.inverse import CalibrationLine, Inverse, inverse_prediction, of_lines, standard_addition
from tinctor.standards.limits import Limits, blank_limits, calibration_limits, ich_limits, known_sigma_limits
from tinctor.standards.series import Series, Standard, series_of
from tinctor.standards.settings import StandardsSettings

__all__ = ["Addition", "Determination", "Unknown", "determine", "determine_by_addition"]


@dataclass(frozen=True, slots=True)
class Unknown:
    """One unknown: numbers are None where it is refused.

    Attributes
    ----------
    id, replicates
    amount : float
        Concentration times path in the cell, as read from the line.
    concentration, u, interval
        In the original sample, mol/L or g/L: dilution undone, path divided out; stock, path and dilution in u and interval.
    interval_line, interval_approximate
        Of the line alone, exact (Fieller) and approximate, in the original sample.
    outside : float
        How far outside the standards' range, as a share of it; 0 inside and up to one standard uncertainty beyond.
    replicate_sd : float or None
        Of the concentration between replicates.
    departure : (wavelength_nm, absorbance) or None
        Where a spectrum departs most from the standards' shape, when it does so beyond noise and model error.
    refused, refused_code : str
        Why there is no figure; empty where there is one.
    """

    id: str
    replicates: int
    amount: float
    concentration: float | None
    u: float | None
    interval: tuple[float, float] | None
    interval_line: tuple[float, float] | None
    interval_approximate: tuple[float, float] | None
    outside: float
    replicate_sd: float | None
    below_decision: bool
    departure: tuple[float, float] | None
    refused: str
    refused_code: str


@dataclass(frozen=True, slots=True, eq=False)
class Determination:
    """The line, its limits as concentration times path, and the unknowns."""

    characterisation: Characterisation
    wavelength_nm: float | None
    line: CalibrationLine
    limits: tuple[Limits, ...]
    unknowns: tuple[Unknown, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Addition:
    """Standard addition: the line of additions, and the concentration in the solution measured, mol/L or g/L."""

    characterisation: Characterisation
    wavelength_nm: float | None
    line: CalibrationLine
    found: Inverse
    u: float
    interval: tuple[float, float] | None


@dataclass(frozen=True, slots=True, eq=False)
class _Signals:
    """How a spectrum becomes the signal of a line: one wavelength, or its score against the mean shape."""

    result: Characterisation
    settings: StandardsSettings
    column: int | None
    limit: float = 2.0

    def line(self) -> CalibrationLine:
        x = self.result.points.amount
        if self.column is None:
            scores = self.result.scores
            return of_lines(scores.line, 0, x, _unit_sd(scores.line.weight[:, 0], scores.variance))
        lines = self.result.lines
        return of_lines(lines, self.column, x, _unit_sd(lines.weight[:, self.column], self._variances()))

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

    def variance_ratio(self, signal: float) -> float:
        """Variance of a reading of an unknown against that of a signal of weight 1: noise and cell, no dilution."""
        lines, settings = self.result.lines, self.settings
        shape = np.nan_to_num(lines.slope)
        if self.column is not None:
            own = float(settings.noise.reading_variance(min(signal, 10.0))) + settings.model_error_absorbance**2
            return own / _unit_sd(lines.weight[:, self.column], self._variances()) ** 2
        scores, size = self.result.scores, float(shape @ shape)
        noise = float(settings.noise.reading_variance(np.minimum(signal * shape, 10.0)) @ shape**2) / size**2
        cell = (settings.model_error_absorbance * float(shape.sum()) / size) ** 2
        return (noise + cell) / _unit_sd(scores.line.weight[:, 0], scores.variance) ** 2

    def _variances(self) -> FloatArray:
        """Declared variances of the standards' readings at the chosen wavelength, (n,)."""
        points, lines, settings = self.result.points, self.result.lines, self.settings
        j = self.column or 0
        fitted = lines.intercept[j] + points.amount * lines.slope[j]
        noise = settings.noise.reading_variance(np.minimum(fitted, 10.0)) / points.scans
        return np.asarray(noise + settings.model_error_absorbance**2 + (points.amount_u * lines.slope[j]) ** 2)


def determine(
    series: Series,
    unknowns: Sequence[Sequence[Spectrum]],
    settings: StandardsSettings | None = None,
    *,
    wavelength_nm: float | None = None,
    coverage: float = 0.95,
    extrapolate: bool = False,
    alpha: float = 0.05,
    absorbance_limit: float = 2.0,
) -> Determination:
    """Return the concentration of each unknown.

    Parameters
    ----------
    unknowns
        For each, its replicate spectra on the standards' axis.
    wavelength_nm
        Where to read; the whole spectrum when left out.
    extrapolate
        Give a figure outside the standards' range too.
    absorbance_limit
        An unknown that reads above it at a wavelength used is refused.

    Raises
    ------
    InputError
        For a wavelength that was not measured, or replicates in different cells.

    Examples
    --------
    >>> scans = [Standard(Spectrum(f"s{k}", [500.0, 510.0], [0.1 * k, 0.2 * k]), 0.01 * k) for k in (1, 2, 3, 4)]
    >>> found = determine(series_of(scans), [[Spectrum("u", [500.0, 510.0], [0.25, 0.5])]])
    >>> round(found.unknowns[0].concentration, 6)
    0.025
    """
    settings = settings or StandardsSettings()
    chosen = series if wavelength_nm is None else series.on(_only(series, wavelength_nm))
    result = characterise(chosen, settings)
    signals = _Signals(result, settings, None if wavelength_nm is None else 0, absorbance_limit)
    line = signals.line()
    kept = np.isin(series.wavelength_nm, result.wavelength_nm)
    limits = _limits(line, signals, series, kept, alpha)
    found = [
        _unknown(list(group), line, signals, kept, coverage, limits[0].decision or 0.0, extrapolate=extrapolate)
        for group in unknowns
    ]
    return Determination(result, wavelength_nm, line, limits, tuple(found))


def determine_by_addition(
    measured: Sequence[Standard],
    unspiked: Sequence[Spectrum],
    blanks: Sequence[Spectrum] = (),
    settings: StandardsSettings | None = None,
    *,
    wavelength_nm: float | None = None,
    coverage: float = 0.95,
    absorbance_limit: float = 2.0,
) -> Addition:
    """Return the concentration in the measured solution before additions, as concentration times path over the path.

    Parameters
    ----------
    measured
        Spectra of the solution with known additions: `concentration` is what was added, in the solution measured.
    unspiked
        At least one spectrum of the solution without addition.
    blanks
        Taken off every spectrum: an offset goes into the result in full.
    """
    if not unspiked or len(measured) + len(unspiked) < 3:
        raise InputError.single(
            "too-few-additions", ".standards", "standard addition needs the solution without addition and two or more additions"
        )
    settings = replace(settings or StandardsSettings(), intercept="fitted")
    series = series_of(measured, [*unspiked], absorbance_limit)
    if blanks:
        blank = np.mean([b.absorbance for b in blanks], axis=0)
        series = replace(series, absorbance=series.absorbance - blank, blanks=series.blanks - blank)
    result = characterise(series if wavelength_nm is None else series.on(_only(series, wavelength_nm)), settings)
    line = _Signals(result, settings, None if wavelength_nm is None else 0).line()
    found = standard_addition(line, coverage)
    stock = abs(found.x) * math.hypot(settings.stock_relative_u or 0.0, settings.path_length_relative_u)
    interval = _widened(found, line, stock, coverage)
    return Addition(result, wavelength_nm, line, found, math.hypot(found.u, stock), interval)


def _only(series: Series, wavelength_nm: float) -> np.ndarray:
    """Bools (m,), true at one wavelength: everything is tested and read there and nowhere else."""
    distance = np.abs(series.wavelength_nm - wavelength_nm)
    if distance.min() > SAME_WAVELENGTH_NM:
        nearest = series.wavelength_nm[int(distance.argmin())]
        message = f"{wavelength_nm:g} nm was asked for and not measured; the nearest reading is at {nearest:g} nm"
        raise InputError.single("wavelength-not-measured", ".wavelength_nm", message)
    return np.asarray(distance <= SAME_WAVELENGTH_NM)


def _unit_sd(weight: FloatArray, variance: FloatArray) -> float:
    """Declared standard deviation of a signal of weight 1: weights are reciprocal variances scaled to a mean of 1."""
    used = weight > 0
    return float(np.sqrt((weight[used] * variance[used]).mean()))


def _limits(line: CalibrationLine, signals: _Signals, series: Series, kept: np.ndarray, alpha: float) -> tuple[Limits, ...]:
    ratio = signals.variance_ratio(line.intercept)
    found = [calibration_limits(line, alpha, variance_ratio=ratio)]
    if len(series.blanks):
        blank = blank_limits(line, signals.of(series.blanks[:, kept]), alpha)
        found += [blank] if blank else []
    found.append(known_sigma_limits(line.residual_sd * math.sqrt(ratio) / abs(line.slope), alpha))
    return (*found, *ich_limits(line, intercept=line.rest > 0))


def _unknown(
    group: list[Spectrum],
    line: CalibrationLine,
    signals: _Signals,
    kept: np.ndarray,
    coverage: float,
    decision: float,
    *,
    extrapolate: bool,
) -> Unknown:
    first = group[0]
    values = signals.of(np.stack([s.absorbance[kept] for s in group]))
    signal = float(values.mean())
    found = inverse_prediction(line, signal, len(group), signals.variance_ratio(signal), coverage)
    factor = first.dilution_factor / first.path_length_cm
    settings = signals.settings
    relative = math.sqrt(
        (settings.stock_relative_u or 0.0) ** 2
        + settings.path_length_relative_u**2
        + (first.path_length_u_cm / first.path_length_cm) ** 2
        + (first.dilution_factor_u / first.dilution_factor) ** 2
    )
    # less than its standard uncertainty beyond the last standard is at the last standard
    outside = max(line.low - found.x, found.x - line.high, 0.0)
    outside = outside / (line.high - line.low or line.high) if outside > found.u else 0.0
    refused, code = _refusal(group, kept, signals, found, line, outside, extrapolate=extrapolate)
    shown = not refused
    widened = _widened(found, line, relative * found.x, coverage)
    return Unknown(
        id=first.id,
        replicates=len(group),
        amount=found.x,
        concentration=found.x * factor if shown else None,
        u=math.hypot(found.u, relative * found.x) * factor if shown else None,
        interval=_scaled(widened, factor) if shown and widened else None,
        interval_line=_scaled(found.exact, factor) if shown and found.exact else None,
        interval_approximate=_scaled(found.approximate, factor) if shown else None,
        outside=outside,
        replicate_sd=float(np.std(values, ddof=1)) / abs(line.slope) * factor if len(group) > 1 and shown else None,
        below_decision=found.x < decision,
        departure=signals.departure(np.stack([s.absorbance[kept] for s in group]).mean(axis=0), len(group)),
        refused=refused,
        refused_code=code,
    )


def _refusal(
    group: list[Spectrum],
    kept: np.ndarray,
    signals: _Signals,
    found: Inverse,
    line: CalibrationLine,
    outside: float,
    *,
    extrapolate: bool,
) -> tuple[str, str]:
    """Why an unknown has no figure, and the code of the reason; empty where it has one."""
    for s in group:
        readings = s.absorbance[kept]
        if readings.max() > signals.limit:
            at = s.wavelength_nm[kept][int(readings.argmax())]
            message = f"{s.id!r} reads {readings.max():.3g} at {at:g} nm, above the absorbance limit {signals.limit:g}: dilute it"
            return message, "saturated"
    if outside > 0 and not extrapolate:
        side = "above" if found.x > line.high else "below"
        message = f"{100 * outside:.3g} % of the standards' range {side} it: dilute or add a standard, or ask for extrapolation"
        return message, "outside-standards-range"
    return "", ""


def _widened(found: Inverse, line: CalibrationLine, u: float, coverage: float) -> tuple[float, float] | None:
    """The exact interval with what lies outside the line (stock, path, dilution) added.

    Only the scatter about the line has few degrees of freedom: Student's factor is that of the effective ones (Welch and
    Satterthwaite), and each side keeps its share of the exact interval.
    """
    if found.exact is None:
        return None
    probability = 0.5 + coverage / 2.0
    combined = math.hypot(found.u, u)
    if found.u == 0.0:
        half = normal_quantile(probability) * u
        return found.x - half, found.x + half
    effective = line.degrees_of_freedom * (combined / found.u) ** 4
    own = float(t_quantile(probability, line.degrees_of_freedom)) * found.u
    half = float(t_quantile(probability, effective)) * combined
    return found.x - (found.x - found.exact[0]) / own * half, found.x + (found.exact[1] - found.x) / own * half


def _scaled(interval: tuple[float, float], factor: float) -> tuple[float, float]:
    return interval[0] * factor, interval[1] * factor
