"""Options that the commands before measuring share, and the request document they make."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from tinctor.cli.output import Format
from tinctor.cli.reading import background_terms, given

__all__ = [
    "AbsorbanceLimit",
    "Background",
    "DilutionFactor",
    "DilutionFactorU",
    "FormatOption",
    "Library",
    "Names",
    "NoiseCorrelation",
    "NoiseFloor",
    "NoiseTransmittance",
    "NoiseWavelength",
    "Output",
    "PathLength",
    "PathLengthU",
    "Planned",
    "Plot",
    "RangeNm",
    "RequestOnly",
    "StepNm",
    "Strict",
    "Target",
    "Unit",
    "WavelengthsNm",
    "numbers",
    "option_of",
    "plan_document",
    "values_by_name",
]

#: Kinds of chart file, by the ending of its name.
CHART_KINDS = (".svg", ".png", ".pdf")

#: Options whose name is not that of the document's key.
OPTIONS = {
    "components": "component",
    "concentrations": "planned",
    "concentration_unit": "unit",
    "wavelength_range_nm": "range-nm",
    "on_fibre_percent": "on-fibre",
    "liquor_ratio_l_per_kg": "liquor-ratio",
}

Names = Annotated[list[str], typer.Option("--component", "-c", help="Component; repeat, or separate by commas.")]
Library = Annotated[str, typer.Option("--library", "-l", help="Collection of the components: a name, or the path of a folder.")]
Planned = Annotated[
    list[str] | None,
    typer.Option(help="Planned concentration in the original sample, NAME=VALUE; repeat, or separate by commas. All or none."),
]
Unit = Annotated[
    str | None,
    typer.Option(help="Of planned values and results: mol/L mmol/L umol/L g/L mg/L ug/L; default as the library has it."),
]
PathLength = Annotated[float, typer.Option(help="Path length of the cell, in cm.")]
PathLengthU = Annotated[float, typer.Option(help="Its standard uncertainty, in cm (0: taken as exact).")]
DilutionFactor = Annotated[float, typer.Option(help="Final volume over taken volume.")]
DilutionFactorU = Annotated[float, typer.Option(help="Its standard uncertainty (0: taken as exact).")]
Background = Annotated[
    list[str] | None,
    typer.Option("--background", "-b", help="Terms to be fitted: offset, slope, scatter, shift; none for none (default offset)."),
]
RangeNm = Annotated[tuple[float, float] | None, typer.Option(help="Readings from LOW to HIGH nm only.", metavar="LOW HIGH")]
WavelengthsNm = Annotated[str | None, typer.Option(help="Read at these wavelengths only, in nm, separated by commas.")]
StepNm = Annotated[float | None, typer.Option(help="Distance of the readings, in nm (default: that of the coarsest record).")]
AbsorbanceLimit = Annotated[float, typer.Option(help="Readings above this absorbance will not be used.")]
NoiseFloor = Annotated[float | None, typer.Option(help="Standard uncertainty of a reading, in absorbance (default 0.0005).")]
NoiseTransmittance = Annotated[float | None, typer.Option(help="... of transmittance, as a fraction (default 0.0001).")]
NoiseWavelength = Annotated[float | None, typer.Option(help="... of the wavelength axis, in nm (default 0.05).")]
NoiseCorrelation = Annotated[
    float, typer.Option(help="Distance over which errors of neighbouring readings are alike, in nm (0: independent).")
]
Target = Annotated[
    float | None,
    typer.Option(help="Relative standard uncertainty wanted of each component (0.02 is 2 %): turns the answer into yes or no."),
]


def _chart_file(path: Path | None) -> Path | None:
    """Refuse a chart file of no known kind before any work is done."""
    if path is not None and path.suffix.lower() not in CHART_KINDS:
        raise typer.BadParameter(f"expected a file name that ends in {', '.join(CHART_KINDS)}, found {str(path)!r}")
    return path


Plot = Annotated[
    Path | None, typer.Option(help="Draw a chart into this file: its name ends in .svg, .png or .pdf.", callback=_chart_file)
]
FormatOption = Annotated[Format, typer.Option("--format", "-f", help="Form of the result; json is the response document.")]
Output = Annotated[Path | None, typer.Option("--output", "-o", help="Write to this file, whole or not at all.")]
RequestOnly = Annotated[bool, typer.Option("--request", help="Print the equivalent JSON request and stop.")]
Strict = Annotated[bool, typer.Option("--strict", help="Exit with 5 when anything needs a look.")]


def plan_document(
    schema: str,
    component: list[str],
    library: str,
    planned: list[str] | None,
    unit: str | None,
    background: list[str] | None,
    wavelengths_nm: str | None,
    *,
    noise: tuple[float | None, float | None, float | None],
    **settings: Any,
) -> dict[str, Any]:
    """Return the request that a command line stands for."""
    document = given(
        schema=schema,
        library=library,
        components=[name.strip() for item in component for name in item.split(",") if name.strip()],
        concentration_unit=unit,
        concentrations=values_by_name(planned, "--planned"),
        background=background_terms(background),
        wavelengths_nm=numbers(wavelengths_nm, "--wavelengths-nm"),
        **settings,
    )
    levels = given(floor=noise[0], transmittance=noise[1], wavelength_nm=noise[2])
    return {**document, "noise": levels} if levels else document


def values_by_name(items: list[str] | None, option: str) -> dict[str, float] | None:
    """Return NAME=VALUE pairs as a mapping."""
    if items is None:
        return None
    found: dict[str, float] = {}
    for item in (part.strip() for whole in items for part in whole.split(",")):
        name, equals, text = item.rpartition("=")
        if not (equals and name.strip()):
            raise typer.BadParameter(f"expected NAME=VALUE, found {item!r}", param_hint=option)
        if name.strip() in found:
            raise typer.BadParameter(f"{name.strip()!r} stands twice", param_hint=option)
        found[name.strip()] = _number(text, option)
    return found


def numbers(text: str | None, option: str) -> list[float] | None:
    """Return numbers separated by commas."""
    return None if text is None else [_number(part, option) for part in text.split(",")]


def option_of(path: str) -> str:
    """Return the option that stands behind a path of the document.

    Examples
    --------
    >>> option_of("$.flasks_ml[2]"), option_of("$.concentrations.tarn-blue"), option_of("$.noise.floor")
    ('--flasks-ml', '--planned tarn-blue', '--noise-floor')
    """
    key, _, rest = path.removeprefix("$").lstrip(".").partition(".")
    key = key.partition("[")[0]
    if not key:
        return path
    if key == "noise":
        return f"--noise-{rest.replace('_', '-')}"
    option = OPTIONS.get(key, key.replace("_", "-"))
    return f"--{option} {rest}".rstrip() if key in ("concentrations", "on_fibre_percent") else f"--{option}"


def _number(text: str, option: str) -> float:
    try:
        return float(text)
    except ValueError as error:
        raise typer.BadParameter(f"expected a number, found {text.strip()!r}", param_hint=option) from error
