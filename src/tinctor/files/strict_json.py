"""JSON text, read strictly: duplicate keys and runaway nesting are refused, with the path of each.

Numbers are left as the standard library reads them: `NaN`, `Infinity` and numbers too large for float64 come out as
non-finite floats, which whoever checks the document refuses with their path (`non_finite_faults` finds them all).
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterator
from typing import Any, Final

from tinctor.errors import Fault, InputError

__all__ = ["DEEPEST", "non_finite_faults", "parse"]

#: Deeper nesting than any document of the contract, and far from the interpreter's recursion limit.
DEEPEST: Final = 32


class _Repeating(dict[str, Any]):
    """An object of the text in which keys were repeated."""

    repeated: tuple[str, ...] = ()


def parse(text: str | bytes) -> Any:
    """Return the value that a JSON text stands for.

    Raises
    ------
    InputError
        For text that is not JSON (with line and column), not UTF-8, nested too deeply, or with repeated keys.

    Examples
    --------
    >>> parse('{"id": "a", "absorbance": [0.1, 0.2]}')
    {'id': 'a', 'absorbance': [0.1, 0.2]}
    """
    repeats: list[_Repeating] = []

    def build(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        found = dict(pairs)
        if len(found) == len(pairs):
            return found
        repeating = _Repeating(found)
        keys = [key for key, _ in pairs]
        repeating.repeated = tuple(dict.fromkeys(key for key in keys if keys.count(key) > 1))
        repeats.append(repeating)
        return repeating

    try:
        value = json.loads(_decoded(text), object_pairs_hook=build)
    except json.JSONDecodeError as error:
        where = f"line {error.lineno}, column {error.colno}"
        raise InputError.single("not-json", "$", f"expected JSON, found a fault at {where}: {error.msg}") from error
    except RecursionError as error:
        raise _too_deep() from error
    except ValueError as error:  # a whole number of thousands of digits
        raise InputError.single("not-finite", "$", f"a number cannot be read: {error}") from error
    _check_depth(value)
    if repeats:
        raise InputError(_repeat_faults(value))
    return value


def non_finite_faults(value: Any) -> list[Fault]:
    """Return a fault for each number of a parsed document that is not finite, with its path.

    Examples
    --------
    >>> [fault.path for fault in non_finite_faults(parse('{"a": [1, NaN, 1e400]}'))]
    ['$.a[1]', '$.a[2]']
    """
    return [
        Fault("not-finite", path, f"expected a finite number, found {item}", "NaN, Infinity and numbers beyond 1e308 are refused")
        for path, item in _walk(value)
        if isinstance(item, float) and not math.isfinite(item)
    ]


def _decoded(text: str | bytes) -> str:
    if isinstance(text, str):
        return text
    try:
        return text.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError.single(
            "not-utf-8", "$", f"expected UTF-8 text, found byte 0x{text[error.start]:02x} at {error.start}"
        ) from error


def _walk(value: Any, path: str = "$") -> Iterator[tuple[str, Any]]:
    yield path, value
    if isinstance(value, dict):
        for key, item in value.items():
            yield from _walk(item, f"{path}.{key}")
    elif isinstance(value, list):
        for k, item in enumerate(value):
            yield from _walk(item, f"{path}[{k}]")


def _check_depth(value: Any) -> None:
    level = [value] if isinstance(value, dict | list) else []
    for _ in range(DEEPEST):
        inside = (item for outer in level for item in (outer.values() if isinstance(outer, dict) else outer))
        level = [item for item in inside if isinstance(item, dict | list)]
        if not level:
            return
    raise _too_deep()


def _too_deep() -> InputError:
    return InputError.single("too-deep", "$", f"the document is nested more than {DEEPEST} deep", "no document of this tool is")


def _repeat_faults(value: Any) -> list[Fault]:
    return [
        Fault(
            "duplicate-key", f"{path}.{key}", f"the key {key!r} stands more than once", "keep one: which was meant is not guessed"
        )
        for path, item in _walk(value)
        if isinstance(item, _Repeating)
        for key in item.repeated
    ]
