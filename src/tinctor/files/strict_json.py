"""JSON text, read strictly: repeated keys, runaway nesting and text that is no Unicode are refused, with their paths.

Numbers are left as the standard library reads them: `NaN`, `Infinity` and numbers too large for float64 come out as
non-finite floats or as whole numbers beyond it, which whoever checks the document refuses with their path
(`non_finite_faults` finds them all). Whole numbers of thousands of digits are refused here.
"""

from __future__ import annotations

import json
import math
import re
from collections import Counter
from collections.abc import Callable, Iterable, Iterator
from typing import Any, Final

from tinctor.errors import Fault, InputError

__all__ = ["DEEPEST", "child_path", "non_finite_faults", "parse"]

#: Deeper nesting than any document of the contract, and far from the interpreter's recursion limit.
DEEPEST: Final = 32

#: Whole numbers with more digits are beyond float64.
MOST_DIGITS: Final = 308

PLAIN_KEY: Final = re.compile(r"[A-Za-z_][A-Za-z0-9_\-]{0,79}")
SURROGATE_ESCAPE: Final = re.compile(r"\\u[dD][89a-fA-F]")


class _Repeating(dict[str, Any]):
    """An object of the text in which keys were repeated."""

    repeated: tuple[str, ...] = ()


def parse(text: str | bytes) -> Any:
    """Return the value that a JSON text stands for.

    Parameters
    ----------
    text
        JSON; bytes are taken as UTF-8, with or without byte order mark.

    Raises
    ------
    InputError
        For text that is not JSON (with line and column), not UTF-8, nested too deeply, with repeated keys, with half a
        surrogate pair, or with a whole number of thousands of digits. Repeated keys are all reported, with their paths.

    Examples
    --------
    >>> parse('{"id": "a", "absorbance": [0.1, 0.2]}')
    {'id': 'a', 'absorbance': [0.1, 0.2]}
    """
    decoded = _decoded(text)
    repeats: list[_Repeating] = []

    def build(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        found = dict(pairs)
        if len(found) == len(pairs):
            return found
        repeating = _Repeating(found)
        repeating.repeated = tuple(key for key, count in Counter(key for key, _ in pairs).items() if count > 1)
        repeats.append(repeating)
        return repeating

    value = _loaded(decoded, build)
    _check_depth(value)
    faults = list(_repeat_faults(value)) if repeats else []
    if SURROGATE_ESCAPE.search(decoded):
        faults += _surrogate_faults(value)
    if faults:
        raise InputError(faults)
    return value


def non_finite_faults(value: Any, path: str = "$") -> list[Fault]:
    """Return a fault for each number of a parsed document that float64 cannot hold, with its path.

    Examples
    --------
    >>> [fault.path for fault in non_finite_faults(parse('{"a": [1, NaN, 1e400]}'))]
    ['$.a[1]', '$.a[2]']
    """
    hint = "NaN, Infinity and numbers beyond 1e308 are refused"
    return [
        Fault("not-finite", place, f"expected a finite number, found {_brief(item)}", hint)
        for place, item in _walk(value, path, _all_finite)
        if isinstance(item, int | float) and not _is_finite(item)
    ]


def child_path(path: str, key: str | int) -> str:
    """Return the JSON path of an element of the list, or of a key of the object, at `path`.

    Examples
    --------
    >>> child_path("$", "spectra"), child_path("$.spectra", 3), child_path("$", "a b")
    ('$.spectra', '$.spectra[3]', '$["a b"]')
    """
    if isinstance(key, int):
        return f"{path}[{key}]"
    if PLAIN_KEY.fullmatch(key):
        return f"{path}.{key}"
    return f"{path}[{json.dumps(key if len(key) <= 80 else key[:80] + '...')}]"


def _decoded(text: str | bytes) -> str:
    if isinstance(text, bytes):
        try:
            return text.decode("utf-8-sig")
        except UnicodeDecodeError as error:
            raise InputError.single(
                "not-utf-8", "$", f"expected UTF-8 text, found byte 0x{text[error.start]:02x} at {error.start}"
            ) from error
    try:
        text.encode()
    except UnicodeEncodeError as error:
        raise InputError.single(
            "not-unicode", "$", f"expected Unicode text, found half a surrogate pair at {error.start}"
        ) from error
    return text.removeprefix("\ufeff")


def _loaded(text: str, build: Callable[[list[tuple[str, Any]]], dict[str, Any]]) -> Any:
    try:
        return json.loads(text, object_pairs_hook=build)
    except json.JSONDecodeError as error:
        where = f"line {error.lineno}, column {error.colno}"
        raise InputError.single("not-json", "$", f"expected JSON, found a fault at {where}: {error.msg}") from error
    except RecursionError as error:
        raise _too_deep() from error
    except ValueError as error:  # a whole number of thousands of digits: read again so that its path can be told
        value = json.loads(text, parse_int=lambda digits: int(digits) if len(digits) <= MOST_DIGITS else math.inf)
        _check_depth(value)
        raise InputError(non_finite_faults(value)) from error


def _walk(value: Any, path: str, nothing_in: Callable[[list[Any]], bool]) -> Iterator[tuple[str, Any]]:
    """Every value with its path; lists of which `nothing_in` is true are passed over, so that no path is built for each number."""
    yield path, value
    if isinstance(value, dict):
        for key, item in value.items():
            yield from _walk(item, child_path(path, key), nothing_in)
    elif isinstance(value, list) and not nothing_in(value):
        for k, item in enumerate(value):
            yield from _walk(item, child_path(path, k), nothing_in)


def _types(items: Iterable[Any]) -> set[type]:
    return set(map(type, items))


def _all_numbers(items: list[Any]) -> bool:
    return _types(items) <= {int, float}


def _all_finite(items: list[Any]) -> bool:
    try:
        return _all_numbers(items) and all(map(math.isfinite, items))
    except OverflowError:  # a whole number beyond float64
        return False


def _is_finite(item: float) -> bool:
    try:
        return math.isfinite(item)
    except OverflowError:
        return False


def _brief(item: float) -> str:
    return f"{item}" if isinstance(item, float) else "a whole number of more than 308 digits"


def _check_depth(value: Any) -> None:
    level = [value] if isinstance(value, dict | list) else []
    for _ in range(DEEPEST):
        below: list[Any] = []
        for outer in level:
            items = outer.values() if isinstance(outer, dict) else outer
            if not _types(items) <= {int, float, str, bool, type(None)}:
                below.extend(item for item in items if isinstance(item, dict | list))
        if not below:
            return
        level = below
    raise _too_deep()


def _too_deep() -> InputError:
    return InputError.single("too-deep", "$", f"the document is nested more than {DEEPEST} deep", "no document of this tool is")


def _repeat_faults(value: Any) -> Iterator[Fault]:
    for path, item in _walk(value, "$", _all_numbers):
        for key in item.repeated if isinstance(item, _Repeating) else ():
            message = f"the key {key[:80]!r} stands more than once"
            yield Fault("duplicate-key", child_path(path, key), message, "keep one: which was meant is not guessed")


def _surrogate_faults(value: Any) -> Iterator[Fault]:
    for path, item in _walk(value, "$", _all_numbers):
        texts = item.keys() if isinstance(item, dict) else [item] if isinstance(item, str) else []
        for text in texts:
            if any("\ud800" <= mark <= "\udfff" for mark in text):
                yield Fault("not-unicode", path, f"expected Unicode text, found half a surrogate pair in {text[:80]!a}")
