"""The operation dilution/1: which dilution and which cell, from the glassware there is."""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from pydantic import Field

from tinctor.errors import Fault, InputError
from tinctor.operations.plan_in import Plan, PlannedOut, PlanRequest, SpectraOut, finite, planned_flags, planned_out, spectra_out
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.shared import FlagOut, Number, ResponseModel, gather
from tinctor.plan.dilution import DilutionAsked, DilutionChoice, choose_dilution, on_fibre_g_per_l
from tinctor.plan.glassware import FLASKS_ML, PIPETTES_ML

__all__ = ["DilutionRequest", "DilutionResponse", "run"]

Schema = Literal["dilution/1"]
#: Choices listed.
MOST_CHOICES = 10

Volumes = Annotated[list[Number], Field(min_length=1, max_length=40)]


class DilutionRequest(PlanRequest):
    """At which dilution and in which cell should the sample be measured?"""

    schema_: Annotated[Schema, Field(alias="schema")] = "dilution/1"
    cells_cm: Annotated[list[Number], Field(min_length=1, max_length=20)] = Field(
        [1.0], description="path lengths of the cells there are"
    )
    cell_relative_u: Number = Field(0.0, description="relative standard uncertainty of a path length; 0 takes it as exact")
    absorbance_window: Annotated[list[Number], Field(min_length=2, max_length=2)] = Field(
        [0.1, 1.0], description="the highest absorbance is to lie between low and high"
    )
    pipettes_ml: Volumes = Field(list(PIPETTES_ML), description="volumes of the pipettes there are; class A")
    flasks_ml: Volumes = Field(list(FLASKS_ML), description="volumes of the flasks there are; class A")
    steps: Annotated[int, Field(ge=1, le=2)] = Field(2, description="most steps of a dilution")
    on_fibre_percent: dict[str, Number] | None = Field(
        None, description="planned, by name, in per cent of dye on the weight of fibre, in place of concentrations"
    )
    liquor_ratio_l_per_kg: Number | None = Field(None, description="litres of bath for a kilogram of fibre")


class StepOut(ResponseModel):
    """Pipette this volume and make up to the mark of this flask."""

    pipette_ml: float
    flask_ml: float


class ServedOut(ResponseModel):
    """One component in one choice."""

    name: str
    expected_relative_u: float | None = Field(description="null where none is planned, or it is not determined")
    served: bool = Field(description="above its quantification limit, inside its linear range, and within the target")
    why_not: str = ""


class DilutionChoiceOut(ResponseModel):
    """One dilution in one cell."""

    path_length_cm: float
    dilution_factor: float
    dilution_factor_u: float = Field(description="from class A tolerances; filling and temperature are not in it")
    volumes: list[StepOut] = Field(description="in the order in which they are made; empty for the undiluted sample")
    highest_absorbance: float
    highest_nm: float
    readings_left_out: int = Field(description="readings above the window, which are not used")
    expected_relative_u: list[ServedOut]


class DilutionResponse(ResponseModel):
    """Choices that serve every component, best first; or the two that do together."""

    schema_: Annotated[Schema, Field(alias="schema")] = "dilution/1"
    choices: list[DilutionChoiceOut]
    more_choices: int = Field(description="choices that serve as well and are not listed")
    together: list[DilutionChoiceOut] = Field(description="two that serve all components together, where no single one does")
    warning: str | None
    planned: PlannedOut
    spectra: SpectraOut | None = None
    flags: list[FlagOut]
    provenance: Provenance


def run(request: DilutionRequest) -> DilutionResponse:
    """Choose dilution and cell.

    Raises
    ------
    InputError
        Listing every fault of the request, or why nothing that there is will do.

    Examples
    --------
    >>> request = DilutionRequest.model_validate({
    ...     "schema": "dilution/1", "background": [], "concentrations": {"Cu": 5.0, "Ni": 2.0}, "concentration_unit": "mol/L",
    ...     "components": [
    ...         {"name": "Cu", "wavelength_nm": [395, 810], "molar_absorptivity": [0.2, 12.0], "scale_relative_u": 0.01},
    ...         {"name": "Ni", "wavelength_nm": [395, 810], "molar_absorptivity": [5.0, 1.0], "scale_relative_u": 0.01}],
    ... })
    >>> best = run(request).choices[0]
    >>> best.dilution_factor, [(v.pipette_ml, v.flask_ml) for v in best.volumes], round(best.highest_absorbance, 2)
    (100.0, [(5.0, 500.0)], 0.62)
    """
    plan = Plan.of(request, concentrations=_on_fibre(request))
    window = request.absorbance_window
    (answer,) = gather(
        [
            (
                "$",
                lambda: choose_dilution(
                    plan.sample,
                    DilutionAsked(
                        cells_cm=request.cells_cm,
                        absorbance_window=(window[0], window[1]),
                        pipettes_ml=request.pipettes_ml,
                        flasks_ml=request.flasks_ml,
                        steps=request.steps,
                        cell_relative_u=request.cell_relative_u,
                    ),
                ),
            )
        ]
    )
    return DilutionResponse(
        choices=[_choice(plan, c) for c in answer.choices[:MOST_CHOICES]],
        more_choices=max(0, len(answer.choices) - MOST_CHOICES),
        together=[_choice(plan, c) for c in answer.pair or ()],
        warning=None if answer.pair is None else _two_needed(plan, answer.pair),
        planned=planned_out(plan),
        spectra=spectra_out(plan, request.include_spectra),
        flags=planned_flags(plan, cell_is_chosen=True),
        provenance=provenance(request, plan.records, {**plan.settings, **_asked(request)}),
    )


