"""One design applied to blocks of spectra: fit, uncertainty, interval, judgement."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from functools import cached_property
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.component import Component
from tinctor.noise import NoiseModel
from tinctor.resolve.design import Design, condition_number, dependent_components
from tinctor.resolve.fit import FitBlock, FitColumns, fit_columns, fit_rows
from tinctor.resolve.interferent import Interferent, interferent
from tinctor.resolve.interval import non_negative_interval
from tinctor.resolve.judge import Evidence, judge
from tinctor.resolve.nonnegative import nearest_nonnegative
from tinctor.resolve.parts import Part, merged_parts, put_rows, reordered
from tinctor.resolve.residuals import durbin_watson, effective_points, neighbour_correlation, residual_tests
from tinctor.resolve.resolution import Severity
from tinctor.resolve.settings import ResolveSettings
from tinctor.resolve.uncertainty import Cell, Estimates, estimates, limits_of_detection

__all__ = ["Readings", "Resolver"]

#: Below this pivot a spectrum with saturated readings is resolved on a basis made for the readings left: the common one
#: would cost it digits.
SMALLEST_PIVOT: Final = 1e-3
#: Below this one the readings do not determine the coefficients.
SINGULAR_PIVOT: Final = 1e-10
#: Where no component has more than this share of its highest absorptivity, the solution should be clear.
CLEAR_SHARE: Final = 0.01
#: Lag-1 autocorrelation of the residuals in standard deviations of chance, above which it is taken into account.
SIGNIFICANT_CORRELATION: Final = 2.5
#: Results that judgement looks at.
RESULTS_JUDGED: Final = (
    "unconstrained",
    "u",
    "decision_limit",
    "fitted_per_cm",
    "background_value",
    "background_u",
    "points",
    "selectivity",
    "saturated",
)


@dataclass(frozen=True, slots=True, eq=False)
class Readings:
    """Measured rows (n, m) on a design's wavelengths: absorbance, perhaps its uncertainty, cell, saturated readings."""

    absorbance: FloatArray
    absorbance_u: FloatArray | None
    cell: Cell
    saturated: np.ndarray | None = None

    def take(self, rows: np.ndarray) -> Readings:
        """Return some of the rows."""
        cell = Cell(*(getattr(self.cell, f.name)[rows] for f in fields(Cell)))
        return Readings(
            self.absorbance[rows],
            None if self.absorbance_u is None else self.absorbance_u[rows],
            cell,
            None if self.saturated is None else self.saturated[rows],
        )

    def on(self, keep: np.ndarray) -> Readings:
        """Return the readings at some of the wavelengths, none of them saturated."""
        return Readings(self.absorbance[:, keep], None if self.absorbance_u is None else self.absorbance_u[:, keep], self.cell)


