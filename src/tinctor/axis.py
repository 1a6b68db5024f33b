"""Wavelength axes: checked, turned to ascending order, and resampled without ever extrapolating.

Resampling is by the piecewise cubic Hermite interpolant of Fritsch and Butland (SIAM J. Sci. Stat. Comput. 5
(1984) 300, doi 10.1137/0905021): it passes through every tabulated point and never overshoots between them, so a
band edge or a saturated flank gives rise to no wiggle that was not measured.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from tinctor.arrays import FloatArray, finite_array, read_only
from tinctor.errors import InputError

__all__ = [
    "INTERPOLATION_METHOD",
    "WAVELENGTH_LIMITS_NM",
    "ascending",
    "covered",
    "derivative",
    "interpolation_u",
    "resample",
    "wavelength_axis",
]

INTERPOLATION_METHOD: Final = "piecewise cubic Hermite (Fritsch-Butland), no extrapolation"

#: UV-visible and near-infrared solution spectra lie well inside; a wavenumber or micrometre axis lies outside.
WAVELENGTH_LIMITS_NM: Final = (100.0, 3000.0)

#: Two axes are the same point for point when no wavelength differs by more than this.
SAME_WAVELENGTH_NM: Final = 1e-6


def ascending(wavelength_nm: ArrayLike) -> tuple[FloatArray, bool]:
    """Return the axis in ascending order, and whether it had to be turned round.

    Parameters
    ----------
    wavelength_nm : array (n_wavelengths,)
        Finite and strictly monotonic, in nm.

    Raises
    ------
    InputError
        For no points, a value that is not finite, a repeated wavelength, a change of direction, or values that
        cannot be nanometres; the message names index and value.

    Examples
    --------
    >>> ascending([500.0, 450.0, 400.0])
    (array([400., 450., 500.]), True)
    """
    axis = finite_array(wavelength_nm, "wavelength_nm", ndim=1, unit="nm")
    if axis.size == 0:
        raise InputError.single("empty-axis", ".wavelength_nm", "wavelength_nm must hold at least one wavelength, found none")
    step = np.diff(axis)
    falling = bool(axis.size > 1 and axis[-1] < axis[0])
    wrong = np.flatnonzero(step >= 0 if falling else step <= 0)
    if wrong.size:
        raise _not_monotonic(axis, int(wrong[0]), falling)
    low, high = float(axis.min()), float(axis.max())
    if low < WAVELENGTH_LIMITS_NM[0] or high > WAVELENGTH_LIMITS_NM[1]:
        raise InputError.single(
            "axis-not-nm",
            ".wavelength_nm",
            f"expected wavelengths in nm between {WAVELENGTH_LIMITS_NM[0]:g} and {WAVELENGTH_LIMITS_NM[1]:g}, "
            f"found {low:g} to {high:g}",
            "convert micrometres (x 1000) or wavenumbers (1e7 / cm-1) to nm first",
        )
    return (read_only(axis[::-1]), True) if falling else (axis, False)


def wavelength_axis(wavelength_nm: ArrayLike) -> FloatArray:
    """Return a checked axis that must already ascend (domain values hold no other)."""
    axis, turned = ascending(wavelength_nm)
    if turned:
        raise InputError.single("axis-descending", ".wavelength_nm", "wavelengths must ascend here, found a descending axis")
    return axis


def covered(wavelength_nm: FloatArray, by_nm: FloatArray) -> np.ndarray:
    """Return which wavelengths lie within the range of the axis `by_nm` (no extrapolation), shape (n_wavelengths,)."""
    inside: np.ndarray = (wavelength_nm >= by_nm[0] - SAME_WAVELENGTH_NM) & (wavelength_nm <= by_nm[-1] + SAME_WAVELENGTH_NM)
    return inside


def resample(wavelength_nm: FloatArray, values: FloatArray, onto_nm: FloatArray) -> FloatArray:
    """Return `values` interpolated onto another axis inside the range of the first.

    Parameters
    ----------
    wavelength_nm : array (n,)
        Ascending, in nm.
    values : array (n,)
        One value per wavelength.
    onto_nm : array (m,)
        Wavelengths wanted; each must be covered.

    Returns
    -------
    array (m,)
        Exactly the tabulated values where the wavelengths coincide.

    Raises
    ------
    InputError
        When a wanted wavelength lies outside: nothing is extrapolated.

    Examples
    --------
    >>> import numpy as np
    >>> resample(np.array([400.0, 410.0]), np.array([0.0, 1.0]), np.array([405.0]))
    array([0.5])
    """
    outside = np.flatnonzero(~covered(onto_nm, wavelength_nm))
    if outside.size:
        first = int(outside[0])
        raise InputError.single(
            "extrapolation",
            f".wavelength_nm[{first}]",
            f"{onto_nm[first]:g} nm lies outside the tabulated range {wavelength_nm[0]:g} to {wavelength_nm[-1]:g} nm",
            "narrow the wavelength range: nothing is extrapolated",
        )
    if wavelength_nm.size == 1:
        return np.full(onto_nm.size, values[0])
    slope = _node_slopes(wavelength_nm, values)
    k = np.clip(np.searchsorted(wavelength_nm, onto_nm, side="right") - 1, 0, wavelength_nm.size - 2)
    h = wavelength_nm[k + 1] - wavelength_nm[k]
    t = np.clip((onto_nm - wavelength_nm[k]) / h, 0.0, 1.0)
    rise = (values[k + 1] - values[k]) / h
    inner = (slope[k] - rise) * (1 - t) - (slope[k + 1] - rise) * t
    result: FloatArray = values[k] * (1 - t) + values[k + 1] * t + h * t * (1 - t) * inner
    return np.where(t == 0.0, values[k], np.where(t == 1.0, values[k + 1], result))


def interpolation_u(wavelength_nm: FloatArray, values: FloatArray, onto_nm: FloatArray) -> FloatArray:
    """Return a standard uncertainty for what lies between tabulated points, shape (m,); zero on them.

    A third of the distance between the cubic and the straight line through the neighbours: an estimate by
    judgement (common practice, no source), large where the table is coarse against its bands.
    """
    cubic = resample(wavelength_nm, values, onto_nm)
    return np.abs(cubic - np.interp(onto_nm, wavelength_nm, values)) / 3.0


def derivative(wavelength_nm: FloatArray, values: FloatArray) -> FloatArray:
    """Return d(values)/d(wavelength) per nm along the last axis: second-order differences, uneven steps allowed."""
    if wavelength_nm.size < 2:
        return np.zeros_like(values)
    slope: FloatArray = np.gradient(values, wavelength_nm, axis=-1, edge_order=2 if wavelength_nm.size > 2 else 1)
    return slope


def _node_slopes(x: FloatArray, y: FloatArray) -> FloatArray:
    """Slopes at the nodes by the weighted harmonic mean; zero at a turning point."""
    h = np.diff(x)
    rise = np.diff(y) / h
    if x.size == 2:
        return np.array([rise[0], rise[0]])
    slope = np.zeros_like(y)
    same_sign = rise[:-1] * rise[1:] > 0
    w1, w2 = 2 * h[1:] + h[:-1], h[1:] + 2 * h[:-1]
    with np.errstate(divide="ignore", invalid="ignore"):
        harmonic = (w1 + w2) / (w1 / rise[:-1] + w2 / rise[1:])
    slope[1:-1] = np.where(same_sign, harmonic, 0.0)
    slope[0] = _end_slope(h[0], h[1], rise[0], rise[1])
    slope[-1] = _end_slope(h[-1], h[-2], rise[-1], rise[-2])
    return slope


def _end_slope(h0: float, h1: float, rise0: float, rise1: float) -> float:
    """One-sided three-point slope, kept from overshooting."""
    slope = ((2 * h0 + h1) * rise0 - h0 * rise1) / (h0 + h1)
    if slope * rise0 <= 0:
        return 0.0
    if rise0 * rise1 <= 0 and abs(slope) > 3 * abs(rise0):
        return float(3 * rise0)
    return float(slope)


def _not_monotonic(axis: FloatArray, k: int, falling: bool) -> InputError:
    if axis[k] == axis[k + 1]:
        return InputError.single(
            "duplicate-wavelength",
            f".wavelength_nm[{k + 1}]",
            f"wavelength_nm[{k + 1}] repeats {axis[k]:g} nm of wavelength_nm[{k}]; each wavelength may stand once",
            "remove one of the readings, or average them yourself if they are repeats",
        )
    way = "fall" if falling else "rise"
    return InputError.single(
        "axis-not-monotonic",
        f".wavelength_nm[{k + 1}]",
        f"wavelengths must {way} throughout, found {axis[k + 1]:g} nm after {axis[k]:g} nm at index {k + 1}",
        "sort the readings by wavelength",
    )