def _asked(request: DilutionRequest) -> dict[str, object]:
    names = ("cells_cm", "cell_relative_u", "absorbance_window", "pipettes_ml", "flasks_ml", "steps")
    return {name: getattr(request, name) for name in names}


def _on_fibre(request: DilutionRequest) -> dict[str, float] | None:
    """Concentrations from per cent on weight of fibre, in base units; None where they are given as such."""
    percent, ratio = request.on_fibre_percent, request.liquor_ratio_l_per_kg
    if percent is None and ratio is None:
        return None
    faults = []
    if percent is None or ratio is None:
        missing = "on_fibre_percent" if percent is None else "liquor_ratio_l_per_kg"
        faults.append(
            Fault(
                "missing-key",
                f"$.{missing}",
                "per cent on fibre and liquor ratio (L/kg, such as 10) belong together, found one alone",
            )
        )
    if percent is not None and request.concentrations is not None:
        faults.append(Fault("given-twice", "$.on_fibre_percent", "give concentrations or on_fibre_percent, not both"))
    if ratio is not None and not ratio > 0:
        faults.append(Fault("liquor-ratio", "$.liquor_ratio_l_per_kg", f"must be above 0 L/kg, found {ratio:g}"))
    faults += [
        Fault("on-fibre", f"$.on_fibre_percent.{name}", f"must be from 0 to 100 %, found {value:g}")
        for name, value in (percent or {}).items()
        if not 0 <= value <= 100
    ]
    if faults:
        raise InputError(faults)
    assert percent is not None
    assert ratio is not None
    return _per_mole(request, {name: on_fibre_g_per_l(value, ratio) for name, value in percent.items()})


def _per_mole(request: DilutionRequest, grams: dict[str, float]) -> dict[str, float]:
    """g/L in each component's base unit: divided by the molar mass where its absorptivity is molar."""
    from tinctor.operations.components_in import components_of
    from tinctor.units import conversion_factor

    components, _ = components_of(request.components, request.library)
    factors = {c.name: conversion_factor(c.basis, "g/L", c.molar_mass_g_per_mol, c.name) for c in components}
    return {name: value / factors.get(name, 1.0) for name, value in grams.items()}


def _choice(plan: Plan, choice: DilutionChoice) -> DilutionChoiceOut:
    d = choice.dilution
    return DilutionChoiceOut(
        path_length_cm=choice.path_length_cm,
        dilution_factor=d.factor,
        dilution_factor_u=d.factor * d.relative_u,
        volumes=[StepOut(pipette_ml=step.pipette_ml, flask_ml=step.flask_ml) for step in d.steps],
        highest_absorbance=choice.highest_absorbance,
        highest_nm=choice.highest_nm,
        readings_left_out=choice.readings_left_out,
        expected_relative_u=[
            ServedOut(
                name=name,
                expected_relative_u=finite(choice.relative_u[k]),
                served=bool(choice.serves[k]),
                why_not=_why_not(choice, k),
            )
            for k, name in enumerate(plan.sample.names)
        ],
    )


def _why_not(choice: DilutionChoice, k: int) -> str:
    if choice.serves[k]:
        return ""
    if choice.beyond_linear[k]:
        return "above its linear range"
    if choice.overshoots[k]:
        return "its own highest absorbance is above the window"
    return "not determined" if np.isinf(choice.relative_u[k]) else "below its quantification limit, or outside the target"


def _two_needed(plan: Plan, pair: tuple[DilutionChoice, DilutionChoice]) -> str:
    parts = []
    for choice in pair:
        names = [n for n, ok in zip(plan.sample.names, choice.serves, strict=True) if ok]
        parts.append(f"{choice.dilution.factor:.4g} times in {choice.path_length_cm:g} cm for {', '.join(names)}")
    return f"no single dilution serves all components; two do together: {' and '.join(parts)}"
