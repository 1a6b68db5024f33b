"""Answers on overlap, wavelengths and dilution as text for a person at a terminal."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable

from tinctor.operations.dilution import DilutionChoiceOut, DilutionResponse
from tinctor.operations.overlap import OverlapResponse, WindowOut
from tinctor.operations.plan_in import PlannedOut
from tinctor.operations.shared import FlagOut
from tinctor.operations.wavelengths import WavelengthsResponse
from tinctor.report.rounding import significant
from tinctor.report.text_table import printable, text_table

__all__ = ["dilution_text", "overlap_text", "wavelengths_text"]

WIDTH = 110
#: Lines of a list that may be long.
LISTED = 8


def overlap_text(response: OverlapResponse) -> str:
    """Return the answer on overlap as text."""
    heading = [
        ("", "component"), ("planned", response.components[0].unit if _one_unit(response) else ""), ("expected", "u, %"),
        ("", "selectivity"), ("", "% per nm"), ("decision", "limit"), ("detection", "limit"), ("", "verdict"),
    ]  # fmt: skip
    rows = [
        [
            printable(c.name),
            significant(c.concentration, 4) + ("" if _one_unit(response) else f" {c.unit}"),
            _percent(c.expected_relative_u),
            significant(c.selectivity, 2),
            _number(c.percent_per_nm),
            _number(c.decision_limit),
            _number(c.detection_limit),
            c.verdict,
        ]
        for c in response.components
    ]
    right = [False, *([True] * 6), False]
    lines = [*_wrapped(response.summary, ""), "", *_planned(response.planned)]
    lines += ["", *text_table(heading, [[(cell, "") for cell in row] for row in rows], right=right, colour=False), ""]
    for c in response.components:
        lines += _wrapped(f"{printable(c.name)}: {printable(c.reason)}", "")
    lines += [*_obstacles(response), *_price(response), *_pairs(response), *_crossings(response), *_windows(response.clear_windows)]
    return "\n".join([*lines, *_not_declared(response), *_flags(response.flags)]) + "\n"


def wavelengths_text(response: WavelengthsResponse) -> str:
    """Return the wavelengths chosen as text."""
    places = ", ".join(f"{w:g}" for w in response.wavelengths_nm)
    sure = "no other set of this size is better" if response.exact else (
        f"a good set; no other of this size is better by more than {100 * response.proven_within:.2g} %"
    )  # fmt: skip
    readings = ", ".join(f"{a:.3f}" for a in response.absorbance)
    lines = [
        f"measure at {places} nm ({sure})",
        f"  planned absorbance  {readings}",
        f"  criterion           {response.criterion}: {_percent(response.criterion_value)} %, "
        f"efficiency {response.efficiency:.2f} of all {response.all_candidates} candidates together",
        f"  condition number    {significant(response.condition_number, 3)}",
        "",
        *_planned(response.planned),
        "",
    ]
    both = list(zip(response.expected_u, response.expected_u_all_candidates, strict=True))
    columns = [
        (("", "component"), [printable(one.name) for one, _ in both]),
        (("expected u, %", "as chosen"), [_percent(one.relative_u) for one, _ in both]),
        (("", "all candidates"), [_percent(every.relative_u) for _, every in both]),
    ]
    if any(one.wavelength_bias_relative is not None for one, _ in both):
        columns.append((("bias by axis, %", "as chosen"), [_percent(one.wavelength_bias_relative) for one, _ in both]))
        columns.append((("", "all candidates"), [_percent(every.wavelength_bias_relative) for _, every in both]))
    rows = [[(cell, "") for cell in row] for row in zip(*(cells for _, cells in columns), strict=True)]
    right = [False, *([True] * (len(columns) - 1))]
    lines += [*text_table([head for head, _ in columns], rows, right=right, colour=False), ""]
    heading = [("", "count"), ("criterion", "%"), ("worst", "u, %"), ("", "efficiency"), ("", "wavelengths, nm")]
    table = [
        [
            (f"{row.count}{' ' if row.exact else '~'}", ""),
            (_percent(row.criterion_value), ""),
            (_percent(row.worst_relative_u), ""),
            (f"{row.efficiency:.2f}", ""),
            (" ".join(f"{w:g}" for w in row.wavelengths_nm), ""),
        ]
        for row in response.table
    ]
    lines += text_table(heading, table, right=[True, True, True, True, False], colour=False)
    if not all(row.exact for row in response.table):
        lines.append("~ a good set, not proved to be the best")
    return "\n".join([*lines, *_flags(response.flags)]) + "\n"


def dilution_text(response: DilutionResponse) -> str:
    """Return dilutions and cells as text."""
    lines = [*_planned(response.planned, cell=False), ""]
    if response.warning:
        lines += [*_wrapped(printable(response.warning), ""), ""]
    choices = response.choices or response.together
    names = [part.name for part in choices[0].expected_relative_u]
    heading = [
        ("cell", "cm"), ("dilution", "factor"), ("", "volumes"), ("highest", "absorbance"),
        *((printable(name), "u, %") for name in names),
    ]  # fmt: skip
    rows = [[(cell, "") for cell in _choice(choice)] for choice in choices]
    lines += text_table(heading, rows, right=[True, True, False, True, *([True] * len(names))], colour=False)
    if response.more_choices:
        lines.append(f"and {response.more_choices} more that serve")
    lines += ["", "u: expected relative standard uncertainty; dilution from class A tolerances; - this choice does not serve"]
    if response.together:
        lines.append("readings above the window are left out where the absorbance goes beyond it")
    lines.append("dyes and solvents can harm: dilute and dispose by their safety data sheets and local rules")
    return "\n".join([*lines, *_flags(response.flags)]) + "\n"


def _choice(choice: DilutionChoiceOut) -> list[str]:
    steps = ", then ".join(f"{step.pipette_ml:g} mL to {step.flask_ml:g} mL" for step in choice.volumes) or "as it is"
    served = [_percent(part.expected_relative_u) if part.served else "-" for part in choice.expected_relative_u]
    return [
        f"{choice.path_length_cm:g}",
        significant(choice.dilution_factor, 4),
        steps,
        f"{choice.highest_absorbance:.3f} at {choice.highest_nm:g} nm",
        *served,
    ]


def _one_unit(response: OverlapResponse) -> bool:
    return len({c.unit for c in response.components}) == 1


def _percent(share: float | None) -> str:
    return "-" if share is None else significant(100 * share, 2)


def _number(value: float | None) -> str:
    return "-" if value is None else significant(value, 2)


def _planned(planned: PlannedOut, *, cell: bool = True) -> list[str]:
    low, high = planned.wavelength_nm
    words = f"planned: {planned.readings} readings from {low:g} to {high:g} nm"
    if cell:
        words += f", {planned.path_length_cm:g} cm"
        words += "" if planned.dilution_factor == 1 else f", diluted {planned.dilution_factor:g} times"
        words += f"; highest absorbance {planned.highest_absorbance:.3f} at {planned.highest_nm:g} nm"
    else:
        parts = [f"{printable(c.name)} {significant(c.concentration, 4)} {c.unit}" for c in planned.concentrations]
        words += f"; undiluted {', '.join(parts)}"
    lines = _wrapped(words, "")
    if planned.assumed:
        lines += _wrapped("no concentrations were planned: those assumed give each component the same highest absorbance", "")
    return lines


def _obstacles(response: OverlapResponse) -> list[str]:
    lines = [""] if response.groups or response.left_out else []
    for group in response.groups:
        lines += _wrapped(printable(group.message), "")
    for part in response.left_out:
        what = f"the rest would be {part.verdict}"
        what += f", at worst {_percent(part.worst_relative_u)} %" if part.worst_relative_u is not None else ""
        lines.append(f"without {printable(part.left_out)}: {what}")
    return lines


def _price(response: OverlapResponse) -> list[str]:
    terms = list(response.components[0].price)
    fitted = list(response.components[0].price_of_fitted)
    if not terms + fitted:
        return []
    heading = [("factor on u of", "component"), *(("", f"+ {term}") for term in terms), *(("fitted", term) for term in fitted)]
    rows = [
        [
            (printable(c.name), ""),
            *((_factor(c.price[t]), "") for t in terms),
            *((_factor(c.price_of_fitted[t]), "") for t in fitted),
        ]
        for c in response.components
    ]
    return ["", *text_table(heading, rows, right=[False, *([True] * (len(heading) - 1))], colour=False)]


def _factor(value: float | None) -> str:
    return "-" if value is None else f"{value:.2f}"


def _pairs(response: OverlapResponse) -> list[str]:
    lines = ["", "pairs, least selective first"]
    for pair in response.pairs[:LISTED]:
        both = " and ".join(map(printable, pair.components))
        lines.append(f"  {both}: cosine {pair.cosine:.3f}, selectivity {significant(pair.selectivity, 2)}")
    return [*lines, *_more(len(response.pairs))]


def _crossings(response: OverlapResponse) -> list[str]:
    if not response.crossings:
        return []
    lines = ["", "equal absorptivities"]
    for c in response.crossings[:LISTED]:
        kind = ", isosbestic" if c.isosbestic else ""
        lines.append(f"  {c.wavelength_nm:.1f} nm: {' and '.join(map(printable, c.components))}{kind}")
    return [*lines, *_more(len(response.crossings))]


def _windows(windows: Iterable[WindowOut]) -> list[str]:
    lines = []
    for w in windows:
        span = f"{w.low_nm:g} nm" if w.low_nm == w.high_nm else f"{w.low_nm:g} to {w.high_nm:g} nm"
        if w.component is None:
            lines.append(f"  {span}: none, for the baseline")
        else:
            lines.append(
                f"  {span}: {printable(w.component)}, most at {w.best_nm:g} nm (others {_percent(w.others_share)} % of it at most)"
            )
    return ["", "clear windows", *lines[:LISTED], *_more(len(lines))] if lines else []


def _not_declared(response: OverlapResponse) -> list[str]:
    lines = []
    for source in ("library-scale", "library-shape"):
        names = [printable(c.name) for c in response.components if source in c.not_declared]
        if names:
            lines.append(f"not in the uncertainty, because nobody has stated it: {source} of {', '.join(names)}")
    return ["", *lines] if lines else []


def _flags(flags: Iterable[FlagOut]) -> list[str]:
    lines: list[str] = []
    for flag in flags:
        lines += ["", *_wrapped(f"{flag.severity}: {flag.code}. {printable(flag.message)}", "")]
    return lines


def _more(count: int) -> list[str]:
    return [f"  and {count - LISTED} more (--format json lists all)"] if count > LISTED else []


def _wrapped(text: str, indent: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent + "  ", break_on_hyphens=False)
