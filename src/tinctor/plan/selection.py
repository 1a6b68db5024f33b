"""What a set of wavelengths is worth: variances of the concentrations, and three criteria made from them.

Each candidate wavelength i brings the information z_i z_i' about the coefficients, weighted by the variance of a reading at
the planned absorbance. A set S has M = sum z_i z_i', and the relative concentrations have the covariance C = T M^-1 T'.
More readings never raise a criterion, and each is convex in the information: that is what `bound` builds on.

    worst-relative-u   sqrt(max C_jj)           the relative standard uncertainty of the worst component (E-like, minimax)
    trace              sqrt(mean C_jj)          their root mean square (A-optimal)
    determinant        det(C)^(1/2p)            their geometric mean along the axes of the joint region (D-optimal)
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from tinctor.arrays import FloatArray

__all__ = ["CRITERIA", "Criterion", "Problem", "criterion_value", "objectives", "objectives_of"]

Criterion = Literal["worst-relative-u", "determinant", "trace"]
CRITERIA: Final[tuple[Criterion, ...]] = ("worst-relative-u", "determinant", "trace")

#: Added to the diagonal of M (whose eigenvalues for all candidates are 1), so that a singular set is bad and not an error.
RIDGE: Final = 1e-15
#: Sets judged at a time.
CHUNK: Final = 4096


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """Which k of n candidates?

    Attributes
    ----------
    wavelength_nm : array (n,)
        Ascending.
    Z : array (n, q)
        Weighted rows in coordinates in which all candidates together have M = I.
    T : array (p, q)
        From coordinates to relative concentrations.
    criterion
        What is to be small.
    spacing_nm
        Smallest distance between two chosen wavelengths; 0 for none.
    shifted : array (n, s), optional
        Weighted change of each reading for each of s errors of the wavelength axis: the worst of them counts as a bias.
    """

    wavelength_nm: FloatArray
    Z: FloatArray
    T: FloatArray
    criterion: Criterion
    spacing_nm: float = 0.0
    shifted: FloatArray | None = None

    @property
    def n(self) -> int:
        """Number of candidates."""
        return len(self.Z)

    @property
    def unknowns(self) -> int:
        """Coefficients to determine: so many wavelengths are needed."""
        return int(self.Z.shape[1])

    def previous(self) -> np.ndarray:
        """Return for each candidate the last one that may stand before it, or -1, int array (n,)."""
        if self.spacing_nm <= 0:
            return np.arange(self.n) - 1
        # a hair of tolerance: 400.1 + 0.2 must not count as closer than 0.2
        reach = np.searchsorted(self.wavelength_nm, self.wavelength_nm - self.spacing_nm * (1 - 1e-9), side="right") - 1
        return np.minimum(reach, np.arange(self.n) - 1)


def objectives(problem: Problem, sets: np.ndarray) -> FloatArray:
    """Return the objective of each set: the squared criterion, or log det C for the determinant.

    Parameters
    ----------
    sets : int array (N, k)
        Candidate numbers.

    Returns
    -------
    array (N,)
        Huge where a set does not determine the coefficients.
    """
    parts = []
    for start in range(0, len(sets), CHUNK):
        rows = problem.Z[sets[start : start + CHUNK]]
        M = np.swapaxes(rows, 1, 2) @ rows
        moved = None
        if problem.shifted is not None:
            moved = np.swapaxes(rows, 1, 2) @ problem.shifted[sets[start : start + CHUNK]]
        parts.append(objectives_of(problem, M, moved))
    return np.concatenate(parts)


def objectives_of(problem: Problem, M: FloatArray, moved: FloatArray | None) -> FloatArray:
    """Return the objective of information matrices (N, q, q), with Z' of the shifted readings (N, q, s) where they count."""
    inverse = np.linalg.inv(M + RIDGE * np.eye(M.shape[-1]))
    half = problem.T @ inverse
    C = half @ problem.T.T
    if problem.criterion == "determinant":
        value = _logdet(C)
        if moved is not None:
            bias = half @ moved
            # a hair on the diagonal: sets that determine nothing have a singular C too
            hair = 1e-13 * np.einsum("njj->n", C)[:, None, None] * np.eye(C.shape[-1])
            inner = np.einsum("njs,njs->ns", bias, np.linalg.solve(C + hair, bias))
            value = value + np.log1p(np.maximum(inner, 0.0)).max(axis=1)
        return value
    variance = np.abs(np.einsum("njj->nj", C))
    if moved is None:
        return np.asarray(variance.max(axis=1) if problem.criterion == "worst-relative-u" else variance.mean(axis=1))
    square = variance[:, :, None] + (half @ moved) ** 2
    judged = square.max(axis=1) if problem.criterion == "worst-relative-u" else square.mean(axis=1)
    return np.asarray(judged.max(axis=1))


def criterion_value(problem: Problem, objective: float) -> float:
    """Return the criterion as a relative standard uncertainty from an objective."""
    if problem.criterion == "determinant":
        return float(np.exp(min(objective / (2 * len(problem.T)), 700.0)))
    return float(np.sqrt(objective))


def _logdet(C: FloatArray) -> FloatArray:
    sign, value = np.linalg.slogdet(C)
    return np.where(sign > 0, value, 1e300)
