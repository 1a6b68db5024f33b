"""The sheet of standards: what each solution holds. And that of mixtures: how much of each component."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Final

from tinctor.errors import Fault, UnreadableFileError
from tinctor.files.grid import shown
from tinctor.files.numbers import all_numbers, is_number
from tinctor.files.reading import DELIMITERS
from tinctor.files.source import bytes_of, name_of
from tinctor.files.table import Cells, cells_of, decoded

__all__ = ["StandardRow", "read_mixtures_sheet", "read_standards_sheet"]

NUMBERS: Final = ("concentration", "concentration_u", "path_length_cm")
COLUMNS: Final = ("id", *NUMBERS, "replicate_of")


@dataclass(frozen=True, slots=True)
class StandardRow:
    """One line of the sheet; a concentration of 0 is a blank. What the sheet leaves empty is None."""

    id: str
    concentration: float
    concentration_u: float | None
    path_length_cm: float | None
    replicate_of: str | None


def read_standards_sheet(path: str | Path) -> list[StandardRow]:
    """Return the rows of a sheet with the columns id and concentration, and any of concentration_u, path_length_cm, replicate_of.

    Raises
    ------
    UnreadableFileError
        For other columns, values that are not numbers, an id that stands twice, or both decimal marks.
    """
    cells, source, decimal = _sheet(path, lambda header: header[:1] == ["id"] and "concentration" in header, _expected())
    header = cells.rows[0]
    unknown = [name for name in header if name not in COLUMNS]
    if unknown or len(set(header)) < len(header):
        found = ", ".join(shown(name) for name in header)
        raise UnreadableFileError.single("sheet-columns", f"{source}, line 1", f"{_expected()}, each once, found {found}")
    rows = []
    for row, line in zip(cells.rows[1:], cells.lines[1:], strict=True):
        values = dict(zip(header, row, strict=True))
        place = f"{source}, line {line}"
        numbers = {name: _number(values.get(name, ""), decimal, f"{place}, {name}", name == "concentration") for name in NUMBERS}
        concentration = numbers["concentration"]
        assert concentration is not None
        rows.append(
            StandardRow(
                values["id"],
                concentration,
                numbers["concentration_u"],
                numbers["path_length_cm"],
                values.get("replicate_of") or None,
            )
        )
    return rows


def read_mixtures_sheet(path: str | Path) -> dict[str, dict[str, float]]:
    """Return id -> component -> concentration of a sheet with the column id and one column for each component.

    Raises
    ------
    UnreadableFileError
        As `read_standards_sheet`; an empty cell is not taken for 0.
    """
    expected = "expected the column id and one column for each component"
    cells, source, decimal = _sheet(path, lambda header: header[:1] == ["id"] and len(header) > 1 and all(header), expected)
    header = cells.rows[0]
    if len(set(header)) < len(header):
        raise UnreadableFileError.single("sheet-columns", f"{source}, line 1", f"{expected}, each once")
    found: dict[str, dict[str, float]] = {}
    for row, line in zip(cells.rows[1:], cells.lines[1:], strict=True):
        values = [
            _number(cell, decimal, f"{source}, line {line}, {name}", True) for name, cell in zip(header[1:], row[1:], strict=True)
        ]
        found[row[0]] = {name: value for name, value in zip(header[1:], values, strict=True) if value is not None}
    return found


def _expected() -> str:
    return "expected the columns id and concentration, and any of concentration_u, path_length_cm, replicate_of"


def _sheet(path: str | Path, is_header: object, expected: str) -> tuple[Cells, str, str]:
    """Cells under the one delimiter that makes the first row a header, the file's name, and its decimal mark."""
    assert callable(is_header)
    source = name_of(path)
    text = decoded(bytes_of(path), source)
    candidates = [cells_of(text, d, source) for name, d in DELIMITERS.items() if d in text or name == "comma"]
    cells = next((c for c in candidates if is_header(c.rows[0])), None)
    if cells is None:
        found = ", ".join(shown(cell) for cell in max((c.rows[0] for c in candidates), key=len))
        raise UnreadableFileError.single(
            "sheet-columns", f"{source}, line 1", f"{expected}, found {found}", "id is the first column"
        )
    body = list(zip(cells.rows[1:], cells.lines[1:], strict=True))
    faults = [
        Fault("ragged", f"{source}, line {line}", f"expected {len(cells.rows[0])} columns as in line 1, found {len(row)}")
        for row, line in body
        if len(row) != len(cells.rows[0])
    ]
    if not body:
        faults.append(Fault("no-samples", source, "expected one line for each solution below the header, found none"))
    ids = [row[0] for row, _ in body]
    faults += [
        Fault(
            "duplicate-id", f"{source}, line {line}", f"the id {shown(row[0])} is empty or stands twice", "name each solution once"
        )
        for row, line in body
        if not row[0] or ids.count(row[0]) > 1
    ]
    if faults:
        raise UnreadableFileError(faults)
    return cells, source, _decimal(cells, source)


def _decimal(cells: Cells, source: str) -> str:
    """The decimal mark of the sheet: comma where a number needs it, point otherwise; never both."""
    body = [cell for row in cells.rows[1:] for cell in row[1:] if cell]
    comma = [cell for cell in body if is_number(cell, "comma") and not is_number(cell, "point")]
    point = [cell for cell in body if is_number(cell, "point") and not is_number(cell, "comma")]
    if comma and point:
        raise UnreadableFileError.single(
            "decimal", source, f"found {comma[0]} and {point[0]}: write every number with the same decimal mark"
        )
    return "comma" if comma else "point"


def _number(cell: str, decimal: str, place: str, needed: bool) -> float | None:
    if not cell and not needed:
        return None
    values = all_numbers([cell], decimal) if is_number(cell, decimal) else None
    if values is None:
        raise UnreadableFileError.single("not-a-number", place, f"expected a number with a decimal {decimal}, found {shown(cell)}")
    return float(values[0])
