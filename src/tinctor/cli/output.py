"""Where results go: standard output, or a file written whole or not at all."""

from __future__ import annotations

import os
import sys
from enum import StrEnum
from pathlib import Path

__all__ = ["Format", "put"]


class Format(StrEnum):
    """Forms of a result; `json` is the response document."""

    TABLE = "table"
    JSON = "json"
    CSV = "csv"


def put(text: str, output: Path | None) -> None:
    """Write text to standard output, or to a file by way of a temporary one beside it."""
    if output is None:
        sys.stdout.write(text)
        sys.stdout.flush()
        return
    import tempfile  # loaded when a file is asked for

    try:
        handle, name = tempfile.mkstemp(dir=output.parent, prefix=f".{output.name}.")
    except OSError as error:
        from tinctor.errors import InputError

        raise InputError.single("no-folder", str(output), f"the file cannot be written: {error.strerror}") from error
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as file:
            file.write(text)
        Path(name).chmod(0o666 & ~_umask())  # a temporary file is made for its owner alone
        Path(name).replace(output)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
