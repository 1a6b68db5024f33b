"""Results as a table for a person at a terminal: samples by components, then what was noticed, in words."""

from __future__ import annotations

import textwrap
from typing import Final

from tinctor.operations.resolve import ResolveResponse
from tinctor.operations.resolve_results import ComponentResult, SpectrumResult
from tinctor.report.rounding import rounded, significant
from tinctor.report.text_table import Cell, printable, styled, text_table

__all__ = ["resolve_table"]

#: Emphasis beside the words, never instead of them: bold and reverse, which need no colour vision.
BOLD, REVERSE = "\x1b[1m", "\x1b[7m"
STYLES: Final = {"accepted": "", "flagged": BOLD, "refused": REVERSE}
GRADES: Final = {"info": "", "warning": BOLD, "refusal": REVERSE}
#: Width of the words below the table where the terminal's is not known.
PIPE_WIDTH: Final = 110


def resolve_table(response: ResolveResponse, *, width: int | None = None, colour: bool = False) -> str:
    """Return the results as text.

    Parameters
    ----------
    width
        Columns of the terminal, to which the words are wrapped; 110 when not given. The table is as wide as it needs to be.
    colour
        Whether to put in terminal codes for emphasis.
    """
    first = response.results[0]
    heading = [
        ("", "sample"),
        *((printable(c.name), f"{c.unit}  ") for c in first.components),
        *((f"total {printable(a.name)}", f"{a.unit}  ") for a in first.analytes),
        ("", "status"),
    ]
    rows = [_row(result) for result in response.results]
    right = [False, *([True] * (len(heading) - 2)), False]
    lines = text_table(heading, rows, right=right, colour=colour)
    for result in response.results:
        lines += _flag_lines(result, width or PIPE_WIDTH, colour=colour)
    return "\n".join([*lines, *_closing(response)]) + "\n"


def _row(result: SpectrumResult) -> list[Cell]:
    totals = [
        (f"{_value(a.concentration, a.u, None)}  ", STYLES["refused"] if a.status == "refused" else "") for a in result.analytes
    ]
    return [(printable(result.id), ""), *map(_component, result.components), *totals, (result.status, STYLES[result.status])]


def _component(c: ComponentResult) -> Cell:
    not_detected = c.unconstrained is not None and c.decision_limit is not None and c.unconstrained < c.decision_limit
    value = _value(c.concentration, c.u, c.detection_limit if not_detected else None)
    return f"{value} {'*' if c.status == 'flagged' else ' '}", STYLES[c.status]


def _value(value: float | None, u: float | None, below: float | None) -> str:
    """A value with its uncertainty, or that it lies below the detection limit, or that there is none."""
    if value is None or u is None:
        return "refused"
    if below is not None:
        return f"< {significant(below, 2)}"
    shown, shown_u = rounded(value, u)
    return f"{shown} ± {shown_u}"


def _flag_lines(result: SpectrumResult, width: int, *, colour: bool) -> list[str]:
    """Flags under the name of their sample; what merely says "not detected" is in the table already."""
    flags = [flag for flag in result.flags if flag.code != "below-decision-limit"]
    if not flags:
        return []
    lines = ["", styled(printable(result.id), BOLD, colour=colour)]
    for flag in flags:
        head = f"{flag.severity}: {flag.code}."
        wrapped = textwrap.wrap(
            f"{head} {printable(flag.message)}", max(width, 40), initial_indent="  ", subsequent_indent="  ", break_on_hyphens=False
        )
        if wrapped[0].startswith(f"  {head}"):
            wrapped[0] = f"  {styled(head, GRADES[flag.severity], colour=colour)}{wrapped[0][2 + len(head) :]}"
        lines += wrapped
    return lines


def _closing(response: ResolveResponse) -> list[str]:
    counts = {word: sum(result.status == word for result in response.results) for word in STYLES}
    lines = [
        "",
        "value ± standard uncertainty (k = 1); < detection limit: not detected; * needs a look",
        ", ".join(f"{count} {word}" for word, count in counts.items() if count) + f" of {len(response.results)} spectra",
    ]
    if any(_has_refused(result) for result in response.results):
        lines.insert(2, "refused: no figure can be stood behind; the reason stands above under the sample's name")
    sources = ("library-scale", "library-shape")
    undeclared = {source: [c.name for c in response.results[0].components if source in c.not_declared] for source in sources}
    lines += [f"not in the uncertainty, because nobody has stated it: {s} of {', '.join(n)}" for s, n in undeclared.items() if n]
    return lines


def _has_refused(result: SpectrumResult) -> bool:
    return "refused" in {result.status, *(c.status for c in result.components), *(a.status for a in result.analytes)}
