"""Delimited text to cells: encoding, lines, fields. No meaning yet."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from typing import Final

from tinctor.errors import UnreadableFileError

__all__ = ["LARGEST_FILE_BYTES", "MOST_FIELDS", "Cells", "cells_of", "decoded"]

#: Larger files are refused: delimited text of this size holds tens of thousands of spectra.
LARGEST_FILE_BYTES: Final = 512 * 1024 * 1024
#: No spectrum has more wavelengths, and no plain export more spectra side by side.
MOST_FIELDS: Final = 20_000


@dataclass(frozen=True, slots=True)
class Cells:
    """The fields of a table, and the line of the file on which each row begins (from 1)."""

    rows: list[list[str]]
    lines: list[int]


def decoded(data: bytes, source: str) -> str:
    """Return the text of a file in UTF-8, with or without a byte order mark.

    Raises
    ------
    UnreadableFileError
        For an empty or oversized file and for other encodings.
    """
    if len(data) > LARGEST_FILE_BYTES:
        raise UnreadableFileError.single(
            "file-too-large",
            source,
            f"the file has {len(data) / 1e6:.0f} MB, more than the {LARGEST_FILE_BYTES // 2**20} MiB that are read",
        )
    if data.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\x00" in data[:4096]:
        raise UnreadableFileError.single(
            "encoding", source, "expected UTF-8 text, found UTF-16 or binary data", "save it as UTF-8 text"
        )
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise UnreadableFileError.single(
            "encoding",
            f"{source}, line {line}",
            f"expected UTF-8 text, found byte 0x{data[error.start]:02x}",
            "save it as UTF-8 text",
        ) from error
    if not text.strip():
        raise UnreadableFileError.single("empty-file", source, "the file is empty: expected wavelengths and absorbances")
    return text


def cells_of(text: str, delimiter: str, source: str) -> Cells:
    """Return the fields of a text by RFC 4180, blanks around them taken off; blank lines at the end are dropped.

    Raises
    ------
    UnreadableFileError
        For an unclosed quote, a blank line inside, or more fields than any spectrum has.
    """
    widest = text[: text.find("\n")].count(delimiter) + 1 if "\n" in text else text.count(delimiter) + 1
    if widest > MOST_FIELDS:
        raise UnreadableFileError.single(
            "too-many-columns", f"{source}, line 1", f"found {widest} columns; at most {MOST_FIELDS} are read", "split the file"
        )
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, quotechar='"', strict=True)
    rows: list[list[str]] = []
    lines: list[int] = []
    before = 0
    try:
        for row in reader:
            rows.append([cell.strip() for cell in row])
            lines.append(before + 1)
            before = reader.line_num
    except csv.Error as error:
        raise UnreadableFileError.single(
            "bad-quotes", f"{source}, line {reader.line_num}", f"the fields cannot be read: {error}"
        ) from error
    while rows and not any(rows[-1]):
        rows.pop()
        lines.pop()
    if not rows:
        raise UnreadableFileError.single("empty-file", source, "the file holds no cells: expected wavelengths and absorbances")
    for row, line in zip(rows, lines, strict=True):
        if not any(row):
            raise UnreadableFileError.single(
                "blank-line", f"{source}, line {line}", "found a blank line inside the table", "remove it"
            )
    return Cells(rows, lines)
