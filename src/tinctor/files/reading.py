"""What a reader is told and what it returns; the same for every format."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

from tinctor.errors import InputError
from tinctor.spectrum import Spectrum

__all__ = ["DELIMITERS", "LAYOUTS", "FileReading", "Layout", "ReadOptions"]

Layout = Literal["two-columns", "columns", "rows", "json"]

#: Layouts of delimited text.
LAYOUTS: Final[tuple[Layout, ...]] = ("two-columns", "columns", "rows")

#: Delimiters by the name under which they are asked for.
DELIMITERS: Final = {"comma": ",", "semicolon": ";", "tab": "\t"}


@dataclass(frozen=True, slots=True)
class ReadOptions:
    """What to take as given; `None` is found out from the file.

    Parameters
    ----------
    delimiter
        "comma", "semicolon" or "tab".
    decimal
        "point" or "comma".
    layout
        "two-columns" (one spectrum), "columns" (many, one a column) or "rows" (many, one a row).
    """

    delimiter: str | None = None
    decimal: str | None = None
    layout: str | None = None

    def __post_init__(self) -> None:
        for name, value, allowed in (
            ("delimiter", self.delimiter, tuple(DELIMITERS)),
            ("decimal", self.decimal, ("point", "comma")),
            ("layout", self.layout, LAYOUTS),
        ):
            if value is not None and value not in allowed:
                raise InputError.single("read-option", f".{name}", f"{name} must be one of {', '.join(allowed)}, found {value!r}")


@dataclass(frozen=True, slots=True, eq=False)
class FileReading:
    """Spectra read from one file, and how it was read.

    Attributes
    ----------
    source
        The file's name.
    spectra
        In the file's order; axes ascending.
    layout, delimiter, decimal, encoding
        How the file was understood.
    notes
        What else was noticed, in words.
    """

    source: str
    spectra: tuple[Spectrum, ...]
    layout: Layout
    delimiter: str
    decimal: str
    encoding: str = "UTF-8"
    notes: tuple[str, ...] = ()
