"""The operation calibrate/1: a PLS model from spectra of mixtures of known composition, validated."""

from __future__ import annotations

from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field

from tinctor.arrays import FloatArray
from tinctor.errors import InputError
from tinctor.operations.calibrate_in import ReferenceIn, StepIn, TestIn, Training, training_of
from tinctor.operations.calibrate_results import AnalyteOut, LimitsOut, OutlierOut, SampleOut, analyte_out, limits_out, samples_out
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.shared import FlagOut, Number, RequestModel, ResponseModel, SpectrumIn, gather
from tinctor.pls.calibrate import fit_model
from tinctor.pls.document import model_document
from tinctor.pls.limits import f_quantile
from tinctor.pls.model import Model
from tinctor.pls.validate import HAALAND_THOMAS_LEVEL, CrossValidation, cross_validate, folds_of, haaland_thomas, one_standard_error

__all__ = ["CalibrateRequest", "CalibrateResponse", "run"]

Schema = Literal["calibrate/1"]
Selection = Literal["one-standard-error", "f-test", "minimum"]


class CalibrateRequest(RequestModel):
    """Learn from mixtures of known composition how much of each analyte is in a spectrum."""

    schema_: Annotated[Schema, Field(alias="schema")] = "calibrate/1"
    spectra: list[SpectrumIn] = Field(min_length=3, max_length=10_000)
    references: list[ReferenceIn] = Field(min_length=3, max_length=10_000, description="what each spectrum's sample holds")
    groups: dict[str, str] = Field(default={}, description="id to preparation: replicates of one preparation share a group")
    unit: str = Field(description="of the references, as text; kept with the model")
    preprocess: list[StepIn] = Field(default=[], max_length=20, description="steps before the model, in order")
    max_components: Annotated[int, Field(ge=1, le=60)] = 10
    selection: Selection | Annotated[int, Field(ge=1, le=60)] = "one-standard-error"
    folds: Literal["leave-one-group-out"] | Annotated[int, Field(ge=2, le=1000)] = "leave-one-group-out"
    seed: Annotated[int, Field(ge=0)] = 0
    joint: bool = Field(default=False, description="one model for all analytes; one for each otherwise")
    reference_u: dict[str, Number] = Field(default={}, description="standard uncertainty of the references, by analyte")
    coverage: Number = Field(0.95, ge=0.68, le=0.9999)
    test: TestIn | None = Field(None, description="spectra and references kept out of everything")


class CalibrateResponse(ResponseModel):
    """The model, and how it will do."""

    schema_: Annotated[Schema, Field(alias="schema")] = "calibrate/1"
    model: dict[str, Any] = Field(description="plain JSON, enough to predict")
    analytes: list[AnalyteOut]
    samples: list[SampleOut] = Field(description="training samples under each model: scores, leverage, T2, Q")
    limits: list[LimitsOut] = Field(description="of each model")
    outliers: list[OutlierOut]
    flags: list[FlagOut]
    provenance: Provenance


def run(request: CalibrateRequest) -> CalibrateResponse:
    """Train and validate.

    Raises
    ------
    InputError
        Listing every fault of the request, or what the spectra cannot teach.

    Examples
    --------
    >>> def spectrum(k, a, b):
    ...     return {"id": f"m{k}", "wavelength_nm": [400, 500, 600], "absorbance": [a, a + b, 0.5 * b]}
    >>> levels = [(0.1, 0.5), (0.2, 0.1), (0.3, 0.4), (0.4, 0.2), (0.5, 0.3)]
    >>> response = run(CalibrateRequest.model_validate({
    ...     "schema": "calibrate/1", "unit": "g/L", "max_components": 2, "selection": 2,
    ...     "spectra": [spectrum(k, a, b) for k, (a, b) in enumerate(levels)],
    ...     "references": [{"id": f"m{k}", "values": {"a": a}} for k, (a, _) in enumerate(levels)],
    ... }))
    >>> response.analytes[0].chosen_components, round(response.analytes[0].table[2].rmsecv, 9)
    (2, 0.0)
    """
    training, test = training_of(request)
    parts = [list(range(len(training.names)))] if request.joint else [[j] for j in range(len(training.names))]
    models: list[Model] = []
    analytes: list[AnalyteOut] = []
    for columns in parts:
        (found,) = gather([("$", lambda columns=columns: _one(request, training, test, columns))])
        models.append(found[0])
        analytes += found[1]
    samples, outliers = samples_out(models, training)
    record = provenance(
        request, [], request.model_dump(by_alias=True, exclude={"spectra", "references", "test", "schema_"}), with_scipy=True
    )
    return CalibrateResponse(
        model=model_document(models, record.model_dump()),
        analytes=analytes,
        samples=samples,
        limits=[limits_out(model) for model in models],
        outliers=outliers,
        flags=_flags(request, training, models),
        provenance=record,
    )


