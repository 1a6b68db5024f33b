"""The bytes of a file or of standard input, bounded."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Final

from tinctor.errors import UnreadableFileError

__all__ = ["LARGEST_FILE_BYTES", "STANDARD_INPUT", "bytes_of", "check_size", "name_of"]

#: Larger files are refused: this holds some 20 000 spectra of 400 readings, and every reading costs far more in memory.
LARGEST_FILE_BYTES: Final = 64 * 1024 * 1024

STANDARD_INPUT: Final = "-"


def bytes_of(source: str | Path) -> bytes:
    """Return what a file holds; "-" is standard input. Never reads further than the limit.

    Raises
    ------
    UnreadableFileError
        When the file cannot be opened or is too large.
    """
    if str(source) == STANDARD_INPUT:
        return check_size(sys.stdin.buffer.read(LARGEST_FILE_BYTES + 1), name_of(source))
    try:
        with Path(source).open("rb") as file:
            data = file.read(LARGEST_FILE_BYTES + 1)
    except (OSError, ValueError) as error:  # ValueError: a NUL in the name
        reason = getattr(error, "strerror", None) or error
        raise UnreadableFileError.single(
            "no-file", str(source), f"the file cannot be opened: {reason}", "check the name and the folder"
        ) from error
    return check_size(data, name_of(source))


def check_size(data: bytes, source: str) -> bytes:
    """Return `data` when it is not larger than `LARGEST_FILE_BYTES`."""
    if len(data) > LARGEST_FILE_BYTES:
        raise UnreadableFileError.single(
            "file-too-large",
            source,
            f"expected at most {LARGEST_FILE_BYTES // 2**20} MiB ({LARGEST_FILE_BYTES} bytes), found more",
            "split the file",
        )
    return data


def name_of(source: str | Path) -> str:
    """Return the name by which a source is spoken of."""
    return "standard input" if str(source) == STANDARD_INPUT else Path(source).name
