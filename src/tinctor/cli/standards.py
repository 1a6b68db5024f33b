"""`tinctor standards` and `tinctor mixtures`: absorptivities from weighed standards, or from mixtures of known composition."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from tinctor.cli import series as s
from tinctor.cli.faults import Exit, guarded
from tinctor.cli.output import Format, put
from tinctor.cli.reading import document_of, given, read_all, say

if TYPE_CHECKING:
    from collections.abc import Callable

__all__ = ["EPILOG", "MIXTURES_EPILOG", "mixtures", "standards"]

EPILOG = f"""
Examples:

tinctor standards series.csv --sheet sheet.csv --name tarn-blue-lot-12 --unit mg/L --stock-relative-u 0.004

tinctor standards series.csv --sheet sheet.csv --name tarn-blue-lot-12 --unit mg/L --stock-relative-u 0.004 -f json -o lot-12.json

tinctor library add lot-12.json --to my-dyes --title "Tarn blue, lot 12" --operator "A. Moor" --new-collection "Our dyes"

{s.HAZARD}
"""
MIXTURES_EPILOG = f"""
Example:

tinctor mixtures mixtures.csv --sheet compositions.csv --unit mg/L

The sheet has the column id and one column for each component, 0 where there is none.

{s.HAZARD}
"""


def standards(
    files: Annotated[list[str], typer.Argument(help="Files of the standards' and blanks' spectra; - is standard input.")],
    sheet: s.Sheet,
    name: Annotated[str, typer.Option(help="Of the component, for example tarn-blue-lot-12.")],
    unit: s.Unit,
    molar_mass: s.MolarMass = None,
    basis: Annotated[str | None, typer.Option(help="Of the absorptivity: molar or mass (default: that of the unit).")] = None,
    stock_relative_u: s.StockU = None,
    path_length_relative_u: Annotated[float, typer.Option(help="Relative standard uncertainty of the cell's path length.")] = 0.0,
    intercept: s.Intercept = "tested",
    blank: s.Blank = None,
    range_nm: s.RangeNm = None,
    absorbance_limit: s.AbsorbanceLimit = 2.0,
    noise_floor: s.NoiseFloor = None,
    significance: s.Significance = 0.05,
    allowed_nonlinearity: s.AllowedNonlinearity = 0.0,
    outliers: s.Outliers = "mark",
    leave_out: s.LeaveOut = None,
    solvent: Annotated[str | None, typer.Option(help="Solvent of the standards.")] = None,
    ph: Annotated[float | None, typer.Option(help="pH of the standards.")] = None,
    temperature_c: Annotated[float | None, typer.Option(help="Temperature, in degrees C.")] = None,
    bandwidth_nm: Annotated[float | None, typer.Option(help="Spectral bandwidth of the instrument, in nm.")] = None,
    source: Annotated[str | None, typer.Option(help="Who measured, where and when; kept with the result.")] = None,
    handbook: Annotated[
        str | None, typer.Option(help="Substance of the table of published specific absorbances to compare with (tartrazine, ...).")
    ] = None,
    delimiter: s.Delimiter = None,
    decimal: s.Decimal = None,
    layout: s.Layout = None,
    output_format: s.FormatOption = Format.TABLE,
    output: s.Output = None,
    request: s.RequestOnly = False,
    strict: s.Strict = False,
) -> None:
    """Absorptivity spectrum of one substance from weighed standards: its uncertainty, the range in which Beer's law was
    shown to hold, and what was left out.

    Each spectrum's id must stand on the sheet. The JSON form goes to `tinctor library add`.
    """
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.files import ReadOptions

        document, notes = s.series_document(
            files,
            sheet,
            blank,
            ReadOptions(delimiter, decimal, layout),
            schema="standards/1",
            name=name,
            concentration_unit=unit,
            basis=basis,
            molar_mass_g_per_mol=molar_mass,
            stock_relative_u=stock_relative_u,
            path_length_relative_u=path_length_relative_u,
            intercept=intercept,
            wavelength_range_nm=list(range_nm) if range_nm else None,
            absorbance_limit=absorbance_limit,
            noise_floor=noise_floor,
            significance=significance,
            allowed_nonlinearity=allowed_nonlinearity,
            outliers=outliers,
            leave_out=leave_out or None,
            solvent=solvent,
            ph=ph,
            temperature_c=temperature_c,
            bandwidth_nm=bandwidth_nm,
            source=source,
            handbook=handbook,
        )
        _answer("standards", document, notes, output_format, output, request=request, strict=strict)


def mixtures(
    files: Annotated[list[str], typer.Argument(help="Files of the mixtures' spectra; - is standard input.")],
    sheet: Annotated[Path, typer.Option(help="Composition of each mixture: id, and one column for each component.")],
    unit: s.Unit,
    intercept: Annotated[str, typer.Option(help="zero, or fitted: an offset of its own at each wavelength.")] = "zero",
    stock_relative_u: Annotated[
        list[str] | None, typer.Option(help="NAME=VALUE: relative standard uncertainty of a component's stock; repeat for more.")
    ] = None,
    molar_mass: Annotated[list[str] | None, typer.Option(help="NAME=VALUE in g/mol; repeat for more.")] = None,
    blank: s.Blank = None,
    absorbance_limit: Annotated[float, typer.Option(help="A mixture that reads above this absorbance is refused.")] = 2.0,
    delimiter: s.Delimiter = None,
    decimal: s.Decimal = None,
    layout: s.Layout = None,
    output_format: s.FormatOption = Format.TABLE,
    output: s.Output = None,
    request: s.RequestOnly = False,
    strict: s.Strict = False,
) -> None:
    """Absorptivity spectra of several components from mixtures of known composition, where pure standards cannot be had."""
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.errors import InputError
        from tinctor.files import ReadOptions
        from tinctor.files.standards_sheet import read_mixtures_sheet

        options = ReadOptions(delimiter, decimal, layout)
        spectra, notes = read_all(files, options)
        compositions = read_mixtures_sheet(sheet)
        wrong = {spectrum.id for spectrum in spectra} ^ compositions.keys()
        if wrong:
            raise InputError.single(
                "not-on-sheet",
                str(sheet),
                f"sheet and spectra differ in {', '.join(map(repr, sorted(wrong)[:6]))}",
                "each needs both",
            )
        rows = [
            {**{k: v for k, v in document_of(x).items() if not k.startswith("dilution")}, "concentrations": compositions[x.id]}
            for x in spectra
        ]
        for row in rows:
            row.pop("path_length_u_cm", None)
        blanks = [document_of(x) for x in read_all([blank], options)[0]] if blank else []
        document = {
            "schema": "mixtures/1",
            "mixtures": rows,
            "concentration_unit": unit,
            "intercept": intercept,
            "absorbance_limit": absorbance_limit,
            **given(blank=blanks or None),
            **given(stock_relative_u=_pairs(stock_relative_u, "--stock-relative-u") or None),
            **given(molar_mass_g_per_mol=_pairs(molar_mass, "--molar-mass") or None),
        }
        _answer("mixtures", document, notes, output_format, output, request=request, strict=strict)


def _answer(
    operation: str,
    document: dict[str, Any],
    notes: list[str],
    output_format: Format,
    output: Path | None,
    *,
    request: bool,
    strict: bool,
) -> None:
    if request:
        put(json.dumps(document, ensure_ascii=False) + "\n", output)
        return
    from tinctor.operations.registry import run_checked
    from tinctor.report import standards_text

    response: Any = run_checked(operation, document)
    forms: dict[str, tuple[Callable[[Any], str], Callable[[Any], str]]] = {
        "standards": (standards_text.standards_table, standards_text.standards_csv),
        "mixtures": (standards_text.mixtures_table, standards_text.mixtures_csv),
    }
    table, csv = forms[operation]
    say(notes)
    s.put_response(response, output_format, output, table, csv)
    if strict and any(flag.severity == "warning" for flag in response.flags):
        raise typer.Exit(Exit.DONE_WITH_FLAGS)


def _pairs(items: list[str] | None, option: str) -> dict[str, float]:
    found = {}
    for item in items or []:
        name, mark, value = item.rpartition("=")
        try:
            found[name] = float(value)
        except ValueError as error:
            raise typer.BadParameter(f"expected NAME=VALUE, found {item!r}", param_hint=option) from error
        if not mark or not name:
            raise typer.BadParameter(f"expected NAME=VALUE, found {item!r}", param_hint=option)
    return found
