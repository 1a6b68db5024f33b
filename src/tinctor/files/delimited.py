"""Delimited text to spectra, by evidence: every reading possible is tried, and exactly one must hold.

A reading is a delimiter, a decimal mark and a layout. It holds when every row parses, the fields agree in number and
the axis is strictly monotonic within the range of wavelengths. Several that hold and give different numbers are an error
that names the option which settles it; nothing is ever guessed.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np

from tinctor.errors import UnreadableFileError
from tinctor.files.grid import Grid
from tinctor.files.layouts import LaidOut, laid_out
from tinctor.files.misfit import Misfit, Stage, nearest
from tinctor.files.reading import DELIMITERS, LAYOUTS, FileReading, Layout, ReadOptions
from tinctor.files.table import Cells, cells_of, decoded
from tinctor.spectrum import Spectrum

__all__ = ["read_delimited"]


@dataclass(frozen=True, slots=True, eq=False)
class _Candidate:
    delimiter: str
    decimal: str
    layout: Layout
    empty_rows: int
    found: LaidOut

    def __str__(self) -> str:
        spectra = self.found.spectra
        what = f"{len(spectra)} spectra" if len(spectra) > 1 else "1 spectrum"
        points = spectra[0].wavelength_nm.size
        return f"delimiter {self.delimiter}, decimal {self.decimal}, layout {self.layout} ({what} of {points} points)"


def read_delimited(data: bytes, source_name: str, options: ReadOptions | None = None) -> FileReading:
    """Return the spectra of a delimited text.

    Parameters
    ----------
    data
        The file's bytes: UTF-8, with or without byte order mark.
    source_name
        The file's name, for messages; its stem is the id of a spectrum without a header.
    options
        What to take as given; everything is found out where it is `None`.

    Raises
    ------
    UnreadableFileError
        When no reading holds (with what is wrong in the one that most nearly does, and where), or when several do.

    Examples
    --------
    >>> read_delimited(b"nm;vat-3\\n400,5;0,213\\n401,0;0,220\\n", "vat-3.csv").spectra[0].absorbance
    array([0.213, 0.22 ])
    """
    options = options or ReadOptions()
    text = decoded(data, source_name)
    holding: list[_Candidate] = []
    misfits: list[Misfit] = []
    for delimiter in [options.delimiter] if options.delimiter else _delimiters(text):
        try:
            cells = cells_of(text, DELIMITERS[delimiter], source_name)
        except UnreadableFileError as error:
            misfits.append(Misfit.of(Stage.TABLE, *error.faults))
            continue
        for decimal in _decimals(options, delimiter, text):
            grid = Grid(cells, decimal, source_name, _stem(source_name))
            for layout in _layouts(options, cells):
                try:
                    holding.append(_Candidate(delimiter, decimal, layout, cells.empty_rows, laid_out(layout, grid)))
                except Misfit as misfit:
                    misfits.append(misfit)
    if not holding:
        raise nearest(misfits)
    first = holding[0]
    if any(not _same(first.found.spectra, other.found.spectra) for other in holding[1:]):
        raise _ambiguous(holding, source_name)
    spectra = tuple(first.found.spectra)
    return FileReading(source_name, spectra, first.layout, first.delimiter, first.decimal, notes=_notes(first, text))


def _delimiters(text: str) -> list[str]:
    found = [name for name, mark in DELIMITERS.items() if mark in text]
    return found or ["comma"]


def _decimals(options: ReadOptions, delimiter: str, text: str) -> list[str]:
    """The decimal marks worth trying: a comma must occur, and between commas it must be quoted."""
    if options.decimal:
        return [options.decimal]
    comma = '"' in text if delimiter == "comma" else "," in text
    return ["point", "comma"] if comma else ["point"]


def _layouts(options: ReadOptions, cells: Cells) -> list[Layout]:
    if options.layout:
        return [layout for layout in LAYOUTS if layout == options.layout]
    return ["two-columns", "rows"] if len(cells.rows[0]) == 2 else ["columns", "rows"]


def _stem(source_name: str) -> str:
    name = re.split(r"[/\\]", source_name)[-1]
    return (name.rsplit(".", 1)[0] or name).strip()


def _same(one: list[Spectrum], other: list[Spectrum]) -> bool:
    return len(one) == len(other) and all(
        a.id == b.id
        and np.array_equal(a.wavelength_nm, b.wavelength_nm)
        and np.array_equal(a.absorbance, b.absorbance)
        and (a.path_length_cm, a.path_length_u_cm, a.dilution_factor, a.dilution_factor_u)
        == (b.path_length_cm, b.path_length_u_cm, b.dilution_factor, b.dilution_factor_u)
        for a, b in zip(one, other, strict=True)
    )


def _ambiguous(holding: list[_Candidate], source_name: str) -> UnreadableFileError:
    ways = []
    for name in ("delimiter", "decimal", "layout"):
        values = list(dict.fromkeys(getattr(candidate, name) for candidate in holding))
        if len(values) > 1:
            ways.append(f"{' or '.join(f'{name}={value}' for value in values)} (--{name} on the command line)")
    readings = "; or ".join(str(candidate) for candidate in holding)
    return UnreadableFileError.single(
        "ambiguous",
        source_name,
        f"the file can be read in {len(holding)} ways: {readings}",
        f"say which with {', and '.join(ways)}",
    )


def _notes(candidate: _Candidate, text: str) -> tuple[str, ...]:
    notes = list(candidate.found.notes)
    if text.count("−") > sum(spectrum.id.count("−") for spectrum in candidate.found.spectra):
        notes.append("the minus sign U+2212 was read as a minus")
    if candidate.empty_rows:
        notes.append(f"{candidate.empty_rows} row(s) of delimiters without values at the end were left out")
    return tuple(notes)
