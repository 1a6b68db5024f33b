"""Delimited text to spectra, by evidence: every reading possible is tried, and exactly one must hold.

A reading is a delimiter, a decimal mark and a layout. It holds when every row parses, the fields agree in number and
the axis is strictly monotonic within the range of wavelengths. Several that hold and give different numbers are an error
that names the option which settles it; nothing is ever guessed.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np

from tinctor.errors import Fault, UnreadableFileError
from tinctor.files.layouts import spectra_by_layout
from tinctor.files.reading import DELIMITERS, LAYOUTS, FileReading, Layout, ReadOptions
from tinctor.files.table import Cells, cells_of, decoded
from tinctor.spectrum import Spectrum

__all__ = ["read_delimited"]

#: Faults that say "this is not the layout" and not "this is what is wrong with it": shown only when there is nothing better.
SHAPE_FAULTS = frozenset({"layout", "no-header", "ragged"})


@dataclass(frozen=True, slots=True, eq=False)
class _Candidate:
    delimiter: str
    decimal: str
    layout: Layout
    spectra: list[Spectrum]

    def __str__(self) -> str:
        count = len(self.spectra)
        what = f"{count} spectra" if count > 1 else "1 spectrum"
        points = self.spectra[0].wavelength_nm.size
        return f"delimiter {self.delimiter}, decimal {self.decimal}, layout {self.layout} ({what} of {points} points)"


def read_delimited(data: bytes, source: str, options: ReadOptions | None = None) -> FileReading:
    """Return the spectra of a delimited text.

    Parameters
    ----------
    data
        The file's bytes: UTF-8, with or without byte order mark.
    source
        The file's name, for messages; its stem is the id of a spectrum without a header.
    options
        What to take as given.

    Raises
    ------
    UnreadableFileError
        When no reading holds (with what is wrong, and where), or when several do.

    Examples
    --------
    >>> read_delimited(b"nm;vat-3\\n400,5;0,213\\n401,0;0,220\\n", "vat-3.csv").spectra[0].absorbance
    array([0.213, 0.22 ])
    """
    options = options or ReadOptions()
    text = decoded(data, source)
    holding: list[_Candidate] = []
    failed: list[UnreadableFileError] = []
    for delimiter in [options.delimiter] if options.delimiter else _delimiters(text):
        try:
            cells = cells_of(text, DELIMITERS[delimiter], source)
        except UnreadableFileError as error:
            failed.append(error)
            continue
        for decimal in _decimals(options, delimiter):
            for layout in _layouts(options, cells):
                try:
                    spectra = spectra_by_layout(layout, cells, decimal, source, _stem(source))
                except UnreadableFileError as error:
                    failed.append(error)
                    continue
                holding.append(_Candidate(delimiter, decimal, layout, spectra))
    if not holding:
        raise _most_telling(failed)
    first = holding[0]
    if any(not _same(first.spectra, other.spectra) for other in holding[1:]):
        raise _ambiguous(holding, source)
    return FileReading(source, tuple(first.spectra), first.layout, first.delimiter, first.decimal, notes=_notes(text))


def _delimiters(text: str) -> list[str]:
    found = [name for name, mark in DELIMITERS.items() if mark in text]
    return found or ["comma"]


def _decimals(options: ReadOptions, delimiter: str) -> list[str]:
    if options.decimal:
        return [options.decimal]
    return ["point"] if delimiter == "comma" else ["point", "comma"]


def _layouts(options: ReadOptions, cells: Cells) -> list[Layout]:
    if options.layout:
        return [layout for layout in LAYOUTS if layout == options.layout]
    return ["two-columns", "rows"] if len(cells.rows[0]) == 2 else ["columns", "rows"]


def _stem(source: str) -> str:
    name = re.split(r"[/\\]", source)[-1]
    return name.rsplit(".", 1)[0] or name


def _same(one: list[Spectrum], other: list[Spectrum]) -> bool:
    return len(one) == len(other) and all(
        a.id == b.id
        and np.array_equal(a.wavelength_nm, b.wavelength_nm)
        and np.array_equal(a.absorbance, b.absorbance)
        and (a.path_length_cm, a.dilution_factor) == (b.path_length_cm, b.dilution_factor)
        for a, b in zip(one, other, strict=True)
    )


def _ambiguous(holding: list[_Candidate], source: str) -> UnreadableFileError:
    differing = [
        f"--{name}" for name in ("delimiter", "decimal", "layout") if len({getattr(candidate, name) for candidate in holding}) > 1
    ]
    readings = "; or ".join(str(candidate) for candidate in holding)
    return UnreadableFileError.single(
        "ambiguous", source, f"the file can be read in {len(holding)} ways: {readings}", f"say which with {' or '.join(differing)}"
    )


def _most_telling(failed: list[UnreadableFileError]) -> UnreadableFileError:
    """The fault of the reading that got furthest: one about a value before one about the shape."""

    def rank(error: UnreadableFileError) -> tuple[bool, int]:
        fault = error.faults[0]
        line = re.search(r"line (\d+)", fault.path)
        return fault.code not in SHAPE_FAULTS, int(line.group(1)) if line else 0

    best = max(failed, key=rank)
    if best.faults[0].code not in SHAPE_FAULTS:
        return best
    shapes = (
        "two columns (wavelength, absorbance), one spectrum a column under a row of ids, or one a row beside a row of wavelengths"
    )
    fault = best.faults[0]
    return UnreadableFileError([Fault(fault.code, fault.path, f"{fault.message}. A file holds {shapes}", fault.hint)])


def _notes(text: str) -> tuple[str, ...]:
    return ("the minus sign U+2212 was read as a minus",) if "−" in text else ()
