"""Parts that the documents of several operations share. Keys are those of the contract; a unit stands in every key that has one."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Discriminator, Field, Tag

from tinctor.arrays import FloatArray
from tinctor.component import Component, Conditions
from tinctor.errors import Fault, InputError
from tinctor.noise import NoiseModel
from tinctor.spectrum import Spectrum

__all__ = [
    "BudgetPart",
    "ComponentChoice",
    "ComponentIn",
    "ConditionsIn",
    "FlagOut",
    "NoiseIn",
    "RecordUsed",
    "RequestModel",
    "ResponseModel",
    "SpectrumIn",
    "gather",
]

#: The longest list of numbers or spectra in a request.
LONGEST = 100_000

Number = Annotated[float, Field(allow_inf_nan=False)]
Numbers = Annotated[list[Number], Field(min_length=1, max_length=LONGEST)]


class RequestModel(BaseModel):
    """Base of what comes in: strict types, finite numbers, no unknown keys."""

    model_config = ConfigDict(
        strict=True, extra="forbid", allow_inf_nan=False, frozen=True, populate_by_name=True, defer_build=True
    )


class ResponseModel(BaseModel):
    """Base of what goes out. Every number is finite; what cannot be stood behind is null."""

    model_config = ConfigDict(allow_inf_nan=False, frozen=True, populate_by_name=True, defer_build=True)


class SpectrumIn(RequestModel):
    """One measured absorbance spectrum with its cell and dilution."""

    id: str = Field(description="the sample's name")
    wavelength_nm: Numbers = Field(description="wavelengths in nm, strictly rising or falling")
    absorbance: Numbers = Field(description="decadic absorbance at each wavelength")
    path_length_cm: Number = Field(1.0, description="path length of the cell in cm")
    path_length_u_cm: Number = Field(0.0, description="its standard uncertainty; 0 takes it as exact")
    dilution_factor: Number = Field(1.0, description="final volume over taken volume")
    dilution_factor_u: Number = Field(0.0, description="its standard uncertainty; 0 takes it as exact")
    absorbance_u: Numbers | None = Field(None, description="standard uncertainty of each reading, in place of the noise model's")

    def to_spectrum(self) -> Spectrum:
        """Return the domain value."""
        return Spectrum(
            self.id,
            self.wavelength_nm,
            self.absorbance,
            path_length_cm=self.path_length_cm,
            path_length_u_cm=self.path_length_u_cm,
            dilution_factor=self.dilution_factor,
            dilution_factor_u=self.dilution_factor_u,
            absorbance_u=self.absorbance_u,
        )

    @classmethod
    def of(cls, spectrum: Spectrum) -> SpectrumIn:
        """Return the document part for a domain value."""
        return cls.model_construct(
            id=spectrum.id,
            wavelength_nm=spectrum.wavelength_nm.tolist(),
            absorbance=spectrum.absorbance.tolist(),
            path_length_cm=spectrum.path_length_cm,
            path_length_u_cm=spectrum.path_length_u_cm,
            dilution_factor=spectrum.dilution_factor,
            dilution_factor_u=spectrum.dilution_factor_u,
            absorbance_u=_listed(spectrum.absorbance_u),
        )


class ConditionsIn(RequestModel):
    """Conditions of a measurement; what is not known is left out."""

    solvent: str | None = None
    ph: Number | None = None
    temperature_c: Number | None = None
    bandwidth_nm: Number | None = None

    def to_conditions(self) -> Conditions:
        """Return the domain value."""
        return Conditions(self.solvent, self.ph, self.temperature_c, self.bandwidth_nm)


class ComponentIn(RequestModel):
    """A component given inline: molar or mass absorptivity on its own axis."""

    name: str
    wavelength_nm: Numbers
    molar_absorptivity: Numbers | None = Field(None, description="L mol-1 cm-1; this or mass_absorptivity")
    mass_absorptivity: Numbers | None = Field(None, description="L g-1 cm-1; this or molar_absorptivity")
    absorptivity_u: Numbers | None = Field(None, description="standard uncertainty at each wavelength")
    scale_relative_u: Number | None = Field(None, description="relative standard uncertainty common to all wavelengths")
    molar_mass_g_per_mol: Number | None = None
    linear_to: Number | None = Field(None, description="highest concentration times path shown to follow Beer's law")
    analyte: str | None = Field(None, description="components of one analyte are also reported as a total")
    conditions: ConditionsIn | None = None

    def to_component(self) -> Component:
        """Return the domain value.

        Raises
        ------
        InputError
            When not exactly one of the two absorptivities is given, or a value cannot be.
        """
        given = [self.molar_absorptivity is not None, self.mass_absorptivity is not None]
        if sum(given) != 1:
            found = "both" if all(given) else "neither"
            raise InputError.single(
                "one-absorptivity", "", f"component {self.name!r} needs molar_absorptivity or mass_absorptivity, found {found}"
            )
        molar = self.molar_absorptivity is not None
        return Component(
            self.name,
            self.wavelength_nm,
            self.molar_absorptivity if self.molar_absorptivity is not None else self.mass_absorptivity or [],
            basis="molar" if molar else "mass",
            absorptivity_u=self.absorptivity_u,
            scale_relative_u=self.scale_relative_u,
            molar_mass_g_per_mol=self.molar_mass_g_per_mol,
            linear_to=self.linear_to,
            analyte=self.analyte,
            conditions=self.conditions.to_conditions() if self.conditions else Conditions(),
        )


def _kind_of_component(value: Any) -> str:
    return "by-name" if isinstance(value, str) else "inline"


#: A component by its name in the library, or given inline.
ComponentChoice = Annotated[
    Annotated[str, Tag("by-name")] | Annotated[ComponentIn, Tag("inline")],
    Discriminator(_kind_of_component),
]


class NoiseIn(RequestModel):
    """Standard uncertainties of a reading, of transmittance (as a fraction) and of the wavelength axis."""

    floor: Number = NoiseModel().floor
    transmittance: Number = NoiseModel().transmittance
    wavelength_nm: Number = NoiseModel().wavelength_nm

    def to_noise(self) -> NoiseModel:
        """Return the domain value."""
        return NoiseModel(self.floor, self.transmittance, self.wavelength_nm)


class BudgetPart(ResponseModel):
    """One source of uncertainty, as a standard uncertainty of the concentration."""

    source: str
    u: float | None


class FlagOut(ResponseModel):
    """Something that needs a look, in words."""

    code: str
    severity: Literal["info", "warning", "refusal"]
    message: str
    components: list[str] = []
    wavelength_nm: list[float] = []


class RecordUsed(ResponseModel):
    """A library record that a result rests on."""

    name: str
    record: str
    sha256: str
    caution: str = Field("", description="what the record warns of")


def gather(parts: list[tuple[str, Any]]) -> list[Any]:
    """Call each function and return the results; all the faults of all of them go into one error.

    Parameters
    ----------
    parts
        (JSON path, function of no arguments) for each value.
    """
    results: list[Any] = []
    faults: list[Fault] = []
    for path, make in parts:
        try:
            results.append(make())
        except InputError as error:
            faults += error.at(path).faults
    if faults:
        raise InputError(faults)
    return results


def _listed(array: FloatArray | None) -> list[float] | None:
    return None if array is None else array.tolist()
