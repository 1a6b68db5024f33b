"""The uncertainty budget of each concentration (GUM, JCGM 100:2008, first-order propagation).

Six sources, each with its own covariance over the components of a spectrum:

    noise          readings, independent from wavelength to wavelength; inflated where the residuals are larger than declared
                   or correlated (fewer effective points)
    library-shape  absorptivity errors, independent from wavelength to wavelength
    wavelength     one shift of the axis, common to all wavelengths
    library-scale  purity, weighing, stock: passes to the component's own concentration 1:1 and leaves no trace in the fit
    path-length, dilution   common to all components of the spectrum

The last three are invisible in any residual: they come from what is declared, or they are not there at all.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.component import Component
from tinctor.noise import NoiseModel
from tinctor.resolve.fit import FitBlock, FitColumns
from tinctor.resolve.quantiles import normal_quantile
from tinctor.resolve.small import Cholesky, packed_index, packed_pairs, unpacked

__all__ = ["SOURCES", "Cell", "Estimates", "estimates", "limits_of_detection"]

#: Sources in the order of a budget.
SOURCES: Final = ("noise", "library-scale", "library-shape", "path-length", "dilution", "wavelength")

#: One-sided error probability of decision and detection limits (ISO 11843, Currie 1995).
LIMIT_LEVEL: Final = 0.95


@dataclass(frozen=True, slots=True, eq=False)
class Cell:
    """Path and dilution of n spectra: what turns a fitted coefficient s = c b / D into a concentration.

    Attributes
    ----------
    factor : array (n,)
        D / b, per cm.
    path_relative_u, dilution_relative_u : arrays (n,)
    """

    factor: FloatArray
    path_relative_u: FloatArray
    dilution_relative_u: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Estimates:
    """Unconstrained estimates of n spectra with p components and their covariance.

    Attributes
    ----------
    coefficients : array (n, q)
        All coefficients as fitted (s per cm, then background, then the shift when fitted).
    coefficient_covariance : array (n, q, q)
        (X' W X)^-1: the metric of the fit.
    background_u : array (n, q - p)
        Standard uncertainties of the background coefficients.
    concentration : array (n, p)
        In the original sample, in mol/L or g/L.
    covariance : array (n, p, p)
        Of the concentrations, all sources.
    budget : array (n, p, 6)
        Standard uncertainties by source, in the order of `SOURCES`.
    u_at_zero : array (n, p)
        Standard uncertainty each would have at zero concentration, the others as they are; with the weights of this fit, so that
        for a component far above its limit it is on the large side.
    proportional : array (n, p)
        Relative standard uncertainty of the sources that grow with the concentration.
    relative_per_nm : array (n, p)
        Change of the concentration per nm shift of the axis.
    variance_inflation : array (n, p)
        How much the other columns raise the variance: 1 / selectivity^2.
    correlation : array (n, p, p)
        Of the estimates under the fit's own metric: near -1 for components that can be exchanged.
    """

    coefficients: FloatArray
    coefficient_covariance: FloatArray
    background_u: FloatArray
    concentration: FloatArray
    covariance: FloatArray
    budget: FloatArray
    u_at_zero: FloatArray
    proportional: FloatArray
    relative_per_nm: FloatArray
    variance_inflation: FloatArray
    correlation: FloatArray


def estimates(
    columns: FitColumns,
    block: FitBlock,
    components: Sequence[Component],
    cell: Cell,
    noise: NoiseModel,
    noise_inflation: FloatArray,
) -> Estimates:
    """Return estimates, budget and covariance of a fitted block.

    Parameters
    ----------
    noise_inflation : array (n,)
        Factor on the variance of the noise part, at least 1.
    """
    p = len(components)
    basis = _coordinates_to_coefficients(columns)
    z = block.coordinates @ basis.T
    inverse = Cholesky(block.gram, columns.k).inverse()
    to_coefficients = basis @ inverse
    metric = to_coefficients @ basis.T
    visible, noise_covariance, shape_covariance = _reading_parts(columns, block, to_coefficients, noise_inflation)
    s = z[:, :p]
    per_nm = to_coefficients @ block.slope_gram
    shift = np.einsum("nqp,np->nq", per_nm, s)
    scale = np.array([c.scale_relative_u or 0.0 for c in components])
    variance = _component_variances(s, noise_covariance, shape_covariance, shift[:, :p], noise, scale, cell)
    own_shift = shift[:, :p] - s * np.einsum("npp->np", per_nm[:, :p])
    at_zero = variance[..., 0] + variance[..., 2] + (noise.wavelength_nm * own_shift) ** 2
    common = cell.path_relative_u**2 + cell.dilution_relative_u**2
    covariance = visible[:, :p, :p] + noise.wavelength_nm**2 * shift[:, :p, None] * shift[:, None, :p]
    covariance += common[:, None, None] * s[:, :, None] * s[:, None, :]
    covariance[:, np.arange(p), np.arange(p)] += (scale * s) ** 2
    factor = cell.factor[:, None]
    spread = np.sqrt(np.einsum("nii->ni", metric))
    return Estimates(
        coefficients=z,
        coefficient_covariance=metric,
        background_u=np.sqrt(np.einsum("nii->ni", visible)[:, p:] + (noise.wavelength_nm * shift[:, p:]) ** 2),
        concentration=s * factor,
        covariance=covariance * factor[..., None] ** 2,
        budget=np.sqrt(variance) * factor[..., None],
        u_at_zero=np.sqrt(at_zero) * factor,
        proportional=np.sqrt(scale**2 + common[:, None]),
        relative_per_nm=np.divide(shift[:, :p], s, out=np.zeros_like(s), where=s != 0),
        variance_inflation=_variance_inflation(columns, block, metric, p),
        correlation=(metric / np.where(spread > 0, spread, 1.0)[:, :, None] / np.where(spread > 0, spread, 1.0)[:, None, :])[
            :, :p, :p
        ],
    )


def limits_of_detection(u_at_zero: FloatArray, proportional: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return (decision limit, detection limit), each (n, p), with error probabilities of 5 % (Currie 1995, ISO 11843).

    L_C = z u0. L_D solves L_D = L_C + z u(L_D) with u(c)^2 = u0^2 + (proportional c)^2, which gives
    L_D = 2 L_C / (1 - (z proportional)^2); infinite where the proportional part alone is too large.

    Examples
    --------
    >>> decision, detection = limits_of_detection(np.array([[1.0]]), np.array([[0.0]]))
    >>> decision.round(4), detection.round(4)
    (array([[1.6449]]), array([[3.2897]]))
    """
    z = normal_quantile(LIMIT_LEVEL)
    decision = z * u_at_zero
    left = 1.0 - (z * proportional) ** 2
    return decision, np.where(left > 0, 2.0 * decision / np.where(left > 0, left, 1.0), np.inf)


def _reading_parts(
    columns: FitColumns, block: FitBlock, to_coefficients: FloatArray, noise_inflation: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Covariances of the coefficients from independent reading errors: both parts, noise alone, shape alone."""
    transposed = np.swapaxes(to_coefficients, 1, 2)
    noise_part = to_coefficients @ unpacked(block.noise_gram, columns.k) @ transposed
    noise_part *= noise_inflation[:, None, None]
    if not columns.design.shape_variance.any():
        return noise_part, noise_part, np.zeros_like(noise_part)
    shape_part = to_coefficients @ unpacked(block.shape_gram, columns.k) @ transposed
    return noise_part + shape_part, noise_part, shape_part


def _component_variances(
    s: FloatArray,
    noise_covariance: FloatArray,
    shape_covariance: FloatArray,
    shift: FloatArray,
    noise: NoiseModel,
    scale: FloatArray,
    cell: Cell,
) -> FloatArray:
    """Variances (n, p, 6) of the coefficients in the order of `SOURCES`."""
    p = s.shape[1]
    variance = np.empty((*s.shape, len(SOURCES)))
    variance[..., 0] = np.maximum(np.einsum("nii->ni", noise_covariance)[:, :p], 0.0)
    variance[..., 1] = (scale * s) ** 2
    variance[..., 2] = np.maximum(np.einsum("nii->ni", shape_covariance)[:, :p], 0.0)
    variance[..., 3] = (cell.path_relative_u[:, None] * s) ** 2
    variance[..., 4] = (cell.dilution_relative_u[:, None] * s) ** 2
    variance[..., 5] = (noise.wavelength_nm * shift) ** 2
    return variance


def _coordinates_to_coefficients(columns: FitColumns) -> FloatArray:
    basis = columns.design.Rinv
    if not columns.design.shift:
        return basis
    q, r = basis.shape
    extended = np.zeros((q + 1, r + 1))
    extended[:q, :r] = basis
    extended[q, r] = 1.0
    return extended


def _variance_inflation(columns: FitColumns, block: FitBlock, metric: FloatArray, p: int) -> FloatArray:
    """(X' W X)_jj ((X' W X)^-1)_jj, with the first factor from X = Q R of the design."""
    R = columns.design.Q.T @ columns.design.X[:, :p]
    rows, cols = packed_pairs(columns.r)
    products = R[rows] * R[cols] * np.where(rows == cols, 1.0, 2.0)[:, None]
    size = block.gram[:, packed_index(columns.k)[rows, cols]] @ products
    inflation: FloatArray = np.maximum(size * np.einsum("nii->ni", metric)[:, :p], 1.0)
    return inflation
