"""Numbers in text, read strictly: ASCII digits, one decimal mark, an exponent; nothing that has to be guessed."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray

__all__ = ["OTHER_MARK", "all_numbers", "first_wrong", "is_number", "numbers"]

#: Sign (ASCII or U+2212), digits with at most one decimal mark, exponent. No blanks, separators, nan, inf or hexadecimal.
PATTERNS: Final = {
    "point": re.compile(r"[+\-−]?(?:\d+\.?\d*|\.\d+)(?:[eE][+\-−]?\d+)?", re.ASCII),
    "comma": re.compile(r"[+\-−]?(?:\d+,?\d*|,\d+)(?:[eE][+\-−]?\d+)?", re.ASCII),
}

#: Every character that a number may hold, and the line feed that joins numbers here. Within this alphabet `float` takes
#: exactly what the patterns take; the unit tests hold the two against each other.
ALPHABETS: Final = {"point": re.compile(r"[0-9.+\-−eE\n]*"), "comma": re.compile(r"[0-9,+\-−eE\n]*")}

OTHER_MARK: Final = {"point": "comma", "comma": "point"}


def is_number(text: str, decimal: str) -> bool:
    """Return whether a cell is a number with this decimal mark ("point" or "comma").

    Examples
    --------
    >>> is_number("0,213", "comma"), is_number("0,213", "point"), is_number("1_000", "point"), is_number("nan", "point")
    (True, False, False, False)
    """
    return PATTERNS[decimal].fullmatch(text) is not None


def first_wrong(cells: Sequence[str], decimal: str) -> int | None:
    """Return the place of the first cell that is not a number, or `None`."""
    match = PATTERNS[decimal].fullmatch
    return next((k for k, cell in enumerate(cells) if match(cell) is None), None)


def numbers(cells: Sequence[str], decimal: str) -> FloatArray:
    """Return the values of cells that are all numbers, (n,); a number beyond float64 comes out infinite."""
    return _values("\n".join(cells), decimal) if cells else np.zeros(0)


def all_numbers(cells: Sequence[str], decimal: str) -> FloatArray | None:
    """Return the values of cells, (n,), or `None` when one of them is not a number.

    Much quicker than asking `is_number` of each cell.

    Examples
    --------
    >>> all_numbers(["0,213", "−1e-3"], "comma")
    array([ 0.213, -0.001])
    >>> all_numbers(["0,213", "****"], "comma") is None
    True
    """
    joined = "\n".join(cells)
    if not cells or ALPHABETS[decimal].fullmatch(joined) is None:
        return None if cells else np.zeros(0)
    try:
        values = _values(joined, decimal)
    except ValueError:
        return None
    return values if values.size == len(cells) else None  # a quoted cell may hold a line feed


def _values(joined: str, decimal: str) -> FloatArray:
    plain = joined.replace("−", "-")
    if decimal == "comma":
        plain = plain.replace(",", ".")
    return np.array(plain.split("\n"), dtype=np.float64)
