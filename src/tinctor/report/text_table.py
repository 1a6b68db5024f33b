"""A plain text table: aligned columns under a two-line heading.

Written here because a console library would take a sixth of a cold start, and nothing of it but alignment is needed.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Sequence

__all__ = ["Cell", "printable", "shown_width", "styled", "text_table"]

#: A cell's text, and the terminal code that emphasises it ("" for none).
Cell = tuple[str, str]

RESET = "\x1b[0m"

#: Marks that turn the direction of what follows, by their class in the Unicode character database.
TURNING = frozenset({"LRE", "RLE", "LRO", "RLO", "PDF", "LRI", "RLI", "FSI", "PDI"})


def printable(text: str) -> str:
    """Return a text with what would steer a terminal, break the line or turn the reading direction written as an escape.

    Examples
    --------
    >>> print(printable("vat-3"), printable("a\\x1b[31mb\\nc"))
    vat-3 a\\x1b[31mb\\nc
    """
    if text.isprintable():
        return text
    return "".join(c.encode("unicode_escape").decode() if _steers(c) else c for c in text)


def _steers(c: str) -> bool:
    return unicodedata.category(c) in ("Cc", "Cs", "Zl", "Zp") or unicodedata.bidirectional(c) in TURNING


def shown_width(text: str) -> int:
    """Return how many columns of a terminal a text takes: two for wide characters, none for combining ones.

    Examples
    --------
    >>> shown_width("vat-3"), shown_width("染料")
    (5, 4)
    """
    return sum(0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in text)


def styled(text: str, code: str, *, colour: bool) -> str:
    """Return a text with a terminal code before and a reset after it, where colour is wanted."""
    return f"{code}{text}{RESET}" if colour and code else text


def text_table(
    heading: Sequence[tuple[str, str]], rows: Sequence[Sequence[Cell]], *, right: Sequence[bool], colour: bool
) -> list[str]:
    """Return the lines of a table.

    Parameters
    ----------
    heading
        Two lines for each column (name above, unit below).
    rows
        Cells of each row.
    right
        Whether each column is aligned to the right.
    colour
        Whether to put in the cells' terminal codes.

    Examples
    --------
    >>> for line in text_table([("", "id"), ("dye", "g/L")], [[("a", ""), ("0.5", "")]], right=[False, True], colour=False):
    ...     print(line)
        dye
    id  g/L
    ───────
    a   0.5
    """
    columns = range(len(heading))
    widths = [max([*map(shown_width, heading[k]), *(shown_width(row[k][0]) for row in rows)]) for k in columns]

    def line(cells: Sequence[Cell]) -> str:
        parts = []
        for k, (text, code) in enumerate(cells):
            blank = " " * (widths[k] - shown_width(text))
            parts.append(blank + styled(text, code, colour=colour) if right[k] else styled(text, code, colour=colour) + blank)
        return "  ".join(parts).rstrip()

    heads = [line([(head[k], "") for head in heading]) for k in (0, 1)]
    return [*heads, "─" * (sum(widths) + 2 * (len(widths) - 1)), *map(line, rows)]
