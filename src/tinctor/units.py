"""Concentration units: a closed table, converted at the edge.

Inside the package a concentration is in mol/L where the component's absorptivity is molar and in g/L where it
is by mass. `conversion_factor` turns that into the unit a user asked for.

    >>> conversion_factor("molar", "mg/L", molar_mass_g_per_mol=250.0)
    250000.0
    >>> conversion_factor("mass", "mg/L")
    1000.0
"""

from __future__ import annotations

from typing import Final, Literal

from tinctor.errors import InputError

__all__ = ["BASE_UNIT", "CONCENTRATION_UNITS", "Basis", "check_unit", "conversion_factor"]

#: What an absorptivity counts: moles (L mol-1 cm-1) or grams as weighed (L g-1 cm-1).
Basis = Literal["molar", "mass"]

BASE_UNIT: Final[dict[Basis, str]] = {"molar": "mol/L", "mass": "g/L"}

#: unit name -> (basis, how many of the unit make one base unit)
CONCENTRATION_UNITS: Final[dict[str, tuple[Basis, float]]] = {
    "mol/L": ("molar", 1.0),
    "mmol/L": ("molar", 1e3),
    "umol/L": ("molar", 1e6),
    "g/L": ("mass", 1.0),
    "mg/L": ("mass", 1e3),
    "ug/L": ("mass", 1e6),
}


def check_unit(unit: str, path: str = "$.concentration_unit") -> str:
    """Return `unit` when it is in the table.

    Raises
    ------
    InputError
        When it is not, naming the units that are.
    """
    if unit not in CONCENTRATION_UNITS:
        raise InputError.single(
            "unknown-unit", path, f"expected a concentration unit, found {unit!r}", f"one of {' '.join(CONCENTRATION_UNITS)}"
        )
    return unit


def conversion_factor(basis: Basis, unit: str, molar_mass_g_per_mol: float | None = None, name: str = "the component") -> float:
    """Return how many `unit` make one base unit (mol/L or g/L) of a component.

    Parameters
    ----------
    basis
        "molar" or "mass": the basis of the component's absorptivity.
    unit
        The unit wanted, one of `CONCENTRATION_UNITS`.
    molar_mass_g_per_mol
        Needed when the unit and the absorptivity are on different bases.
    name
        The component's name, for the message.

    Raises
    ------
    InputError
        For an unknown unit, or when the molar mass is needed and not given.
    """
    target, factor = CONCENTRATION_UNITS[check_unit(unit)]
    if target == basis:
        return factor
    if molar_mass_g_per_mol is None:
        raise InputError.single(
            "molar-mass-needed",
            "$.concentration_unit",
            f"{unit} from a {basis} absorptivity needs the molar mass of {name!r}, which is not given",
            f"give molar_mass_g_per_mol, or ask for a unit on the {basis} basis such as {BASE_UNIT[basis]}",
        )
    return factor * molar_mass_g_per_mol if target == "mass" else factor / molar_mass_g_per_mol
