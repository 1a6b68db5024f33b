"""Options and documents that the commands on standards share."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from tinctor.cli.output import Format, put
from tinctor.cli.reading import document_of, given, read_all

if TYPE_CHECKING:
    from collections.abc import Callable

    from tinctor.files import ReadOptions

__all__ = [
    "HAZARD",
    "AbsorbanceLimit",
    "AllowedNonlinearity",
    "Blank",
    "Decimal",
    "Delimiter",
    "FormatOption",
    "Intercept",
    "Layout",
    "LeaveOut",
    "MolarMass",
    "NoiseFloor",
    "Outliers",
    "Output",
    "RangeNm",
    "RequestOnly",
    "Sheet",
    "Significance",
    "StockU",
    "Strict",
    "Unit",
    "put_response",
    "series_document",
]

HAZARD = (
    "Dyes, metal salts and solvents can harm: weigh and dilute by their safety data sheets; "
    "dispose of stock and series by local rules."
)

Sheet = Annotated[
    Path,
    typer.Option(
        help="What each solution holds: id, concentration, and any of concentration_u, path_length_cm, replicate_of. 0: blank."
    ),
]
Unit = Annotated[str, typer.Option(help="Of the concentrations: mol/L mmol/L umol/L g/L mg/L ug/L.")]
MolarMass = Annotated[float | None, typer.Option("--molar-mass", help="In g/mol: needed to change between moles and grams.")]
StockU = Annotated[
    float | None,
    typer.Option(
        help="Relative standard uncertainty that all standards share: weighing, purity, flask of the stock (0.005 is 0.5 %)."
    ),
]
Intercept = Annotated[str, typer.Option(help="zero (through the blank), fitted, or tested: fitted where it is significant.")]
Blank = Annotated[str | None, typer.Option(help="File of one or more blank spectra, beside those of the sheet.")]
RangeNm = Annotated[tuple[float, float] | None, typer.Option(help="Use readings from LOW to HIGH nm only.", metavar="LOW HIGH")]
AbsorbanceLimit = Annotated[float, typer.Option(help="Readings above this absorbance are not used.")]
NoiseFloor = Annotated[float | None, typer.Option(help="Standard uncertainty of a reading, in absorbance (default 0.0005).")]
Significance = Annotated[float, typer.Option(help="Level of every test.")]
AllowedNonlinearity = Annotated[float, typer.Option(help="Departure from the line, as a share, accepted even where significant.")]
Outliers = Annotated[str, typer.Option(help="A standard off the curve of the others: mark, or leave-out.")]
LeaveOut = Annotated[list[str] | None, typer.Option(help="Leave this standard out by your word; repeat for more.")]
Delimiter = Annotated[str | None, typer.Option(help="Between the fields of the files: comma, semicolon, tab (default: found out).")]
Decimal = Annotated[str | None, typer.Option(help="Decimal mark of the files: point, comma (default: found out).")]
Layout = Annotated[str | None, typer.Option(help="Layout of the files: two-columns, columns, rows (default: found out).")]
FormatOption = Annotated[Format, typer.Option("--format", "-f", help="Form of the result; json is the response document.")]
Output = Annotated[Path | None, typer.Option("--output", "-o", help="Write to this file, whole or not at all.")]
RequestOnly = Annotated[bool, typer.Option("--request", help="Print the equivalent JSON request and stop.")]
Strict = Annotated[bool, typer.Option("--strict", help="Exit with 5 when anything needs a look.")]


def series_document(
    files: list[str], sheet: Path, blank: str | None, options: ReadOptions, zero_is_a_sample: bool = False, **settings: Any
) -> tuple[dict[str, Any], list[str]]:
    """Return the part of a request that describes standards and blanks, and what the readers noticed.

    A concentration of 0 is a blank, or the sample itself where standards are additions to it (`zero_is_a_sample`).

    Raises
    ------
    InputError
        When sheet and files do not name the same solutions.
    """
    from tinctor.files.standards_sheet import read_standards_sheet

    rows = read_standards_sheet(sheet)
    spectra, notes = read_all(files, options)
    _same_ids([row.id for row in rows], [s.id for s in spectra], str(sheet))
    found = {s.id: document_of(s) for s in spectra}
    standards, blanks = [], []
    for row in rows:
        measured = {key: found[row.id][key] for key in ("id", "wavelength_nm", "absorbance")}
        values = given(path_length_cm=row.path_length_cm, replicate_of=row.replicate_of)
        if row.concentration == 0 and row.replicate_of is None and not zero_is_a_sample:
            blanks.append({**measured, **given(path_length_cm=row.path_length_cm)})
            continue
        standards.append({**measured, "concentration": row.concentration, **values, **given(concentration_u=row.concentration_u)})
    if blank is not None:
        blank_spectra, more = read_all([blank], options)
        notes += more
        blanks += [document_of(s) for s in blank_spectra]
    noise_floor = settings.pop("noise_floor", None)
    document = {**given(**settings), "standards": standards, "blank": blanks}
    if noise_floor is not None:
        document["noise"] = {"floor": noise_floor}
    return {key: value for key, value in document.items() if value != []}, notes


def put_response(
    response: Any,
    output_format: Format,
    output: Path | None,
    table: Callable[[Any], str],
    csv: Callable[[Any], str],
) -> None:
    """Write a response in the form asked for."""
    if output_format is Format.JSON:
        from tinctor.operations.registry import dumped

        put(json.dumps(dumped(response), ensure_ascii=False) + "\n", output)
    else:
        put(table(response) if output_format is Format.TABLE else csv(response), output)


def _same_ids(on_sheet: list[str], measured: list[str], source: str) -> None:
    from tinctor.arrays import quoted
    from tinctor.errors import Fault, InputError

    faults = []
    if missing := [i for i in on_sheet if i not in measured]:
        faults.append(
            Fault("not-measured", source, f"no spectrum for {quoted(missing)}", "give their file, or take them off the sheet")
        )
    if extra := [i for i in measured if i not in on_sheet]:
        faults.append(
            Fault("not-on-sheet", source, f"no line for {quoted(extra)}", "add them to the sheet, or leave their file out")
        )
    if faults:
        raise InputError(faults)
