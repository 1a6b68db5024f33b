"""The layouts of a plain export: cells with a given decimal mark to spectra, or the first reason why not."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import WAVELENGTH_LIMITS_NM
from tinctor.errors import Fault, InputError, UnreadableFileError
from tinctor.files.numbers import first_wrong, is_number, numbers
from tinctor.files.table import MOST_FIELDS, Cells
from tinctor.spectrum import Spectrum

__all__ = ["ROW_KEYS", "spectra_by_layout"]

#: Named columns that may stand between the id and the wavelengths of the rows layout.
ROW_KEYS: Final = ("path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u")

MISSING: Final = "missing and over-range readings are not guessed: measure again, or leave the spectrum or the wavelength out"


def spectra_by_layout(layout: str, cells: Cells, decimal: str, source: str, stem: str) -> list[Spectrum]:
    """Return the spectra that the cells hold in a layout.

    Parameters
    ----------
    layout
        "two-columns", "columns" or "rows".
    decimal
        "point" or "comma".
    source, stem
        The file's name for messages, and the id of a single spectrum without one.

    Raises
    ------
    UnreadableFileError
        Saying what does not fit, with line and column.
    """
    return READERS[layout](cells, decimal, source, stem)


def _columns(cells: Cells, decimal: str, source: str, stem: str, width: int | None = None) -> list[Spectrum]:
    """First column wavelength, one spectrum in each further column, ids in one header row."""
    rows = cells.rows
    has_header = not is_number(rows[0][0], decimal)
    fields = len(rows[0])
    if (width and fields != width) or fields < 2:
        raise _fault("layout", source, cells, 0, 0, f"expected {width or 'at least 2'} columns, found {fields}")
    header = rows[0] if has_header else ["wavelength_nm", stem]
    if len(header) != fields or (not has_header and fields != 2):
        raise _fault("no-header", source, cells, 0, 0, f"{fields - 1} spectra need a header row with their ids, found numbers")
    body = range(1 if has_header else 0, len(rows))
    _check_widths(cells, body, fields, source)
    _check_points(len(body), source)
    values = np.stack([_row_numbers(cells, k, decimal, source) for k in body])
    axis = _axis(values[:, 0], [f"line {cells.lines[k]}" for k in body], source)
    ids = header[1:] if has_header and not _same_as_quantity(header, fields) else [stem, *header[2:]]
    _check_ids(ids, source, f"line {cells.lines[0]}")
    return [_spectrum(i, axis, values[:, k + 1], source) for k, i in enumerate(ids)]


def _two_columns(cells: Cells, decimal: str, source: str, stem: str) -> list[Spectrum]:
    return _columns(cells, decimal, source, stem, width=2)


def _rows(cells: Cells, decimal: str, source: str, _: str) -> list[Spectrum]:
    """A header whose cells from some column on are wavelengths; one spectrum a row, its id first."""
    header = cells.rows[0]
    first = next((k for k in range(1, len(header)) if is_number(header[k], decimal)), None)
    if first is None or is_number(header[0], decimal):
        raise _fault("layout", source, cells, 0, 0, "expected wavelengths in the header row, found none")
    keys = header[1:first]
    for k, key in enumerate(keys, start=1):
        if key not in ROW_KEYS:
            raise _fault(
                "unknown-column", source, cells, 0, k, f"expected one of {', '.join(ROW_KEYS)} or a wavelength, found {key!r}"
            )
    if len(set(keys)) < len(keys):
        raise _fault("duplicate-column", source, cells, 0, 1, f"each column may stand once, found {', '.join(keys)}")
    axis = _axis(_row_numbers(cells, 0, decimal, source, first), [f"column {k + 1}" for k in range(first, len(header))], source)
    _check_points(len(axis), source)
    body = range(1, len(cells.rows))
    if not body:
        raise _fault("no-spectra", source, cells, 0, 0, "expected one spectrum a row below the header, found none")
    _check_widths(cells, body, len(header), source)
    ids = [cells.rows[k][0] for k in body]
    _check_ids(ids, source, "column 1")
    spectra = []
    for k, i in zip(body, ids, strict=True):
        row = _row_numbers(cells, k, decimal, source, 1)
        cell = dict(zip(keys, row[: first - 1].tolist(), strict=True))
        spectra.append(_spectrum(i, axis, row[first - 1 :], f"{source}, line {cells.lines[k]}", cell))
    return spectra


READERS: Final[dict[str, Callable[[Cells, str, str, str], list[Spectrum]]]] = {
    "two-columns": _two_columns,
    "columns": _columns,
    "rows": _rows,
}


def _same_as_quantity(header: Sequence[str], fields: int) -> bool:
    """A single column headed by the quantity's name instead of a sample's id."""
    return fields == 2 and header[1].strip().casefold() in {"", "a", "abs", "absorbance"}


def _spectrum(i: str, axis: FloatArray, absorbance: FloatArray, where: str, cell: dict[str, float] | None = None) -> Spectrum:
    try:
        return Spectrum(i, axis, absorbance, **(cell or {}))
    except InputError as error:
        raise UnreadableFileError([Fault(f.code, f"{where}, spectrum {i!r}", f.message, f.hint) for f in error.faults]) from error


def _row_numbers(cells: Cells, row: int, decimal: str, source: str, start: int = 0) -> FloatArray:
    texts = cells.rows[row][start:]
    wrong = first_wrong(texts, decimal)
    if wrong is not None:
        found = texts[wrong]
        what = f"found {found!r}" if found else "found an empty cell"
        raise _fault(
            "not-a-number", source, cells, row, start + wrong, f"expected a number with a decimal {decimal}, {what}", MISSING
        )
    values = numbers(texts, decimal)
    if not np.isfinite(values).all():
        k = int(np.flatnonzero(~np.isfinite(values))[0])
        raise _fault("not-finite", source, cells, row, start + k, f"{texts[k]} is too large for a reading")
    return values


def _axis(axis: FloatArray, places: Sequence[str], source: str) -> FloatArray:
    """Return an axis whose steps all go one way and whose values can be nanometres."""
    low, high = WAVELENGTH_LIMITS_NM
    outside = np.flatnonzero((axis < low) | (axis > high))
    if outside.size:
        k = int(outside[0])
        message = f"expected a wavelength between {low:g} and {high:g} nm, found {axis[k]:g}"
        raise UnreadableFileError.single("axis-not-nm", f"{source}, {places[k]}", message, "convert the axis to nm")
    step = np.diff(axis)
    repeated = np.flatnonzero(step == 0)
    if repeated.size:
        k = int(repeated[0]) + 1
        raise UnreadableFileError.single(
            "duplicate-wavelength", f"{source}, {places[k]}", f"{axis[k]:g} nm stands twice", "keep one reading per wavelength"
        )
    if step.size and not (np.all(step > 0) or np.all(step < 0)):
        k = int(np.flatnonzero(np.sign(step) != np.sign(step[0]))[0]) + 1
        message = f"wavelengths must rise or fall throughout, found {axis[k]:g} nm after {axis[k - 1]:g} nm"
        raise UnreadableFileError.single("axis-not-monotonic", f"{source}, {places[k]}", message, "sort the readings")
    return axis


def _check_widths(cells: Cells, body: range, fields: int, source: str) -> None:
    for k in body:
        if len(cells.rows[k]) != fields:
            raise _fault(
                "ragged", source, cells, k, 0, f"expected {fields} columns as in line {cells.lines[0]}, found {len(cells.rows[k])}"
            )


def _check_points(points: int, source: str) -> None:
    if points < 2:
        raise UnreadableFileError.single("too-few-points", source, f"expected a spectrum of at least 2 wavelengths, found {points}")
    if points > MOST_FIELDS:
        raise UnreadableFileError.single("too-many-points", source, f"found {points} wavelengths; at most {MOST_FIELDS} are read")


def _check_ids(ids: Sequence[str], source: str, where: str) -> None:
    if "" in ids:
        raise UnreadableFileError.single(
            "empty-id", f"{source}, {where}", f"spectrum {ids.index('') + 1} has no id", "name every spectrum"
        )
    twice = [i for i, count in Counter(ids).items() if count > 1]
    if twice:
        raise UnreadableFileError.single(
            "duplicate-id", f"{source}, {where}", f"the id {twice[0]!r} stands more than once", "rename one"
        )


def _fault(code: str, source: str, cells: Cells, row: int, column: int, message: str, hint: str = "") -> UnreadableFileError:
    place = f"{source}, line {cells.lines[row]}, column {column + 1}"
    return UnreadableFileError([Fault(code, place, message, hint)])
