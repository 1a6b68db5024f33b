"""From an exception to a message on standard error and an exit code; the only place that decides either."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from enum import IntEnum
from typing import NoReturn

import typer

__all__ = ["Exit", "fail", "guarded"]


class Exit(IntEnum):
    """Exit codes of the contract."""

    DONE = 0
    TOOL_FAULT = 1
    USAGE = 2
    INPUT_REFUSED = 3
    UNDETERMINED = 4
    DONE_WITH_FLAGS = 5


def fail(message: str, code: Exit) -> NoReturn:
    """Print a message on standard error and leave with an exit code."""
    typer.echo(message, err=True)
    raise typer.Exit(code)


@contextmanager
def guarded(*, as_json: bool = False) -> Iterator[None]:
    """Turn what goes wrong inside into a message and an exit code.

    Parameters
    ----------
    as_json
        Print the error document instead of lines.
    """
    from tinctor.errors import TinctorError, UndeterminedError

    try:
        yield
    except TinctorError as error:
        code = Exit.UNDETERMINED if isinstance(error, UndeterminedError) else Exit.INPUT_REFUSED
        fail(_document(error) if as_json else f"tinctor: {error}", code)
    except BrokenPipeError:
        # the reader of our output has left; nothing more can be said to it
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise typer.Exit(Exit.DONE) from None
    except (typer.Exit, typer.Abort, typer.BadParameter, KeyboardInterrupt):
        raise
    except Exception as error:
        if os.environ.get("TINCTOR_DEBUG") == "1":
            raise
        fail(
            f"tinctor: a fault of the tool itself: {type(error).__name__}: {error}. Please report it; TINCTOR_DEBUG=1 shows where",
            Exit.TOOL_FAULT,
        )


def _document(error: Exception) -> str:
    from tinctor.errors import TinctorError
    from tinctor.operations.faults import error_body

    assert isinstance(error, TinctorError)
    return json.dumps(error_body(error), ensure_ascii=False)
