"""From one instrument to another: shift and bandwidth difference between a record and a spectrum of the same substance.

    A(w) = scale [e(w - shift) + broadening/2 e''(w - shift)] + offset

A slit function of variance v (nm^2) adds v/2 of the second derivative to a spectrum (its Taylor series); for the triangular
slit function of a monochromator of bandwidth B (full width at half height) v = B^2 / 6.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import derivative
from tinctor.errors import InputError
from tinctor.noise import NoiseModel
from tinctor.standards.distributions import cubic_spline
from tinctor.standards.line import LinearModel, linear_model

__all__ = ["Transfer", "corrected_absorptivity", "estimate_transfer"]

#: Variance of a triangular slit function of bandwidth B: B^2 / 6.
TRIANGLE: Final = 6.0
ROUNDS: Final = 20
LARGEST_SHIFT_NM: Final = 10.0
LEAST_POINTS: Final = 8


@dataclass(frozen=True, slots=True)
class Transfer:
    """What tells a check spectrum from a record.

    Attributes
    ----------
    shift_nm, shift_u_nm
        How much further to the red the check spectrum lies.
    broadening_nm2, broadening_u_nm2
        Variance of the check's slit function less that of the record's; negative where the check is sharper.
    amount, amount_u
        Concentration times path of the check as the record has it.
    offset
    residual_rms
    points
    bandwidth_nm : float or None
        Of the check, where that of the record is known and the difference allows one.
    shift_significant, broadening_significant
        Beyond twice the standard uncertainty.
    """

    shift_nm: float
    shift_u_nm: float
    broadening_nm2: float
    broadening_u_nm2: float
    amount: float
    amount_u: float
    offset: float
    residual_rms: float
    points: int
    bandwidth_nm: float | None

    @property
    def shift_significant(self) -> bool:
        """Beyond twice its standard uncertainty."""
        return abs(self.shift_nm) > 2.0 * self.shift_u_nm

    @property
    def broadening_significant(self) -> bool:
        """Beyond twice its standard uncertainty."""
        return abs(self.broadening_nm2) > 2.0 * self.broadening_u_nm2


def estimate_transfer(
    record_nm: FloatArray,
    absorptivity: FloatArray,
    check_nm: FloatArray,
    absorbance: FloatArray,
    noise: NoiseModel | None = None,
    record_bandwidth_nm: float | None = None,
) -> Transfer:
    """Return shift and bandwidth difference by weighted Gauss-Newton on the readings inside the record's range.

    Uncertainties come from the scatter about the fit where that is larger than the noise, with as many independent readings
    as the correlation of neighbouring residuals leaves.

    Raises
    ------
    InputError
        For too few readings, a check that does not absorb, or a shift of more than 10 nm: not the same substance.

    Examples
    --------
    >>> w = np.arange(400.0, 601.0)
    >>> band = lambda x: np.exp(-0.5 * ((x - 500.0) / 30.0) ** 2)
    >>> found = estimate_transfer(w, 50.0 * band(w), w, 0.8 * band(w - 0.7))
    >>> round(found.shift_nm, 3), round(found.amount, 4)
    (0.7, 0.016)
    """
    noise = noise or NoiseModel()
    if record_nm.size < LEAST_POINTS:
        raise InputError.single("too-few-points", ".record", f"a shift needs {LEAST_POINTS} wavelengths, found {record_nm.size}")
    bends = _derivatives(record_nm, absorptivity)
    shift = broadening = 0.0
    for _ in range(ROUNDS):
        inside = (check_nm - shift >= record_nm[0]) & (check_nm - shift <= record_nm[-1])
        if inside.sum() < LEAST_POINTS:
            raise InputError.single(
                "too-few-points", ".check", f"{int(inside.sum())} readings lie inside the record's range, {LEAST_POINTS} are needed"
            )
        at, A = check_nm[inside] - shift, absorbance[inside]
        e, d, dd = (bend(at) for bend in bends)
        shape = e + 0.5 * broadening * dd
        amount = max(float(_fitted(np.column_stack([shape, np.ones_like(shape)]), A).coefficients[0]), 0.0)
        if amount <= 0:
            raise InputError.single("no-absorption", ".check", "the check spectrum shows nothing of the record")
        # columns: amount, offset, shift, broadening; the last two as changes
        X = np.column_stack([shape, np.ones_like(shape), -amount * d, 0.5 * amount * dd])
        weight = 1.0 / noise.reading_variance(np.minimum(A, 10.0))
        model = _fitted(X, A, weight)
        step, change = float(model.coefficients[2]), float(model.coefficients[3])
        shift, broadening = shift + step, broadening + change
        if abs(shift) > LARGEST_SHIFT_NM:
            message = f"no shift within {LARGEST_SHIFT_NM:g} nm brings check and record together"
            raise InputError.single("not-alike", ".check", message, "is it the same substance in the same solvent?")
        if abs(step) < 1e-9 and abs(change) < 1e-9:
            break
    u = model.u / model.residual_sd * max(model.residual_sd, 1.0) * _correlation_factor(model.residual * np.sqrt(weight))
    bias = _noise_bias(record_nm, absorptivity, X[:, 3], weight, amount, float(model.u[3]) / model.residual_sd)
    broadening -= bias
    total = broadening + (record_bandwidth_nm or 0.0) ** 2 / TRIANGLE
    return Transfer(
        shift_nm=shift,
        shift_u_nm=float(u[2]),
        broadening_nm2=broadening,
        broadening_u_nm2=math.hypot(float(u[3]), bias),
        amount=float(model.coefficients[0]),
        amount_u=float(u[0]),
        offset=float(model.coefficients[1]),
        residual_rms=float(np.sqrt(np.mean(model.residual**2))),
        points=int(inside.sum()),
        bandwidth_nm=math.sqrt(TRIANGLE * total) if record_bandwidth_nm is not None and total >= 0 else None,
    )


def _derivatives(record_nm: FloatArray, absorptivity: FloatArray) -> tuple[Callable[[FloatArray], FloatArray], ...]:
    """A record, its slope and its curvature as functions of wavelength.

    Between the points by cubic splines; the curvature from wide differences, which are quieter than a spline's own.
    """
    curvature = derivative(record_nm, derivative(record_nm, absorptivity))
    spline = cubic_spline(record_nm, absorptivity)
    return spline, spline.derivative(), cubic_spline(record_nm, curvature)


def _fitted(X: FloatArray, A: FloatArray, weight: FloatArray | None = None) -> LinearModel:
    try:
        return linear_model(X, A, weight)
    except ValueError as error:
        message = "the record has no band whose shift and width could be told apart from an offset"
        raise InputError.single("no-band", ".component", message, "use a record with a maximum inside the check's range") from error


def _noise_bias(
    record_nm: FloatArray, absorptivity: FloatArray, column: FloatArray, weight: FloatArray, amount: float, unit_u: float
) -> float:
    """What the record's noise makes of the broadening: it goes against its own second difference.

    The noise is seen in third differences, to which bands wide against the step give next to nothing.
    """
    third = np.diff(absorptivity, 3)
    noise = float(np.median(np.abs(third))) * 1.4826 / math.sqrt(20.0)
    step = float(np.median(np.diff(record_nm)))
    # second differences over two steps: covariance with the reading itself is -2 / (2 step)^2 of its variance
    lean = 0.5 * amount**2 * noise**2 * 2.0 / (2.0 * step) ** 2
    return float(weight.sum()) * lean * unit_u**2 if column.size else 0.0


def corrected_absorptivity(
    record_nm: FloatArray, absorptivity: FloatArray, absorptivity_u: FloatArray | None, transfer: Transfer
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return (wavelength_nm, absorptivity, absorptivity_u) as the check's instrument would have measured the record.

    Wavelengths that the shift moves out of the record's range are lost; the uncertainties of shift and broadening are added.
    """
    bends = _derivatives(record_nm, absorptivity)
    at = record_nm - transfer.shift_nm
    kept = (at >= record_nm[0]) & (at <= record_nm[-1])
    at = at[kept]
    own = np.zeros(record_nm.size) if absorptivity_u is None else absorptivity_u
    e, d, dd = (bend(at) for bend in bends)
    variance = np.interp(at, record_nm, own) ** 2 + (transfer.shift_u_nm * d) ** 2 + (0.5 * transfer.broadening_u_nm2 * dd) ** 2
    return record_nm[kept], e + 0.5 * transfer.broadening_nm2 * dd, np.sqrt(variance)


def _correlation_factor(standardised: FloatArray) -> float:
    squares = float(standardised @ standardised)
    rho = float(standardised[1:] @ standardised[:-1]) / squares if squares > 0 else 0.0
    if rho * math.sqrt(standardised.size) <= 2.5:
        return 1.0
    rho = min(rho, 0.98)
    return math.sqrt((1.0 + rho) / (1.0 - rho))
