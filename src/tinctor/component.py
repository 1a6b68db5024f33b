"""A known absorber: its absorptivity spectrum and what is known about it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from tinctor.arrays import FloatArray, finite_array, non_negative
from tinctor.axis import ascending
from tinctor.errors import Fault, InputError
from tinctor.units import Basis

__all__ = ["Component", "Conditions"]


@dataclass(frozen=True, slots=True)
class Conditions:
    """Under which conditions a spectrum was taken; `None` where it is not known.

    Examples
    --------
    >>> Conditions(solvent="water", ph=7.0).differences(Conditions(solvent="ethanol"))
    ['solvent water against ethanol']
    """

    solvent: str | None = None
    ph: float | None = None
    temperature_c: float | None = None
    bandwidth_nm: float | None = None

    def differences(self, other: Conditions) -> list[str]:
        """Return in words where two sets of conditions, known on both sides, disagree by more than is usual.

        Usual here (common practice, no source): 0.5 in pH, 5 degrees C, a factor of 2 in bandwidth.
        """
        found = []
        if self.solvent and other.solvent and self.solvent.casefold() != other.solvent.casefold():
            found.append(f"solvent {self.solvent} against {other.solvent}")
        if self.ph is not None and other.ph is not None and abs(self.ph - other.ph) > 0.5:
            found.append(f"pH {self.ph:g} against {other.ph:g}")
        if self.temperature_c is not None and other.temperature_c is not None and abs(self.temperature_c - other.temperature_c) > 5:
            found.append(f"{self.temperature_c:g} °C against {other.temperature_c:g} °C")
        if self.bandwidth_nm and other.bandwidth_nm and not 0.5 <= self.bandwidth_nm / other.bandwidth_nm <= 2:
            found.append(f"bandwidth {self.bandwidth_nm:g} nm against {other.bandwidth_nm:g} nm")
        return found


@dataclass(frozen=True, slots=True, eq=False, init=False)
class Component:
    """A pure component's absorptivity spectrum.

    Parameters
    ----------
    name
        Text, not empty.
    wavelength_nm : array (n_wavelengths,)
        Strictly monotonic, in nm; a descending axis is turned round.
    absorptivity : array (n_wavelengths,)
        L mol-1 cm-1 when `basis` is "molar", L g-1 cm-1 when it is "mass"; decadic.
    absorptivity_u : array (n_wavelengths,), optional
        Its standard uncertainty, independent from wavelength to wavelength.
    scale_relative_u
        Relative standard uncertainty common to all wavelengths (purity, weighing, stock); `None` where it is not
        known, which the result then says: it is never taken for exact in silence.
    molar_mass_g_per_mol
        Needed to change between moles and grams.
    linear_to
        Highest concentration times path (mol L-1 cm or g L-1 cm) at which Beer's law was shown to hold.
    analyte
        Components with the same analyte are also reported as one total.

    Raises
    ------
    InputError
        Listing every fault with its place.

    Examples
    --------
    >>> Component("Cu", [400.0, 402.0], [0.2, 0.3], scale_relative_u=0.01).basis
    'molar'
    """

    name: str
    wavelength_nm: FloatArray
    absorptivity: FloatArray
    basis: Basis
    absorptivity_u: FloatArray | None
    scale_relative_u: float | None
    molar_mass_g_per_mol: float | None
    linear_to: float | None
    analyte: str | None
    conditions: Conditions
    caution: str

    def __init__(
        self,
        name: str,
        wavelength_nm: ArrayLike,
        absorptivity: ArrayLike,
        *,
        basis: Basis = "molar",
        absorptivity_u: ArrayLike | None = None,
        scale_relative_u: float | None = None,
        molar_mass_g_per_mol: float | None = None,
        linear_to: float | None = None,
        analyte: str | None = None,
        conditions: Conditions = Conditions(),
        caution: str = "",
    ) -> None:
        axis, turned = ascending(wavelength_nm)
        values = _on_axis(finite_array(absorptivity, "absorptivity", ndim=1), "absorptivity", axis, turned)
        spread = None
        if absorptivity_u is not None:
            spread = _on_axis(non_negative(absorptivity_u, "absorptivity_u", ndim=1), "absorptivity_u", axis, turned)
        faults = [] if name.strip() else [Fault("empty-name", ".name", f"a component needs a name, found {name!r}")]
        if basis not in ("molar", "mass"):
            faults.append(Fault("basis", ".basis", f"basis must be 'molar' or 'mass', found {basis!r}"))
        if not np.any(values > 0):
            faults.append(Fault("no-absorption", ".absorptivity", f"{name!r} absorbs nowhere: every absorptivity is 0 or below"))
        faults += _number_faults("scale_relative_u", scale_relative_u, zero_allowed=True)
        faults += _number_faults("molar_mass_g_per_mol", molar_mass_g_per_mol)
        faults += _number_faults("linear_to", linear_to)
        if faults:
            raise InputError(faults)
        for key, value in (
            ("name", name),
            ("wavelength_nm", axis),
            ("absorptivity", values),
            ("basis", basis),
            ("absorptivity_u", spread),
            ("scale_relative_u", scale_relative_u),
            ("molar_mass_g_per_mol", molar_mass_g_per_mol),
            ("linear_to", linear_to),
            ("analyte", analyte),
            ("conditions", conditions),
            ("caution", caution),
        ):
            object.__setattr__(self, key, value)


def _on_axis(values: FloatArray, name: str, axis: FloatArray, turned: bool) -> FloatArray:
    if values.shape != axis.shape:
        raise InputError.single(
            "wrong-length", f".{name}", f"{name} must have one value per wavelength ({axis.size}), found {values.size}"
        )
    if not turned:
        return values
    flipped = values[::-1].copy()
    flipped.setflags(write=False)
    return flipped


def _number_faults(name: str, value: float | None, *, zero_allowed: bool = False) -> list[Fault]:
    if value is None or (math.isfinite(value) and (value > 0 or (zero_allowed and value == 0))):
        return []
    rule = "at least 0" if zero_allowed else "above 0"
    return [Fault(name.replace("_", "-"), f".{name}", f"{name} must be a finite number {rule}, found {value!r}")]