def _one(
    request: CalibrateRequest, training: Training, test: Training | None, columns: list[int]
) -> tuple[Model, list[AnalyteOut]]:
    """One model of one or several analytes: cross-validated, sized, trained on everything."""
    Y = training.Y[:, columns]
    folds = folds_of(
        training.groups, _spread_over(Y), None if request.folds == "leave-one-group-out" else request.folds, request.seed
    )
    smallest = min(len(inside) for inside, _ in folds)
    if request.max_components > smallest - 1:
        raise InputError.single(
            "too-many-components",
            ".max_components",
            f"the smallest training part of a fold has {smallest} spectra and allows {smallest - 1} components, "
            f"found {request.max_components}",
            "ask for fewer components, or prepare more mixtures",
        )
    cv = cross_validate(training.X, training.wavelength_nm, Y, training.steps, request.max_components, folds, training.groups)
    chosen = _chosen(request, cv)
    names = [training.names[j] for j in columns]
    reference_u = np.array([request.reference_u.get(name, 0.0) for name in names])

    def model_of(components: int) -> Model:
        return fit_model(
            training.X, training.wavelength_nm, Y, names, request.unit, training.steps, components,
            preparations=len(np.unique(training.groups)), reference_u=reference_u, coverage=request.coverage,
        )  # fmt: skip

    every = [model_of(h) for h in range(1, request.max_components + 1)]
    out = [analyte_out(j, k, training, test, cv, every, chosen) for k, j in enumerate(columns)]
    return every[chosen - 1], out


def _spread_over(Y: FloatArray) -> FloatArray:
    """What folds are spread over: the reference, or the sum of several in units of their spread."""
    spread = Y.std(axis=0)
    return np.asarray((Y / np.where(spread > 0, spread, 1.0)).sum(axis=1))


def _chosen(request: CalibrateRequest, cv: CrossValidation) -> int:
    """The number of components; of several analytes together the largest that any of them needs."""
    if isinstance(request.selection, int):
        if request.selection > request.max_components:
            raise InputError.single(
                "selection",
                ".selection",
                f"at most max_components ({request.max_components}) can be chosen, found {request.selection}",
            )
        return request.selection
    columns = range(cv.errors.shape[2])
    if request.selection == "one-standard-error":
        return max(one_standard_error(cv, j) for j in columns)
    if request.selection == "f-test":
        return max(haaland_thomas(cv, j, lambda n: f_quantile(1 - HAALAND_THOMAS_LEVEL, n, n)) for j in columns)
    return max(int(np.argmin(cv.press[1:, j])) + 1 for j in columns)


def _flags(request: CalibrateRequest, training: Training, models: list[Model]) -> list[FlagOut]:
    flags = []
    preparations = len(np.unique(training.groups))
    for model in models:
        if preparations < 6 * (model.components + 1):
            # ASTM E1655 asks for 6 (k + 1) calibration samples (from memory)
            message = (
                f"{preparations} preparations are few for {model.components} components of {', '.join(model.names)}: "
                f"{6 * (model.components + 1)} are usual (6 (k + 1), ASTM E1655, from memory)"
            )
            flags.append(FlagOut(code="few-preparations", severity="info", message=message, components=list(model.names)))
    if any(step.step == "autoscale" for step in training.steps):
        message = "autoscale makes empty, noisy regions count like bands: compare with the model without it"
        flags.append(FlagOut(code="autoscaled", severity="warning", message=message))
    missing = [name for name in training.names if name not in request.reference_u]
    if missing:
        message = f"reference_u is not stated for {', '.join(missing)}: errors of the references count as the model's"
        flags.append(FlagOut(code="reference-u-not-stated", severity="info", message=message, components=missing))
    return flags