class Resolver:
    """What every block of a batch shares."""

    def __init__(self, design: Design, components: Sequence[Component], settings: ResolveSettings) -> None:
        self.design, self.components, self.settings = design, components, settings
        m = design.wavelength_nm.size
        self.determined = m > 0 and design.asked <= m
        self.interferent: Interferent | None = interferent(design) if self.determined else None
        self.condition = condition_number(design) if self.determined else np.nan
        self.dependent = dependent_components(design)
        E = design.X[:, : design.p]
        self.clear = (np.abs(E) <= CLEAR_SHARE * E.max(axis=0, initial=0.0)).all(axis=1)

    @cached_property
    def columns(self) -> FitColumns:
        """Column products of the design."""
        return fit_columns(self.design)

    def block(self, readings: Readings) -> Part:
        """Resolve the rows of one block: those with saturated readings apart from those without."""
        n, m = readings.absorbance.shape
        if not self.determined:
            return _undetermined(self, n, float(m))
        saturated = readings.absorbance > self.settings.absorbance_limit
        masked = saturated.any(axis=1)
        if not masked.any():
            return self._rows(readings)
        clean, rest = np.flatnonzero(~masked), np.flatnonzero(masked)
        parts = [self._rows(replace(readings.take(rest), saturated=saturated[rest]))]
        if clean.size:
            parts.insert(0, self._rows(readings.take(clean)))
        return reordered(merged_parts(parts), np.argsort(np.concatenate([clean, rest]), kind="stable"))

    def _rows(self, readings: Readings) -> Part:
        fit = self._fit(readings)
        smallest = SINGULAR_PIVOT if readings.saturated is None else SMALLEST_PIVOT
        poor = (fit.smallest_pivot < smallest) | (fit.points < self.design.asked)
        result = self._judged(readings, fit)
        if poor.any():
            self._replace_poor(result, np.flatnonzero(poor), readings)
        return result

    def _fit(self, readings: Readings) -> FitBlock:
        keep = None if readings.saturated is None else ~readings.saturated
        return fit_rows(self.columns, readings.absorbance, self.settings.noise, keep, readings.absorbance_u)

    def _judged(self, readings: Readings, fit: FitBlock) -> Part:
        """Numbers and flags of fitted rows."""
        settings, p = self.settings, self.design.p
        degrees = np.maximum(fit.points - self.design.unknowns, 0.0)
        effective = self._effective_points(readings, fit)
        reduced = np.divide(fit.chi_square, degrees, out=np.ones_like(degrees), where=degrees > 0)
        inflation = np.maximum(reduced, 1.0) * np.maximum(fit.points, 1.0) / effective
        e = estimates(self.columns, fit, self.components, readings.cell, settings.noise, inflation)
        tests = residual_tests(fit, self.design.unknowns, settings.noise, settings.limits)
        result: Part = {
            **self._concentrations(e, readings.cell),
            "background_value": e.coefficients[:, p:],
            "background_u": e.background_u,
            "points": fit.points,
            "residual_rms": np.sqrt(fit.squares / np.maximum(fit.points, 1.0)),
            "chi_square": fit.chi_square,
            "degrees_of_freedom": degrees,
            "durbin_watson": durbin_watson(fit),
            "condition_number": np.full(len(degrees), self.condition),
            "effective_points": effective,
            "optimality": fit.optimality,
            "visible_residual": tests.visible,
            "excess_residual": tests.excess,
            "structure": tests.structure,
            "structure_limit": tests.structure_limit,
            "chi_square_limit": tests.chi_square_limit,
            "saturated": readings.saturated,
        }
        clear_window, offset_bias = self._clear_window(readings, e)
        shared = {name: result[name] for name in RESULTS_JUDGED}
        result["severity"] = judge(
            Evidence(
                design=self.design,
                components=self.components,
                settings=settings,
                u_at_zero=e.u_at_zero,
                factor=readings.cell.factor,
                tests=tests,
                interferent=self.interferent,
                clear_window=clear_window,
                offset_bias=offset_bias,
                **shared,
            )
        )
        return result

    def _concentrations(self, e: Estimates, cell: Cell) -> Part:
        """Estimates with and without sign constraint, uncertainty, interval and limits."""
        design, p = self.design, self.design.p
        u = np.sqrt(np.maximum(np.einsum("nii->ni", e.covariance), 0.0))
        decision, detection = limits_of_detection(e.u_at_zero, e.proportional)
        low, high = non_negative_interval(e.concentration, u, self.settings.coverage)
        signed = np.append(design.non_negative, False) if design.shift else design.non_negative
        constrained = nearest_nonnegative(e.coefficients, e.coefficient_covariance, signed)[:, :p]
        selectivity = 1.0 / np.sqrt(e.variance_inflation)
        selectivity[:, self.dependent] = 0.0
        return {
            "unconstrained": e.concentration,
            "concentration": constrained * cell.factor[:, None],
            "u": u,
            "low": low,
            "high": high,
            "decision_limit": decision,
            "detection_limit": detection,
            "budget": e.budget,
            "covariance": e.covariance,
            "relative_per_nm": e.relative_per_nm,
            "fitted_per_cm": e.coefficients[:, :p],
            "selectivity": selectivity,
            "correlation": e.correlation,
        }

    def _effective_points(self, readings: Readings, fit: FitBlock) -> FloatArray:
        """Readings less what correlation between neighbours takes away, looked at only where it is significant."""
        effective = np.maximum(fit.points, 1.0)
        significant = neighbour_correlation(fit) * np.sqrt(effective) > SIGNIFICANT_CORRELATION
        rows = np.flatnonzero(significant & (fit.points >= 12) & (fit.points - self.design.unknowns >= 6))
        if rows.size:
            some = readings.take(rows)
            residual = _standardised_residual(self.design, some, fit.coordinates[rows], self.settings.noise)
            used = np.ones(residual.shape, dtype=bool) if some.saturated is None else ~some.saturated
            residual[~used] = 0.0
            effective[rows] = effective_points(residual, used, fit.points[rows])
        return effective

    def _clear_window(self, readings: Readings, e: Estimates) -> tuple[FloatArray, FloatArray]:
        """Mean residual where nothing absorbs, and the bias of an offset of that size; for designs without a background."""
        design = self.design
        if design.terms or design.shift or self.clear.sum() < 3:
            return np.zeros(0), np.zeros(0)
        window = readings.absorbance[:, self.clear] - e.coefficients[:, : design.p] @ design.X[self.clear, : design.p].T
        mean = window.mean(axis=1)
        response = design.Rinv[: design.p] @ design.Q.sum(axis=0)
        return mean, mean[:, None] * response * readings.cell.factor[:, None]

    def _replace_poor(self, result: Part, poor: np.ndarray, readings: Readings) -> None:
        """Resolve rows anew, each group with the same readings left on a design of its own; changes `result` in place."""
        masks = np.zeros((poor.size, len(self.design.X)), dtype=bool) if readings.saturated is None else readings.saturated[poor]
        distinct, group = np.unique(masks, axis=0, return_inverse=True)
        for k, mask in enumerate(distinct):
            rows, keep = poor[group.ravel() == k], ~mask
            reduced = self.design.on(keep)
            if reduced.unknowns == self.design.unknowns and reduced.shift:
                reduced = replace(reduced, shift=False)  # a shift that the spectrum cannot show
            resolver = Resolver(reduced, self.components, self.settings)
            if reduced.asked > keep.sum() or (reduced.unknowns == self.design.unknowns and not mask.any()):
                part = _undetermined(resolver, rows.size, float(keep.sum()))
            else:
                left = readings.take(rows).on(keep)
                part = resolver._judged(left, resolver._fit(left))
            put_rows(result, rows, part)


