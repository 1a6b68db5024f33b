"""Cells with a decimal mark: their numbers in bulk, the checks all layouts share, and where each fault stands."""

from __future__ import annotations

from collections.abc import Container, Iterator, Sequence
from dataclasses import dataclass
from itertools import chain
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import WAVELENGTH_LIMITS_NM
from tinctor.errors import Fault
from tinctor.files.misfit import Misfit, Stage, diagnosed
from tinctor.files.numbers import OTHER_MARK, all_numbers, is_number
from tinctor.files.table import MOST_PER_AXIS, Cells

__all__ = ["Grid", "check_axis", "check_ids", "shown"]

MISSING: Final = "missing and over-range readings are not guessed: measure again, or leave the spectrum or the wavelength out"
ONE_MARK: Final = "write every number of the file with the same decimal mark, and none with thousands separators"
LONGEST_SHOWN: Final = 60


@dataclass(frozen=True, slots=True)
class Grid:
    """The cells of a file, read with one decimal mark.

    Parameters
    ----------
    cells
        The fields and their lines.
    decimal
        "point" or "comma".
    source, stem
        The file's name for messages, and the id of a spectrum that has none in the file.
    """

    cells: Cells
    decimal: str
    source: str
    stem: str

    def place(self, row: int, column: int | None = None) -> str:
        """Return the place of a row or a cell (both from 0) in words, counted from 1."""
        where = f"{self.source}, line {self.cells.lines[row]}"
        return where if column is None else f"{where}, column {column + 1}"

    def is_number(self, row: int, column: int) -> bool:
        """Return whether a cell is a number with this decimal mark."""
        return is_number(self.cells.rows[row][column], self.decimal)

    def shape(self, row: int, message: str, code: str = "layout", hint: str = "") -> Misfit:
        """Return the misfit of a row that cannot be one of the layout."""
        return Misfit.of(Stage.SHAPE, Fault(code, self.place(row), message, hint))

    def check_widths(self, body: range, fields: int) -> None:
        """Raise the misfit of rows that have not `fields` cells."""
        rows = self.cells.rows
        if all(len(rows[k]) == fields for k in body):
            return

        def faults() -> Iterator[Fault]:
            for k in body:
                if len(rows[k]) != fields:
                    message = f"expected {fields} columns as in line {self.cells.lines[0]}, found {len(rows[k])}"
                    hint = "a decimal comma needs semicolon or tab between the fields" if len(rows[k]) > fields else ""
                    yield Fault("ragged", self.place(k), message, hint)

        raise Misfit(Stage.RAGGED, lambda: diagnosed(faults()))

    def values(self, body: range, start: int) -> FloatArray | None:
        """Return the numbers from column `start` on, (n_rows, n_columns), or `None` when a cell is not a finite number."""
        rows = self.cells.rows
        # one row first: it costs nothing, and most readings that do not hold fail there
        if not all(is_number(cell, self.decimal) for cell in rows[body[0]][start:]):
            return None
        flat = all_numbers(list(chain.from_iterable(rows[k][start:] for k in body)), self.decimal)
        return None if flat is None or not np.isfinite(flat).all() else flat.reshape(len(body), -1)

    def wrong_cells(self, body: range, start: int, unread: Container[int] = ()) -> Iterator[Fault]:
        """Return a fault for each cell from column `start` on that is not a finite number; columns `unread` are passed over."""
        for k in body:
            for column, cell in enumerate(self.cells.rows[k][start:], start=start):
                if column in unread:
                    continue
                if not is_number(cell, self.decimal):
                    yield self._not_a_number(k, column, cell)
                elif not np.isfinite(all_numbers([cell], self.decimal)).all():  # type: ignore[arg-type]
                    message = f"expected a reading, found {shown(cell)}, which is too large for any number"
                    yield Fault("not-finite", self.place(k, column), message, MISSING)

    def _not_a_number(self, row: int, column: int, cell: str) -> Fault:
        found = shown(cell) if cell else "an empty cell"
        bare = cell.translate({ord(mark): None for mark in "., ' "})
        hint = ONE_MARK if is_number(cell, OTHER_MARK[self.decimal]) or (bare != cell and is_number(bare, "point")) else MISSING
        return Fault(
            "not-a-number", self.place(row, column), f"expected a number with a decimal {self.decimal}, found {found}", hint
        )

    def check_points(self, points: int, spectra: int) -> None:
        """Raise the misfit of too few or too many wavelengths or spectra."""
        if spectra < 1:
            raise Misfit.of(
                Stage.POINTS, Fault("no-spectra", self.source, "expected one spectrum a row below the header, found none")
            )
        if points < 2:
            message = f"expected a spectrum of at least 2 wavelengths, found {points}"
            raise Misfit.of(Stage.POINTS, Fault("too-few-points", self.source, message, "export the whole spectrum"))
        for count, what in ((points, "wavelengths"), (spectra, "spectra")):
            if count > MOST_PER_AXIS:
                message = f"found {count} {what}; at most {MOST_PER_AXIS} are read"
                raise Misfit.of(Stage.POINTS, Fault("too-many-points", self.source, message, "split the file"))


