"""The operation wavelengths/1: where to measure when only a few wavelengths can be read."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from tinctor.operations.overlap import WindowOut, windows_out
from tinctor.operations.plan_in import (
    CellPlanRequest,
    Plan,
    PlannedOut,
    SpectraOut,
    finite,
    planned_flags,
    planned_out,
    spectra_out,
)
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.shared import FlagOut, Number, Numbers, ResponseModel, gather
from tinctor.plan.wavelengths import Choice, WavelengthsAsked, choose_wavelengths

__all__ = ["ExpectedU", "WavelengthsRequest", "WavelengthsResponse", "run"]

Schema = Literal["wavelengths/1"]


class WavelengthsRequest(CellPlanRequest):
    """Which wavelengths, when only a few can be read?"""

    schema_: Annotated[Schema, Field(alias="schema")] = "wavelengths/1"
    count: Annotated[int, Field(ge=1, le=60)] | None = Field(None, description="as many as there are unknowns when left out")
    candidates_nm: Numbers | None = Field(None, description="where one can measure; all planned readings when left out")
    minimum_spacing_nm: Number = Field(0.0, description="smallest distance between two of them")
    absorbance_window: Annotated[list[Number], Field(min_length=2, max_length=2)] | None = Field(
        None, description="planned absorbance of each reading, from low to high; up to absorbance_limit when left out"
    )
    criterion: Literal["worst-relative-u", "determinant", "trace"] = "worst-relative-u"
    wavelength_error_nm: Number = Field(0.0, description="the axis may be off by this much either way: the worst case counts")


class ExpectedU(ResponseModel):
    """Expected uncertainty of one component, from the resolver's full budget."""

    name: str
    unit: str
    u: float | None
    relative_u: float | None
    wavelength_bias_relative: float | None = Field(
        description="largest relative error that wavelength_error_nm causes; it is in the criterion and not in u; null without one"
    )


class RowOut(ResponseModel):
    """The best set found of one size."""

    count: int
    wavelengths_nm: list[float]
    criterion_value: float | None
    efficiency: float
    worst_relative_u: float | None
    exact: bool


class WavelengthsResponse(ResponseModel):
    """The choice, what it loses, and the same for other counts."""

    schema_: Annotated[Schema, Field(alias="schema")] = "wavelengths/1"
    wavelengths_nm: list[float]
    expected_u: list[ExpectedU]
    absorbance: list[float] = Field(description="planned, at the wavelengths chosen")
    condition_number: float
    criterion: str
    criterion_value: float | None = Field(description="relative standard uncertainty, of what the choice can change")
    efficiency: float = Field(
        description="criterion of all candidates used together over that of the choice; above 1 where flanks do more harm than good"
    )
    exact: bool = Field(description="proved that no allowed set of this size is better by the criterion")
    proven_within: float = Field(description="no allowed set is better by a larger share")
    nodes: int = Field(description="parts of the search tree that were looked at")
    all_candidates: int
    expected_u_all_candidates: list[ExpectedU]
    table: list[RowOut] = Field(description="from as many as there are unknowns to six more")
    clear_windows: list[WindowOut]
    planned: PlannedOut
    spectra: SpectraOut | None = None
    flags: list[FlagOut]
    provenance: Provenance


