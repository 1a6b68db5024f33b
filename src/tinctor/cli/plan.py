"""`tinctor overlap`, `tinctor wavelengths` and `tinctor dilution`: what the library says before anything is measured."""

from __future__ import annotations

import json
import sys
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Any, Literal

import typer

from tinctor.cli.faults import Exit, guarded
from tinctor.cli.output import Format, put
from tinctor.cli.plan_options import (
    AbsorbanceLimit,
    Background,
    DilutionFactor,
    DilutionFactorU,
    FormatOption,
    Library,
    Names,
    NoiseCorrelation,
    NoiseFloor,
    NoiseTransmittance,
    NoiseWavelength,
    Output,
    PathLength,
    PathLengthU,
    Planned,
    Plot,
    RangeNm,
    RequestOnly,
    StepNm,
    Strict,
    Target,
    Unit,
    WavelengthsNm,
    numbers,
    option_of,
    plan_document,
    values_by_name,
)
from tinctor.cli.reading import cautions, say

__all__ = ["DILUTION_EPILOG", "OVERLAP_EPILOG", "WAVELENGTHS_EPILOG", "dilution", "overlap", "wavelengths"]

CODES = "Exit codes: 0 done, 1 fault of the tool, 2 usage, 3 input refused, 5 done, and something needs a look (--strict)."
OVERLAP_EPILOG = f"""
Examples:

tinctor overlap -l palewater-dyehouse -c hollin-yellow,bramble-red,tarn-blue

tinctor overlap -l palewater-dyehouse -c tarn-blue,fathom-navy --planned tarn-blue=0.008,fathom-navy=0.002 --target-relative-u 0.02

tinctor overlap -l palewater-dyehouse -c bramble-red,sorrel-red,tarn-blue --plot overlap.svg

{CODES}
"""
WAVELENGTHS_EPILOG = f"""
Examples:

tinctor wavelengths -l palewater-dyehouse -c hollin-yellow,bramble-red,tarn-blue --count 4

tinctor wavelengths -l palewater-dyehouse -c bramble-red,tarn-blue --candidates-nm 450,505,525,560,590,625,660 --count 3

tinctor wavelengths -l palewater-dyehouse -c bramble-red,tarn-blue --minimum-spacing-nm 10 --wavelength-error-nm 1 --plot choice.png

{CODES}
"""
DILUTION_EPILOG = f"""
Examples:

tinctor dilution -l palewater-dyehouse -c bramble-red,tarn-blue --planned bramble-red=0.55,tarn-blue=0.6 --unit g/L

tinctor dilution -l palewater-dyehouse -c bramble-red,tarn-blue --on-fibre bramble-red=2,tarn-blue=0.5 --liquor-ratio 10

Dyes and solvents can harm: dilute by their safety data sheets, never pipette by mouth, dispose by local rules.

{CODES}
"""


def overlap(
    component: Names,
    library: Library,
    planned: Planned = None,
    unit: Unit = None,
    path_length_cm: PathLength = 1.0,
    path_length_u_cm: PathLengthU = 0.0,
    dilution_factor: DilutionFactor = 1.0,
    dilution_factor_u: DilutionFactorU = 0.0,
    background: Background = None,
    range_nm: RangeNm = None,
    wavelengths_nm: WavelengthsNm = None,
    step_nm: StepNm = None,
    absorbance_limit: AbsorbanceLimit = 2.0,
    noise_floor: NoiseFloor = None,
    noise_transmittance: NoiseTransmittance = None,
    noise_wavelength_nm: NoiseWavelength = None,
    noise_correlation_nm: NoiseCorrelation = 0.0,
    target_relative_u: Target = None,
    plot: Plot = None,
    output_format: FormatOption = Format.TABLE,
    output: Output = None,
    request: RequestOnly = False,
    strict: Strict = False,
) -> None:
    """Can these components be told apart, and how well at best? From the library alone, before anything is measured.

    Uncertainties are those that resolving would state for the planned concentrations.
    """
    with guarded(as_json=output_format is Format.JSON):
        document = plan_document(
            "overlap/1", component, library, planned, unit, background, wavelengths_nm,
            wavelength_range_nm=list(range_nm) if range_nm else None, step_nm=step_nm, absorbance_limit=absorbance_limit,
            noise=(noise_floor, noise_transmittance, noise_wavelength_nm), noise_correlation_nm=noise_correlation_nm,
            target_relative_u=target_relative_u,
            path_length_cm=path_length_cm, path_length_u_cm=path_length_u_cm,
            dilution_factor=dilution_factor, dilution_factor_u=dilution_factor_u,
        )  # fmt: skip
        _answer("overlap", document, plot, output_format, output, request=request, strict=strict)


