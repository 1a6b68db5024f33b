"""`tinctor determine` and `tinctor transfer`: unknowns of one substance, and a record on another instrument."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated, Any

import typer

from tinctor.cli import series as s
from tinctor.cli.faults import Exit, guarded
from tinctor.cli.output import Format, put
from tinctor.cli.reading import document_of, given, read_all, say, with_cells

__all__ = ["EPILOG", "TRANSFER_EPILOG", "determine", "transfer"]

EPILOG = f"""
Examples:

tinctor determine unknowns.csv --standards series.csv --sheet sheet.csv --unit mg/L --wavelength-nm 620

tinctor determine unknowns.csv --standards series.csv --sheet sheet.csv --unit mg/L --dilution-factor 25 --dilution-factor-u 0.1

tinctor determine --additions spiked.csv --sheet additions.csv --unit mg/L --wavelength-nm 620 --blank blank.csv

{s.HAZARD}
"""
TRANSFER_EPILOG = """
Example:

tinctor transfer check.csv --record my-dyes/tarn-blue-lot-12 -f json -o other.json

tinctor library add other.json --to my-dyes --name tarn-blue-lot-12-b --title "Tarn blue, photometer B" --operator "A. Moor"
"""


def determine(
    files: Annotated[list[str] | None, typer.Argument(help="Files of the unknowns' spectra; - is standard input.")] = None,
    standards: Annotated[
        list[str] | None, typer.Option(help="File of the standards' and blanks' spectra; repeat for more.")
    ] = None,
    additions: Annotated[
        list[str] | None,
        typer.Option(help="Standard addition instead: spectra of the sample with known additions (0 on the sheet for none)."),
    ] = None,
    sheet: Annotated[Path, typer.Option(help="What each standard, or each addition, holds: id, concentration, ...")] = ...,  # type: ignore[assignment]
    unit: s.Unit = ...,  # type: ignore[assignment]
    wavelength_nm: Annotated[float | None, typer.Option(help="Where to read; the whole spectrum when left out.")] = None,
    molar_mass: s.MolarMass = None,
    stock_relative_u: s.StockU = None,
    intercept: s.Intercept = "tested",
    blank: s.Blank = None,
    range_nm: s.RangeNm = None,
    absorbance_limit: s.AbsorbanceLimit = 2.0,
    noise_floor: s.NoiseFloor = None,
    significance: s.Significance = 0.05,
    allowed_nonlinearity: s.AllowedNonlinearity = 0.0,
    outliers: s.Outliers = "mark",
    leave_out: s.LeaveOut = None,
    path_length_cm: Annotated[float | None, typer.Option(help="Path length of the unknowns' cell, in cm (default 1).")] = None,
    path_length_u_cm: Annotated[float | None, typer.Option(help="Its standard uncertainty, in cm.")] = None,
    dilution_factor: Annotated[
        float | None, typer.Option(help="Final volume over taken volume of the unknowns (default 1).")
    ] = None,
    dilution_factor_u: Annotated[float | None, typer.Option(help="Its standard uncertainty.")] = None,
    samples: Annotated[Path | None, typer.Option(help="Bench sheet: id and cell and dilution of each unknown.")] = None,
    one_sample: Annotated[bool, typer.Option("--one-sample", help="All unknowns are replicates of one sample.")] = False,
    coverage: Annotated[float, typer.Option(help="Coverage probability of the interval.")] = 0.95,
    alpha: Annotated[float, typer.Option(help="Error rate of the decision and detection limits.")] = 0.05,
    extrapolate: Annotated[bool, typer.Option("--extrapolate", help="Give a figure outside the standards' range too.")] = False,
    delimiter: s.Delimiter = None,
    decimal: s.Decimal = None,
    layout: s.Layout = None,
    output_format: s.FormatOption = Format.TABLE,
    output: s.Output = None,
    request: s.RequestOnly = False,
    strict: s.Strict = False,
) -> None:
    """Concentration of unknowns of one substance from its calibration line, with an exact interval, or by standard addition.

    An unknown outside the standards' range is refused unless --extrapolate asks for it.
    """
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.files import ReadOptions

        _check_design(files, standards, additions)
        options = ReadOptions(delimiter, decimal, layout)
        document, notes = s.series_document(
            additions or standards or [],
            sheet,
            blank,
            options,
            schema="determine/1",
            zero_is_a_sample=bool(additions),
            design="addition" if additions else "external",
            concentration_unit=unit,
            wavelength_nm=wavelength_nm,
            molar_mass_g_per_mol=molar_mass,
            stock_relative_u=stock_relative_u,
            intercept=intercept,
            wavelength_range_nm=list(range_nm) if range_nm else None,
            absorbance_limit=absorbance_limit,
            noise_floor=noise_floor,
            significance=significance,
            allowed_nonlinearity=allowed_nonlinearity,
            outliers=outliers,
            leave_out=leave_out or None,
            coverage=coverage,
            alpha=alpha,
            extrapolate=extrapolate or None,
        )
        if files:
            unknowns, more = read_all(files, options)
            unknowns = with_cells(unknowns, samples, path_length_cm, path_length_u_cm, dilution_factor, dilution_factor_u)
            document["unknowns"] = [document_of(x) for x in unknowns]
            for row in document["unknowns"][1:] if one_sample else []:
                row["replicate_of"] = unknowns[0].id
            notes += more
        if request:
            put(json.dumps(document, ensure_ascii=False) + "\n", output)
            return
        say(notes)
        response = _determined(document)
        from tinctor.report.determine_text import determine_csv, determine_table

        s.put_response(response, output_format, output, determine_table, determine_csv)
        warned = any(flag.severity == "warning" for flag in response.flags)
        if strict and (warned or any(result.status != "accepted" for result in response.results)):
            raise typer.Exit(Exit.DONE_WITH_FLAGS)


def transfer(
    check: Annotated[str, typer.Argument(help="File of one spectrum of the same substance on the other instrument.")],
    record: Annotated[str, typer.Option(help="COLLECTION/RECORD to compare with, for example published/methylene-blue.")],
    blank: Annotated[str | None, typer.Option(help="File of one blank spectrum of that instrument.")] = None,
    noise_floor: s.NoiseFloor = None,
    delimiter: s.Delimiter = None,
    decimal: s.Decimal = None,
    layout: s.Layout = None,
    output_format: s.FormatOption = Format.TABLE,
    output: s.Output = None,
    strict: s.Strict = False,
) -> None:
    """Wavelength shift and bandwidth difference between a record and another instrument, and the record corrected for both."""
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.errors import InputError
        from tinctor.files import ReadOptions
        from tinctor.operations.registry import run_checked
        from tinctor.report.standards_text import transfer_csv, transfer_table

        collection, _, name = record.rpartition("/")
        if not collection:
            raise InputError.single(
                "record-name", "--record", f"expected COLLECTION/RECORD, found {record!r}", "for example published/methylene-blue"
            )
        options = ReadOptions(delimiter, decimal, layout)
        document: dict[str, Any] = {"schema": "transfer/1", "library": collection, "component": name}
        for key, file in (("check", check), ("blank", blank)):
            if file is None:
                continue
            spectra, notes = read_all([file], options)
            if len(spectra) != 1:
                raise InputError.single("one-spectrum", file, f"expected one spectrum, found {len(spectra)}", "give a file of one")
            say(notes)
            document[key] = document_of(spectra[0])
        if noise_floor is not None:
            document["noise"] = given(floor=noise_floor)
        response: Any = run_checked("transfer", document)
        s.put_response(response, output_format, output, transfer_table, transfer_csv)
        if strict and any(flag.severity == "warning" for flag in response.flags):
            raise typer.Exit(Exit.DONE_WITH_FLAGS)


def _determined(document: dict[str, Any]) -> Any:
    from tinctor.errors import UndeterminedError
    from tinctor.operations.registry import run_checked

    response: Any = run_checked("determine", document)
    if all(result.status == "refused" for result in response.results):
        lines = [f"{r.id}: {f.code}: {f.message}" for r in response.results for f in r.flags]
        raise UndeterminedError("\n".join(["nothing could be determined:", *dict.fromkeys(lines)]))
    return response


def _check_design(files: list[str] | None, standards: list[str] | None, additions: list[str] | None) -> None:
    if bool(standards) == bool(additions):
        raise typer.BadParameter("give either --standards with files of unknowns, or --additions", param_hint="--standards")
    if standards and not files:
        raise typer.BadParameter("give the files of the unknowns", param_hint="FILES")
    if additions and files:
        raise typer.BadParameter("with --additions the sample is among them: give no other files", param_hint="FILES")
