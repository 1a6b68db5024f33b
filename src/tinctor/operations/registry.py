"""The operations by name, and the one way in for a document: text or object in, response document out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from importlib import import_module
from typing import Any, Final

from pydantic import BaseModel, ValidationError

from tinctor.errors import InputError
from tinctor.files.strict_json import parse
from tinctor.operations.faults import faults_of
from tinctor.operations.shared import RequestModel, ResponseModel

__all__ = ["OPERATIONS", "Operation", "dumped", "operation", "run_checked", "run_document"]

#: Operations by name, with the module that holds each: loaded when it is used.
OPERATIONS: Final[dict[str, str]] = {
    "calibrate": "tinctor.operations.calibrate",
    "determine": "tinctor.operations.determine",
    "dilution": "tinctor.operations.dilution",
    "mixtures": "tinctor.operations.mixtures",
    "overlap": "tinctor.operations.overlap",
    "predict": "tinctor.operations.predict",
    "resolve": "tinctor.operations.resolve",
    "standards": "tinctor.operations.standards",
    "transfer": "tinctor.operations.transfer",
    "wavelengths": "tinctor.operations.wavelengths",
}


@dataclass(frozen=True, slots=True)
class Operation:
    """One operation of the contract."""

    name: str
    request: type[RequestModel]
    response: type[ResponseModel]
    run: Callable[[Any], ResponseModel]


def operation(name: str) -> Operation:
    """Return an operation by name.

    Raises
    ------
    InputError
        For an unknown name, listing those known.
    """
    if name not in OPERATIONS:
        raise InputError.single(
            "unknown-operation", "", f"expected an operation, found {name!r}", f"one of {' '.join(sorted(OPERATIONS))}"
        )
    module = import_module(OPERATIONS[name])
    stem = name.capitalize()
    return Operation(name, getattr(module, f"{stem}Request"), getattr(module, f"{stem}Response"), module.run)


def run_document(name: str, request: str | bytes | dict[str, Any]) -> dict[str, Any]:
    """Run an operation on a request document and return the response document.

    Parameters
    ----------
    name
        "resolve".
    request
        JSON text, or the object it stands for.

    Raises
    ------
    InputError
        Listing every fault with its JSON path.

    Examples
    --------
    >>> run_document("resolve", '{"schema": "resolve/1"}')
    Traceback (most recent call last):
    tinctor.errors.InputError: this key is required and is not there [at $.components]
    this key is required and is not there [at $.spectra]
    """
    return dumped(run_checked(name, parse(request) if isinstance(request, str | bytes) else request))


def run_checked(name: str, document: Any) -> ResponseModel:
    """Check a request document, run the operation and return the response model.

    Raises
    ------
    InputError
        Listing every fault with its JSON path.
    """
    op = operation(name)
    if not isinstance(document, dict):
        raise InputError.single("not-an-object", "$", f"expected a JSON object, found {type(document).__name__}")
    if "schema" not in document:
        raise InputError.single("missing-key", "$.schema", f'expected "schema": "{name}/1", found none')
    try:
        checked = op.request.model_validate(document)
    except ValidationError as error:
        raise faults_of(error) from error
    return op.run(checked)


def dumped(response: BaseModel) -> dict[str, Any]:
    """Return a response as a plain document."""
    return response.model_dump(by_alias=True, mode="json", warnings=False)
