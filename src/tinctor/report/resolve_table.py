"""Results as a table for a person at a terminal: samples by components, then what was noticed, in words."""

from __future__ import annotations

import io
from typing import Final

from rich.box import SIMPLE_HEAD
from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from tinctor.operations.resolve import ResolveResponse
from tinctor.operations.resolve_results import ComponentResult, SpectrumResult
from tinctor.report.rounding import rounded, significant

__all__ = ["resolve_table"]

#: Emphasis beside the words, never instead of them; blue and orange are told apart with every kind of colour vision.
STYLES: Final = {"accepted": "", "flagged": "bold dark_orange", "refused": "bold reverse"}
GRADES: Final = {"info": "", "warning": "bold dark_orange", "refusal": "bold reverse"}


def resolve_table(response: ResolveResponse, *, width: int | None = None, colour: bool = False) -> str:
    """Return the results as text.

    Parameters
    ----------
    width
        Columns of the terminal; as wide as needed when not given.
    colour
        Whether to put in terminal codes for emphasis.
    """
    table = Table(box=SIMPLE_HEAD, pad_edge=False, show_edge=False)
    table.add_column("sample", no_wrap=True)
    first = response.results[0]
    for c in first.components:
        table.add_column(f"{c.name}\n{c.unit}", justify="right", no_wrap=True)
    for analyte in first.analytes:
        table.add_column(f"total {analyte.name}\n{analyte.unit}", justify="right", no_wrap=True)
    table.add_column("status", no_wrap=True)
    for result in response.results:
        totals = [_cell(a.concentration, a.u, None) for a in result.analytes]
        table.add_row(result.id, *map(_component, result.components), *totals, Text(result.status, style=STYLES[result.status]))
    out = io.StringIO()
    natural = 40 + 30 * (len(first.components) + len(first.analytes) + 1)
    console = Console(file=out, width=width or max(natural, 100), force_terminal=colour, highlight=False, legacy_windows=False)
    console.print(table)
    _print_flags(console, response.results)
    for line in _closing(response):
        console.print(line, markup=False)
    return "\n".join(line.rstrip() for line in out.getvalue().splitlines()) + "\n"


def _component(c: ComponentResult) -> Text:
    if c.concentration is None:
        return Text("refused  ", style=STYLES["refused"])
    not_detected = c.unconstrained is not None and c.decision_limit is not None and c.unconstrained < c.decision_limit
    cell = _cell(c.concentration, c.u, c.detection_limit if not_detected else None)
    return Text(f"{cell} *", style=STYLES["flagged"]) if c.status == "flagged" else Text(f"{cell}  ")


def _cell(value: float | None, u: float | None, below: float | None) -> str:
    """A value with its uncertainty, or that it lies below the detection limit."""
    if value is None or u is None:
        return "refused"
    if below is not None:
        return f"< {significant(below, 2)}"
    shown, shown_u = rounded(value, u)
    return f"{shown} ± {shown_u}"


def _print_flags(console: Console, results: list[SpectrumResult]) -> None:
    """Flags under the name of their sample; what merely says "not detected" is in the table already."""
    for result in results:
        flags = [flag for flag in result.flags if flag.code != "below-decision-limit"]
        if not flags:
            continue
        console.print(Text(f"\n{result.id}", style="bold"))
        for flag in flags:
            head = Text(f"{flag.severity}: {flag.code}. ", style=GRADES[flag.severity])
            console.print(Padding(head + Text(flag.message), (0, 0, 0, 2)))


def _closing(response: ResolveResponse) -> list[str]:
    counts = {word: sum(result.status == word for result in response.results) for word in STYLES}
    lines = [
        "",
        "value ± standard uncertainty (k = 1); < detection limit: not detected; * needs a look",
        ", ".join(f"{count} {word}" for word, count in counts.items() if count) + f" of {len(response.results)} spectra",
    ]
    undeclared = {
        source: [c.name for c in response.results[0].components if source in c.not_declared]
        for source in ("library-scale", "library-shape")
    }
    lines += [f"not in the uncertainty, because nobody has stated it: {s} of {', '.join(n)}" for s, n in undeclared.items() if n]
    return lines
