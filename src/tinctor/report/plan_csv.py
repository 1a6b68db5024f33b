"""Answers on overlap, wavelengths and dilution as comma-separated values, full precision."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence

from tinctor.operations.dilution import DilutionResponse
from tinctor.operations.overlap import OverlapResponse
from tinctor.operations.wavelengths import WavelengthsResponse

__all__ = ["dilution_csv", "overlap_csv", "wavelengths_csv"]

OVERLAP_COLUMNS = (
    "component", "verdict", "unit", "concentration", "selectivity", "sensitivity", "variance_inflation", "percent_per_nm",
    "expected_u", "expected_relative_u", "decision_limit", "detection_limit", "quantification_limit", "target_met", "reason",
)  # fmt: skip
WAVELENGTHS_COLUMNS = ("count", "chosen", "wavelengths_nm", "criterion_value", "efficiency", "worst_relative_u", "exact")
DILUTION_COLUMNS = (
    "choice", "path_length_cm", "dilution_factor", "dilution_factor_u", "volumes_ml", "highest_absorbance", "highest_nm",
    "component", "expected_relative_u", "served",
)  # fmt: skip


def overlap_csv(response: OverlapResponse) -> str:
    """Return one row a component."""
    return _table(
        OVERLAP_COLUMNS,
        (
            [getattr(c, "name" if column == "component" else column) for column in OVERLAP_COLUMNS]
            for c in response.components
        ),
    )  # fmt: skip


def wavelengths_csv(response: WavelengthsResponse) -> str:
    """Return one row a count of wavelengths; that of the count asked for is marked `chosen`."""
    rows: list[list[object]] = [
        [
            row.count,
            row.wavelengths_nm == response.wavelengths_nm,
            " ".join(map(repr, row.wavelengths_nm)),
            row.criterion_value,
            row.efficiency,
            row.worst_relative_u,
            row.exact,
        ]
        for row in response.table
    ]
    if not any(row.wavelengths_nm == response.wavelengths_nm for row in response.table):
        worst = max((e.relative_u for e in response.expected_u if e.relative_u is not None), default=None)
        places = " ".join(map(repr, response.wavelengths_nm))
        count = len(response.wavelengths_nm)
        rows.append([count, True, places, response.criterion_value, response.efficiency, worst, response.exact])
    return _table(WAVELENGTHS_COLUMNS, rows)


def dilution_csv(response: DilutionResponse) -> str:
    """Return one row a choice and component, best choice first; `volumes_ml` as pipette:flask, steps between blanks."""
    rows: list[list[object]] = []
    for number, choice in enumerate(response.choices or response.together, 1):
        volumes = " ".join(f"{step.pipette_ml:g}:{step.flask_ml:g}" for step in choice.volumes)
        shared = [choice.path_length_cm, choice.dilution_factor, choice.dilution_factor_u, volumes]
        for part in choice.expected_relative_u:
            top = [choice.highest_absorbance, choice.highest_nm]
            rows.append([number, *shared, *top, part.name, part.expected_relative_u, part.served])
    return _table(DILUTION_COLUMNS, rows)


def _table(columns: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    out = io.StringIO()
    # everything quoted that a carriage return in a name could break: see resolve_csv
    writer = csv.writer(out, lineterminator="\n")
    quoting = csv.writer(out, lineterminator="\n", quoting=csv.QUOTE_ALL)
    writer.writerow(columns)
    for row in rows:
        cells = [_cell(value) for value in row]
        (quoting if any("\r" in cell for cell in cells) else writer).writerow(cells)
    return out.getvalue()


def _cell(value: object) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    return repr(value) if isinstance(value, float) else str(value)
