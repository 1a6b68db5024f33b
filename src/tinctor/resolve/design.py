"""The design matrix: the library resampled onto the sample's axis, with background shapes, factored once.

    A(w) = sum_j s_j e_j(w) + sum_k g_k f_k(w)        s_j = c_j b / D

Columns are brought to unit norm and factored by Gram-Schmidt with reorthogonalisation: X = Q R. All fitting happens in
the coordinates of Q, where the weighted normal equations have the condition of the weights only, not of X.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import SAME_WAVELENGTH_NM, covered, derivative, interpolation_u, resample
from tinctor.component import Component
from tinctor.errors import InputError
from tinctor.resolve.settings import ResolveSettings

__all__ = [
    "Design",
    "build_design",
    "condition_number",
    "dependent_components",
    "median_step",
    "orthonormal_factors",
    "shape_variance",
    "usable_wavelengths",
]

#: A unit column this close to the span of those before it is dependent on them to the precision of float64.
DEPENDENT = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class Design:
    """Columns for one wavelength axis. p components come first, then the linear background terms.

    Attributes
    ----------
    names, terms
        Component names and linear background terms (without "shift"), in column order.
    wavelength_nm : array (m,)
    X : array (m, q)
        Columns as they multiply the coefficients (absorptivity per cm; shapes of unit size).
    slope : array (m, p)
        d(absorptivity)/d(wavelength), per nm.
    curvature : array (m, p)
        Second derivative, per nm^2: what a fitted shift adds beyond its own column.
    shape_variance : array (m, p)
        Squared standard uncertainty of the absorptivity, wavelength by wavelength (zero where none was stated).
    independent : array (q,) of bool
        Columns that are not dependent on earlier ones.
    Q, Rinv : arrays (m, r), (q, r)
        Orthonormal basis of the r independent columns, and the matrix that turns its coordinates into coefficients
        (rows of dependent columns are zero).
    non_negative : array (q,) of bool
        Coefficients that may not be negative: components and scatter.
    shift : bool
        Whether a wavelength shift is fitted, whose column depends on the spectrum.
    """

    names: tuple[str, ...]
    terms: tuple[str, ...]
    wavelength_nm: FloatArray
    X: FloatArray
    slope: FloatArray
    curvature: FloatArray
    shape_variance: FloatArray
    independent: np.ndarray
    Q: FloatArray
    Rinv: FloatArray
    non_negative: np.ndarray
    shift: bool

    @property
    def p(self) -> int:
        """Number of components."""
        return len(self.names)

    @property
    def unknowns(self) -> int:
        """Number of coefficients fitted, the shift included."""
        return int(self.independent.sum()) + int(self.shift)

    @property
    def asked(self) -> int:
        """Number of coefficients asked for, dependent ones and the shift included: so many readings are needed."""
        return int(self.X.shape[1]) + int(self.shift)

    def of(self, places: Sequence[int]) -> Design:
        """Return the design with some of the components only, factored anew."""
        some = list(places)
        X = np.column_stack([self.X[:, some], self.X[:, self.p :]])
        parts = (self.slope[:, some], self.curvature[:, some], self.shape_variance[:, some])
        return _factored(tuple(self.names[k] for k in some), self.terms, self.wavelength_nm, X, *parts, self.shift)

    def with_background(self, background: Sequence[str]) -> Design:
        """Return the design with other background terms, factored anew."""
        terms = tuple(term for term in background if term != "shift")
        X = np.column_stack([self.X[:, : self.p], *(_background_shape(term, self.wavelength_nm) for term in terms)])
        return _factored(
            self.names, terms, self.wavelength_nm, X, self.slope, self.curvature, self.shape_variance, "shift" in background
        )

    def on(self, keep: np.ndarray) -> Design:
        """Return the design restricted to the wavelengths where `keep` is true, factored anew."""
        return _factored(
            self.names,
            self.terms,
            self.wavelength_nm[keep],
            self.X[keep],
            self.slope[keep],
            self.curvature[keep],
            self.shape_variance[keep],
            self.shift,
        )


def usable_wavelengths(
    wavelength_nm: FloatArray, components: Sequence[Component], settings: ResolveSettings
) -> tuple[np.ndarray, np.ndarray]:
    """Return which readings are wanted, and which of those every component covers: two bool arrays (m,).

    Raises
    ------
    InputError
        When `wavelengths_nm` names a wavelength that is not on the axis.
    """
    wanted = np.ones(wavelength_nm.size, dtype=bool)
    if settings.wavelength_range_nm is not None:
        low, high = settings.wavelength_range_nm
        wanted = (wavelength_nm >= low - SAME_WAVELENGTH_NM) & (wavelength_nm <= high + SAME_WAVELENGTH_NM)
    elif settings.wavelengths_nm is not None:
        wanted = _at(wavelength_nm, settings.wavelengths_nm)
    inside = wanted.copy()
    for component in components:
        inside &= covered(wavelength_nm, component.wavelength_nm)
    return wanted, inside


def build_design(wavelength_nm: FloatArray, components: Sequence[Component], background: Sequence[str]) -> Design:
    """Return the design on an axis that every component covers.

    Raises
    ------
    InputError
        When a wavelength lies outside a component's range (nothing is extrapolated).
    """
    X = [resample(c.wavelength_nm, c.absorptivity, wavelength_nm) for c in components]
    slopes = [derivative(c.wavelength_nm, c.absorptivity) for c in components]
    slope = [resample(c.wavelength_nm, de, wavelength_nm) for c, de in zip(components, slopes, strict=True)]
    curvature = [
        resample(c.wavelength_nm, derivative(c.wavelength_nm, de), wavelength_nm) for c, de in zip(components, slopes, strict=True)
    ]
    variance = [shape_variance(c, wavelength_nm) for c in components]
    terms = tuple(term for term in background if term != "shift")
    shapes = [_background_shape(term, wavelength_nm) for term in terms]
    return _factored(
        tuple(c.name for c in components),
        terms,
        wavelength_nm,
        np.column_stack([*X, *shapes]),
        np.column_stack(slope),
        np.column_stack(curvature),
        np.column_stack(variance),
        "shift" in background,
    )


def orthonormal_factors(X: FloatArray) -> tuple[FloatArray, FloatArray, np.ndarray]:
    """Return (Q, Rinv, independent) with X[:, independent] @ Rinv[independent] == Q, columns scaled to unit norm first.

    A column that depends on earlier ones to the precision of float64 is left out of Q and has a zero row in Rinv.
    """
    m, q = X.shape
    norm = np.sqrt(np.einsum("ij,ij->j", X, X))
    unit = X / np.where(norm > 0, norm, 1.0)
    basis: list[FloatArray] = []
    R = np.zeros((q, q))
    independent = np.zeros(q, dtype=bool)
    for k in range(q):
        rest, coefficients = _orthogonalised(unit[:, k], basis)
        length = float(np.sqrt(rest @ rest))
        if norm[k] == 0 or length < DEPENDENT or len(basis) == m:
            continue
        independent[k] = True
        R[: len(basis), k] = coefficients
        R[len(basis), k] = length
        basis.append(rest / length)
    r = len(basis)
    Rinv = np.zeros((q, r))
    kept = np.flatnonzero(independent)
    Rinv[kept] = np.linalg.inv(R[:r, kept]) / norm[kept, None] if r else np.zeros((0, 0))
    return (np.column_stack(basis) if r else np.zeros((m, 0))), Rinv, independent


def condition_number(design: Design) -> float:
    """Return the ratio of the largest to the smallest singular value of the independent columns at unit norm."""
    unit = design.X / np.maximum(np.sqrt((design.X**2).sum(axis=0)), np.finfo(float).tiny)
    sizes = np.linalg.svd(unit[:, design.independent], compute_uv=False)
    return float(sizes[0] / sizes[-1]) if sizes.size else np.nan


def dependent_components(design: Design) -> np.ndarray:
    """Return which component columns are in an exact linear dependence: the left-out ones and those they are made of; bool (p,)."""
    p = design.p
    involved = ~design.independent & design.X.any(axis=0)
    unit = design.X / np.maximum(np.sqrt((design.X**2).sum(axis=0)), np.finfo(float).tiny)
    kept = np.flatnonzero(design.independent)
    for k in np.flatnonzero(involved):
        weights = np.linalg.lstsq(unit[:, kept], unit[:, k], rcond=None)[0]
        involved[kept[np.abs(weights) > 1e-6]] = True
    return np.asarray(involved[:p])


def _orthogonalised(column: FloatArray, basis: list[FloatArray]) -> tuple[FloatArray, FloatArray]:
    """Return the part of a column orthogonal to the basis and its coordinates; twice is enough (Kahan-Parlett)."""
    rest = column.copy()
    coefficients = np.zeros(len(basis))
    for _ in range(2):
        for k, direction in enumerate(basis):
            along = float(direction @ rest)
            coefficients[k] += along
            rest -= along * direction
    return rest, coefficients


def _factored(
    names: tuple[str, ...],
    terms: tuple[str, ...],
    wavelength_nm: FloatArray,
    X: FloatArray,
    slope: FloatArray,
    curvature: FloatArray,
    shape_variance: FloatArray,
    shift: bool,
) -> Design:
    Q, Rinv, independent = orthonormal_factors(X)
    non_negative = np.array([True] * len(names) + [term == "scatter" for term in terms])
    return Design(names, terms, wavelength_nm, X, slope, curvature, shape_variance, independent, Q, Rinv, non_negative, shift)


def shape_variance(component: Component, wavelength_nm: FloatArray, *, dense: bool = True) -> FloatArray:
    """Return the squared uncertainty of a resampled absorptivity, (m,): as stated, plus what interpolation adds.

    Errors of neighbouring readings between two tabulated points are shared, so a finer axis brings no new information:
    the variance is scaled up by the ratio of the steps, unless the readings are few of that axis (`dense` false).
    """
    between = interpolation_u(component.wavelength_nm, component.absorptivity, wavelength_nm) ** 2
    if component.absorptivity_u is None:
        return between
    stated = np.interp(wavelength_nm, component.wavelength_nm, component.absorptivity_u) ** 2
    steps = (median_step(component.wavelength_nm), median_step(wavelength_nm))
    finer = steps[0] / steps[1] if dense and min(steps) > 0 else 1.0
    return stated * max(1.0, finer) + between


def median_step(axis_nm: FloatArray) -> float:
    """Return the middle one of an axis's steps, in nm; 0 for a single wavelength."""
    # not np.median, which loads numpy's masked arrays: a tenth of a cold start
    return float(np.sort(np.diff(axis_nm))[(axis_nm.size - 1) // 2]) if axis_nm.size > 1 else 0.0


def _background_shape(term: str, wavelength_nm: FloatArray) -> FloatArray:
    """Offset 1; slope from -1 to 1 over the axis; scatter w^-4, 1 at the short end (Rayleigh's law for small particles)."""
    if term == "offset":
        return np.ones(wavelength_nm.size)
    if term == "slope":
        span = wavelength_nm[-1] - wavelength_nm[0]
        return (2 * (wavelength_nm - wavelength_nm[0]) / span - 1) if span > 0 else np.zeros(wavelength_nm.size)
    return np.asarray((wavelength_nm / wavelength_nm[0]) ** -4.0)


def _at(wavelength_nm: FloatArray, wavelengths_nm: Sequence[float]) -> np.ndarray:
    """Bool array (m,): true at the wavelengths asked for; each must be on the axis."""
    chosen = np.zeros(wavelength_nm.size, dtype=bool)
    for position, wanted in enumerate(wavelengths_nm):
        k = int(np.argmin(np.abs(wavelength_nm - wanted)))
        if abs(wavelength_nm[k] - wanted) > SAME_WAVELENGTH_NM:
            raise InputError.single(
                "wavelength-not-measured",
                f".wavelengths_nm[{position}]",
                f"{wanted:g} nm was asked for and not measured; the nearest reading is at {wavelength_nm[k]:g} nm",
                "name wavelengths that are on the sample's axis",
            )
        chosen[k] = True
    return chosen
