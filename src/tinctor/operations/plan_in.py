"""What the requests of overlap, wavelengths and dilution share: a sample that has not been measured."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field

from tinctor.errors import InputError
from tinctor.operations.components_in import components_of, units_of
from tinctor.operations.shared import (
    ComponentChoice,
    FlagOut,
    NoiseIn,
    Number,
    Numbers,
    RecordUsed,
    RequestModel,
    ResponseModel,
    gather,
)
from tinctor.plan.sample import PlannedSample, planned_sample
from tinctor.resolve.batch_notes import batch_notes
from tinctor.resolve.resolution import Severity
from tinctor.resolve.settings import ResolveSettings

__all__ = [
    "CellPlanRequest",
    "Plan",
    "PlanRequest",
    "PlannedConcentration",
    "PlannedOut",
    "SpectraOut",
    "finite",
    "planned_flags",
    "planned_out",
    "spectra_out",
]


class PlanRequest(RequestModel):
    """A planned sample and how it will be resolved."""

    library: str | None = Field(None, description="collection of the components named; not needed when all are inline")
    components: list[ComponentChoice] = Field(min_length=1, max_length=60, description="names in the library, or components inline")
    concentration_unit: str | None = Field(
        None, description="mol/L mmol/L umol/L g/L mg/L ug/L; when left out, mol/L for molar components and g/L for those by mass"
    )
    concentrations: dict[str, Number] | None = Field(
        None, description="planned, by name, in the original sample; when left out, equal absorbances that together reach 0.8"
    )
    background: list[Literal["offset", "slope", "scatter", "shift"]] = Field(default=["offset"])
    wavelength_range_nm: Annotated[list[Number], Field(min_length=2, max_length=2)] | None = None
    wavelengths_nm: Numbers | None = None
    step_nm: Number | None = Field(None, description="distance of the readings; that of the coarsest record when left out")
    absorbance_limit: Number = 2.0
    noise_correlation_nm: Number = Field(
        0.0, description="distance over which errors of neighbouring readings are alike; 0 where they are independent"
    )
    noise: NoiseIn = NoiseIn()
    target_relative_u: Number | None = Field(None, description="relative standard uncertainty wanted of each component")
    include_spectra: bool = Field(default=False, description="put the planned spectra into the response, for a chart")


class CellPlanRequest(PlanRequest):
    """A planned sample in a cell and at a dilution that are settled."""

    path_length_cm: Number = Field(1.0, description="path length of the cell in cm")
    path_length_u_cm: Number = Field(0.0, description="its standard uncertainty; 0 takes it as exact")
    dilution_factor: Number = Field(1.0, description="final volume over taken volume")
    dilution_factor_u: Number = Field(0.0, description="its standard uncertainty; 0 takes it as exact")

    def cell(self) -> dict[str, float]:
        """Return path and dilution by name."""
        return {name: getattr(self, name) for name in CellPlanRequest.model_fields if name not in PlanRequest.model_fields}


class PlannedConcentration(ResponseModel):
    """One planned concentration."""

    name: str
    concentration: float
    unit: str


class PlannedOut(ResponseModel):
    """The sample that was planned."""

    concentrations: list[PlannedConcentration]
    assumed: bool = Field(description="whether the concentrations were assumed, because none was planned")
    path_length_cm: float
    dilution_factor: float
    wavelength_nm: list[float] = Field(description="lowest and highest wavelength read")
    readings: int
    highest_absorbance: float
    highest_nm: float


class SpectraOut(ResponseModel):
    """Planned spectra: absorptivity and planned absorbance of each component, on the wavelengths read."""

    wavelength_nm: list[float]
    names: list[str]
    absorptivity: list[list[float]] = Field(description="by component; L mol-1 cm-1 or L g-1 cm-1")
    absorptivity_unit: list[str]
    absorbance: list[list[float]] = Field(description="by component, planned")


@dataclass(frozen=True, slots=True)
class Plan:
    """A request turned into a planned sample."""

    sample: PlannedSample
    units: tuple[str, ...]
    factors: tuple[float, ...]
    records: list[RecordUsed]
    settings: dict[str, Any]

    @classmethod
    def of(
        cls, request: PlanRequest, concentrations: dict[str, float] | None = None, *, cell: dict[str, float] | None = None
    ) -> Plan:
        """Return the plan of a request; `concentrations` in base units replace those of the request; `cell` is path and
        dilution by name.

        Raises
        ------
        InputError
            Listing every fault with its JSON path.
        """
        settings, (components, records) = gather(
            [("$", lambda: _settings(request)), ("$", lambda: components_of(request.components, request.library))]
        )
        units, factors = units_of(request.concentration_unit, components)
        by_name = dict(zip((c.name for c in components), factors, strict=True))
        planned = concentrations
        if planned is None and request.concentrations is not None:
            planned = {name: value / by_name.get(name, 1.0) for name, value in request.concentrations.items()}
            if not planned:
                raise InputError.single(
                    "missing-concentration", "$.concentrations", "expected a concentration for each component, found none"
                )
        (sample,) = gather(
            [
                (
                    "$",
                    lambda: planned_sample(
                        components,
                        planned,
                        settings,
                        step_nm=request.step_nm,
                        noise_correlation_nm=request.noise_correlation_nm,
                        **(cell or {}),
                    ),
                )
            ],
        )
        return cls(
            sample, units, factors, records, {**asdict(settings), "concentration_unit": list(units), "library": request.library}
        )


def planned_out(plan: Plan) -> PlannedOut:
    """Return the planned sample as it stands in a response."""
    sample, A = plan.sample, plan.sample.absorbance
    top = int(np.argmax(A))
    return PlannedOut(
        concentrations=[
            PlannedConcentration(name=name, concentration=float(c * factor), unit=unit)
            for name, c, factor, unit in zip(sample.names, sample.concentration, plan.factors, plan.units, strict=True)
        ],
        assumed=sample.assumed,
        path_length_cm=sample.path_length_cm,
        dilution_factor=sample.dilution_factor,
        wavelength_nm=[float(sample.wavelength_nm[0]), float(sample.wavelength_nm[-1])],
        readings=int(sample.wavelength_nm.size),
        highest_absorbance=float(A[top]),
        highest_nm=float(sample.wavelength_nm[top]),
    )


def planned_flags(plan: Plan, *, cell_is_chosen: bool = False) -> list[FlagOut]:
    """Return what needs a look before anything is measured: range, conditions, absorbance, linear range.

    Parameters
    ----------
    cell_is_chosen
        Whether the answer chooses path and dilution itself, so that those of the plan say nothing.
    """
    sample = plan.sample
    everywhere = np.ones(sample.wavelength_nm.size, dtype=bool)
    words, grades = batch_notes(sample.wavelength_nm, everywhere, everywhere, sample.components, sample.settings)
    flags = [FlagOut(code="range-not-covered", severity="warning", message=note) for note in sample.notes]
    if not (sample.settings.wavelengths_nm and "too-few-points" in words):
        words.pop("too-few-points", None)
    for code, message in words.items():
        worst = Severity(int(np.max(grades[code])))
        flags.append(FlagOut(code=code, severity="warning" if worst >= Severity.WARNING else "info", message=message))
    if cell_is_chosen:
        return flags
    limit = sample.settings.absorbance_limit
    above = int((sample.absorbance > limit).sum())
    if above:
        message = f"{above} planned readings are above absorbance {limit:g} and would not be used: dilute or use a shorter cell"
        flags.append(FlagOut(code="saturated", severity="warning", message=message))
    beyond = [
        f"{c.name}: {amount / c.linear_to:.2f} times"
        for c, amount in zip(sample.components, sample.in_cell, strict=True)
        if c.linear_to is not None and amount > c.linear_to * (1 + 1e-9)
    ]
    if beyond:
        message = f"planned above the range in which Beer's law was shown ({'; '.join(beyond)}): dilute or use a shorter cell"
        flags.append(FlagOut(code="beyond-linear-range", severity="warning", message=message))
    return flags


def spectra_out(plan: Plan, wanted: bool) -> SpectraOut | None:
    """Return the planned spectra where they are wanted."""
    if not wanted:
        return None
    sample = plan.sample
    p = len(sample.components)
    return SpectraOut(
        wavelength_nm=sample.wavelength_nm.tolist(),
        names=list(sample.names),
        absorptivity=sample.design.X[:, :p].T.tolist(),
        absorptivity_unit=["L mol⁻¹ cm⁻¹" if c.basis == "molar" else "L g⁻¹ cm⁻¹" for c in sample.components],
        absorbance=sample.absorbance_by_component.T.tolist(),
    )


def finite(value: float) -> float | None:
    """Return a number, or None where there is none."""
    return float(value) if np.isfinite(value) else None


def _settings(request: PlanRequest) -> ResolveSettings:
    (noise,) = gather([(".noise", request.noise.to_noise)])
    return ResolveSettings(
        background=tuple(request.background),
        wavelength_range_nm=(request.wavelength_range_nm[0], request.wavelength_range_nm[1])
        if request.wavelength_range_nm
        else None,
        wavelengths_nm=tuple(request.wavelengths_nm) if request.wavelengths_nm else None,
        absorbance_limit=request.absorbance_limit,
        noise=noise,
        target_relative_u=request.target_relative_u,
    )
