"""From the arrays of a resolution to the results of a resolve/1 response."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np

from tinctor.operations.flag_words import flags_of
from tinctor.operations.resolve_results import (
    AnalyteResult,
    BackgroundResult,
    ComponentResult,
    FitResult,
    InterferentResult,
    SpectrumResult,
    StatusWord,
)
from tinctor.operations.shared import BudgetPart, FlagOut
from tinctor.resolve.interval import non_negative_interval
from tinctor.resolve.resolution import Resolution, Severity, Status
from tinctor.resolve.uncertainty import SOURCES

__all__ = ["response_results"]

WORDS: Final[dict[int, StatusWord]] = {Status.ACCEPTED: "accepted", Status.FLAGGED: "flagged", Status.REFUSED: "refused"}
GRADES: Final = {Severity.INFO: "info", Severity.WARNING: "warning", Severity.REFUSAL: "refusal"}


def response_results(resolution: Resolution, factors: tuple[float, ...], units: tuple[str, ...]) -> Iterator[SpectrumResult]:
    """Return the results of a batch in order.

    Parameters
    ----------
    factors, units
        Per component: how many of its unit make one mol/L or g/L, and the unit.
    """
    status = resolution.spectrum_status()
    for row, sample in enumerate(resolution.ids):
        flags = [
            FlagOut.model_construct(
                code=flag.code,
                severity=GRADES[flag.severity],
                message=flag.message,
                components=list(flag.components),
                wavelength_nm=list(flag.wavelength_nm),
            )
            for flag in flags_of(resolution, row, factors, units)
        ]
        yield SpectrumResult.model_construct(
            id=sample,
            status=WORDS[status[row]],
            components=[_component(resolution, row, j, factors[j], units[j]) for j in range(len(units))],
            analytes=list(_analytes(resolution, row, factors, units)),
            covariance=_covariance(resolution, row, factors),
            background=list(_background(resolution, row)),
            fit=_fit(resolution, row),
            flags=flags,
        )


def _component(r: Resolution, row: int, j: int, factor: float, unit: str) -> ComponentResult:
    refused = r.status[row, j] == Status.REFUSED

    def number(array: np.ndarray) -> float | None:
        return None if refused else _finite(array[row, j] * factor)

    detected = not refused and r.unconstrained[row, j] > r.decision_limit[row, j]
    return ComponentResult.model_construct(
        name=r.names[j],
        status=WORDS[r.status[row, j]],
        unit=unit,
        concentration=number(r.concentration),
        unconstrained=number(r.unconstrained),
        u=number(r.u),
        interval=None if refused else [float(r.low[row, j] * factor), float(r.high[row, j] * factor)],
        decision_limit=number(r.decision_limit),
        detection_limit=number(r.detection_limit),
        budget=[
            BudgetPart.model_construct(source=source, u=None if refused else float(r.budget[row, j, k] * factor))
            for k, source in enumerate(SOURCES)
        ],
        percent_per_nm=float(100.0 * r.relative_per_nm[row, j]) if detected else None,
        unseen_bias=None if refused else _unseen_bias(r, row, j, factor),
        not_declared=_not_declared(r, j),
    )


def _unseen_bias(r: Resolution, row: int, j: int, factor: float) -> float | None:
    if r.interferent is None or not np.isfinite(r.visible_residual[row]) or r.fitted_per_cm[row, j] == 0:
        return None
    to_sample = r.unconstrained[row, j] / r.fitted_per_cm[row, j]
    return _finite(r.visible_residual[row] * r.interferent.bias_per_residual[j] * to_sample * factor)


def _not_declared(r: Resolution, j: int) -> list[str]:
    component = r.components[j]
    missing = ["library-scale"] if component.scale_relative_u is None else []
    return missing + (["library-shape"] if component.absorptivity_u is None else [])


def _analytes(r: Resolution, row: int, factors: tuple[float, ...], units: tuple[str, ...]) -> Iterator[AnalyteResult]:
    """Totals. Components refused because they cannot be told apart from one another still have a sound total."""
    for analyte in dict.fromkeys(c.analyte for c in r.components if c.analyte):
        members = np.array([j for j, c in enumerate(r.components) if c.analyte == analyte])
        if len({units[j] for j in members}) > 1:
            continue
        weights = np.array([factors[j] for j in members])
        variance = weights @ r.covariance[row][np.ix_(members, members)] @ weights
        u = float(np.sqrt(max(variance, 0.0)))
        estimate = float(weights @ r.unconstrained[row, members])
        refused = bool((r.status[row, members] == Status.REFUSED).any())
        status = Status.REFUSED if refused else Status(int(r.status[row, members].max()))
        low, high = non_negative_interval(np.array([estimate]), np.array([u]), r.settings.coverage)
        yield AnalyteResult.model_construct(
            name=analyte,
            components=[r.names[j] for j in members],
            status=WORDS[status],
            unit=units[members[0]],
            concentration=None if refused else float(weights @ r.concentration[row, members]),
            unconstrained=None if refused else estimate,
            u=None if refused else u,
            interval=None if refused else [float(low[0]), float(high[0])],
        )


def _covariance(r: Resolution, row: int, factors: tuple[float, ...]) -> list[list[float | None]]:
    scale = np.array(factors)
    matrix = r.covariance[row] * scale[:, None] * scale[None, :]
    refused = r.status[row] == Status.REFUSED
    return [[None if refused[i] or refused[j] else float(value) for j, value in enumerate(line)] for i, line in enumerate(matrix)]


def _background(r: Resolution, row: int) -> Iterator[BackgroundResult]:
    known = not (r.status[row] == Status.REFUSED).all() or r.points[row] >= len(r.components) + len(r.background)
    for k, term in enumerate(r.background):
        value, u = float(r.background_value[row, k]), float(r.background_u[row, k])
        yield BackgroundResult.model_construct(term=term, value=value if known else None, u=u if known else None)


def _fit(r: Resolution, row: int) -> FitResult:
    band = None
    if r.interferent is not None and np.isfinite(r.visible_residual[row]):
        band = InterferentResult.model_construct(
            wavelength_nm=r.interferent.centre_nm,
            width_nm=r.interferent.width_nm,
            absorbance=float(r.interferent.height_per_residual * r.visible_residual[row]),
        )
    return FitResult.model_construct(
        points=int(r.points[row]),
        residual_rms=float(r.residual_rms[row]),
        chi_square=float(r.chi_square[row]),
        degrees_of_freedom=int(r.degrees_of_freedom[row]),
        durbin_watson=float(r.durbin_watson[row]) if r.degrees_of_freedom[row] > 0 else None,
        condition_number=_finite(r.condition_number[row]),
        effective_points=float(r.effective_points[row]),
        chi_square_limit=_finite(r.chi_square_limit[row]),
        residual_structure=float(r.structure[row]),
        residual_structure_limit=_finite(r.structure_limit[row]),
        optimality=float(r.optimality[row]),
        smallest_visible_interferent=band,
    )


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
