"""Bytes to spectra, one format per module. Readers never skip and never guess.

A format is a module with one function `(data: bytes, source_name: str, ...) -> FileReading`; `read_spectra` chooses it.
"""

from __future__ import annotations

from pathlib import Path

from tinctor.files.delimited import read_delimited
from tinctor.files.reading import FileReading, ReadOptions
from tinctor.files.sample_sheet import SampleSheet, apply_sample_sheet, read_sample_sheet
from tinctor.files.source import STANDARD_INPUT, bytes_of, name_of
from tinctor.files.spectra_json import read_spectra_json, spectra_from_json
from tinctor.files.write import write_delimited

__all__ = [
    "FileReading",
    "ReadOptions",
    "SampleSheet",
    "apply_sample_sheet",
    "read_delimited",
    "read_sample_sheet",
    "read_spectra",
    "read_spectra_json",
    "spectra_from_json",
    "write_delimited",
]


def read_spectra(source: str | Path, options: ReadOptions | None = None) -> FileReading:
    """Return the spectra of a file: JSON by its suffix, delimited text otherwise.

    Parameters
    ----------
    source
        The file; "-" is standard input, which is taken for JSON when it begins with a brace or a bracket.
    options
        What to take as given of delimited text.

    Raises
    ------
    UnreadableFileError
        When the file is not there or cannot be read for certain.
    """
    data, name = bytes_of(source), name_of(source)
    is_json = name.lower().endswith(".json")
    if str(source) == STANDARD_INPUT:  # no delimited text of spectra begins so: ids and wavelengths do not
        is_json = data.removeprefix(b"\xef\xbb\xbf").lstrip()[:1] in (b"{", b"[")
    return read_spectra_json(data, name) if is_json else read_delimited(data, name, options)
