"""The operation standards/1: weighed standards in, a component out."""

from __future__ import annotations

from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field

from tinctor.component import Component
from tinctor.errors import UndeterminedError
from tinctor.library.handbook import HandbookComparison, compare_with_handbook
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.series_in import SeriesIn
from tinctor.operations.shared import Number, ResponseModel, gather
from tinctor.operations.standards_results import (
    ComponentOut,
    DroppedOut,
    HandbookOut,
    InterceptOut,
    LinearityOut,
    NoteOut,
    StandardOut,
    SuperpositionOut,
    UncertaintyOut,
    departures_out,
    intercept_out,
    linearity_out,
    listed,
    notes_out,
    standards_out,
    uncertainty_out,
)
from tinctor.standards.characterise import Characterisation, characterise
from tinctor.units import BASE_UNIT

__all__ = ["StandardsRequest", "StandardsResponse", "component_of", "handbook_out", "run"]

Schema = Literal["standards/1"]


class StandardsRequest(SeriesIn):
    """Make a component of a series of weighed standards."""

    schema_: Annotated[Schema, Field(alias="schema")] = "standards/1"
    name: str = Field(min_length=1, description="of the component")
    solvent: str | None = None
    ph: Number | None = None
    temperature_c: Number | None = None
    bandwidth_nm: Number | None = None
    source: str | None = Field(None, description="who measured, where and when; kept with the result")
    handbook: str | None = Field(None, description="substance of the table of published specific absorbances to compare with")


class StandardsResponse(ResponseModel):
    """The component, and what stands behind it. Lists by wavelength run along `wavelength_nm`."""

    schema_: Annotated[Schema, Field(alias="schema")] = "standards/1"
    component: ComponentOut
    wavelength_nm: list[float]
    slope: list[float | None] = Field(description="absorptivity, L mol-1 cm-1 or L g-1 cm-1")
    slope_u: list[float | None] = Field(description="standard error from the scatter about the line, and the blank's")
    slope_interval: list[list[float | None]] = Field(description="95 % interval [low, high] with stock and path")
    intercept: list[float | None]
    intercept_u: list[float | None]
    residual_sd: list[float | None]
    degrees_of_freedom: list[int]
    linearity: LinearityOut
    superposition: SuperpositionOut
    intercept_test: InterceptOut
    uncertainty: UncertaintyOut
    standards_used: list[StandardOut]
    repeat_sd: float | None = Field(description="standard deviation between scans of one solution, in absorbance")
    dropped: list[DroppedOut]
    handbook: list[HandbookOut]
    flags: list[NoteOut]
    base_unit: str = Field(description="mol/L or g/L: the unit behind absorptivity and linear_to")
    provenance: Provenance


def run(request: StandardsRequest) -> StandardsResponse:
    """Make a component of standards.

    Raises
    ------
    InputError
        Listing every fault of the request with its JSON path.
    UndeterminedError
        When the standards show no absorption at all.

    Examples
    --------
    >>> scans = [{"id": f"s{k}", "concentration": 2.0 * k, "wavelength_nm": [500, 510], "absorbance": [0.1 * k, 0.2 * k]}
    ...          for k in (1, 2, 3, 4)]
    >>> request = StandardsRequest.model_validate({"schema": "standards/1", "name": "lot-7", "concentration_unit": "mg/L",
    ...     "stock_relative_u": 0.004, "standards": scans})
    >>> response = run(request)
    >>> [round(e, 6) for e in response.component.mass_absorptivity], response.linearity.highest_concentration
    ([50.0, 100.0], 8.0)
    """
    settings = request.to_settings()
    series = request.to_series()
    result: Characterisation
    (result,) = gather([("$", lambda: characterise(series, settings))])
    component = component_of(result, request, _conditions(request))
    handbook: tuple[HandbookComparison, ...] = ()
    if request.handbook is not None:
        name = request.handbook
        domain = _domain(component, request.molar_mass_g_per_mol)
        (handbook,) = gather([("$", lambda: compare_with_handbook(domain, name))])
    lines, spread = result.lines, result.spread
    return StandardsResponse(
        component=component,
        wavelength_nm=result.wavelength_nm.tolist(),
        slope=listed(lines.slope),
        slope_u=listed(spread.slope_u),
        slope_interval=[list(pair) for pair in zip(listed(spread.interval_low), listed(spread.interval_high), strict=True)],
        intercept=listed(lines.intercept),
        intercept_u=listed(lines.intercept_u),
        residual_sd=listed(lines.residual_sd),
        degrees_of_freedom=[int(d) for d in lines.degrees_of_freedom],
        linearity=linearity_out(result, request.factor()),
        superposition=departures_out(result),
        intercept_test=intercept_out(result),
        uncertainty=uncertainty_out(result),
        standards_used=standards_out(result),
        repeat_sd=series.repeat_sd,
        dropped=[DroppedOut(id=d.id, reason=d.reason, wavelength_nm=list(d.wavelength_nm)) for d in result.dropped],
        handbook=[handbook_out(h) for h in handbook],
        flags=notes_out(result.notes),
        base_unit=BASE_UNIT[request.chosen_basis],
        provenance=provenance(request, [], _settings_used(request), with_scipy=True),
    )


def component_of(result: Characterisation, request: SeriesIn, conditions: dict[str, str | float]) -> ComponentOut:
    """Return the component of a characterisation.

    Raises
    ------
    UndeterminedError
        When no absorptivity is above zero.
    """
    if not np.any(result.absorptivity > 0):
        raise UndeterminedError("the standards show no absorption that grows with concentration: nothing can be made of them")
    spectrum = result.absorptivity.tolist()
    molar = request.chosen_basis == "molar"
    return ComponentOut(
        name=request.name,
        wavelength_nm=result.wavelength_nm.tolist(),
        molar_absorptivity=spectrum if molar else None,
        mass_absorptivity=None if molar else spectrum,
        absorptivity_u=result.spread.absorptivity_u.tolist(),
        scale_relative_u=result.spread.common_relative_u,
        molar_mass_g_per_mol=request.molar_mass_g_per_mol,
        linear_to=result.linear_to,
        conditions=conditions or None,
    )


def handbook_out(found: HandbookComparison) -> HandbookOut:
    """Return a comparison as a document part."""
    v = found.value
    return HandbookOut(
        substance=v.substance,
        solvent=v.solvent,
        ph=v.ph,
        published_wavelength_nm=v.wavelength_nm,
        published_specific_absorbance=v.specific_absorbance,
        from_memory=v.from_memory,
        source=v.source,
        note=v.note,
        maximum_nm=found.maximum_nm,
        specific_absorbance=found.specific_absorbance,
        difference_percent=found.difference_percent,
        dye_content_percent=found.dye_content_percent,
        at_maximum=found.at_maximum,
    )


def _conditions(request: StandardsRequest) -> dict[str, str | float]:
    found = {key: getattr(request, key) for key in ("solvent", "ph", "temperature_c", "bandwidth_nm")}
    return {key: value for key, value in found.items() if value is not None}


def _domain(component: ComponentOut, molar_mass_g_per_mol: float | None) -> Component:
    molar = component.molar_absorptivity is not None
    return Component(
        component.name,
        component.wavelength_nm,
        component.molar_absorptivity if molar else component.mass_absorptivity,  # type: ignore[arg-type]
        basis="molar" if molar else "mass",
        molar_mass_g_per_mol=molar_mass_g_per_mol,
    )


def _settings_used(request: StandardsRequest) -> dict[str, Any]:
    return request.model_dump(by_alias=True, exclude={"standards", "blank", "schema_"})
