"""Results as comma-separated values: one row per sample and component, full precision."""

from __future__ import annotations

import csv
import io
from typing import Final

from tinctor.operations.resolve import ResolveResponse

__all__ = ["COLUMNS", "resolve_csv"]

COLUMNS: Final = (
    "id",
    "component",
    "status",
    "unit",
    "concentration",
    "unconstrained",
    "u",
    "interval_low",
    "interval_high",
    "decision_limit",
    "detection_limit",
    "percent_per_nm",
    "flags",
)


def resolve_csv(response: ResolveResponse) -> str:
    """Return the results with a header row, quoted as in RFC 4180, lines ending in a line feed; empty fields where a component
    is refused. Ids and names stand as they are, whatever they hold: nothing is put before a leading `=`.

    `flags` lists the codes that concern the component, or the whole spectrum, between blanks.
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    # the writer quotes what its own line ending needs, and a carriage return inside a field ends a line for other readers
    quoting = csv.writer(out, lineterminator="\n", quoting=csv.QUOTE_ALL)
    writer.writerow(COLUMNS)
    for result in response.results:
        for c in result.components:
            codes = dict.fromkeys(flag.code for flag in result.flags if not flag.components or c.name in flag.components)
            low, high = c.interval or (None, None)
            numbers = (c.concentration, c.unconstrained, c.u, low, high, c.decision_limit, c.detection_limit, c.percent_per_nm)
            cells = ["" if number is None else repr(number) for number in numbers]
            line = quoting if "\r" in result.id + c.name else writer
            line.writerow([result.id, c.name, c.status, c.unit, *cells, " ".join(codes)])
    return out.getvalue()
