"""Concentration of unknowns of one substance from its calibration line, or by standard addition."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tinctor.axis import SAME_WAVELENGTH_NM
from tinctor.errors import InputError
from tinctor.spectrum import Spectrum
from tinctor.standards.characterise import Characterisation, characterise
from tinctor.standards.distributions import normal_quantile, t_quantile
from tinctor.standards.inverse import CalibrationLine, Inverse, inverse_prediction, standard_addition
from tinctor.standards.limits import Limits, blank_limits, calibration_limits, ich_limits, known_sigma_limits
from tinctor.standards.series import Series, Standard, same_axis, series_of
from tinctor.standards.settings import StandardsSettings
from tinctor.standards.signals import Signals

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
        How far outside the standards' range, as a share of it; 0 inside and up to two standard uncertainties beyond.
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
    signals = Signals(result, settings, None if wavelength_nm is None else 0, absorbance_limit)
    line = signals.line()
    kept = np.isin(series.wavelength_nm, result.wavelength_nm)
    limits = _limits(line, signals, series, kept, alpha)
    found = [_unknown(list(group), line, signals, kept, coverage, alpha, extrapolate=extrapolate) for group in unknowns]
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
        placed = [(".standards[0]", measured[0].spectrum), *((f".blank[{k}]", b) for k, b in enumerate(blanks))]
        if faults := same_axis(placed):
            raise InputError(faults)
        blank = np.mean([b.absorbance for b in blanks], axis=0)
        series = replace(series, absorbance=series.absorbance - blank, blanks=series.blanks - blank)
    result = characterise(series if wavelength_nm is None else series.on(_only(series, wavelength_nm)), settings)
    signals = Signals(result, settings, None if wavelength_nm is None else 0)
    line = signals.line()
    found = standard_addition(line, coverage)
    stock = abs(found.x) * (settings.stock_relative_u or 0.0)  # the cell is the same for all: its path cancels
    # the blank was taken off every spectrum: its error is the result's, in full
    rest = math.hypot(stock, signals.reading_u(0.0) / math.sqrt(len(blanks)) if blanks else 0.0)
    interval = _widened(found, line, rest, coverage)
    return Addition(result, wavelength_nm, line, found, math.hypot(found.u, rest), interval)


def _only(series: Series, wavelength_nm: float) -> np.ndarray:
    """Bools (m,), true at one wavelength: everything is tested and read there and nowhere else."""
    distance = np.abs(series.wavelength_nm - wavelength_nm)
    if distance.min() > SAME_WAVELENGTH_NM:
        nearest = series.wavelength_nm[int(distance.argmin())]
        message = f"{wavelength_nm:g} nm was asked for and not measured; the nearest reading is at {nearest:g} nm"
        raise InputError.single("wavelength-not-measured", ".wavelength_nm", message)
    return np.asarray(distance <= SAME_WAVELENGTH_NM)


def _limits(line: CalibrationLine, signals: Signals, series: Series, kept: np.ndarray, alpha: float) -> tuple[Limits, ...]:
    found = [_decision(line, signals, alpha, 1)]
    if len(series.blanks):
        blank = blank_limits(line, signals.of(series.blanks[:, kept]), alpha)
        found += [blank] if blank else []
    found.append(known_sigma_limits(math.hypot(signals.reading_u(0.0), signals.blank_u(0.0)), alpha))
    return (*found, *ich_limits(line, intercept=line.rest > 0))


def _decision(line: CalibrationLine, signals: Signals, alpha: float, replicates: int) -> Limits:
    """Limits from the line for so many readings, the blank that was taken off included."""
    of_blank = (signals.blank_u(0.0) * abs(line.slope) / line.residual_sd) ** 2 if line.residual_sd > 0 else 0.0
    # of the blank there is one, however many readings of the unknown: its part is not divided by them
    ratio = signals.variance_ratio(line.intercept) + replicates * of_blank
    return calibration_limits(line, alpha, replicates=replicates, variance_ratio=ratio)


def _unknown(
    group: list[Spectrum],
    line: CalibrationLine,
    signals: Signals,
    kept: np.ndarray,
    coverage: float,
    alpha: float,
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
    # within twice its standard uncertainty of the last standard it is not shown to lie beyond it; a line that zero or a blank
    # holds goes on below zero, where the noise of nothing lies
    below = line.low - found.x if line.low > 0 else 0.0
    outside = max(below, found.x - line.high, 0.0)
    outside = outside / (line.high - line.low or line.high) if outside > 2.0 * found.u else 0.0
    refused, code = _refusal(group, kept, signals, found, line, outside, extrapolate=extrapolate)
    shown = not refused
    rest = math.hypot(relative * found.x, signals.blank_u(found.x))
    widened = _widened(found, line, rest, coverage)
    return Unknown(
        id=first.id,
        replicates=len(group),
        amount=found.x,
        concentration=found.x * factor if shown else None,
        u=math.hypot(found.u, rest) * factor if shown else None,
        interval=_scaled(widened, factor) if shown and widened else None,
        interval_line=_scaled(found.exact, factor) if shown and found.exact else None,
        interval_approximate=_scaled(found.approximate, factor) if shown else None,
        outside=outside,
        replicate_sd=float(np.std(values, ddof=1)) / abs(line.slope) * factor if len(group) > 1 and shown else None,
        below_decision=found.x < (_decision(line, signals, alpha, len(group)).decision or 0.0),
        departure=signals.departure(np.stack([s.absorbance[kept] for s in group]).mean(axis=0), len(group)),
        refused=refused,
        refused_code=code,
    )


def _refusal(
    group: list[Spectrum],
    kept: np.ndarray,
    signals: Signals,
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
