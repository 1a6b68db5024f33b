"""`tinctor json` and `tinctor schema`: the operations as documents."""

from __future__ import annotations

import json
import sys
from typing import Annotated

import typer

from tinctor.cli.faults import guarded
from tinctor.cli.output import put

__all__ = ["run_json", "show_schema"]

OperationName = Annotated[
    str,
    typer.Argument(
        help="Name of the operation: resolve, overlap, wavelengths, dilution, standards, determine, calibrate, predict, ..."
    ),
]


def run_json(operation: OperationName) -> None:
    """Run an operation: JSON request on standard input, JSON response on standard output, error document on standard error."""
    with guarded(as_json=True):
        from tinctor.operations.registry import run_document

        put(json.dumps(run_document(operation, sys.stdin.buffer.read()), ensure_ascii=False) + "\n", None)


def show_schema(operation: OperationName) -> None:
    """JSON schemas of an operation's request and response."""
    with guarded(as_json=True):
        from tinctor.operations.registry import operation as find

        op = find(operation)
        schemas = {
            "request": op.request.model_json_schema(by_alias=True, mode="validation"),
            "response": op.response.model_json_schema(by_alias=True, mode="serialization"),
        }
        put(json.dumps(schemas, indent=2, ensure_ascii=False) + "\n", None)
