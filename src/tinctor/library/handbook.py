"""Published specific absorbances (E 1 %, 1 cm), and what a record's maximum says against them.

absorptivity in L g-1 cm-1 = E(1 %, 1 cm) / 10          (1 % is 10 g/L)
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np

from tinctor.arrays import quoted
from tinctor.axis import covered, resample
from tinctor.component import Component
from tinctor.errors import InputError

__all__ = ["HandbookComparison", "HandbookValue", "compare_with_handbook", "handbook_values"]

#: The maximum is looked for this far from the wavelength in the text: most texts say "about".
NEAR_NM = 5.0


@dataclass(frozen=True, slots=True)
class HandbookValue:
    """One published value: specific absorbance of the pure substance in dL g-1 cm-1."""

    name: str
    substance: str
    cas: str
    solvent: str
    ph: str
    wavelength_nm: float
    specific_absorbance: float
    molar_mass_g_per_mol: float | None
    from_memory: bool
    source: str
    note: str

    @property
    def mass_absorptivity(self) -> float:
        """In L g-1 cm-1."""
        return self.specific_absorbance / 10.0


@dataclass(frozen=True, slots=True)
class HandbookComparison:
    """A component against one published value.

    Attributes
    ----------
    value
        What was published.
    maximum_nm, specific_absorbance
        Highest value of the component within 5 nm of the published wavelength.
    difference_percent
        Component less published, in per cent of the published.
    dye_content_percent
        What share of the weighed material would be the pure substance, if nothing else is amiss.
    at_maximum
        Whether the spectrum has a maximum of its own near the published wavelength.
    """

    value: HandbookValue
    maximum_nm: float
    specific_absorbance: float
    difference_percent: float
    dye_content_percent: float
    at_maximum: bool


@lru_cache(maxsize=1)
def handbook_values() -> tuple[HandbookValue, ...]:
    """Return the shipped table.

    Examples
    --------
    >>> [v.specific_absorbance for v in handbook_values() if v.name == "tartrazine"]
    [530.0]
    """
    package = Path(__file__).resolve().parents[1]
    places = [place / "spectra_library" / "handbook" / "specific_absorbance.csv" for place in (package, package.parents[1])]
    with next(place for place in places if place.is_file()).open(encoding="utf-8", newline="") as file:
        return tuple(
            HandbookValue(
                row["name"],
                row["substance"],
                row["cas"],
                row["solvent"],
                row["ph"],
                float(row["wavelength_nm"]),
                float(row["specific_absorbance"]),
                float(row["molar_mass_g_per_mol"]) if row["molar_mass_g_per_mol"] else None,
                row["from_memory"] == "yes",
                row["source"],
                row["note"],
            )
            for row in csv.DictReader(file)
        )


def compare_with_handbook(component: Component, name: str) -> tuple[HandbookComparison, ...]:
    """Return the comparison with each published value of a substance that lies inside the component's range.

    Raises
    ------
    InputError
        When the table has no such substance, none of its wavelengths is covered, or a molar component has no molar mass.

    Examples
    --------
    >>> dye = Component("lot 7", [420.0, 426.0, 432.0], [44.0, 45.05, 44.1], basis="mass")
    >>> round(compare_with_handbook(dye, "tartrazine")[0].dye_content_percent, 1)
    85.0
    """
    values = [v for v in handbook_values() if name.casefold() in (v.name, v.substance.casefold(), v.cas)]
    if not values:
        import difflib  # loaded to word an error

        names = sorted({v.name for v in handbook_values()})
        close = difflib.get_close_matches(name.lower(), names, n=3, cutoff=0.5)
        hint = f"did you mean {quoted(close)}?" if close else f"it has {quoted(names, 60)}"
        raise InputError.single("unknown-substance", ".handbook", f"the table of published values has no {name!r}", hint)
    if component.basis == "molar" and component.molar_mass_g_per_mol is None:
        raise InputError.single(
            "molar-mass-needed",
            ".handbook",
            "published values are by mass: give molar_mass_g_per_mol to compare a molar absorptivity",
        )
    inside = [v for v in values if covered(np.array([v.wavelength_nm]), component.wavelength_nm)[0]]
    if not inside:
        where = ", ".join(f"{v.wavelength_nm:g}" for v in values)
        raise InputError.single(
            "range-not-covered", ".handbook", f"{name!r} is published at {where} nm, outside the standards' range"
        )
    return tuple(_compared(component, value) for value in inside)


def _compared(component: Component, value: HandbookValue) -> HandbookComparison:
    w = component.wavelength_nm
    near = np.flatnonzero(np.abs(w - value.wavelength_nm) <= NEAR_NM)
    if near.size:
        k = int(near[np.argmax(component.absorptivity[near])])
        at, absorptivity = float(w[k]), float(component.absorptivity[k])
        beside = component.absorptivity[[j for j in (k - 1, k + 1) if 0 <= j < w.size]]
        at_maximum = bool(beside.size == 2 and (beside <= absorptivity).all())
    else:
        at_maximum = False
        at = value.wavelength_nm
        absorptivity = float(resample(w, component.absorptivity, np.array([at]))[0])
    if component.basis == "molar":
        absorptivity /= component.molar_mass_g_per_mol or 1.0
    ratio = absorptivity / value.mass_absorptivity
    return HandbookComparison(value, at, 10.0 * absorptivity, 100.0 * (ratio - 1.0), 100.0 * ratio, at_maximum)