def check_axis(axis_nm: FloatArray, places: Sequence[str], source: str) -> None:
    """Raise the misfit of wavelengths, (n_wavelengths,), that do not all go one way or cannot be nanometres."""
    low, high = WAVELENGTH_LIMITS_NM
    outside = np.flatnonzero((axis_nm < low) | (axis_nm > high))
    if outside.size:
        k = int(outside[0])
        message = f"expected a wavelength between {low:g} and {high:g} nm, found {axis_nm[k]:g}"
        hint = "convert micrometres (x 1000) or wavenumbers (1e7 / cm-1) to nm first"
        raise Misfit.of(Stage.AXIS, Fault("axis-not-nm", f"{source}, {places[k]}", message, hint))
    step = np.diff(axis_nm)
    if np.all(step > 0) or np.all(step < 0):
        return
    seen: dict[float, str] = {}
    repeated = []
    for value, place in zip(axis_nm.tolist(), places, strict=True):
        if value in seen:
            message = f"{value:.10g} nm stands twice: in {seen[value]} and in {place}"
            repeated.append(Fault("duplicate-wavelength", f"{source}, {place}", message, "keep one reading per wavelength"))
        seen.setdefault(value, place)
    if repeated:
        raise Misfit.of(Stage.AXIS, *repeated)
    way = "fall" if axis_nm[-1] < axis_nm[0] else "rise"
    k = int(np.flatnonzero(step > 0 if way == "fall" else step < 0)[0]) + 1
    message = f"wavelengths must {way} throughout, found {axis_nm[k]:.10g} nm after {axis_nm[k - 1]:.10g} nm"
    raise Misfit.of(Stage.AXIS, Fault("axis-not-monotonic", f"{source}, {places[k]}", message, "sort the readings by wavelength"))


def check_ids(ids: Sequence[str], places: Sequence[str], source: str) -> None:
    """Raise the misfit of ids that are empty or stand twice."""
    seen: dict[str, str] = {}
    faults = []
    for i, place in zip(ids, places, strict=True):
        if not i:
            faults.append(Fault("empty-id", f"{source}, {place}", "this spectrum has no id", "name every spectrum"))
        elif i in seen:
            message = f"the id {shown(i)} stands in {seen[i]} and again in {place}"
            faults.append(Fault("duplicate-id", f"{source}, {place}", message, "rename one of the samples"))
        seen.setdefault(i, place)
    if faults:
        raise Misfit.of(Stage.IDS, *faults)


def shown(text: str) -> str:
    """Return a text in quotes, cut where it is long."""
    return repr(text) if len(text) <= LONGEST_SHOWN else f"{text[:LONGEST_SHOWN]!r}... ({len(text)} characters)"
