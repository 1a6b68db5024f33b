"""A trained model as plain numbers: enough to predict, to judge a new spectrum, and to be written as JSON and read back.

Prediction needs neither scikit-learn nor scipy. A model is one analyte, or several that were trained jointly.

Uncertainty of a predicted value (Faber and Bro, Chemom. Intell. Lab. Syst. 61 (2002) 133; IUPAC report of Olivieri et al., Pure
Appl. Chem. 78 (2006) 633): u^2 = (1 + h) MSE - u_ref^2, with h the leverage of the spectrum, MSE the mean squared error of the
training set over its degrees of freedom, and u_ref the standard uncertainty of the references; never below h MSE, the share that
the model itself makes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import SAME_WAVELENGTH_NM, covered, resample
from tinctor.errors import InputError
from tinctor.pls.preprocess import FittedStep, apply_steps

__all__ = ["Limits", "Model", "Predicted"]


@dataclass(frozen=True, slots=True, eq=False)
class Limits:
    """What the model was taught.

    Attributes
    ----------
    samples
        Training spectra.
    preparations
        Different preparations among them.
    coverage
        Probability of the interval, and of T2 and Q of a sound spectrum to lie below their limits.
    t2, t2_new, q
        Limits of Hotelling's T2 for training spectra and for new ones, and of the squared residual of new ones. The last two hold
        together at the coverage, each at half the error.
    leverage
        Largest leverage of the training spectra.
    reference : array (q, 2)
        Lowest and highest reference of each analyte.
    """

    samples: int
    preparations: int
    coverage: float
    t2: float
    t2_new: float
    q: float
    leverage: float
    reference: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Predicted:
    """Values of n spectra by one model with q analytes.

    Attributes
    ----------
    value, u : arrays (n, q)
        In the unit of the references.
    low, high : arrays (n, q)
        Coverage interval.
    leverage, t2, q_residual : arrays (n,)
    outside_space : bool array (n,)
        T2 or Q above the limit for new spectra.
    outside_range : bool array (n, q)
        Value below the lowest or above the highest reference.
    """

    value: FloatArray
    u: FloatArray
    low: FloatArray
    high: FloatArray
    leverage: FloatArray
    t2: FloatArray
    q_residual: FloatArray
    outside_space: np.ndarray
    outside_range: np.ndarray


@dataclass(frozen=True, slots=True, eq=False)
class Model:
    """A trained model.

    Attributes
    ----------
    names : q texts
    unit
        Of the references.
    wavelength_nm : array (m,)
        Axis of the training spectra, before any step.
    steps
        Preprocessing as learned from all training spectra.
    components
        Number of PLS components.
    intercept : array (q,)
    coefficients : array (m2, q)
        On the axis after the steps.
    mean_x : array (m2,)
    rotations, loadings : arrays (m2, h)
    score_variance : array (h,)
        Of the training scores (n - 1 degrees of freedom).
    mse : array (q,)
        Mean squared error of the training set over its degrees of freedom.
    degrees_of_freedom
    t_factor
        Student's factor of the interval.
    reference_u : array (q,)
        Standard uncertainty of the references; 0 where nobody stated it.
    limits
    """

    names: tuple[str, ...]
    unit: str
    wavelength_nm: FloatArray
    steps: tuple[FittedStep, ...]
    components: int
    intercept: FloatArray
    coefficients: FloatArray
    mean_x: FloatArray
    rotations: FloatArray
    loadings: FloatArray
    score_variance: FloatArray
    mse: FloatArray
    degrees_of_freedom: int
    t_factor: float
    reference_u: FloatArray
    limits: Limits

    def checked(self) -> Model:
        """Return the model itself when its parts fit together.

        Raises
        ------
        InputError
            Naming the part that does not.
        """
        q, h = len(self.names), self.components
        m = self.steps[-1].wavelength_nm.size if self.steps else self.wavelength_nm.size
        shapes = {
            "intercept": (q,), "coefficients": (m, q), "mean_x": (m,), "rotations": (m, h), "loadings": (m, h),
            "score_variance": (h,), "mse": (q,), "reference_u": (q,),
        }  # fmt: skip
        for name, expected in shapes.items():
            found = getattr(self, name).shape
            if found != expected:
                raise InputError.single("damaged-model", f".{name}", f"expected the shape {expected}, found {found}")
        return self

    def on_axis(self, X: FloatArray, wavelength_nm: FloatArray) -> FloatArray:
        """Return spectra on the model's axis; resampled inside the range of theirs, never extrapolated.

        Raises
        ------
        InputError
            When they do not cover the model's axis.
        """
        same = (
            wavelength_nm.shape == self.wavelength_nm.shape
            and np.abs(wavelength_nm - self.wavelength_nm).max() <= SAME_WAVELENGTH_NM
        )
        if same:
            return X
        missing = ~covered(self.wavelength_nm, wavelength_nm)
        if missing.any():
            raise InputError.single(
                "range-not-covered",
                ".wavelength_nm",
                f"the model was taught from {self.wavelength_nm[0]:g} to {self.wavelength_nm[-1]:g} nm; "
                f"the spectra go from {wavelength_nm[0]:g} to {wavelength_nm[-1]:g} nm",
                "measure over the model's range: nothing is extrapolated",
            )
        return np.stack([resample(wavelength_nm, row, self.wavelength_nm) for row in X])

    def predict(self, X: FloatArray) -> Predicted:
        """Return the values of spectra on the model's axis, (n, m), and whether the model was taught anything like them."""
        Z = apply_steps(X, self.steps)
        value = self.intercept + Z @ self.coefficients
        centred = Z - self.mean_x
        scores = centred @ self.rotations
        t2 = (scores**2 / self.score_variance).sum(axis=1)
        n = self.limits.samples
        leverage = 1.0 / n + t2 / (n - 1)
        residual = centred - scores @ self.loadings.T
        q_residual = np.einsum("ij,ij->i", residual, residual)
        u = self._u(leverage)
        half = self.t_factor * u
        low, high = self.limits.reference.T
        return Predicted(
            value=value,
            u=u,
            low=value - half,
            high=value + half,
            leverage=leverage,
            t2=t2,
            q_residual=q_residual,
            outside_space=(t2 > self.limits.t2_new) | (q_residual > self.limits.q),
            outside_range=(value < low) | (value > high),
        )

    def _u(self, leverage: FloatArray) -> FloatArray:
        whole = (1.0 + leverage)[:, None] * self.mse
        return np.asarray(np.sqrt(np.maximum(whole - self.reference_u**2, leverage[:, None] * self.mse)))