def wavelengths(
    component: Names,
    library: Library,
    count: Annotated[int | None, typer.Option(help="How many; as many as there are unknowns when left out.")] = None,
    candidates_nm: Annotated[
        str | None,
        typer.Option(help="Where one can measure (filters, LEDs), in nm, separated by commas; all readings when left out."),
    ] = None,
    minimum_spacing_nm: Annotated[float, typer.Option(help="Smallest distance between two wavelengths, in nm.")] = 0.0,
    absorbance_window: Annotated[
        tuple[float, float] | None, typer.Option(help="Planned absorbance of each reading, from LOW to HIGH.", metavar="LOW HIGH")
    ] = None,
    criterion: Annotated[
        Literal["worst-relative-u", "determinant", "trace"],
        typer.Option(help="What is to be small: the worst relative uncertainty, the joint region, or the mean square."),
    ] = "worst-relative-u",
    wavelength_error_nm: Annotated[
        float, typer.Option(help="The wavelength axis may be off by this much either way, in nm: the worst case counts.")
    ] = 0.0,
    planned: Planned = None,
    unit: Unit = None,
    path_length_cm: PathLength = 1.0,
    path_length_u_cm: PathLengthU = 0.0,
    dilution_factor: DilutionFactor = 1.0,
    dilution_factor_u: DilutionFactorU = 0.0,
    background: Background = None,
    range_nm: RangeNm = None,
    step_nm: StepNm = None,
    absorbance_limit: AbsorbanceLimit = 2.0,
    noise_floor: NoiseFloor = None,
    noise_transmittance: NoiseTransmittance = None,
    noise_wavelength_nm: NoiseWavelength = None,
    noise_correlation_nm: NoiseCorrelation = 0.0,
    plot: Plot = None,
    output_format: FormatOption = Format.TABLE,
    output: Output = None,
    request: RequestOnly = False,
    strict: Strict = False,
) -> None:
    """Where to measure when only a few wavelengths can be read, what that loses, and where more stop paying."""
    with guarded(as_json=output_format is Format.JSON):
        document = plan_document(
            "wavelengths/1", component, library, planned, unit, background, None,
            wavelength_range_nm=list(range_nm) if range_nm else None, step_nm=step_nm, absorbance_limit=absorbance_limit,
            noise=(noise_floor, noise_transmittance, noise_wavelength_nm), noise_correlation_nm=noise_correlation_nm,
            path_length_cm=path_length_cm, path_length_u_cm=path_length_u_cm,
            dilution_factor=dilution_factor, dilution_factor_u=dilution_factor_u,
            count=count, candidates_nm=numbers(candidates_nm, "--candidates-nm"), minimum_spacing_nm=minimum_spacing_nm,
            absorbance_window=list(absorbance_window) if absorbance_window else None, criterion=criterion,
            wavelength_error_nm=wavelength_error_nm,
        )  # fmt: skip
        if sys.stderr is not None and sys.stderr.isatty() and not request:
            say(["searching for wavelengths (seconds) ..."])
        _answer("wavelengths", document, plot, output_format, output, request=request, strict=strict)


