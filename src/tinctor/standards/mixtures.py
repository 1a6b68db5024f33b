"""Absorptivities of p components from n mixtures of known composition (classical calibration)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import InputError
from tinctor.resolve.design import orthonormal_factors
from tinctor.standards.distributions import t_quantile

__all__ = ["MixtureCalibration", "calibrate_mixtures"]

#: Variance inflation of a component's amounts beyond which the compositions hardly tell it from the others (common practice).
WEAK_DESIGN: Final = 10.0
#: Condition of the spectra found beyond which their apparent amounts say nothing about single labels.
ALIKE: Final = 100.0


@dataclass(frozen=True, slots=True, eq=False)
class MixtureCalibration:
    """Absorptivities from mixtures.

    Attributes
    ----------
    absorptivity, absorptivity_u : arrays (p, m)
        Estimates and standard errors from the scatter about the model.
    intercept, intercept_u : arrays (m,)
        0 where none was fitted.
    residual_sd : array (m,)
    degrees_of_freedom : int
    condition_number
        Of the amounts, each component's scaled to unit length.
    variance_inflation : array (p,)
        Of each component's amounts by the others: 1 is a design in which they vary independently.
    leverage : array (n,)
    apparent : array (n, p)
        Amounts that each spectrum shows against the absorptivities found.
    scale_relative_u : array (p,)
        Relative standard error of each component's scale from the scatter of apparent against stated amounts, widened for few
        degrees of freedom.
    studentised : array (n, p)
        Externally studentised difference of apparent and stated amounts.
    studentised_limit : float
        Bonferroni limit at 5 %.
    alike : bool
        The spectra found are so alike that no label was looked at.
    """

    absorptivity: FloatArray
    absorptivity_u: FloatArray
    intercept: FloatArray
    intercept_u: FloatArray
    residual_sd: FloatArray
    degrees_of_freedom: int
    condition_number: float
    variance_inflation: FloatArray
    leverage: FloatArray
    apparent: FloatArray
    scale_relative_u: FloatArray
    studentised: FloatArray
    studentised_limit: float
    alike: bool


def calibrate_mixtures(
    amounts: FloatArray, absorbance: FloatArray, names: tuple[str, ...], *, fitted_intercept: bool = False
) -> MixtureCalibration:
    """Return the absorptivities by least squares at every wavelength.

    Parameters
    ----------
    amounts : array (n, p)
        Concentration times path.
    absorbance : array (n, m)
        Blank taken off.
    names
        Of the p components, for messages.

    Raises
    ------
    InputError
        When there are too few mixtures, or the compositions cannot tell components apart.

    Examples
    --------
    >>> C = np.array([[1.0, 0.0], [0.0, 1.0], [1.0, 1.0], [2.0, 1.0]])
    >>> calibrate_mixtures(C, C @ np.array([[0.5, 0.1], [0.2, 0.6]]), ("a", "b")).absorptivity.round(6)
    array([[0.5, 0.1],
           [0.2, 0.6]])
    """
    n, p = amounts.shape
    columns = p + int(fitted_intercept)
    if n < columns + 1:
        raise InputError.single(
            "too-few-mixtures",
            ".standards",
            f"{columns} unknowns at each wavelength need at least {columns + 1} mixtures, found {n}",
        )
    if absorbance.shape[1] < p:
        raise InputError.single(
            "too-few-wavelengths", ".mixtures", f"{p} components need at least {p} wavelengths, found {absorbance.shape[1]}"
        )
    X = np.column_stack([amounts, np.ones(n)]) if fitted_intercept else amounts
    Q, Rinv, independent = orthonormal_factors(X)
    if not independent.all():
        raise _dependent(X, names, independent)
    coordinates = Q.T @ absorbance
    coordinates = coordinates + Q.T @ (absorbance - Q @ coordinates)
    coefficients = Rinv @ coordinates
    residual = absorbance - Q @ coordinates
    degrees = n - columns
    sd = np.sqrt((residual**2).sum(axis=0) / degrees)
    spread = (Rinv**2).sum(axis=1)
    leverage = (Q**2).sum(axis=1)
    E = coefficients[:p]
    offset = coefficients[p] if fitted_intercept else np.zeros(absorbance.shape[1])
    apparent: FloatArray = np.linalg.lstsq(E.T, (absorbance - offset).T, rcond=None)[0].T.astype(np.float64)
    studentised, scale = _scatter(apparent, amounts, leverage, degrees, (Rinv @ Q.T)[:p])
    alike = float(np.linalg.cond(E / np.maximum(np.sqrt((E**2).sum(axis=1)), np.finfo(float).tiny)[:, None])) > ALIKE
    if alike:  # the spectra cannot say which component a difference belongs to
        studentised = np.zeros_like(studentised)
    unit = X / np.sqrt((X**2).sum(axis=0))
    sizes = np.linalg.svd(unit, compute_uv=False)
    centred = X[:, :p] - X[:, :p].mean(axis=0) if fitted_intercept else X[:, :p]
    return MixtureCalibration(
        absorptivity=E,
        absorptivity_u=np.sqrt(spread[:p])[:, None] * sd,
        intercept=coefficients[p] if fitted_intercept else np.zeros_like(sd),
        intercept_u=np.sqrt(spread[p]) * sd if fitted_intercept else np.zeros_like(sd),
        residual_sd=sd,
        degrees_of_freedom=degrees,
        condition_number=float(sizes[0] / sizes[-1]),
        variance_inflation=spread[:p] * (centred**2).sum(axis=0),
        leverage=leverage,
        apparent=apparent,
        scale_relative_u=scale,
        studentised=studentised,
        studentised_limit=float(t_quantile(1.0 - 0.05 / (2.0 * n * p), float(max(degrees - 1, 1)))),
        alike=alike,
    )


def _scatter(
    apparent: FloatArray, amounts: FloatArray, leverage: FloatArray, degrees: int, share: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Studentised differences (n, p), and the relative standard error of each component's scale (p,).

    Errors of dilution grow with the amount, so the scale's is that of unequal variances (HC3: MacKinnon and White, J.
    Econometrics 29 (1985) 305); `share` (p, n) is what each mixture adds to each component.
    """
    difference = apparent - amounts
    free = np.maximum(1.0 - leverage, 1e-9)[:, None]
    squares = (difference**2).sum(axis=0)
    without = np.maximum(squares - difference**2 / free, 1e-300) / max(degrees - 1, 1)
    # differences at the level of rounding are no scatter
    exact = np.sqrt(squares) <= 1e-9 * np.sqrt((amounts**2).sum(axis=0))
    studentised = np.where(exact, 0.0, difference / np.sqrt(without * free))
    wider = float(t_quantile(0.975, float(degrees))) / 1.959964
    return studentised, np.sqrt((share**2 * (difference / free).T ** 2).sum(axis=1)) * wider


def _dependent(X: FloatArray, names: tuple[str, ...], independent: np.ndarray) -> InputError:
    left = [(*names, "the intercept")[k] for k in np.flatnonzero(~independent)]
    zero = [name for name, column in zip(names, X.T, strict=False) if not column.any()]
    if zero:
        message, hint = f"{', '.join(zero)} is in no mixture", "leave the component out, or add mixtures that hold it"
    else:
        message = f"the compositions cannot tell {', '.join(left)} from the others: its amounts are a fixed combination of theirs"
        hint = "add mixtures in which the components vary independently of one another"
    return InputError.single("design", ".standards", message, hint)
