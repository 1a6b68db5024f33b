"""Bytes to spectra, one format per module. Readers never skip and never guess."""

from __future__ import annotations

import sys
from pathlib import Path

from tinctor.errors import UnreadableFileError
from tinctor.files.delimited import read_delimited
from tinctor.files.reading import FileReading, ReadOptions
from tinctor.files.sample_sheet import SampleSheet, apply_sample_sheet, read_sample_sheet
from tinctor.files.spectra_json import read_spectra_json
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
    "write_delimited",
]


def read_spectra(source: str | Path, options: ReadOptions | None = None) -> FileReading:
    """Return the spectra of a file: JSON by its suffix, delimited text otherwise; "-" is standard input.

    Raises
    ------
    UnreadableFileError
        When the file is not there or cannot be read for certain.
    """
    if str(source) == "-":
        return _read(sys.stdin.buffer.read(), "standard input", options)
    path = Path(source)
    try:
        data = path.read_bytes()
    except OSError as error:
        raise UnreadableFileError.single("no-file", str(source), f"the file cannot be opened: {error.strerror}") from error
    return _read(data, path.name, options)


def _read(data: bytes, name: str, options: ReadOptions | None) -> FileReading:
    if name.lower().endswith(".json") or (name == "standard input" and data.lstrip()[:1] in (b"{", b"[")):
        return read_spectra_json(data, name)
    return read_delimited(data, name, options)
