"""The layouts of a plain export: cells with a given decimal mark to spectra, or the misfit that says why not."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import chain
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import Fault, InputError
from tinctor.files.grid import Grid, check_axis, check_ids, shown
from tinctor.files.misfit import Misfit, Stage, diagnosed
from tinctor.files.numbers import is_number
from tinctor.spectrum import Spectrum

__all__ = ["QUANTITY_NAMES", "ROW_KEYS", "LaidOut", "laid_out"]

#: Named columns that may stand between the id and the wavelengths of the rows layout.
ROW_KEYS: Final = ("path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u")

#: Headings of a single column of readings that name the quantity and no sample (compared without regard to case).
QUANTITY_NAMES: Final = frozenset({"abs", "absorbance"})

#: Words that stand for a missing or over-range value and are no heading of a column.
NO_HEADING: Final = frozenset({"nan", "na", "n/a", "null", "none", "inf", "over", "ovr", "overflow"})


@dataclass(frozen=True, slots=True)
class LaidOut:
    """The spectra of a file in one layout, and what was noticed on the way."""

    spectra: list[Spectrum]
    notes: list[str]


def laid_out(layout: str, grid: Grid) -> LaidOut:
    """Return the spectra that cells hold in a layout: "two-columns", "columns" or "rows".

    Raises
    ------
    Misfit
        When they do not hold in it.
    """
    return READERS[layout](grid)


def _columns(grid: Grid, width: int | None = None) -> LaidOut:
    """First column wavelength, one spectrum in each further column, ids in one header row."""
    rows = grid.cells.rows
    fields = len(rows[0])
    if fields != (width or fields) or fields < 2:
        raise grid.shape(0, f"expected {width or 'at least 2'} columns, found {fields}")
    has_header = not grid.is_number(0, 0)
    if has_header:
        _check_heading(grid)
    elif fields > 2:
        raise grid.shape(0, f"expected a header row with the ids of {fields - 1} spectra, found numbers", "no-header")
    body = range(int(has_header), len(rows))
    grid.check_widths(body, fields)
    if not body:
        grid.check_points(0, fields - 1)
    values = grid.values(body, 0)
    if values is None:
        raise Misfit(Stage.CELLS, lambda: diagnosed(grid.wrong_cells(body, 0)))
    grid.check_points(len(body), fields - 1)
    check_axis(values[:, 0], [f"line {grid.cells.lines[k]}" for k in body], grid.source)
    ids, notes = _column_ids(grid, rows[0][1:] if has_header else [""])
    axis, readings, turned = _ascending(values[:, 0], values[:, 1:].T)
    last = len(body) - 1

    def place(spectrum: int, _key: str, point: int) -> str:
        return grid.place(body[last - point if turned else point], spectrum + 1)

    return LaidOut(_spectra(ids, axis, readings, {}, place), notes + _turned_note(axis, turned))


def _two_columns(grid: Grid) -> LaidOut:
    return _columns(grid, width=2)


def _rows(grid: Grid) -> LaidOut:
    """A header whose cells from some column on are wavelengths; one spectrum a row, its id first."""
    rows = grid.cells.rows
    header = rows[0]
    first = next((k for k in range(1, len(header)) if grid.is_number(0, k)), None)
    if first is None or not _is_heading(header[0], len(header) - 1):
        raise grid.shape(0, "expected wavelengths in the header row, found none")
    keys, body = header[1:first], range(1, len(rows))
    grid.check_widths(body, len(header))
    unknown_keys = _unknown_keys(grid, keys)
    axis_nm = grid.values(range(1), first)
    values = grid.values(body, 1) if body else np.zeros((0, len(header) - 1))
    if unknown_keys or axis_nm is None or values is None:
        # what stands below an unknown column is no fault of its own
        unknown = {k for k, key in enumerate(keys, start=1) if key not in ROW_KEYS}
        wrong = chain(unknown_keys, grid.wrong_cells(range(1), first), grid.wrong_cells(body, 1, unknown))
        raise Misfit(Stage.CELLS, lambda: diagnosed(wrong))
    grid.check_points(axis_nm.size, len(body))
    _check_keys(grid, keys)
    check_axis(axis_nm[0], [f"column {k + 1}" for k in range(first, len(header))], f"{grid.source}, line {grid.cells.lines[0]}")
    ids = [rows[k][0] for k in body]
    check_ids(ids, [f"line {grid.cells.lines[k]}" for k in body], grid.source)
    axis, readings, turned = _ascending(axis_nm[0], values[:, first - 1 :])
    last = axis.size - 1

    def place(spectrum: int, key: str, point: int) -> str:
        column = 1 + keys.index(key) if key in keys else first + (last - point if turned else point)
        return grid.place(body[spectrum], column)

    cells = {key: values[:, k] for k, key in enumerate(keys)}
    return LaidOut(_spectra(ids, axis, readings, cells, place), _turned_note(axis, turned))


READERS: Final[dict[str, Callable[[Grid], LaidOut]]] = {"two-columns": _two_columns, "columns": _columns, "rows": _rows}


def _check_heading(grid: Grid) -> None:
    """A damaged first reading must not pass for a header: `4OO;0.1` would lose a reading and gain an id.

    Ids may be numbers (007), so when all others are, only the first cell can tell.
    """
    first, others = grid.cells.rows[0][0], grid.cells.rows[0][1:]
    if _is_heading(first, len(others)) or not all(is_number(cell, "point") or is_number(cell, "comma") for cell in others):
        return
    message = f"expected a wavelength or the heading of a header row, found {shown(first) if first else 'an empty cell'}"
    hint = "mend the reading; or, if these are ids, head the first column with a name such as wavelength_nm"
    raise Misfit.of(Stage.CELLS, Fault("not-a-number", grid.place(0, 0), message, hint))


def _is_heading(first: str, others: int) -> bool:
    """Whether the first cell of a file can be a heading: a word, or nothing where more than one column follows."""
    return others > 1 if not first else (first[0].isalpha() or first[0] in "([#") and first.casefold() not in NO_HEADING


def _column_ids(grid: Grid, header: Sequence[str]) -> tuple[list[str], list[str]]:
    """The ids of the columns, with a note where the file's name serves as one."""
    if len(header) == 1 and (not header[0] or header[0].casefold() in QUANTITY_NAMES):
        named = f"the readings are headed {header[0]!r}, which names no sample" if header[0] else "no id stands in the file"
        return [grid.stem], [f"{named}: the file's name {grid.stem!r} serves as the id"]
    check_ids(header, [f"line {grid.cells.lines[0]}, column {k + 2}" for k in range(len(header))], grid.source)
    return list(header), []


