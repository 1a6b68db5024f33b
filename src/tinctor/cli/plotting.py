"""A chart into a file, whole or not at all."""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import Any

from tinctor.errors import InputError

__all__ = ["put_chart"]


def put_chart(operation: str, response: Any, path: Path) -> None:
    """Draw the chart of a response into a file whose name says its kind.

    Raises
    ------
    InputError
        When the file cannot be written; what stood in it before is still there.
    """
    from tinctor.report import charts  # matplotlib is loaded here and only here

    figure = getattr(charts, f"{operation}_figure")(response)
    form = path.suffix.lower().removeprefix(".")
    try:
        with tempfile.TemporaryDirectory(dir=path.resolve().parent, prefix=".tinctor.") as folder:
            whole = Path(folder) / path.name
            charts.save(figure, whole, form)
            whole.replace(path.resolve())
    except OSError as error:
        raise InputError.single("cannot-write", str(path), f"the chart cannot be written: {error.strerror}") from error
