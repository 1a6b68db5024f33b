"""Checked, read-only float64 arrays: the ground every domain value stands on."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from tinctor.errors import Fault, InputError

__all__ = ["FloatArray", "finite_array", "non_negative", "quoted", "read_only"]

FloatArray = NDArray[np.float64]


def read_only(values: ArrayLike) -> FloatArray:
    """Return `values` as a float64 array that cannot be written; copied unless it is such an array already."""
    array = np.asarray(values, dtype=np.float64)
    if array.flags.writeable or not array.flags.c_contiguous:
        array = np.array(array, dtype=np.float64, order="C")
        array.setflags(write=False)
    return array


def finite_array(values: ArrayLike, name: str, *, ndim: int, unit: str = "") -> FloatArray:
    """Return `values` as a read-only array of `ndim` dimensions whose every element is finite.

    Raises
    ------
    InputError
        Naming the array, the index and the value of the first elements that are not finite numbers.
    """
    try:
        array = read_only(values)
    except OverflowError as error:  # a whole number beyond float64
        message = f"{name} must be finite numbers, found one too large for any reading"
        raise InputError.single("not-finite", f".{name}", message, "numbers beyond 1e308 are refused") from error
    except (TypeError, ValueError) as error:
        raise InputError.single("not-numeric", f".{name}", f"{name} must be numbers, found something else: {error}") from error
    if array.ndim != ndim:
        raise InputError.single("wrong-shape", f".{name}", f"{name} must have {ndim} dimension(s), found shape {array.shape}")
    # The sum is finite whenever all elements are (short of overflow), and needs no temporary of the array's size.
    if array.size and not np.isfinite(array.sum()):
        bad = np.argwhere(~np.isfinite(array))
        if len(bad):
            raise InputError([_not_finite(array, name, unit, tuple(int(k) for k in index)) for index in bad])
    return array


def non_negative(values: ArrayLike, name: str, *, ndim: int, unit: str = "") -> FloatArray:
    """Return `values` as a finite read-only array with no element below zero."""
    array = finite_array(values, name, ndim=ndim, unit=unit)
    if array.size and array.min() < 0:
        index = tuple(int(k) for k in np.argwhere(array < 0)[0])
        raise InputError.single(
            "negative", f".{name}{_brackets(index)}", f"{name} must not be negative, found {array[index]:g}{unit and ' ' + unit}"
        )
    return array


def quoted(names: Sequence[str], limit: int = 6) -> str:
    """Return names in quotes, the first `limit` of them."""
    text = ", ".join(repr(name) for name in names[:limit])
    return text if len(names) <= limit else f"{text} and {len(names) - limit} more"


def _not_finite(array: FloatArray, name: str, unit: str, index: tuple[int, ...]) -> Fault:
    value = array[index]
    what = "not a number" if np.isnan(value) else "infinite"
    return Fault(
        "not-finite",
        f".{name}{_brackets(index)}",
        f"{name}{_brackets(index)} must be a finite number{unit and ' in ' + unit}, found {value} ({what})",
        "remove the reading or measure it again: missing and over-range readings are not guessed",
    )


def _brackets(index: tuple[int, ...]) -> str:
    return "".join(f"[{k}]" for k in index)
