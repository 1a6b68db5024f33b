"""The bench sheet: which cell and which dilution each sample was measured with."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from tinctor.arrays import quoted
from tinctor.errors import Fault, InputError, UnreadableFileError
from tinctor.files.grid import Grid, check_ids, shown
from tinctor.files.layouts import ROW_KEYS
from tinctor.files.misfit import Misfit, Stage, diagnosed, nearest
from tinctor.files.reading import DELIMITERS
from tinctor.files.source import bytes_of, name_of
from tinctor.files.table import Cells, cells_of, decoded
from tinctor.spectrum import Spectrum

__all__ = ["SampleSheet", "apply_sample_sheet", "read_sample_sheet"]

#: id -> the values given for it, by the name of the spectrum's field.
SampleSheet = dict[str, dict[str, float]]


def read_sample_sheet(path: str | Path) -> SampleSheet:
    """Return the values of a sheet with the column `id` and any of path_length_cm, path_length_u_cm, dilution_factor and
    dilution_factor_u. Delimiters, decimal marks and encoding as for spectra; ids are text.

    Parameters
    ----------
    path
        The file; "-" is standard input.

    Raises
    ------
    UnreadableFileError
        For a file that is not there, other columns, values that are not numbers, or an id that stands twice.
    """
    source = name_of(path)
    text = decoded(bytes_of(path), source)
    cells = _sheet_cells(text, source)
    misfits = []
    for decimal in ("point", "comma"):
        try:
            return _sheet(Grid(cells, decimal, source, ""))
        except Misfit as misfit:
            misfits.append(misfit)
    raise nearest(misfits)


def apply_sample_sheet(spectra: Sequence[Spectrum], sheet: SampleSheet) -> list[Spectrum]:
    """Return the spectra with the sheet's cell and dilution. Every spectrum must be on the sheet, and the other way round.

    Raises
    ------
    InputError
        Naming the ids that stand on one side only, or the values that `Spectrum` refuses.

    Examples
    --------
    >>> spectrum = Spectrum("a", [400.0, 402.0], [0.1, 0.2])
    >>> apply_sample_sheet([spectrum], {"a": {"dilution_factor": 50.0}})[0].dilution_factor
    50.0
    """
    measured = [spectrum.id for spectrum in spectra]
    known = set(measured)
    faults = []
    if missing := [i for i in measured if i not in sheet]:
        faults.append(Fault("not-on-sheet", "sample sheet", f"no line for {quoted(missing)}", "add them to the sheet"))
    if extra := [i for i in sheet if i not in known]:
        faults.append(Fault("not-measured", "sample sheet", f"no spectrum for {quoted(extra)}", "remove them, or give their file"))
    if faults:
        raise InputError(faults)
    changed = []
    for spectrum in spectra:
        values: dict[str, Any] = dict(sheet[spectrum.id])
        try:
            changed.append(replace(spectrum, **values))
        except InputError as error:
            faults += [Fault(f.code, f"sample sheet, {spectrum.id!r}", f.message, f.hint) for f in error.faults]
    if faults:
        raise InputError(faults)
    return changed


def _sheet_cells(text: str, source: str) -> Cells:
    """The cells under the one delimiter that makes the first row a sheet's header: its names hold no delimiter."""
    headers = []
    for name, delimiter in DELIMITERS.items():
        if delimiter not in text and name != "comma":
            continue
        cells = cells_of(text, delimiter, source)
        if cells.rows[0][0] == "id" and set(cells.rows[0][1:]) <= set(ROW_KEYS) and len(set(cells.rows[0])) == len(cells.rows[0]):
            return cells
        headers.append(cells.rows[0])
    found = ", ".join(shown(cell) for cell in max(headers, key=len))
    raise UnreadableFileError.single(
        "sheet-columns",
        f"{source}, line 1",
        f"expected the columns id and any of {', '.join(ROW_KEYS)}, each once, found {found}",
        "rename the columns, and remove those that are not of these",
    )


def _sheet(grid: Grid) -> SampleSheet:
    rows, keys = grid.cells.rows, grid.cells.rows[0][1:]
    body = range(1, len(rows))
    if not body:
        raise grid.shape(0, "expected one line for each sample below the header, found none", "no-samples")
    grid.check_widths(body, len(rows[0]))
    values = grid.values(body, 1)
    if values is None:
        raise Misfit(Stage.CELLS, lambda: diagnosed(grid.wrong_cells(body, 1)))
    ids = [rows[k][0] for k in body]
    check_ids(ids, [f"line {grid.cells.lines[k]}" for k in body], grid.source)
    return {i: dict(zip(keys, row, strict=True)) for i, row in zip(ids, values.tolist(), strict=True)}
