"""Spectra to delimited text that reads back to the bit."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence

from tinctor.errors import InputError
from tinctor.files.layouts import ROW_KEYS
from tinctor.files.reading import DELIMITERS
from tinctor.spectrum import Spectrum, same_axis

__all__ = ["write_delimited"]


def write_delimited(
    spectra: Sequence[Spectrum], *, layout: str = "columns", delimiter: str = "comma", decimal: str = "point"
) -> str:
    """Return spectra on one axis as text.

    Parameters
    ----------
    spectra
        At least one; all on the same axis. Only "rows" keeps path length and dilution.
    layout, delimiter, decimal
        As in `ReadOptions`; a decimal comma needs another delimiter than the comma.

    Examples
    --------
    >>> print(write_delimited([Spectrum("a", [400.0, 402.0], [0.1, 0.2])]), end="")
    wavelength_nm,a
    400.0,0.1
    402.0,0.2
    """
    axis = spectra[0].wavelength_nm
    if any(not same_axis(axis, s.wavelength_nm) for s in spectra):
        raise InputError.single("axes-differ", "", "spectra of one file must share their wavelengths")
    if decimal == "comma" and delimiter == "comma":
        raise InputError.single("dialect", "", "a decimal comma needs semicolon or tab between the fields")

    def text(value: float) -> str:
        return repr(float(value)).replace(".", "," if decimal == "comma" else ".")

    out = io.StringIO()
    writer = csv.writer(out, delimiter=DELIMITERS[delimiter], lineterminator="\n")
    if layout == "rows":
        writer.writerow(["id", *ROW_KEYS, *map(text, axis)])
        for s in spectra:
            writer.writerow([s.id, *(text(getattr(s, key)) for key in ROW_KEYS), *map(text, s.absorbance)])
    else:
        writer.writerow(["wavelength_nm", *(s.id for s in spectra)])
        for k, wavelength in enumerate(axis):
            writer.writerow([text(wavelength), *(text(s.absorbance[k]) for s in spectra)])
    return out.getvalue()
