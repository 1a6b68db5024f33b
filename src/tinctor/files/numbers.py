"""Numbers in text, read strictly: ASCII digits, one decimal mark, an exponent; nothing that has to be guessed."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray

__all__ = ["first_wrong", "is_number", "numbers"]

#: Sign (ASCII or U+2212), digits with at most one decimal mark, exponent. No blanks, separators, nan, inf or hexadecimal.
PATTERNS: Final = {
    "point": re.compile(r"[+\-−]?(?:\d+\.?\d*|\.\d+)(?:[eE][+\-−]?\d+)?", re.ASCII),
    "comma": re.compile(r"[+\-−]?(?:\d+,?\d*|,\d+)(?:[eE][+\-−]?\d+)?", re.ASCII),
}


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
    joined = "\n".join(cells).replace("−", "-")
    if decimal == "comma":
        joined = joined.replace(",", ".")
    return np.array(joined.split("\n"), dtype=np.float64) if cells else np.zeros(0)
