"""Delimited text to cells: encoding, lines, fields. No meaning yet."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final

from tinctor.errors import UnreadableFileError
from tinctor.files.source import check_size

__all__ = ["MOST_FIELDS", "MOST_PER_AXIS", "Cells", "cells_of", "decoded"]

#: No spectrum has more wavelengths, and no plain export more spectra.
MOST_PER_AXIS: Final = 20_000
#: Beside the readings of a line stand the id or the wavelength and at most four named columns.
MOST_FIELDS: Final = MOST_PER_AXIS + 5

ENCODINGS: Final = "save it as UTF-8 text, with or without byte order mark; nothing else is read"


@dataclass(frozen=True, slots=True)
class Cells:
    """The fields of a table, and the line of the file on which each row begins (from 1).

    `empty_rows` counts the rows at the end that hold delimiters and nothing else, and are not among `rows`.
    """

    rows: list[list[str]]
    lines: list[int]
    empty_rows: int = 0


def decoded(data: bytes, source: str) -> str:
    """Return the text of a file in UTF-8, with or without a byte order mark.

    Raises
    ------
    UnreadableFileError
        For an empty or oversized file and for other encodings.
    """
    check_size(data, source)
    if data.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\x00" in data:
        raise UnreadableFileError.single("encoding", source, "expected UTF-8 text, found UTF-16 or binary data", ENCODINGS)
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise UnreadableFileError.single(
            "encoding", f"{source}, line {line}", f"expected UTF-8 text, found byte 0x{data[error.start]:02x}", ENCODINGS
        ) from error
    if not text.strip():
        raise UnreadableFileError.single("empty-file", source, "the file is empty: expected wavelengths and absorbances")
    return text


def cells_of(text: str, delimiter: str, source: str) -> Cells:
    """Return the fields of a text by RFC 4180, blanks around them taken off; blank lines at the end are dropped.

    Raises
    ------
    UnreadableFileError
        For an unclosed quote, a blank line inside, or more fields or rows than any plain export has.
    """
    reader = csv.reader(_bounded_lines(text, delimiter, source), delimiter=delimiter, quotechar='"', doublequote=True, strict=True)
    rows: list[list[str]] = []
    lines: list[int] = []
    blank_line = empty_rows = before = 0
    try:
        for row in reader:
            line, before = before + 1, reader.line_num
            cells = list(map(str.strip, row))
            if not any(cells):
                blank_line = blank_line or line
                empty_rows += len(cells) > 1
                continue
            if blank_line:
                raise UnreadableFileError.single(
                    "blank-line", f"{source}, line {blank_line}", "found a blank line inside the table", "remove it"
                )
            _check_rows(rows, f"{source}, line {line}")
            rows.append(cells)
            lines.append(line)
    except csv.Error as error:
        place = f"{source}, line {max(reader.line_num, 1)}"
        raise UnreadableFileError.single(
            "bad-quotes", place, f"the fields cannot be read: {error}", 'close the quote, and double a " inside quotes'
        ) from error
    if not rows:
        raise UnreadableFileError.single("empty-file", source, "the file holds no cells: expected wavelengths and absorbances")
    return Cells(rows, lines, empty_rows)


def _bounded_lines(text: str, delimiter: str, source: str) -> Iterator[str]:
    """Lines as the csv module wants them; one that is absurdly wide is refused before it is taken apart."""
    for number, line in enumerate(io.StringIO(text, newline=""), start=1):
        fields = line.count(delimiter) + 1
        if fields > MOST_FIELDS:
            raise UnreadableFileError.single(
                "too-many-columns",
                f"{source}, line {number}",
                f"found {fields} columns; at most {MOST_PER_AXIS} wavelengths or spectra are read",
                "split the file",
            )
        yield line


def _check_rows(rows: list[list[str]], place: str) -> None:
    if len(rows) > MOST_PER_AXIS:
        raise UnreadableFileError.single(
            "too-many-rows", place, f"found more rows; at most {MOST_PER_AXIS} wavelengths or spectra are read", "split the file"
        )