def run(request: WavelengthsRequest) -> WavelengthsResponse:
    """Choose wavelengths.

    Raises
    ------
    InputError
        Listing every fault of the request, or why no set of wavelengths will do.

    Examples
    --------
    >>> request = WavelengthsRequest.model_validate({
    ...     "schema": "wavelengths/1", "background": [], "count": 2, "criterion": "determinant",
    ...     "components": [{"name": "Cu", "wavelength_nm": [395, 500, 810], "molar_absorptivity": [0.2, 0.1, 12.0]},
    ...                    {"name": "Ni", "wavelength_nm": [395, 500, 810], "molar_absorptivity": [5.0, 0.3, 1.0]}],
    ... })
    >>> response = run(request)
    >>> response.wavelengths_nm, response.exact
    ([395.0, 810.0], True)
    """
    plan = Plan.of(request, cell=request.cell())
    window = request.absorbance_window
    (found,) = gather(
        [
            (
                "$",
                lambda: choose_wavelengths(
                    plan.sample,
                    WavelengthsAsked(
                        count=request.count,
                        candidates_nm=request.candidates_nm,
                        minimum_spacing_nm=request.minimum_spacing_nm,
                        absorbance_window=(window[0], window[1]) if window else None,
                        criterion=request.criterion,
                        wavelength_error_nm=request.wavelength_error_nm,
                    ),
                ),
            )
        ]
    )
    choice = found.choice
    return WavelengthsResponse(
        wavelengths_nm=choice.wavelength_nm.tolist(),
        expected_u=_expected(plan, choice),
        absorbance=choice.sample.absorbance.tolist(),
        condition_number=choice.condition_number,
        criterion=request.criterion,
        criterion_value=_relative(plan, choice),
        efficiency=choice.efficiency,
        exact=choice.exact,
        proven_within=choice.proven_within,
        nodes=found.nodes,
        all_candidates=int(found.everything.wavelength_nm.size),
        expected_u_all_candidates=_expected(plan, found.everything),
        table=[
            RowOut(
                count=int(row.wavelength_nm.size),
                wavelengths_nm=row.wavelength_nm.tolist(),
                criterion_value=_relative(plan, row),
                efficiency=row.efficiency,
                worst_relative_u=max((e.relative_u for e in _expected(plan, row) if e.relative_u is not None), default=None),
                exact=row.exact,
            )
            for row in found.table
        ],
        clear_windows=windows_out(plan),
        planned=planned_out(plan),
        spectra=spectra_out(plan, request.include_spectra),
        flags=[*planned_flags(plan), *_of_the_choice(choice)],
        provenance=provenance(request, plan.records, {**plan.settings, **_asked(request)}),
    )


def _asked(request: WavelengthsRequest) -> dict[str, object]:
    names = ("count", "candidates_nm", "minimum_spacing_nm", "absorbance_window", "criterion", "wavelength_error_nm")
    return {name: getattr(request, name) for name in names}


def _relative(plan: Plan, choice: Choice) -> float | None:
    """The criterion; null where it is no relative uncertainty because nothing is planned of a component."""
    return finite(choice.criterion) if plan.sample.concentration.all() else None


def _expected(plan: Plan, choice: Choice) -> list[ExpectedU]:
    e, c = choice.sample.expected, choice.sample.concentration
    return [
        ExpectedU(
            name=name,
            unit=plan.units[k],
            u=finite(e.u[0, k] * plan.factors[k]),
            relative_u=finite(e.u[0, k] / c[k]) if c[k] > 0 else None,
            wavelength_bias_relative=finite(choice.relative_bias[k]) if choice.relative_bias.any() else None,
        )
        for k, name in enumerate(choice.sample.names)
    ]


def _of_the_choice(choice: Choice) -> list[FlagOut]:
    """What the resolver would flag in the choice, and that with no reading to spare nothing can be noticed."""
    limit = choice.sample.settings.limits.collinear_flagged
    alike = [n for n, s in zip(choice.sample.names, choice.sample.expected.selectivity[0], strict=True) if s * limit < 1.0]
    flags = []
    if alike:
        message = f"at these wavelengths the other components take nearly all of the signal of {', '.join(alike)}"
        flags.append(FlagOut(code="collinear", severity="warning", message=message, components=alike))
    if choice.wavelength_nm.size > choice.sample.design.asked:
        return flags
    message = "no reading is left over to notice an absorber that is not in the model: one or two wavelengths more would show it"
    return [*flags, FlagOut(code="too-few-points", severity="info", message=message)]
