"""The operation overlap/1: can these components be told apart, before anything is measured."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from tinctor.operations.overlap_words import NO_SUM, group_words, summary
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
from tinctor.operations.shared import BudgetPart, FlagOut, ResponseModel
from tinctor.plan.crossings import clear_windows, crossings
from tinctor.plan.overlap import Overlap, overlap
from tinctor.resolve.uncertainty import SOURCES

__all__ = ["ComponentOverlap", "OverlapRequest", "OverlapResponse", "WindowOut", "run"]

Schema = Literal["overlap/1"]
VerdictWord = Literal["separable", "marginal", "inseparable"]


class OverlapRequest(CellPlanRequest):
    """Can these components be told apart, and how well at best?"""

    schema_: Annotated[Schema, Field(alias="schema")] = "overlap/1"


class ComponentOverlap(ResponseModel):
    """One component. Uncertainties are null where it is inseparable for want of a signal of its own."""

    name: str
    unit: str
    concentration: float = Field(description="planned, in the original sample")
    selectivity: float = Field(description="net analyte signal over whole signal (Lorber 1986), 0 to 1; equal weights")
    sensitivity: float = Field(description="length of the net analyte signal per unit of concentration in the original sample")
    variance_inflation: float | None = Field(description="1 / selectivity squared; null where the selectivity is 0")
    percent_per_nm: float | None = Field(description="change of the result per nm error of the wavelength axis")
    expected_u: float | None = Field(description="standard uncertainty from the resolver's full budget")
    expected_relative_u: float | None
    budget: list[BudgetPart]
    decision_limit: float | None
    detection_limit: float | None
    quantification_limit: float | None = Field(description="ten times the standard uncertainty at zero (k_Q = 10, Currie 1995)")
    price: dict[str, float | None] = Field(description="factor on expected_u of each background term that could be added")
    price_of_fitted: dict[str, float | None] = Field(description="the same of each term that is fitted, against leaving it out")
    verdict: VerdictWord
    reason: str
    target_met: bool | None = Field(description="null without a target")
    not_declared: list[str] = Field(description="sources of uncertainty that no one has stated, and that are not in expected_u")


class PairOut(ResponseModel):
    """Two components by themselves, with the background."""

    components: list[str]
    cosine: float
    selectivity: float


class GroupOut(ResponseModel):
    """Components that can only be reported together."""

    components: list[str]
    expected_relative_u: float | None = Field(
        description="of their sum, resolved with their mean spectrum; null where they have none"
    )
    proportion_error: float | None = Field(description="largest relative error of the sum when only one of them is there")
    message: str


class LeftOutOut(ResponseModel):
    """What the rest would be like without one component."""

    left_out: str
    worst_relative_u: float | None
    verdict: VerdictWord
    target_met: bool | None


class CrossingOut(ResponseModel):
    """Two components absorb equally; isosbestic when they are forms of one analyte."""

    components: list[str]
    wavelength_nm: float
    absorptivity: float = Field(description="of the first, on its own basis")
    isosbestic: bool


class WindowOut(ResponseModel):
    """One component absorbs alone, or none does (null)."""

    component: str | None
    low_nm: float
    high_nm: float
    best_nm: float
    absorbance: float = Field(description="planned, of the whole sample at best_nm")
    others_share: float = Field(description="largest absorbance of the others over the component's in the window")


class OverlapResponse(ResponseModel):
    """The answer, in numbers and in words."""

    schema_: Annotated[Schema, Field(alias="schema")] = "overlap/1"
    summary: str
    target_met: bool | None = Field(description="of all components; null without a target")
    components: list[ComponentOverlap]
    similarity: list[list[float]] = Field(description="cosines of the absorptivity spectra, in the order of the components")
    condition_number: float | None = Field(
        description="of all fitted columns at unit length; null where one is made up by the others"
    )
    pairs: list[PairOut] = Field(description="least selective first")
    groups: list[GroupOut]
    conflicts: list[list[str]] = Field(
        description="smallest sets that cannot be told apart, whatever the concentrations; one alone is imitated by the background"
    )
    left_out: list[LeftOutOut] = Field(description="each component left out in turn, where not all are separable")
    crossings: list[CrossingOut]
    clear_windows: list[WindowOut]
    planned: PlannedOut
    spectra: SpectraOut | None = None
    flags: list[FlagOut]
    provenance: Provenance


def run(request: OverlapRequest) -> OverlapResponse:
    """Say whether the components can be told apart.

    Raises
    ------
    InputError
        Listing every fault of the request with its JSON path.

    Examples
    --------
    >>> request = OverlapRequest.model_validate({
    ...     "schema": "overlap/1", "background": [], "concentration_unit": "mmol/L", "concentrations": {"Cu": 20, "Ni": 50},
    ...     "components": [{"name": "Cu", "wavelength_nm": [395, 810], "molar_absorptivity": [0.2, 12.0]},
    ...                    {"name": "Ni", "wavelength_nm": [395, 810], "molar_absorptivity": [5.0, 1.0]}],
    ... })
    >>> [(c.name, c.verdict, round(c.selectivity, 3)) for c in run(request).components]
    [('Cu', 'separable', 0.977), ('Ni', 'separable', 0.977)]
    """
    plan = Plan.of(request, cell=request.cell())
    answer = overlap(plan.sample)
    names = plan.sample.names
    met = [v.target_met for v in answer.verdicts if v.target_met is not None]
    return OverlapResponse(
        summary=summary(answer),
        target_met=all(met) if met else None,
        components=[_component(plan, answer, k) for k in range(len(names))],
        similarity=answer.similarity.tolist(),
        condition_number=finite(answer.condition_number),
        pairs=[PairOut(components=[names[k] for k in p.places], cosine=p.cosine, selectivity=p.selectivity) for p in answer.pairs],
        groups=[
            GroupOut(
                components=[names[k] for k in g.places],
                expected_relative_u=finite(g.relative_u) if g.proportion_error <= NO_SUM else None,
                proportion_error=finite(g.proportion_error),
                message=group_words(answer, g),
            )
            for g in answer.groups
        ],
        conflicts=[[names[k] for k in places] for places in answer.conflicts],
        left_out=_left_out(answer),
        crossings=[
            CrossingOut(
                components=[names[k] for k in c.places],
                wavelength_nm=c.wavelength_nm,
                absorptivity=c.absorptivity,
                isosbestic=c.isosbestic,
            )
            for c in crossings(plan.sample)
        ],
        clear_windows=windows_out(plan),
        planned=planned_out(plan),
        spectra=spectra_out(plan, request.include_spectra),
        flags=planned_flags(plan),
        provenance=provenance(request, plan.records, plan.settings),
    )


def windows_out(plan: Plan) -> list[WindowOut]:
    """Return the clear windows of a planned sample."""
    names = plan.sample.names
    return [
        WindowOut(
            component=None if w.place is None else names[w.place],
            low_nm=w.low_nm,
            high_nm=w.high_nm,
            best_nm=w.best_nm,
            absorbance=w.absorbance,
            others_share=w.others_share,
        )
        for w in clear_windows(plan.sample)
    ]


def _component(plan: Plan, answer: Overlap, k: int) -> ComponentOverlap:
    sample, factor, verdict = plan.sample, plan.factors[k], answer.verdicts[k]
    e, component = sample.expected, sample.components[k]
    known = bool(e.determined[0, k]) and e.selectivity[0, k] * sample.settings.limits.collinear_refused >= 1.0
    undeclared = {"library-scale": component.scale_relative_u is None, "library-shape": component.absorptivity_u is None}

    def number(value: float) -> float | None:
        return finite(value * factor) if known else None

    return ComponentOverlap(
        name=component.name,
        unit=plan.units[k],
        concentration=float(sample.concentration[k] * factor),
        selectivity=float(answer.selectivity[k]),
        sensitivity=float(answer.sensitivity[k] / factor),
        variance_inflation=finite(answer.variance_inflation[k]),
        percent_per_nm=100 * float(e.relative_per_nm[0, k]) if known and sample.concentration[k] > 0 else None,
        expected_u=number(e.u[0, k]),
        expected_relative_u=finite(answer.relative_u[k]) if known else None,
        budget=[BudgetPart(source=source, u=number(u)) for source, u in zip(SOURCES, e.budget[0, k], strict=True)],
        decision_limit=number(e.decision_limit[0, k]),
        detection_limit=number(e.detection_limit[0, k]),
        quantification_limit=number(e.quantification_limit[0, k]),
        price={term: finite(price[k]) if known else None for term, price in answer.price.items()},
        price_of_fitted={term: finite(price[k]) if known else None for term, price in answer.paid.items()},
        verdict=verdict.word,
        reason=verdict.reason,
        target_met=verdict.target_met,
        not_declared=[source for source, missing in undeclared.items() if missing],
    )


def _left_out(answer: Overlap) -> list[LeftOutOut]:
    names, order = answer.sample.names, ("inseparable", "marginal", "separable")
    result = []
    for part in answer.left_out:
        if not part.verdicts:
            continue
        worst = min((v.word for v in part.verdicts), key=order.index)
        met = [v.target_met for v in part.verdicts if v.target_met is not None]
        relative = part.relative_u[[r == r for r in part.relative_u]]
        result.append(
            LeftOutOut(
                left_out=names[part.place],
                worst_relative_u=finite(relative.max()) if relative.size and worst != "inseparable" else None,
                verdict=worst,
                target_met=all(met) if met else None,
            )
        )
    return result
