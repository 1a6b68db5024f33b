"""Standards, mixtures and transfers for a person at a terminal, and as CSV."""

from __future__ import annotations

import csv
import io
import textwrap
from collections.abc import Sequence
from typing import Final, Protocol

from tinctor.operations.mixtures import MixturesResponse
from tinctor.operations.standards import StandardsResponse
from tinctor.operations.standards_results import ComponentOut
from tinctor.operations.transfer import TransferResponse
from tinctor.report.rounding import rounded, significant
from tinctor.report.text_table import printable, text_table

__all__ = [
    "flag_lines",
    "mixtures_csv",
    "mixtures_table",
    "standards_csv",
    "standards_table",
    "transfer_csv",
    "transfer_table",
]

WIDTH: Final = 110


class _Flag(Protocol):
    @property
    def code(self) -> str: ...
    @property
    def severity(self) -> str: ...
    @property
    def message(self) -> str: ...


def standards_table(response: StandardsResponse) -> str:
    """Return the result of a series in words and a table of its standards."""
    component = response.component
    spectrum = _spectrum(component)
    top = max(range(len(spectrum)), key=spectrum.__getitem__)
    unit = _unit(component)
    without = " without the stock" if response.uncertainty.stock is None else ""
    lines = [
        f"{printable(component.name)}: {len(response.standards_used)} preparations, {len(spectrum)} wavelengths",
        f"  highest absorptivity   {_with_interval(spectrum[top], response.slope_interval[top], without)} {unit} at "
        f"{component.wavelength_nm[top]:g} nm",
        f"  scale uncertainty      {_scale(response)}",
        f"  Beer's law shown to    {_linear_to(response)}",
        f"  line                   {_line_words(response)}",
        "",
    ]
    heading = [
        ("", "standard"),
        ("weighed", f"{response.base_unit} cm"),
        ("shown", f"{response.base_unit} cm"),
        ("difference", "%"),
    ]
    rows = [
        [
            (printable(s.id), ""),
            (significant(s.amount, 4), ""),
            (significant(s.apparent, 4), ""),
            ("" if s.difference_percent is None else f"{s.difference_percent:+.2f}", ""),
        ]
        for s in response.standards_used
    ]
    lines += text_table(heading, rows, right=[False, True, True, True], colour=False)
    lines += [f"left out: {printable(d.id)}: {d.reason}" for d in response.dropped]
    lines += _handbook_lines(response)
    return "\n".join([*lines, *flag_lines(response.flags)]) + "\n"


def standards_csv(response: StandardsResponse) -> str:
    """Return the component by wavelength, with what stands behind each value."""
    header = ["wavelength_nm", _key(response.component), "absorptivity_u", "slope_u", "low", "high", "intercept", "intercept_u"]
    header += ["residual_sd", "degrees_of_freedom"]
    own: Sequence[float | None] = response.component.absorptivity_u or [None for _ in response.wavelength_nm]
    rows = zip(
        response.wavelength_nm,
        _spectrum(response.component),
        own,
        response.slope_u,
        *zip(*response.slope_interval, strict=True),
        response.intercept,
        response.intercept_u,
        response.residual_sd,
        response.degrees_of_freedom,
        strict=True,
    )
    return _csv(header, [list(row) for row in rows])


def mixtures_table(response: MixturesResponse) -> str:
    """Return the components found and how well the compositions tell them apart."""
    heading = [
        ("", "component"),
        ("highest", _unit(response.components[0])),
        ("at", "nm"),
        ("scale u", "%"),
        ("variance", "inflation"),
    ]
    rows = []
    for c, inflation in zip(response.components, response.design.variance_inflation, strict=True):
        spectrum = _spectrum(c)
        top = max(range(len(spectrum)), key=spectrum.__getitem__)
        scale = "not known" if c.scale_relative_u is None else significant(100 * c.scale_relative_u, 2)
        cells = [printable(c.name), significant(spectrum[top], 4), f"{c.wavelength_nm[top]:g}", scale, f"{inflation:.2f}"]
        rows.append([(text, "") for text in cells])
    lines = text_table(heading, rows, right=[False, True, True, True, True], colour=False)
    d = response.design
    lines.append(
        f"{len(response.mixtures)} mixtures, {d.degrees_of_freedom} degrees of freedom, condition number {d.condition_number:.3g}"
    )
    return "\n".join([*lines, *flag_lines(response.flags)]) + "\n"


def mixtures_csv(response: MixturesResponse) -> str:
    """Return the absorptivities by wavelength, one column and one of uncertainties for each component."""
    header = ["wavelength_nm"]
    columns: list[Sequence[float | None]] = [response.wavelength_nm]
    for c, u in zip(response.components, response.slope_u, strict=True):
        header += [f"{c.name} {_key(c)}", f"{c.name} absorptivity_u"]
        columns += [_spectrum(c), u]
    return _csv(header, [list(row) for row in zip(*columns, strict=True)])


