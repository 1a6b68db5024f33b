"""Where results go: standard output, or a file written whole or not at all."""

from __future__ import annotations

import io
import os
import sys
from enum import StrEnum
from pathlib import Path

from tinctor.cli.faults import Exit, fail

__all__ = ["Format", "put", "speak_utf8"]


class Format(StrEnum):
    """Forms of a result; `json` is the response document."""

    TABLE = "table"
    JSON = "json"
    CSV = "csv"


def speak_utf8() -> None:
    """Let pipes and files be UTF-8 whatever the locale; a terminal keeps its encoding and shows what it can."""
    for stream, in_pipe, on_terminal in ((sys.stdout, "strict", "replace"), (sys.stderr, "backslashreplace", "backslashreplace")):
        if not isinstance(stream, io.TextIOWrapper):
            continue
        if stream.isatty():
            stream.reconfigure(errors=on_terminal)
        else:
            stream.reconfigure(encoding="utf-8", errors=in_pipe)


def put(text: str, output: Path | None) -> None:
    """Write text to standard output, or to a file by way of a temporary one beside it.

    Raises
    ------
    InputError
        When the file cannot be written; what stood in it before is still there.
    """
    if output is None:
        _put_on_standard_output(text)
        return
    try:
        if output.exists() and not (output.is_file() or output.is_dir()):
            # a pipe or a device takes what it is given; a file put in its place would destroy it
            with output.open("w", encoding="utf-8", newline="") as special:
                special.write(text)
        else:
            _replace(output.resolve(), text)  # resolved: a link stays a link
    except BrokenPipeError:
        raise
    except OSError as error:
        from tinctor.errors import InputError

        raise InputError.single("cannot-write", str(output), f"the file cannot be written: {error.strerror}") from error


def _put_on_standard_output(text: str) -> None:
    if sys.stdout is None:
        fail("tinctor: there is no standard output to write to", Exit.TOOL_FAULT)
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except BrokenPipeError:
        raise
    except OSError as error:
        fail(f"tinctor: standard output cannot be written: {error.strerror}", Exit.TOOL_FAULT)


def _replace(target: Path, text: str) -> None:
    import tempfile  # loaded when a file is asked for

    if target.is_dir():
        raise IsADirectoryError(0, "it is a folder")
    # a temporary file is made for its owner alone: give it the mode of what it replaces, or that of any new file
    mode = target.stat().st_mode & 0o777 if target.exists() else 0o666 & ~_umask()
    handle, name = tempfile.mkstemp(dir=target.parent, prefix=".tinctor.")
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as file:
            file.write(text)
        Path(name).chmod(mode)
        Path(name).replace(target)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
