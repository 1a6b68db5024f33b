"""A model as a plain JSON document and back: numbers and words, a version and a checksum; nothing that could be executed.

The checksum is the SHA-256 of the document without it, keys sorted and blanks left out, so that a damaged or hand-edited file is
noticed before it predicts anything.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from typing import Any, Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import Fault, InputError
from tinctor.pls.model import Limits, Model
from tinctor.pls.preprocess import FittedStep, Step

__all__ = ["SCHEMA", "checksum", "model_document", "models_of"]

SCHEMA: Final = "pls-model/1"

#: Arrays of a model by their number of dimensions.
ARRAYS: Final = {
    "intercept": 1, "coefficients": 2, "mean_x": 1, "rotations": 2, "loadings": 2, "score_variance": 1, "mse": 1, "reference_u": 1,
}  # fmt: skip


def model_document(models: Sequence[Model], provenance: Mapping[str, Any] | None = None) -> dict[str, Any]:
    """Return the document of one or more models that read the same spectra.

    Examples
    --------
    >>> from tinctor.pls.calibrate import fit_model
    >>> X = np.array([[0.1, 0.2], [0.2, 0.5], [0.3, 0.5]])
    >>> model = fit_model(X, np.array([400.0, 500.0]), X @ np.array([[1.0], [2.0]]), ["a"], "g/L", [], 1)
    >>> models_of(model_document([model]))[0].components
    1
    """
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "wavelength_nm": models[0].wavelength_nm.tolist(),
        "unit": models[0].unit,
        "models": [_model(model) for model in models],
        "provenance": dict(provenance or {}),
    }
    return {**document, "checksum": checksum(document)}


def checksum(document: Mapping[str, Any]) -> str:
    """Return the SHA-256 of a document without its checksum."""
    rest = {key: value for key, value in document.items() if key != "checksum"}
    text = json.dumps(rest, sort_keys=True, separators=(",", ":"), allow_nan=False, ensure_ascii=False)
    return hashlib.sha256(text.encode()).hexdigest()


def models_of(document: Any) -> list[Model]:
    """Return the models of a document.

    Raises
    ------
    InputError
        When it is not one, of another version, damaged, or its parts do not fit together.
    """
    if not isinstance(document, dict) or document.get("schema") != SCHEMA:
        found = document.get("schema") if isinstance(document, dict) else type(document).__name__
        raise InputError.single(
            "not-a-model", ".schema", f"expected a model, {SCHEMA!r}, found {found!r}", "make it with calibrate"
        )
    try:
        sound = checksum(document) == document.get("checksum")
    except ValueError as error:
        raise InputError.single("damaged-model", "", f"the model holds a number that is none: {error}") from error
    if not sound:
        raise InputError.single(
            "damaged-model",
            ".checksum",
            "the model's checksum is not that of its contents: it is damaged or was edited",
            "train it again",
        )
    try:
        axis = np.array(document["wavelength_nm"], dtype=np.float64)
        return [_read(part, axis, document["unit"]).checked() for part in document["models"]]
    except (KeyError, TypeError, ValueError, IndexError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError.single("damaged-model", "", f"a part of the model is missing or of the wrong kind: {error}") from error


def _model(model: Model) -> dict[str, Any]:
    limits = model.limits
    return {
        "names": list(model.names),
        "components": model.components,
        "preprocess": [_step(step) for step in model.steps],
        **{name: getattr(model, name).tolist() for name in ARRAYS},
        "degrees_of_freedom": model.degrees_of_freedom,
        "t_factor": model.t_factor,
        "limits": {
            "samples": limits.samples,
            "preparations": limits.preparations,
            "coverage": limits.coverage,
            "t2": limits.t2,
            "t2_new": limits.t2_new,
            "q": limits.q,
            "leverage": limits.leverage,
            "reference": limits.reference.tolist(),
        },
    }


def _step(step: FittedStep) -> dict[str, Any]:
    asked = step.step
    return {
        "step": asked.step,
        "low_nm": asked.low_nm,
        "high_nm": asked.high_nm,
        "window": asked.window,
        "polynomial": asked.polynomial,
        "derivative": asked.derivative,
        "wavelength_nm": step.wavelength_nm.tolist(),
        "keep": [step.keep.start, step.keep.stop],
        "values": step.values.tolist(),
    }


def _read(part: dict[str, Any], axis: FloatArray, unit: str) -> Model:
    limits = dict(part["limits"])
    limits["reference"] = np.array(limits["reference"], dtype=np.float64).reshape(-1, 2)
    arrays = {name: _array(part[name], name, ndim) for name, ndim in ARRAYS.items()}
    return Model(
        names=tuple(part["names"]),
        unit=unit,
        wavelength_nm=axis,
        steps=tuple(_read_step(step) for step in part["preprocess"]),
        components=int(part["components"]),
        degrees_of_freedom=int(part["degrees_of_freedom"]),
        t_factor=float(part["t_factor"]),
        limits=Limits(**limits),
        **arrays,
    )


def _read_step(part: dict[str, Any]) -> FittedStep:
    asked = Step(part["step"], part["low_nm"], part["high_nm"], part["window"], part["polynomial"], part["derivative"])
    keep = slice(int(part["keep"][0]), int(part["keep"][1]))
    return FittedStep(asked, np.array(part["wavelength_nm"], dtype=np.float64), keep, np.array(part["values"], dtype=np.float64))


def _array(values: Any, name: str, ndim: int) -> FloatArray:
    array = np.array(values, dtype=np.float64)
    if array.ndim != ndim:
        raise InputError([Fault("damaged-model", f".{name}", f"expected {ndim} dimension(s), found {array.ndim}")])
    return array
