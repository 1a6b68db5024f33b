"""`tinctor resolve`: concentrations from measured spectra."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from tinctor.cli.faults import Exit, guarded
from tinctor.cli.output import Format, put
from tinctor.cli.reading import background_terms, cautions, document_of, given, read_all, say, with_blank, with_cells

if TYPE_CHECKING:
    from tinctor.operations.resolve import ResolveResponse

__all__ = ["EPILOG", "resolve"]

EPILOG = """
Examples:

tinctor resolve vat-run.csv --library palewater-dyehouse -c hollin-yellow -c bramble-red -c tarn-blue --unit g/L

tinctor resolve run.csv --samples sheet.csv -l palewater-dyehouse -c hollin-yellow,tarn-blue -b offset -b scatter -f csv

tinctor resolve - -l palewater-dyehouse -c tarn-blue --range-nm 500 700 --dilution-factor 25 --dilution-factor-u 0.2 < one.csv
"""

Names = Annotated[list[str], typer.Option("--component", "-c", help="Component to look for; repeat, or separate by commas.")]


def resolve(
    files: Annotated[list[str], typer.Argument(help="Files of absorbance spectra (delimited text or JSON); - is standard input.")],
    component: Names,
    library: Annotated[str, typer.Option("--library", "-l", help="Collection of the components: a name, or the path of a folder.")],
    unit: Annotated[
        str | None, typer.Option(help="mol/L mmol/L umol/L g/L mg/L ug/L; default mol/L or g/L, as the library has it.")
    ] = None,
    background: Annotated[
        list[str] | None,
        typer.Option(
            "--background",
            "-b",
            help="Terms fitted beside the components: offset, slope, scatter, shift; none for none (default offset).",
        ),
    ] = None,
    range_nm: Annotated[
        tuple[float, float] | None, typer.Option(help="Use readings from LOW to HIGH nm only.", metavar="LOW HIGH")
    ] = None,
    wavelengths_nm: Annotated[str | None, typer.Option(help="Use these wavelengths only, in nm, separated by commas.")] = None,
    absorbance_limit: Annotated[float, typer.Option(help="Readings above this absorbance are not used.")] = 2.0,
    noise_floor: Annotated[
        float | None, typer.Option(help="Standard uncertainty of a reading, in absorbance (default 0.0005).")
    ] = None,
    noise_transmittance: Annotated[float | None, typer.Option(help="... of transmittance, as a fraction (default 0.0001).")] = None,
    noise_wavelength_nm: Annotated[float | None, typer.Option(help="... of the wavelength axis, in nm (default 0.05).")] = None,
    coverage: Annotated[float, typer.Option(help="Coverage probability of the interval.")] = 0.95,
    target_relative_u: Annotated[
        float | None, typer.Option(help="Relative standard uncertainty wanted; flags what misses it.")
    ] = None,
    path_length_cm: Annotated[
        float | None, typer.Option(help="Path length of the cell for every spectrum, in cm (default 1).")
    ] = None,
    path_length_u_cm: Annotated[
        float | None, typer.Option(help="Its standard uncertainty, in cm (default 0: taken as exact).")
    ] = None,
    dilution_factor: Annotated[
        float | None, typer.Option(help="Final volume over taken volume, for every spectrum (default 1).")
    ] = None,
    dilution_factor_u: Annotated[float | None, typer.Option(help="Its standard uncertainty (default 0: taken as exact).")] = None,
    samples: Annotated[Path | None, typer.Option(help="Bench sheet: id and cell and dilution of each sample.")] = None,
    blank: Annotated[
        str | None, typer.Option(help="File of one blank spectrum on the same axis, taken from every spectrum.")
    ] = None,
    solvent: Annotated[str | None, typer.Option(help="Solvent of the samples, to compare with the records.")] = None,
    ph: Annotated[float | None, typer.Option(help="pH of the samples, to compare with the records.")] = None,
    temperature_c: Annotated[float | None, typer.Option(help="Temperature of the samples, in degrees C.")] = None,
    bandwidth_nm: Annotated[float | None, typer.Option(help="Spectral bandwidth of the instrument, in nm.")] = None,
    delimiter: Annotated[
        str | None, typer.Option(help="Between the fields of the files: comma, semicolon, tab (default: found out).")
    ] = None,
    decimal: Annotated[str | None, typer.Option(help="Decimal mark of the files: point, comma (default: found out).")] = None,
    layout: Annotated[
        str | None, typer.Option(help="Layout of the files: two-columns, columns, rows (default: found out).")
    ] = None,
    output_format: Annotated[Format, typer.Option("--format", "-f", help="Form of the result.")] = Format.TABLE,
    output: Annotated[Path | None, typer.Option("--output", "-o", help="Write to this file, whole or not at all.")] = None,
    request: Annotated[bool, typer.Option("--request", help="Print the equivalent JSON request and stop.")] = False,
    strict: Annotated[bool, typer.Option("--strict", help="Exit with 5 when any spectrum needs a look.")] = False,
) -> None:
    """Concentration of each known component in each measured spectrum, with its uncertainty and a word on whether to trust it.

    Results are in the original sample: path length and dilution are undone.

    Exit codes: 0 done, 1 fault of the tool, 2 usage, 3 input refused, 4 nothing could be determined, 5 done with flags (--strict).
    """
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.files import ReadOptions

        options = ReadOptions(delimiter, decimal, layout)
        spectra, notes = read_all(files, options)
        if output_format is not Format.JSON:  # there, standard error may have to be the error document and nothing else
            say(notes)
        spectra = with_cells(spectra, samples, path_length_cm, path_length_u_cm, dilution_factor, dilution_factor_u)
        spectra = with_blank(spectra, blank, options)
        document: dict[str, Any] = {
            "schema": "resolve/1",
            "library": library,
            "components": [name.strip() for item in component for name in item.split(",") if name.strip()],
            "concentration_unit": unit,
            "background": background_terms(background),
            "wavelength_range_nm": list(range_nm) if range_nm else None,
            "wavelengths_nm": _wavelengths(wavelengths_nm),
            "absorbance_limit": absorbance_limit,
            "noise": given(floor=noise_floor, transmittance=noise_transmittance, wavelength_nm=noise_wavelength_nm),
            "coverage": coverage,
            "target_relative_u": target_relative_u,
            "conditions": given(solvent=solvent, ph=ph, temperature_c=temperature_c, bandwidth_nm=bandwidth_nm),
        }
        document = {key: value for key, value in document.items() if value is not None and value != {}}
        document["spectra"] = [document_of(spectrum) for spectrum in spectra]
        if request:
            put(json.dumps(document, ensure_ascii=False) + "\n", output)
            return
        response = _run(document)
        if output_format is Format.JSON:
            put(_rendered(response, output_format, output), output)
            say([*notes, *cautions(response)])
        else:
            say(cautions(response))
            put(_rendered(response, output_format, output), output)
        if strict and any(result.status != "accepted" for result in response.results):
            raise typer.Exit(Exit.DONE_WITH_FLAGS)


def _run(document: dict[str, Any]) -> ResolveResponse:
    from tinctor.errors import UndeterminedError
    from tinctor.operations.registry import run_checked

    response: ResolveResponse = run_checked("resolve", document)  # type: ignore[assignment]
    if all(result.status == "refused" for result in response.results):
        from tinctor.report.text_table import printable

        lines = [f"{printable(r.id)}: {f.code}: {f.message}" for r in response.results for f in r.flags if f.severity == "refusal"]
        raise UndeterminedError("\n".join(["nothing could be determined:", *dict.fromkeys(lines)]))
    return response


def _rendered(response: ResolveResponse, output_format: Format, output: Path | None) -> str:
    if output_format is Format.JSON:
        from tinctor.operations.registry import dumped

        return json.dumps(dumped(response), ensure_ascii=False) + "\n"
    if output_format is Format.CSV:
        from tinctor.report.resolve_csv import resolve_csv

        return resolve_csv(response)
    from shutil import get_terminal_size

    from tinctor.report.resolve_table import resolve_table

    terminal = output is None and sys.stdout is not None and sys.stdout.isatty()
    return resolve_table(response, width=get_terminal_size().columns if terminal else None, colour=terminal)


def _wavelengths(text: str | None) -> list[float] | None:
    if text is None:
        return None
    try:
        return [float(part) for part in text.split(",")]
    except ValueError as error:
        raise typer.BadParameter(f"expected numbers separated by commas, found {text!r}", param_hint="--wavelengths-nm") from error
