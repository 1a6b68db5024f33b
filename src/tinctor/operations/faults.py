"""Faults of a request: from the schema check to one error with JSON paths, and from an error to the body sent back."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any, Final

from pydantic import ValidationError

from tinctor.errors import Fault, InputError, TinctorError, UndeterminedError

__all__ = ["error_body", "faults_of", "json_path"]

#: Steps that the schema library puts into a location and that are not keys of the document.
NOT_KEYS: Final = frozenset({"by-name", "inline"})

#: Kinds of schema fault in our words; the rest keep the library's sentence.
WORDS: Final[dict[str, tuple[str, str, str]]] = {
    "missing": ("missing-key", "this key is required and is not there", ""),
    "extra_forbidden": (
        "unknown-key",
        "this key is not known here",
        "check the spelling; unknown keys are refused so that none is lost",
    ),
    "finite_number": (
        "not-finite",
        "expected a finite number, found {found}",
        "NaN, Infinity and numbers beyond 1e308 are refused",
    ),
    "float_type": ("not-a-number", "expected a number, found {found}", "numbers are written without quotes"),
    "int_type": ("not-a-number", "expected a whole number, found {found}", ""),
    "string_type": ("not-text", "expected text, found {found}", ""),
    "list_type": ("not-a-list", "expected a list, found {found}", ""),
    "model_type": ("not-an-object", "expected an object, found {found}", ""),
    "too_short": ("too-short", "expected at least {min_length} element(s), found {actual_length}", ""),
    "too_long": (
        "too-long",
        "expected at most {max_length} elements, found {actual_length}",
        "send the spectra in several requests",
    ),
    "greater_than_equal": ("out-of-range", "expected at least {ge}, found {found}", ""),
    "greater_than": ("out-of-range", "expected above {gt}, found {found}", ""),
    "less_than_equal": ("out-of-range", "expected at most {le}, found {found}", ""),
    "less_than": ("out-of-range", "expected below {lt}, found {found}", ""),
    "literal_error": ("unknown-word", "expected {expected}, found {found}", ""),
}


def faults_of(error: ValidationError) -> InputError:
    """Return our error for a failed schema check: every fault with its JSON path."""
    return InputError([_fault(item) for item in error.errors(include_url=False, include_context=True)])


def json_path(location: Sequence[str | int]) -> str:
    """Return a JSON path for a location.

    Examples
    --------
    >>> json_path(("spectra", 0, "absorbance", 17))
    '$.spectra[0].absorbance[17]'
    """
    path = "$"
    for step in location:
        if isinstance(step, int):
            path += f"[{step}]"
        elif step not in NOT_KEYS:
            path += f".{step}" if re.fullmatch(r"[A-Za-z_][\w-]*", step) else f"[{step!r}]"
    return path


def error_body(error: TinctorError) -> dict[str, Any]:
    """Return the error document of the contract: the same at every door.

    Examples
    --------
    >>> error_body(InputError.single("missing-key", "$.spectra", "this key is required and is not there"))["status"]
    422
    """
    faults = error.shown if isinstance(error, InputError) else ()
    more = error.more if isinstance(error, InputError) else 0
    total = len(faults) + more
    return {
        "schema": "error/1",
        "status": 422,
        "code": faults[0].code if total == 1 else ("undetermined" if isinstance(error, UndeterminedError) else "faults"),
        "message": faults[0].message if total == 1 else (f"{total} faults in the request" if total else str(error)),
        "faults": [{"code": f.code, "path": f.path, "message": f.message, "hint": f.hint} for f in faults],
        "more_faults": more,
    }


def _fault(item: Any) -> Fault:
    path = json_path(item["loc"])
    found = item.get("input")
    # a whole number beyond float64 is a number, and the schema library says that it is none
    too_large = item["type"] == "float_type" and isinstance(found, int) and not isinstance(found, bool)
    known = WORDS.get("finite_number" if too_large else item["type"])
    if known is None:
        return Fault(item["type"].replace("_", "-"), path, item["msg"])
    code, words, hint = known
    context = {"found": _shown(item.get("input")), **item.get("ctx", {})}
    return Fault(code, path, words.format(**context), hint)


def _shown(value: object) -> str:
    """The offending value, short and safe to print."""
    if isinstance(value, dict):
        return "an object"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    words = {"True": "true", "False": "false", "None": "null", "nan": "NaN", "inf": "Infinity", "-inf": "-Infinity"}
    text = words.get(repr(value), repr(value))
    return text if len(text) <= 40 else text[:37] + "..."
