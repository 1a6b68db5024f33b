"""The operation predict/1: values of new spectra by a PLS model, and whether it was taught anything like them."""

from __future__ import annotations

from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field

from tinctor.errors import Fault, InputError
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.shared import FlagOut, RequestModel, ResponseModel, SpectrumIn, gather
from tinctor.pls.document import models_of
from tinctor.pls.model import Model, Predicted
from tinctor.spectrum import Spectrum

__all__ = ["PredictRequest", "PredictResponse", "run"]

Schema = Literal["predict/1"]
StatusWord = Literal["accepted", "flagged", "refused"]

#: A spectrum whose T2 or Q exceeds its limit by this factor is refused: the model was taught nothing like it (by judgement).
REFUSED_BEYOND = 10.0
#: A value outside the references by more than this share of their range is refused (by judgement).
RANGE_REFUSED = 0.25


class PredictRequest(RequestModel):
    """How much of each analyte is in a spectrum, by a model from calibrate."""

    schema_: Annotated[Schema, Field(alias="schema")] = "predict/1"
    model: dict[str, Any] = Field(description="`model` of a calibrate response")
    spectra: list[SpectrumIn] = Field(min_length=1, max_length=100_000)


class ValueOut(ResponseModel):
    """One analyte of one spectrum: null numbers where it is refused."""

    name: str
    status: StatusWord
    unit: str
    value: float | None
    u: float | None
    interval: list[float] | None
    leverage: float
    t2: float
    q_residual: float


class PredictedOut(ResponseModel):
    """One spectrum."""

    id: str
    status: StatusWord
    analytes: list[ValueOut]
    flags: list[FlagOut]


class PredictResponse(ResponseModel):
    """Results in the order of the spectra."""

    schema_: Annotated[Schema, Field(alias="schema")] = "predict/1"
    results: list[PredictedOut]
    provenance: Provenance


def run(request: PredictRequest) -> PredictResponse:
    """Predict.

    Raises
    ------
    InputError
        For a damaged or foreign model, faults of the spectra, or spectra that do not cover the model's range.
    """
    models, spectra = gather(
        [
            ("$.model", lambda: models_of(request.model)),
            ("$", lambda: gather([(f"$.spectra[{k}]", s.to_spectrum) for k, s in enumerate(request.spectra)])),
        ]
    )
    _check_ids(spectra)
    results = gather([(f"$.spectra[{k}]", lambda s=s: _one(models, s)) for k, s in enumerate(spectra)])
    settings = {"checksum": request.model.get("checksum"), "refused_beyond": REFUSED_BEYOND, "range_refused": RANGE_REFUSED}
    return PredictResponse(results=results, provenance=provenance(request, [], settings))


def _check_ids(spectra: list[Spectrum]) -> None:
    ids = [s.id for s in spectra]
    twice = [Fault("duplicate-id", f"$.spectra[{k}].id", f"{i!r} stands twice") for k, i in enumerate(ids) if i in set(ids[:k])]
    if twice:
        raise InputError(twice)


def _one(models: list[Model], spectrum: Spectrum) -> PredictedOut:
    # as in training: what the cell and the dilution did to the absorbance is undone
    reading = spectrum.absorbance[None, :] * (spectrum.dilution_factor / spectrum.path_length_cm)
    analytes, flags = [], []
    for model in models:
        found = model.predict(model.on_axis(reading, spectrum.wavelength_nm))
        flags += _flags(model, found)
        analytes += [_value(model, found, k) for k in range(len(model.names))]
    words = [a.status for a in analytes]
    status: StatusWord = "accepted"
    if any(word != "accepted" for word in words):
        status = "refused" if all(word == "refused" for word in words) else "flagged"
    return PredictedOut(id=spectrum.id, status=status, analytes=analytes, flags=flags)


def _value(model: Model, found: Predicted, k: int) -> ValueOut:
    status = _status(model, found, k)
    shown = status != "refused"
    return ValueOut(
        name=model.names[k],
        status=status,
        unit=model.unit,
        value=float(found.value[0, k]) if shown else None,
        u=float(found.u[0, k]) if shown else None,
        interval=[float(found.low[0, k]), float(found.high[0, k])] if shown else None,
        leverage=float(found.leverage[0]),
        t2=float(found.t2[0]),
        q_residual=float(found.q_residual[0]),
    )


def _status(model: Model, found: Predicted, k: int) -> StatusWord:
    low, high = model.limits.reference[k]
    beyond = max(low - found.value[0, k], found.value[0, k] - high)
    far = _times_beyond(model, found) > REFUSED_BEYOND or beyond > RANGE_REFUSED * (high - low)
    if far:
        return "refused"
    return "flagged" if found.outside_space[0] or found.outside_range[0, k] else "accepted"


def _times_beyond(model: Model, found: Predicted) -> float:
    limits = model.limits
    q = found.q_residual[0] / limits.q if limits.q > 0 else (np.inf if found.outside_space[0] else 0.0)
    return float(max(found.t2[0] / limits.t2_new, q))


def _flags(model: Model, found: Predicted) -> list[FlagOut]:
    flags, limits = [], model.limits
    refused = any(_status(model, found, k) == "refused" for k in range(len(model.names)))
    severity: Literal["warning", "refusal"] = "refusal" if refused else "warning"
    names = list(model.names)
    if found.q_residual[0] > limits.q:
        message = (
            f"Q residual {found.q_residual[0]:.3g} above {limits.q:.3g}: the spectrum holds something that the model was not taught"
        )
        flags.append(FlagOut(code="unmodelled-absorber", severity=severity, message=message, components=names))
    if found.t2[0] > limits.t2_new:
        message = f"T2 {found.t2[0]:.3g} above {limits.t2_new:.3g}: outside the space of the training mixtures"
        flags.append(FlagOut(code="outside-calibration-space", severity=severity, message=message, components=names))
    for k, name in enumerate(names):
        if found.outside_range[0, k]:
            low, high = limits.reference[k]
            message = f"{name}: {found.value[0, k]:.4g} lies outside the references, {low:.4g} to {high:.4g} {model.unit}"
            flags.append(FlagOut(code="outside-reference-range", severity=severity, message=message, components=[name]))
    return flags
