"""Which results need a look, and which cannot be stood behind.

Every rule looks at whole columns. A flag is graded by the bias it could cause, so that what does not matter stays a
remark: significance is not importance.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.component import Component
from tinctor.resolve.design import Design
from tinctor.resolve.interferent import Interferent
from tinctor.resolve.residuals import ResidualTests
from tinctor.resolve.resolution import FlagCode, Severity, Status
from tinctor.resolve.settings import ResolveSettings

__all__ = ["Evidence", "judge", "status_of"]

#: A component whose columns hold less than this share of its absorptivity outside the saturated readings is affected.
SATURATED_SHARE = 0.05
#: A background value must exceed this many standard uncertainties to be called one.
SIGNIFICANT = 3.0
#: Without an offset term: mean absorbance in the clear window that is worth a remark.
CLEAR_WINDOW = 0.005


@dataclass(frozen=True, slots=True, eq=False)
class Evidence:
    """What judgement looks at, for n spectra: arrays named as in `Resolution`."""

    design: Design
    components: Sequence[Component]
    settings: ResolveSettings
    unconstrained: FloatArray
    u: FloatArray
    u_at_zero: FloatArray
    decision_limit: FloatArray
    fitted_per_cm: FloatArray
    factor: FloatArray
    background_value: FloatArray
    background_u: FloatArray
    points: FloatArray
    selectivity: FloatArray
    tests: ResidualTests
    interferent: Interferent | None
    saturated: np.ndarray | None
    clear_window: FloatArray
    offset_bias: FloatArray


def judge(evidence: Evidence) -> dict[FlagCode, np.ndarray]:
    """Return the severity of each flag, (n,) or (n, p), for those raised at all."""
    rules: dict[FlagCode, np.ndarray] = {
        "too-few-points": _too_few_points(evidence),
        "collinear": _collinear(evidence),
        "range-not-covered": _invisible(evidence),
        "saturated": _saturated(evidence),
        "offset-large": _offset_large(evidence),
        "scatter-large": _scatter_large(evidence),
        "unmodelled-absorber": _unmodelled(evidence),
        "beyond-linear-range": _beyond_linear_range(evidence),
        "negative-estimate": _negative(evidence),
        "below-decision-limit": _where(evidence.unconstrained < evidence.decision_limit, Severity.INFO),
        "target-not-met": _target_not_met(evidence),
    }
    n, p = evidence.unconstrained.shape
    refused = status_of(rules, n, p) == Status.REFUSED
    for code, grades in rules.items():
        if code != "saturated" and grades.ndim == 2:
            grades[refused & (grades < Severity.REFUSAL)] = Severity.NONE  # nothing is said about a figure that is not given
    return {code: severity for code, severity in rules.items() if severity.any()}


def status_of(severity: dict[FlagCode, np.ndarray], n: int, p: int) -> np.ndarray:
    """Return the status of each component of each spectrum, int8 (n, p)."""
    status = np.zeros((n, p), dtype=np.int8)
    for grades in severity.values():
        if grades.ndim == 2:
            status[grades == Severity.WARNING] = np.maximum(status[grades == Severity.WARNING], Status.FLAGGED)
            status[grades == Severity.REFUSAL] = Status.REFUSED
        else:
            status[grades == Severity.REFUSAL] = Status.REFUSED
    return status


def _where(condition: np.ndarray | np.bool, severity: Severity) -> np.ndarray:
    return np.where(condition, severity, Severity.NONE).astype(np.int8)


def _graded(seen: np.ndarray, bias: FloatArray, e: Evidence) -> np.ndarray:
    """Warning where the bias could matter, a remark where it is small against the concentration and its uncertainty."""
    matters = bias > np.maximum(e.settings.limits.bias_relative * np.abs(e.unconstrained), e.u)
    return np.where(seen, np.where(matters, Severity.WARNING, Severity.INFO), Severity.NONE).astype(np.int8)


def _too_few_points(e: Evidence) -> np.ndarray:
    unknowns = e.design.unknowns
    return np.where(e.points < unknowns, Severity.REFUSAL, np.where(e.points == unknowns, Severity.INFO, Severity.NONE)).astype(
        np.int8
    )


def _collinear(e: Evidence) -> np.ndarray:
    limits = e.settings.limits
    taken = 1.0 / np.maximum(e.selectivity, 1e-300)
    grades = np.where(
        taken > limits.collinear_refused,
        Severity.REFUSAL,
        np.where(taken > limits.collinear_flagged, Severity.WARNING, Severity.NONE),
    ).astype(np.int8)
    grades[:, ~e.design.X[:, : e.design.p].any(axis=0)] = Severity.NONE
    return grades


def _invisible(e: Evidence) -> np.ndarray:
    """A component that absorbs nowhere in the wavelengths used cannot be determined from them."""
    nowhere = ~e.design.X[:, : e.design.p].any(axis=0)
    return np.tile(_where(nowhere, Severity.REFUSAL), (len(e.points), 1))


def _saturated(e: Evidence) -> np.ndarray:
    """Which components lose readings to saturation: the share of their squared signal that is not used."""
    n, p = e.unconstrained.shape
    grades = np.zeros((n, p), dtype=np.int8)
    if e.saturated is None:
        return grades
    rows = np.flatnonzero(e.saturated.any(axis=1))
    signal = e.design.X[:, :p] ** 2
    share = e.saturated[rows].astype(np.float64) @ signal / np.maximum(signal.sum(axis=0), np.finfo(float).tiny)
    grades[rows] = np.where(share > SATURATED_SHARE, Severity.WARNING, Severity.INFO)
    return grades


def _offset_large(e: Evidence) -> np.ndarray:
    n = len(e.points)
    if "offset" in e.design.terms:
        k = e.design.terms.index("offset")
        value, u = np.abs(e.background_value[:, k]), e.background_u[:, k]
        return _where((value > e.settings.limits.offset_flagged) & (value > SIGNIFICANT * u), Severity.WARNING)
    if e.clear_window.size == 0:
        return np.zeros(n, dtype=np.int8)
    seen = np.asarray(np.abs(e.clear_window) > CLEAR_WINDOW)
    return _graded(seen[:, None] & np.ones_like(e.u, dtype=bool), np.abs(e.offset_bias), e)


def _scatter_large(e: Evidence) -> np.ndarray:
    if "scatter" not in e.design.terms:
        return np.zeros(len(e.points), dtype=np.int8)
    k = e.design.terms.index("scatter")
    value, u = e.background_value[:, k], e.background_u[:, k]
    highest = np.abs(e.fitted_per_cm * e.design.X[:, : e.design.p].max(axis=0, initial=0.0)).sum(axis=1)
    return _where((value > e.settings.limits.scatter_flagged * highest) & (value > SIGNIFICANT * u), Severity.WARNING)


def _unmodelled(e: Evidence) -> np.ndarray:
    seen = e.tests.too_large | e.tests.structured
    if e.interferent is None:
        return np.tile(_where(seen, Severity.WARNING)[:, None], (1, e.u.shape[1]))
    bias = e.tests.excess[:, None] * e.interferent.bias_per_residual * e.factor[:, None]
    return _graded(seen[:, None] & np.ones_like(bias, dtype=bool), bias, e)


def _beyond_linear_range(e: Evidence) -> np.ndarray:
    linear_to = np.array([np.inf if c.linear_to is None else c.linear_to for c in e.components])
    beyond = e.settings.limits.linear_range_refused
    return np.where(
        e.fitted_per_cm > beyond * linear_to,
        Severity.REFUSAL,
        np.where(e.fitted_per_cm > linear_to, Severity.WARNING, Severity.NONE),
    ).astype(np.int8)


def _negative(e: Evidence) -> np.ndarray:
    """Below -2 u0 a negative estimate is hardly chance, below -3 u0 it is a sign of a wrong blank, library or model."""
    ratio = np.divide(e.unconstrained, e.u_at_zero, out=np.zeros_like(e.u), where=e.u_at_zero > 0)
    return np.where(ratio < -3.0, Severity.WARNING, np.where(ratio < -2.0, Severity.INFO, Severity.NONE)).astype(np.int8)


def _target_not_met(e: Evidence) -> np.ndarray:
    target = e.settings.target_relative_u
    if target is None:
        return np.zeros(e.u.shape, dtype=np.int8)
    return _where(e.u > target * np.maximum(e.unconstrained, 0.0), Severity.WARNING)