def dilution(
    component: Names,
    library: Library,
    planned: Planned = None,
    unit: Unit = None,
    on_fibre: Annotated[
        list[str] | None, typer.Option(help="In place of --planned: per cent of dye on the weight of fibre, NAME=PERCENT; repeat.")
    ] = None,
    liquor_ratio: Annotated[float | None, typer.Option(help="Litres of bath for a kilogram of fibre, with --on-fibre.")] = None,
    cells_cm: Annotated[str, typer.Option(help="Path lengths of the cells there are, in cm, separated by commas.")] = "1",
    cell_relative_u: Annotated[
        float, typer.Option(help="Relative standard uncertainty of a path length (0: taken as exact).")
    ] = 0.0,
    absorbance_window: Annotated[
        tuple[float, float], typer.Option(help="The highest absorbance is to lie from LOW to HIGH.", metavar="LOW HIGH")
    ] = (0.1, 1.0),
    pipettes_ml: Annotated[
        str | None, typer.Option(help="Pipettes there are, in mL, separated by commas (default 1,2,5,10,20,25,50).")
    ] = None,
    flasks_ml: Annotated[
        str | None, typer.Option(help="Flasks there are, in mL, separated by commas (default 10,25,50,100,250,500,1000).")
    ] = None,
    steps: Annotated[int, typer.Option(help="Most steps of a dilution, 1 or 2.")] = 2,
    background: Background = None,
    range_nm: RangeNm = None,
    wavelengths_nm: WavelengthsNm = None,
    step_nm: StepNm = None,
    absorbance_limit: AbsorbanceLimit = 2.0,
    noise_floor: NoiseFloor = None,
    noise_transmittance: NoiseTransmittance = None,
    noise_wavelength_nm: NoiseWavelength = None,
    noise_correlation_nm: NoiseCorrelation = 0.0,
    target_relative_u: Target = None,
    plot: Plot = None,
    output_format: FormatOption = Format.TABLE,
    output: Output = None,
    request: RequestOnly = False,
    strict: Strict = False,
) -> None:
    """At which dilution and in which cell to measure, with volumes, from the glassware there is."""
    with guarded(as_json=output_format is Format.JSON):
        document = plan_document(
            "dilution/1", component, library, planned, unit, background, wavelengths_nm,
            wavelength_range_nm=list(range_nm) if range_nm else None, step_nm=step_nm, absorbance_limit=absorbance_limit,
            noise=(noise_floor, noise_transmittance, noise_wavelength_nm), noise_correlation_nm=noise_correlation_nm,
            target_relative_u=target_relative_u,
            cells_cm=numbers(cells_cm, "--cells-cm"), cell_relative_u=cell_relative_u,
            absorbance_window=list(absorbance_window),
            pipettes_ml=numbers(pipettes_ml, "--pipettes-ml"), flasks_ml=numbers(flasks_ml, "--flasks-ml"), steps=steps,
            on_fibre_percent=values_by_name(on_fibre, "--on-fibre"), liquor_ratio_l_per_kg=liquor_ratio,
        )  # fmt: skip
        _answer("dilution", document, plot, output_format, output, request=request, strict=strict)


def _answer(
    operation: str, document: dict[str, Any], plot: Path | None, form: Format, output: Path | None, *, request: bool, strict: bool
) -> None:
    """Run an operation, draw its chart, print its result, and leave with the exit code that it deserves."""
    if request:
        put(json.dumps(document, ensure_ascii=False) + "\n", output)
        return
    if plot is not None:
        document["include_spectra"] = True
    response = _run(operation, document, form)
    if plot is not None:
        from tinctor.cli.plotting import put_chart

        put_chart(operation, response, plot)
    if form is not Format.JSON:
        say(cautions(response))
    put(_rendered(operation, response, form), output)
    if form is Format.JSON:
        say(cautions(response))
    if strict and _needs_a_look(response):
        raise typer.Exit(Exit.DONE_WITH_FLAGS)


def _run(operation: str, document: dict[str, Any], form: Format) -> Any:
    """Run an operation; faults point at the option typed, or at the document's key where that is what is asked for."""
    from tinctor.errors import InputError
    from tinctor.operations.registry import run_checked

    try:
        return run_checked(operation, document)
    except InputError as error:
        if form is Format.JSON:
            raise
        raise InputError([replace(fault, path=option_of(fault.path)) for fault in error.faults]) from error


def _rendered(operation: str, response: Any, form: Format) -> str:
    if form is Format.JSON:
        from tinctor.operations.registry import dumped

        return json.dumps(dumped(response), ensure_ascii=False) + "\n"
    from importlib import import_module

    module = "tinctor.report.plan_csv" if form is Format.CSV else "tinctor.report.plan_text"
    text: str = getattr(import_module(module), f"{operation}_{'csv' if form is Format.CSV else 'text'}")(response)
    return text


def _needs_a_look(response: Any) -> bool:
    if any(flag.severity != "info" for flag in response.flags) or getattr(response, "warning", None):
        return True
    return any(
        getattr(c, "verdict", "separable") != "separable" or c.target_met is False for c in getattr(response, "components", [])
    )