def _unknown_keys(grid: Grid, keys: Sequence[str]) -> list[Fault]:
    message = f"expected one of {', '.join(ROW_KEYS)} or a wavelength"
    return [
        Fault("unknown-column", grid.place(0, k), f"{message}, found {shown(key)}", "remove the column, or rename it")
        for k, key in enumerate(keys, start=1)
        if key not in ROW_KEYS
    ]


def _check_keys(grid: Grid, keys: Sequence[str]) -> None:
    twice = [k for k, key in enumerate(keys) if key in keys[:k]]
    if twice:
        faults = (Fault("duplicate-column", grid.place(0, k + 1), f"the column {keys[k]} stands twice", "keep one") for k in twice)
        raise Misfit.of(Stage.IDS, *faults)


def _ascending(axis_nm: FloatArray, readings: FloatArray) -> tuple[FloatArray, FloatArray, bool]:
    """Axis (n_wavelengths,) and readings (n_spectra, n_wavelengths) ascending and read-only, so that every spectrum can
    share them; and whether they were turned round."""
    turned = bool(axis_nm[-1] < axis_nm[0])
    way = slice(None, None, -1 if turned else 1)
    axis, block = np.array(axis_nm[way], order="C"), np.array(readings[:, way], order="C")
    axis.setflags(write=False)
    block.setflags(write=False)
    return axis, block, turned


def _turned_note(axis_nm: FloatArray, turned: bool) -> list[str]:
    fall = f"the wavelengths fall from {axis_nm[-1]:.10g} to {axis_nm[0]:.10g} nm in the file; they were turned round"
    return [fall] if turned else []


def _spectra(
    ids: Sequence[str],
    axis_nm: FloatArray,
    readings: FloatArray,
    cells: dict[str, FloatArray],
    place: Callable[[int, str, int], str],
) -> list[Spectrum]:
    """The spectra; or the misfit with what each of them refuses, and the cell it stands in."""
    spectra: list[Spectrum] = []
    faults: list[Fault] = []
    for k, i in enumerate(ids):
        try:
            cell = {key: float(values[k]) for key, values in cells.items()}
            spectra.append(Spectrum(i, axis_nm, readings[k], **cell))
        except InputError as error:
            faults.extend(_placed(error, i, lambda key, point, k=k: place(k, key, point)))  # type: ignore[misc]
    if faults:
        raise Misfit.of(Stage.VALUES, *faults)
    return spectra


def _placed(error: InputError, i: str, place: Callable[[str, int], str]) -> Iterator[Fault]:
    for fault in error.faults:
        at = re.match(r"\.(\w+)(?:\[(\d+)\])?", fault.path)
        key, point = (at[1], int(at[2] or 0)) if at else ("", 0)
        yield Fault(fault.code, f"{place(key, point)}, spectrum {shown(i)}", fault.message, fault.hint)
