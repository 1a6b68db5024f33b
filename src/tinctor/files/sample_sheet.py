"""The bench sheet: which cell and which dilution each sample was measured with."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from tinctor.arrays import quoted
from tinctor.errors import Fault, InputError, UnreadableFileError
from tinctor.files.layouts import ROW_KEYS
from tinctor.files.numbers import is_number, numbers
from tinctor.files.reading import DELIMITERS
from tinctor.files.table import Cells, cells_of, decoded
from tinctor.spectrum import Spectrum

__all__ = ["SampleSheet", "apply_sample_sheet", "read_sample_sheet"]

#: id -> the values given for it, by the name of the spectrum's field.
SampleSheet = dict[str, dict[str, float]]


def read_sample_sheet(path: str | Path) -> SampleSheet:
    """Return the values of a sheet with the column `id` and any of path_length_cm, path_length_u_cm, dilution_factor and
    dilution_factor_u.

    Raises
    ------
    UnreadableFileError
        For other columns, a value that is not a number, or an id that stands twice.
    """
    source = Path(path).name
    text = decoded(Path(path).read_bytes(), source)
    delimiter = max(DELIMITERS.values(), key=text[: text.find("\n")].count)
    cells = cells_of(text, delimiter, source)
    header = cells.rows[0]
    if header[0] != "id" or any(key not in ROW_KEYS for key in header[1:]) or len(set(header)) < len(header):
        raise UnreadableFileError.single(
            "sheet-columns",
            f"{source}, line 1",
            f"expected the columns id and any of {', '.join(ROW_KEYS)}, found {', '.join(header)}",
        )
    sheet: SampleSheet = {}
    for k in range(1, len(cells.rows)):
        sample, values = _row(cells, k, source, comma=delimiter != ",")
        if sample in sheet:
            raise UnreadableFileError.single(
                "duplicate-id", f"{source}, line {cells.lines[k]}", f"{sample!r} stands more than once"
            )
        sheet[sample] = dict(zip(header[1:], values, strict=True))
    return sheet


def apply_sample_sheet(spectra: Sequence[Spectrum], sheet: SampleSheet) -> list[Spectrum]:
    """Return the spectra with the sheet's cell and dilution. Every spectrum must be on the sheet, and the other way round.

    Examples
    --------
    >>> spectrum = Spectrum("a", [400.0, 402.0], [0.1, 0.2])
    >>> apply_sample_sheet([spectrum], {"a": {"dilution_factor": 50.0}})[0].dilution_factor
    50.0
    """
    measured = [spectrum.id for spectrum in spectra]
    faults = []
    if missing := [i for i in measured if i not in sheet]:
        faults.append(Fault("not-on-sheet", "sample sheet", f"no line for {quoted(missing)}", "add them to the sheet"))
    if extra := [i for i in sheet if i not in set(measured)]:
        faults.append(Fault("not-measured", "sample sheet", f"no spectrum for {quoted(extra)}", "remove them, or give their file"))
    if faults:
        raise InputError(faults)
    changed = []
    for spectrum in spectra:
        try:
            values: dict[str, Any] = dict(sheet[spectrum.id])
            changed.append(replace(spectrum, **values))
        except InputError as error:
            raise InputError([Fault(f.code, f"sample sheet, {spectrum.id!r}", f.message, f.hint) for f in error.faults]) from error
    return changed


def _row(cells: Cells, k: int, source: str, *, comma: bool) -> tuple[str, list[float]]:
    row, place = cells.rows[k], f"{source}, line {cells.lines[k]}"
    if len(row) != len(cells.rows[0]):
        raise UnreadableFileError.single("ragged", place, f"expected {len(cells.rows[0])} columns, found {len(row)}")
    for cell in row[1:]:
        if not is_number(cell, "point") and not (comma and is_number(cell, "comma")):
            raise UnreadableFileError.single("not-a-number", place, f"expected a number, found {cell!r}")
    decimal = "comma" if any("," in cell for cell in row[1:]) else "point"
    return row[0], numbers(row[1:], decimal).tolist()