def transfer_table(response: TransferResponse) -> str:
    """Return shift and bandwidth difference in words."""
    shift, shift_u = rounded(response.shift_nm, response.shift_u_nm)
    broad, broad_u = rounded(response.broadening_nm2, response.broadening_u_nm2)
    lines = [
        f"{printable(response.component.name)}" + (f" from {response.parent}" if response.parent else ""),
        f"  shift                  {shift} ± {shift_u} nm (above 0: the check lies to the red)",
        f"  broadening             {broad} ± {broad_u} nm2 (variance of the slit function, check less record)",
        *([f"  bandwidth of the check {response.bandwidth_nm:.2f} nm"] if response.bandwidth_nm is not None else []),
        f"  amount by the record   {' ± '.join(rounded(response.amount, response.amount_u))} (concentration x path)",
        f"  unexplained            {1000 * response.residual_rms:.2f} mAU over {response.points} readings",
    ]
    return "\n".join([*lines, *flag_lines(response.flags)]) + "\n"


def transfer_csv(response: TransferResponse) -> str:
    """Return the corrected record by wavelength."""
    c = response.component
    return _csv(
        ["wavelength_nm", _key(c), "absorptivity_u"],
        [list(row) for row in zip(c.wavelength_nm, _spectrum(c), c.absorptivity_u or [], strict=True)],
    )


def flag_lines(flags: Sequence[_Flag]) -> list[str]:
    """Return flags in words, wrapped, warnings first."""
    lines = []
    for flag in sorted(flags, key=lambda f: f.severity != "warning"):
        text = f"{flag.severity}: {flag.code}. {printable(flag.message)}"
        lines += ["", *textwrap.wrap(text, WIDTH, subsequent_indent="  ", break_long_words=False, break_on_hyphens=False)]
    return lines


def _spectrum(c: ComponentOut) -> list[float]:
    return (c.molar_absorptivity if c.molar_absorptivity is not None else c.mass_absorptivity) or []


def _unit(c: ComponentOut) -> str:
    return "L mol-1 cm-1" if c.molar_absorptivity is not None else "L g-1 cm-1"


def _key(c: ComponentOut) -> str:
    return "molar_absorptivity" if c.molar_absorptivity is not None else "mass_absorptivity"


def _with_interval(value: float, interval: list[float | None], without: str) -> str:
    low, high = interval
    if low is None or high is None:
        return significant(value, 4)
    return f"{significant(value, 4)} (95 %{without}: {significant(low, 4)} to {significant(high, 4)})"


def _scale(response: StandardsResponse) -> str:
    u = response.uncertainty
    series = "series not known" if u.series is None else f"series {significant(100 * u.series, 2)} % ({u.series_basis})"
    stock = "stock not stated" if u.stock is None else f"stock {significant(100 * u.stock, 2)} %"
    whole = "not known" if u.common is None else f"{significant(100 * u.common, 2)} %"
    return f"{whole}: {stock}, {series}, path {significant(100 * u.path_length, 2)} %"


def _linear_to(response: StandardsResponse) -> str:
    test = response.linearity.tests[-1]
    if response.linearity.linear_to is None:
        return "nothing: see below"
    words = f"{significant(response.linearity.linear_to, 4)} {response.base_unit} cm"
    if test.f is None or test.probability is None:
        return words
    return f"{words} ({test.method} test: F = {test.f:.3g}, probability {test.probability:.2g})"


def _line_words(response: StandardsResponse) -> str:
    t = response.intercept_test
    words = "with a fitted intercept" if t.fitted else "through zero"
    return words if t.probability is None else f"{words} (intercept: t = {t.t or 0:.2f}, probability {t.probability:.2g})"


def _handbook_lines(response: StandardsResponse) -> list[str]:
    lines = []
    for h in response.handbook:
        memory = ", from memory" if h.from_memory else ""
        text = (
            f"handbook: {h.substance} in {h.solvent}: E(1 %, 1 cm) {h.published_specific_absorbance:g} at "
            f"{h.published_wavelength_nm:g} nm ({h.source}{memory}); here {h.specific_absorbance:.4g} at {h.maximum_nm:g} nm, "
            f"{h.difference_percent:+.1f} %: as weighed, a dye content of {h.dye_content_percent:.1f} % would explain it"
        )
        if not h.at_maximum:
            text += ". This spectrum has no maximum there: it may be another substance, solvent or pH"
        lines += ["", *textwrap.wrap(text, WIDTH, subsequent_indent="  ", break_long_words=False, break_on_hyphens=False)]
    return lines


def _csv(header: Sequence[str], rows: Sequence[Sequence[float | str | None]]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(header)
    writer.writerows(["" if value is None else value for value in row] for row in rows)
    return out.getvalue()