def _undetermined(context: Resolver, n: int, points: float) -> Part:
    """Rows of zeros, refused for too few readings."""
    design = context.design
    p, b = design.p, len(design.terms) + int(design.shift)
    shapes: dict[str, tuple[int, ...]] = {
        **dict.fromkeys(
            ("unconstrained", "concentration", "u", "low", "high", "decision_limit", "detection_limit", "relative_per_nm",
             "fitted_per_cm", "selectivity"), (n, p),
        ),
        **dict.fromkeys(("background_value", "background_u"), (n, b)),
        **dict.fromkeys(("covariance", "correlation"), (n, p, p)),
        "budget": (n, p, 6),
        **dict.fromkeys(
            ("residual_rms", "chi_square", "degrees_of_freedom", "durbin_watson", "optimality", "visible_residual",
             "excess_residual", "structure", "structure_limit", "chi_square_limit"), (n,),
        ),
    }  # fmt: skip
    result: Part = {name: np.zeros(shape) for name, shape in shapes.items()}
    result.update(points=np.full(n, points), condition_number=np.full(n, context.condition), effective_points=np.full(n, points))
    result["saturated"] = None
    grade = np.full(n, Severity.REFUSAL, dtype=np.int8)
    result["severity"] = {"too-few-points": grade}
    return result


def _standardised_residual(design: Design, readings: Readings, coordinates: FloatArray, noise: NoiseModel) -> FloatArray:
    """Residuals over their standard deviation, less the part that a shift of the axis explains where one is declared."""
    y = coordinates[:, : design.Q.shape[1]]
    s = y @ design.Rinv[: design.p].T
    fitted, D = y @ design.Q.T, s @ design.slope.T
    residual = readings.absorbance - fitted
    if design.shift:
        shift_nm = coordinates[:, -1:]
        residual -= shift_nm * D + (0.5 * shift_nm**2 * s) @ design.curvature.T
    own = readings.absorbance_u
    variance = noise.reading_variance(np.minimum(fitted, 10.0)) if own is None else own**2
    root = np.sqrt(variance + (s**2) @ design.shape_variance.T)
    residual /= root
    if noise.wavelength_nm > 0:
        D /= root
        size = np.vecdot(D, D)
        residual -= (np.vecdot(residual, D) / np.where(size > 0, size, 1.0))[:, None] * D
    return residual
