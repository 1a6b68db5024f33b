"""Steps between a spectrum and a PLS model, each learned from the training spectra of a fold and from no others.

    range           readings from low to high nm only
    offset          less the mean absorbance from low to high nm, spectrum by spectrum
    snv             standard normal variate: each spectrum less its mean, over its standard deviation (Barnes and others 1989)
    savitzky-golay  local polynomial smoothing or its derivative (Savitzky and Golay 1964); both half windows are dropped
    mean-centre     less the mean training spectrum
    autoscale       over the standard deviation at each wavelength: empty regions then count like bands

A derivative is with respect to wavelength, per nm, on an ascending even axis: an uneven one is refused, not resampled in silence.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import Fault, InputError

__all__ = ["STEPS", "FittedStep", "Step", "apply_steps", "fit_steps", "savitzky_golay_weights"]

StepName = Literal["range", "offset", "snv", "savitzky-golay", "mean-centre", "autoscale"]
STEPS: Final[tuple[StepName, ...]] = ("range", "offset", "snv", "savitzky-golay", "mean-centre", "autoscale")

#: Largest relative departure of a step of the axis from the mean step that still counts as even.
EVEN: Final = 0.01
#: A wavelength whose readings spread less than this share of the largest spread is constant: it has nothing to scale.
CONSTANT: Final = 1e-9


@dataclass(frozen=True, slots=True)
class Step:
    """One step as the user asks for it.

    Attributes
    ----------
    step
        One of `STEPS`.
    low_nm, high_nm
        Of "range" and "offset".
    window, polynomial, derivative
        Of "savitzky-golay": readings in the window (odd), degree, and order of the derivative (0 smooths).
    """

    step: StepName
    low_nm: float | None = None
    high_nm: float | None = None
    window: int | None = None
    polynomial: int = 2
    derivative: int = 0

    def __post_init__(self) -> None:
        faults = _faults(self)
        if faults:
            raise InputError(faults)


@dataclass(frozen=True, slots=True, eq=False)
class FittedStep:
    """A step with what it learned, on the axis it was taught.

    Attributes
    ----------
    step
        As asked for.
    wavelength_nm : array (m,)
        Axis that comes out.
    keep : slice
        Which columns of the axis that goes in are kept (all but for "range" and "savitzky-golay").
    values : array
        Mean or scale of "mean-centre" and "autoscale", weights of "savitzky-golay", columns of the offset's window; else empty.
    """

    step: Step
    wavelength_nm: FloatArray
    keep: slice
    values: FloatArray

    def apply(self, X: FloatArray) -> FloatArray:
        """Return the spectra (n, m_in) after this step, (n, m); the input is not changed."""
        name = self.step.step
        if name == "range":
            return np.ascontiguousarray(X[:, self.keep])
        if name == "offset":
            return np.asarray(X - X[:, self.keep].mean(axis=1, keepdims=True))
        if name == "snv":
            spread = X.std(axis=1, ddof=1, keepdims=True)
            _refuse_flat(spread)
            return np.asarray((X - X.mean(axis=1, keepdims=True)) / spread)
        if name == "savitzky-golay":
            windows = np.lib.stride_tricks.sliding_window_view(X, self.values.size, axis=1)
            return np.ascontiguousarray(windows @ self.values)
        return np.asarray(X - self.values if name == "mean-centre" else X / self.values)


def fit_steps(X: FloatArray, wavelength_nm: FloatArray, steps: Sequence[Step]) -> tuple[list[FittedStep], FloatArray]:
    """Learn the steps from training spectra, in order; return them and the spectra after the last.

    Parameters
    ----------
    X : array (n, m)
        Training spectra, samples in rows, on an ascending axis.
    wavelength_nm : array (m,)
    steps
        In the order in which they are done.

    Raises
    ------
    InputError
        Naming the step that cannot be done and why.

    Examples
    --------
    >>> w = np.array([400.0, 402.0, 404.0])
    >>> fitted, Z = fit_steps(np.array([[1.0, 2.0, 4.0], [3.0, 4.0, 6.0]]), w, [Step("mean-centre")])
    >>> Z
    array([[-1., -1., -1.],
           [ 1.,  1.,  1.]])
    """
    fitted: list[FittedStep] = []
    for place, step in enumerate(steps):
        try:
            learned = _fit(step, X, wavelength_nm)
            X = learned.apply(X)
        except InputError as error:
            raise error.at(f".preprocess[{place}]") from error
        wavelength_nm = learned.wavelength_nm
        fitted.append(learned)
    return fitted, X


def apply_steps(X: FloatArray, fitted: Sequence[FittedStep]) -> FloatArray:
    """Return spectra after steps that were learned elsewhere."""
    for step in fitted:
        X = step.apply(X)
    return X


def savitzky_golay_weights(window: int, polynomial: int, derivative: int, step_nm: float) -> FloatArray:
    """Return the weights (window,) of the readings from left to right for the polynomial's value or derivative in the middle.

    Examples
    --------
    >>> (35 * savitzky_golay_weights(5, 2, 0, 1.0)).round(9)
    array([-3., 12., 17., 12., -3.])
    """
    places = np.arange(window) - window // 2
    powers = places[:, None] ** np.arange(polynomial + 1)
    factorial = float(np.prod(np.arange(1, derivative + 1)))
    weights: FloatArray = np.linalg.pinv(powers.astype(np.float64))[derivative] * factorial / step_nm**derivative
    return weights


def _fit(step: Step, X: FloatArray, w: FloatArray) -> FittedStep:
    everything, nothing = slice(0, w.size), np.zeros(0)
    if step.step in ("range", "offset"):
        inside = _inside(step, w)
        return FittedStep(step, w[inside] if step.step == "range" else w, inside, nothing)
    if step.step == "snv":
        if w.size < 2:
            raise InputError.single("too-few-points", "", "snv needs at least 2 wavelengths, found one")
        return FittedStep(step, w, everything, nothing)
    if step.step == "savitzky-golay":
        assert step.window is not None
        weights = savitzky_golay_weights(step.window, step.polynomial, step.derivative, _even_step(w, step.window))
        half = step.window // 2
        return FittedStep(step, w[half : w.size - half], slice(half, w.size - half), weights)
    if step.step == "mean-centre":
        return FittedStep(step, w, everything, X.mean(axis=0))
    return FittedStep(step, w, everything, _scale(X, w))


def _inside(step: Step, w: FloatArray) -> slice:
    low = w[0] if step.low_nm is None else step.low_nm
    high = w[-1] if step.high_nm is None else step.high_nm
    places = np.flatnonzero((w >= low - 1e-6) & (w <= high + 1e-6))
    if places.size == 0:
        raise InputError.single(
            "empty-range", "", f"no reading lies from {low:g} to {high:g} nm; the spectra go from {w[0]:g} to {w[-1]:g} nm"
        )
    return slice(int(places[0]), int(places[-1]) + 1)


def _even_step(w: FloatArray, window: int) -> float:
    if w.size < window:
        raise InputError.single(
            "window", ".window", f"the window of {window} readings is longer than the spectra, {w.size} readings"
        )
    steps = np.diff(w)
    mean = float(steps.mean())
    worst = float(np.abs(steps - mean).max())
    if worst > EVEN * mean:
        raise InputError.single(
            "uneven-axis",
            "",
            f"savitzky-golay needs an even axis; the steps go from {steps.min():g} to {steps.max():g} nm",
            "resample the spectra to an even axis, or leave the step out",
        )
    return mean


def _scale(X: FloatArray, w: FloatArray) -> FloatArray:
    if len(X) < 2:
        raise InputError.single("too-few-spectra", "", "autoscale needs at least 2 spectra, found one")
    spread = X.std(axis=0, ddof=1)
    constant = np.flatnonzero(spread <= CONSTANT * spread.max())
    if constant.size:
        places = ", ".join(f"{v:g}" for v in w[constant[:6]])
        raise InputError.single(
            "constant-column",
            "",
            f"{constant.size} wavelength(s) have the same reading in all training spectra and cannot be scaled: {places} nm",
            "cut them off with a range step before",
        )
    return np.asarray(spread)


def _refuse_flat(spread: FloatArray) -> None:
    flat = np.flatnonzero(~(spread[:, 0] > 0))
    if flat.size:
        raise InputError.single("flat-spectrum", "", f"snv of a flat spectrum is not defined: spectrum {int(flat[0])} is constant")


def _faults(step: Step) -> list[Fault]:
    if step.step not in STEPS:
        return [Fault("unknown-step", ".step", f"expected one of {', '.join(STEPS)}, found {step.step!r}")]
    faults = []
    if step.low_nm is not None and step.high_nm is not None and not step.low_nm < step.high_nm:
        faults.append(Fault("empty-range", ".low_nm", f"expected low below high, found {step.low_nm:g} and {step.high_nm:g} nm"))
    if step.step == "savitzky-golay":
        faults += _savitzky_golay_faults(step)
    return faults


def _savitzky_golay_faults(step: Step) -> list[Fault]:
    window: Any = step.window
    if window is None:
        return [Fault("window", ".window", "savitzky-golay needs a window, found none", "an odd number of readings, such as 9")]
    faults = []
    if window < 3 or window % 2 == 0:
        faults.append(Fault("window", ".window", f"the window must be an odd number of at least 3 readings, found {window}"))
    if not 0 <= step.polynomial < window:
        faults.append(Fault("polynomial", ".polynomial", f"the degree must be from 0 to below the window, found {step.polynomial}"))
    if not 0 <= step.derivative <= min(step.polynomial, 3):
        words = f"the order of the derivative must be from 0 to the degree and at most 3, found {step.derivative}"
        faults.append(Fault("derivative", ".derivative", words))
    return faults
