"""The operation determine/1: concentration of unknowns of one substance from its calibration line, or by standard addition."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field

from tinctor.errors import InputError
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.series_in import SeriesIn, UnknownIn
from tinctor.operations.shared import Number, ResponseModel, gather
from tinctor.operations.standards_results import (
    DroppedOut,
    LinearityOut,
    NoteOut,
    StandardOut,
    SuperpositionOut,
    departures_out,
    finite,
    linearity_out,
    notes_out,
    standards_out,
)
from tinctor.operations.unknowns_in import unknown_groups
from tinctor.standards.determine import Addition, Determination, Unknown, determine, determine_by_addition
from tinctor.standards.inverse import CalibrationLine
from tinctor.standards.limits import Limits

__all__ = ["DetermineRequest", "DetermineResponse", "run"]

Schema = Literal["determine/1"]

#: Replicates that scatter by more than so many times what one reading's share of the uncertainty allows are not of one sample.
REPLICATES_DIFFER = 4.0


class DetermineRequest(SeriesIn):
    """Read the concentration of unknowns off the line of the standards."""

    schema_: Annotated[Schema, Field(alias="schema")] = "determine/1"
    design: Literal["external", "addition"] = Field(
        "external",
        description="external: standards apart from the unknowns; addition: standards are the sample itself with known additions "
        "(concentration is what was added, 0 for none)",
    )
    unknowns: list[UnknownIn] = Field(default=[], max_length=10_000)
    wavelength_nm: Number | None = Field(None, description="where to read; the whole spectrum when left out")
    coverage: Number = Field(0.95, ge=0.5, le=0.999)
    extrapolate: bool = Field(False, description="give a figure outside the standards' range too")
    alpha: Number = Field(0.05, ge=0.0001, le=0.2, description="error rate of the decision and detection limits")

    def settings_used(self) -> dict[str, Any]:
        """Return everything but the measured data."""
        return self.model_dump(by_alias=True, exclude={"standards", "blank", "unknowns", "schema_"})


class LineOut(ResponseModel):
    """The line, signal against concentration times path (mol L-1 cm or g L-1 cm)."""

    signal: Literal["one wavelength", "whole spectrum"]
    slope: float
    slope_u: float | None
    intercept: float
    intercept_u: float | None
    residual_sd: float | None
    degrees_of_freedom: float | None = Field(description="null where the scatter is declared, not estimated")
    points: int
    range: list[float] = Field(description="concentration times path covered by the standards")


class LimitsOut(ResponseModel):
    """Limits by one definition, in concentration_unit for a path of 1 cm and no dilution."""

    definition: str
    decision: float | None
    detection: float | None
    quantification: float | None


class DeterminedOut(ResponseModel):
    """One unknown, in the original sample."""

    id: str
    status: Literal["accepted", "flagged", "refused"]
    unit: str
    replicates: int
    concentration: float | None
    u: float | None
    interval: list[float] | None = Field(description="exact (Fieller) interval with stock, path and dilution")
    interval_line: list[float] | None = Field(description="of the line alone, exact; null where it has no bound")
    interval_approximate: list[float] | None = Field(description="of the line alone by the usual first-order formula")
    replicate_sd: float | None
    outside_range_percent: float
    flags: list[NoteOut]


class DetermineResponse(ResponseModel):
    """Concentrations, the line and its limits."""

    schema_: Annotated[Schema, Field(alias="schema")] = "determine/1"
    results: list[DeterminedOut]
    line: LineOut
    limits: list[LimitsOut]
    linearity: LinearityOut
    superposition: SuperpositionOut
    standards_used: list[StandardOut]
    dropped: list[DroppedOut]
    flags: list[NoteOut]
    provenance: Provenance


def run(request: DetermineRequest) -> DetermineResponse:
    """Determine unknowns.

    Raises
    ------
    InputError
        Listing every fault of the request with its JSON path.

    Examples
    --------
    >>> scans = [{"id": f"s{k}", "concentration": 2.0 * k, "wavelength_nm": [500, 510], "absorbance": [0.1 * k, 0.2 * k]}
    ...          for k in (1, 2, 3, 4)]
    >>> unknown = {"id": "u", "wavelength_nm": [500, 510], "absorbance": [0.25, 0.5], "dilution_factor": 10.0}
    >>> request = DetermineRequest.model_validate({"schema": "determine/1", "concentration_unit": "mg/L",
    ...     "standards": scans, "unknowns": [unknown]})
    >>> round(run(request).results[0].concentration, 6)
    50.0
    """
    settings = request.to_settings()
    factor = request.factor()
    if request.design == "addition":
        found = _by_addition(request)
        results = [_addition_out(request, found, factor)]
        result, line = found.characterisation, found.line
        limits: tuple[Limits, ...] = ()
    else:
        series, groups = request.to_series(), unknown_groups(request)
        determination: Determination
        (determination,) = gather(
            [
                (
                    "$",
                    lambda: determine(
                        series,
                        groups,
                        settings,
                        wavelength_nm=request.wavelength_nm,
                        coverage=request.coverage,
                        extrapolate=request.extrapolate,
                        absorbance_limit=request.absorbance_limit,
                        alpha=request.alpha,
                    ),
                )
            ]
        )
        results = [_unknown_out(u, determination, request.concentration_unit, factor) for u in determination.unknowns]
        result, line, limits = determination.characterisation, determination.line, determination.limits
    return DetermineResponse(
        results=results,
        line=_line_out(line, request.wavelength_nm),
        limits=[_limits_out(one, factor) for one in limits],
        linearity=linearity_out(result, factor),
        superposition=departures_out(result),
        standards_used=standards_out(result),
        dropped=[DroppedOut(id=d.id, reason=d.reason, wavelength_nm=list(d.wavelength_nm)) for d in result.dropped],
        flags=notes_out(n for n in result.notes if request.design == "external" or n.code != "intercept"),
        provenance=provenance(
            request, [], request.model_dump(by_alias=True, exclude={"standards", "blank", "unknowns", "schema_"}), with_scipy=True
        ),
    )


def _by_addition(request: DetermineRequest) -> Addition:
    if request.unknowns:
        raise InputError.single(
            "unknowns-with-addition",
            "$.unknowns",
            "in the design addition the sample is among the standards (concentration 0), found unknowns as well",
        )
    if request.wavelength_range_nm is not None:
        message = "standard addition reads one wavelength or the whole spectrum: a range is not taken"
        raise InputError.single(
            "range-with-addition", "$.wavelength_range_nm", message, "give wavelength_nm, or files of that range"
        )
    paths = {s.path_length_cm for s in request.standards}
    if len(paths) > 1:
        raise InputError.single("paths-differ", "$.standards", f"additions must share one path length, found {sorted(paths)} cm")
    factor, settings = request.factor(), request.to_settings()
    plain = [s for s in request.standards if s.concentration == 0]
    added = [s for s in request.standards if s.concentration != 0]
    standards = gather([(f"$.standards[{request.standards.index(s)}]", lambda s=s: s.to_standard(factor)) for s in added])
    unspiked = gather([("$.standards", s.to_spectrum) for s in plain])
    blanks = gather([(f"$.blank[{k}]", b.to_spectrum) for k, b in enumerate(request.blank)])
    found: Addition
    (found,) = gather(
        [
            (
                "$",
                lambda: determine_by_addition(
                    standards,
                    unspiked,
                    blanks,
                    settings,
                    wavelength_nm=request.wavelength_nm,
                    coverage=request.coverage,
                    absorbance_limit=request.absorbance_limit,
                ),
            )
        ]
    )
    return found


def _addition_out(request: DetermineRequest, found: Addition, factor: float) -> DeterminedOut:
    path = request.standards[0].path_length_cm
    scale = factor / path
    flags = [
        NoteOut(
            code="standard-addition",
            severity="info",
            message="in the solution measured, before anything was added; the matrix must be the same in all of them",
        )
    ]
    if not request.blank:
        flags.append(
            NoteOut(
                code="no-blank",
                severity="warning",
                message="no blank was given: whatever else absorbs, and any offset of the cell, goes into the result in full",
            )
        )
    warned = any(f.severity == "warning" for f in flags)
    return DeterminedOut(
        id=next(s.id for s in request.standards if s.concentration == 0),
        status="flagged" if warned else "accepted",
        unit=request.concentration_unit,
        replicates=sum(s.concentration == 0 for s in request.standards),
        concentration=found.found.x * scale,
        u=found.u * scale,
        interval=None if found.interval is None else [v * scale for v in found.interval],
        interval_line=None if found.found.exact is None else [v * scale for v in found.found.exact],
        interval_approximate=[v * scale for v in found.found.approximate],
        replicate_sd=None,
        outside_range_percent=0.0,
        flags=flags,
    )


def _unknown_out(u: Unknown, determination: Determination, unit: str, factor: float) -> DeterminedOut:
    flags = list(_unknown_flags(u, determination))
    status: Literal["accepted", "flagged", "refused"] = "accepted"
    if u.refused:
        status = "refused"
    elif any(f.severity == "warning" for f in flags):
        status = "flagged"

    def pair(values: tuple[float, float] | None) -> list[float] | None:
        return None if values is None else [values[0] * factor, values[1] * factor]

    return DeterminedOut(
        id=u.id,
        status=status,
        unit=unit,
        replicates=u.replicates,
        concentration=None if u.concentration is None else u.concentration * factor,
        u=None if u.u is None else u.u * factor,
        interval=pair(u.interval),
        interval_line=pair(u.interval_line),
        interval_approximate=pair(u.interval_approximate),
        replicate_sd=None if u.replicate_sd is None else u.replicate_sd * factor,
        outside_range_percent=100.0 * u.outside,
        flags=flags,
    )


def _unknown_flags(u: Unknown, determination: Determination) -> list[NoteOut]:
    flags = []
    if u.refused:
        flags.append(NoteOut(code=u.refused_code, severity="warning", message=u.refused))
    elif u.outside > 0:
        message = f"{100 * u.outside:.3g} % of the standards' range outside it: the line was not shown to hold there"
        flags.append(NoteOut(code="outside-standards-range", severity="warning", message=message))
    if u.departure is not None:
        message = (
            f"its spectrum has not the standards' shape: {1000 * u.departure[1]:+.1f} mAU at {u.departure[0]:g} nm; "
            "another absorber, aggregation or turbidity may bias it"
        )
        flags.append(NoteOut(code="unmodelled-absorber", severity="warning", message=message, wavelength_nm=[u.departure[0]]))
    if u.replicate_sd is not None and u.u is not None and u.replicate_sd > REPLICATES_DIFFER * u.u * u.replicates**0.5:
        message = "its replicates differ by far more than the uncertainty of their mean allows: are they one sample?"
        flags.append(NoteOut(code="replicates-differ", severity="warning", message=message))
    if u.below_decision:
        message = f"below the decision limit ({determination.limits[0].definition}): not shown to be there"
        flags.append(NoteOut(code="below-decision-limit", severity="info", message=message))
    if not u.refused and u.interval is None:
        message = "the slope is not significant: no bounded interval of concentration explains the signal (Fieller)"
        flags.append(NoteOut(code="interval-unbounded", severity="warning", message=message))
    if determination.line.points == 1:
        message = "a proportion to one standard: it takes the line for straight and through zero, and nothing here shows either"
        flags.append(NoteOut(code="single-standard", severity="warning", message=message))
    return flags


def _line_out(line: CalibrationLine, wavelength_nm: float | None) -> LineOut:
    return LineOut(
        signal="whole spectrum" if wavelength_nm is None else "one wavelength",
        slope=line.slope,
        slope_u=finite(line.slope_u),
        intercept=line.intercept,
        intercept_u=finite(line.intercept_u),
        residual_sd=finite(line.residual_sd),
        degrees_of_freedom=finite(line.degrees_of_freedom),
        points=line.points,
        range=[line.low, line.high],
    )


def _limits_out(limits: Limits, factor: float) -> LimitsOut:
    def scaled(value: float | None) -> float | None:
        return None if value is None else value * factor

    return LimitsOut(
        definition=limits.definition,
        decision=scaled(limits.decision),
        detection=scaled(limits.detection),
        quantification=scaled(limits.quantification),
    )
