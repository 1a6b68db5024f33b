"""Spectra to delimited text that reads back to the bit; what would not come back is refused."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence

import numpy as np

from tinctor.errors import Fault, InputError
from tinctor.files.layouts import QUANTITY_NAMES, ROW_KEYS
from tinctor.files.reading import DELIMITERS, LAYOUTS
from tinctor.files.table import MOST_PER_AXIS
from tinctor.spectrum import Spectrum

__all__ = ["write_delimited"]

#: What a spectrum has that was measured undiluted in a 1 cm cell, both taken as exact: as ROW_KEYS.
PLAIN_CELL = (1.0, 0.0, 1.0, 0.0)


def write_delimited(spectra: Sequence[Spectrum], layout: str = "columns", delimiter: str = "comma", decimal: str = "point") -> str:
    """Return spectra on one axis as text, every number with all its digits.

    Parameters
    ----------
    spectra
        At least one, all on the same axis. Only "rows" has a place for path length and dilution; none has one for
        `absorbance_u` (JSON has).
    layout, delimiter, decimal
        As in `ReadOptions`; a decimal comma needs another delimiter than the comma.

    Raises
    ------
    InputError
        For whatever would not read back: other axes, values without a place, an id that a reader would not take as one.

    Examples
    --------
    >>> print(write_delimited([Spectrum("a", [400.0, 402.0], [0.1, 0.2])]), end="")
    wavelength_nm,a
    400.0,0.1
    402.0,0.2
    """
    _check_dialect(layout, delimiter, decimal)
    _check_spectra(spectra, layout)
    axis = spectra[0].wavelength_nm

    def text(value: float) -> str:
        return repr(float(value)).replace(".", "," if decimal == "comma" else ".")

    out = io.StringIO()
    writer = csv.writer(out, delimiter=DELIMITERS[delimiter], lineterminator="\n")
    if layout == "rows":
        writer.writerow(["id", *ROW_KEYS, *map(text, axis)])
        writer.writerows([s.id, *(text(getattr(s, key)) for key in ROW_KEYS), *map(text, s.absorbance)] for s in spectra)
    else:
        writer.writerow(["wavelength_nm", *(s.id for s in spectra)])
        table = np.column_stack([axis, *(s.absorbance for s in spectra)])
        writer.writerows(map(text, row) for row in table.tolist())
    return out.getvalue()


def _check_dialect(layout: str, delimiter: str, decimal: str) -> None:
    for name, value, allowed in (
        ("layout", layout, LAYOUTS),
        ("delimiter", delimiter, tuple(DELIMITERS)),
        ("decimal", decimal, ("point", "comma")),
    ):
        if value not in allowed:
            raise InputError.single("write-option", f".{name}", f"{name} must be one of {', '.join(allowed)}, found {value!r}")
    if decimal == "comma" and delimiter == "comma":
        raise InputError.single("dialect", "", "a decimal comma needs semicolon or tab between the fields")


def _check_spectra(spectra: Sequence[Spectrum], layout: str) -> None:
    if not spectra:
        raise InputError.single("no-spectra", "", "expected at least one spectrum, found none")
    if layout == "two-columns" and len(spectra) > 1:
        raise InputError.single(
            "layout", "", f"two-columns holds one spectrum, found {len(spectra)}", "write them as columns or rows"
        )
    axis, ids = spectra[0].wavelength_nm, [s.id for s in spectra]
    faults = [fault for k, s in enumerate(spectra) for fault in _spectrum_faults(s, f"[{k}]", layout)]
    if any(not np.array_equal(axis, s.wavelength_nm) for s in spectra):
        faults.append(Fault("axes-differ", "", "spectra of one file must share their wavelengths", "write one file for each axis"))
    if not 2 <= axis.size <= MOST_PER_AXIS or len(spectra) > MOST_PER_AXIS:
        message = (
            f"a file holds 2 to {MOST_PER_AXIS} wavelengths and up to {MOST_PER_AXIS} spectra, found {axis.size} and {len(ids)}"
        )
        faults.append(Fault("file-shape", "", message))
    if len(set(ids)) < len(ids):
        faults.append(Fault("duplicate-id", "", "the spectra of one file must have different ids", "rename the samples"))
    if layout != "rows" and len(ids) == 1 and ids[0].casefold() in QUANTITY_NAMES:
        message = f"the id {ids[0]!r} above a single column would be read as the name of the quantity"
        faults.append(Fault("id", "[0].id", message, "write it as rows, or rename the sample"))
    if faults:
        raise InputError(faults)


def _spectrum_faults(s: Spectrum, path: str, layout: str) -> list[Fault]:
    faults = []
    if s.absorbance_u is not None:
        faults.append(Fault("no-place", f"{path}.absorbance_u", "delimited text has no place for absorbance_u", "write JSON"))
    if layout != "rows" and tuple(getattr(s, key) for key in ROW_KEYS) != PLAIN_CELL:
        message = f"layout {layout} has no place for the path length and dilution of {s.id!r}"
        faults.append(Fault("no-place", path, message, "write it as rows, or keep them on a sample sheet"))
    if s.id != s.id.strip() or any(mark in "\x00\r" or "\ud800" <= mark <= "\udfff" for mark in s.id):
        message = f"the id {s.id!a} begins or ends with a blank, or holds a character that does not survive in a text file"
        faults.append(Fault("id", f"{path}.id", message, "rename the sample"))
    return faults
