"""Determinations for a person at a terminal, and as CSV."""

from __future__ import annotations

import csv
import io

from tinctor.operations.determine import DeterminedOut, DetermineResponse
from tinctor.report.rounding import rounded, significant
from tinctor.report.standards_text import flag_lines
from tinctor.report.text_table import Cell, printable, text_table

__all__ = ["determine_csv", "determine_table"]


def determine_table(response: DetermineResponse) -> str:
    """Return the concentrations with their intervals, the line and its limits."""
    unit = response.results[0].unit
    heading = [("", "sample"), ("concentration", unit), ("interval", unit), ("", "status")]
    lines = text_table(heading, [_row(r) for r in response.results], right=[False, True, True, False], colour=False)
    line = response.line
    dof = "declared scatter" if line.degrees_of_freedom is None else f"{line.degrees_of_freedom:g} degrees of freedom"
    lines += [
        "",
        f"line by {line.signal}: {line.points} points, {dof}"
        + (f"; limits in {unit} (1 cm, undiluted):" if response.limits else ""),
    ]
    for limit in response.limits:
        shown = [
            f"{name} {significant(value, 2)}"
            for name, value in (
                ("decision", limit.decision),
                ("detection", limit.detection),
                ("quantification", limit.quantification),
            )
            if value is not None
        ]
        lines.append(f"  {limit.definition}: {', '.join(shown)}")
    lines += [f"left out: {printable(d.id)}: {d.reason}" for d in response.dropped]
    for result in response.results:
        lines += [
            f"{text}" if not text or text.startswith("  ") else f"{printable(result.id)}: {text}"
            for text in flag_lines(result.flags)
        ]
    return "\n".join([*lines, *flag_lines(response.flags)]) + "\n"


def determine_csv(response: DetermineResponse) -> str:
    """Return one row a sample."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["id", "status", "unit", "concentration", "u", "low", "high", "replicates", "outside_range_percent", "flags"])
    for r in response.results:
        low, high = r.interval or (None, None)
        values = ["" if v is None else v for v in (r.concentration, r.u, low, high)]
        flags = " ".join(f.code for f in r.flags)
        writer.writerow([r.id, r.status, r.unit, *values, r.replicates, r.outside_range_percent, flags])
    return out.getvalue()


def _row(r: DeterminedOut) -> list[Cell]:
    value = "refused" if r.concentration is None or r.u is None else " ± ".join(rounded(r.concentration, r.u))
    interval = "not bounded"
    if r.concentration is None:
        interval = ""
    elif r.interval is not None and r.u is not None:
        interval = " to ".join(rounded(end, r.u)[0] for end in r.interval)
    return [(printable(r.id), ""), (value, ""), (interval, ""), (r.status, "")]
