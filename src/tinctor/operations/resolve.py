"""The operation resolve/1: spectra and components in, concentrations with uncertainty and flags out."""

from __future__ import annotations

from dataclasses import asdict
from typing import Annotated, Any, Literal

from pydantic import Field

from tinctor.component import Conditions
from tinctor.errors import InputError
from tinctor.operations.components_in import components_of, units_of
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.resolve_response import response_results
from tinctor.operations.resolve_results import SpectrumResult
from tinctor.operations.shared import (
    ComponentChoice,
    ConditionsIn,
    NoiseIn,
    Number,
    Numbers,
    RequestModel,
    ResponseModel,
    SpectrumIn,
    gather,
)
from tinctor.resolve.engine import resolve
from tinctor.resolve.resolution import Resolution
from tinctor.resolve.settings import JudgementLimits, ResolveSettings
from tinctor.spectrum import Spectrum, SpectrumBatch

__all__ = ["ResolveRequest", "ResolveResponse", "run"]

Schema = Literal["resolve/1"]


class ModelErrorIn(RequestModel):
    """Model error to be expected of real spectra, as a standard deviation: residual structure below it raises no flag."""

    relative: Number = JudgementLimits().model_error_relative
    absorbance: Number = JudgementLimits().model_error_absorbance


class ResolveRequest(RequestModel):
    """Concentrations of known components in measured mixture spectra."""

    schema_: Annotated[Schema, Field(alias="schema")] = "resolve/1"
    library: str | None = Field(None, description="collection of the components named; not needed when all are inline")
    components: list[ComponentChoice] = Field(min_length=1, max_length=60, description="names in the library, or components inline")
    spectra: list[SpectrumIn] = Field(min_length=1, max_length=100_000)
    concentration_unit: str | None = Field(
        None, description="mol/L mmol/L umol/L g/L mg/L ug/L; when left out, mol/L for molar components and g/L for those by mass"
    )
    background: list[Literal["offset", "slope", "scatter", "shift"]] = Field(default=["offset"])
    wavelength_range_nm: Annotated[list[Number], Field(min_length=2, max_length=2)] | None = None
    wavelengths_nm: Numbers | None = None
    absorbance_limit: Number = 2.0
    noise: NoiseIn = NoiseIn()
    coverage: Number = 0.95
    target_relative_u: Number | None = None
    conditions: ConditionsIn | None = Field(None, description="of the samples, to compare with those of the records")
    model_error: ModelErrorIn = ModelErrorIn()


class ResolveResponse(ResponseModel):
    """Results in the order of the spectra."""

    schema_: Annotated[Schema, Field(alias="schema")] = "resolve/1"
    results: list[SpectrumResult]
    provenance: Provenance


def run(request: ResolveRequest) -> ResolveResponse:
    """Resolve a request.

    Raises
    ------
    InputError
        Listing every fault of the request with its JSON path.

    Examples
    --------
    >>> request = ResolveRequest.model_validate({
    ...     "schema": "resolve/1", "background": [], "concentration_unit": "mmol/L",
    ...     "components": [{"name": "Cu", "wavelength_nm": [700, 800], "molar_absorptivity": [6.0, 12.0]}],
    ...     "spectra": [{"id": "a", "wavelength_nm": [700, 800], "absorbance": [0.3, 0.6]}],
    ... })
    >>> round(run(request).results[0].components[0].concentration, 6)
    50.0
    """
    settings, components_and_records, spectra = gather(
        [
            ("$", lambda: _settings(request)),
            ("$", lambda: components_of(request.components, request.library)),
            ("$", lambda: _spectra(request)),
        ]
    )
    components, records = components_and_records
    units, factors = units_of(request.concentration_unit, components)
    results: list[SpectrumResult | None] = [None] * len(spectra)
    for places in _by_axis(spectra):
        batch = SpectrumBatch.of([spectra[k] for k in places])
        (resolution,) = gather([("$", lambda batch=batch: resolve(batch, components, settings))])
        _compare_conditions(resolution, request.conditions)
        for k, result in zip(places, response_results(resolution, factors, units), strict=True):
            results[k] = result
    return ResolveResponse(
        results=[result for result in results if result is not None],
        provenance=provenance(request, records, _settings_used(settings, units, request.library)),
    )


def _settings(request: ResolveRequest) -> ResolveSettings:
    noise, limits = gather(
        [
            (".noise", request.noise.to_noise),
            (".model_error", lambda: _limits(request.model_error)),
        ]
    )
    return ResolveSettings(
        background=tuple(request.background),
        wavelength_range_nm=(request.wavelength_range_nm[0], request.wavelength_range_nm[1])
        if request.wavelength_range_nm
        else None,
        wavelengths_nm=tuple(request.wavelengths_nm) if request.wavelengths_nm else None,
        absorbance_limit=request.absorbance_limit,
        noise=noise,
        coverage=request.coverage,
        target_relative_u=request.target_relative_u,
        limits=limits,
    )


def _limits(model_error: ModelErrorIn) -> JudgementLimits:
    for name in ("relative", "absorbance"):
        if getattr(model_error, name) < 0:
            raise InputError.single("negative", f".{name}", f"{name} must not be negative, found {getattr(model_error, name):g}")
    return JudgementLimits(model_error_relative=model_error.relative, model_error_absorbance=model_error.absorbance)


def _spectra(request: ResolveRequest) -> list[Spectrum]:
    spectra = gather([(f".spectra[{k}]", spectrum.to_spectrum) for k, spectrum in enumerate(request.spectra)])
    first: dict[str, int] = {}
    for k, spectrum in enumerate(spectra):
        if first.setdefault(spectrum.id, k) == k:
            continue
        raise InputError.single(
            "duplicate-id", f".spectra[{k}].id", f"ids must differ, found {spectrum.id!r} more than once", "rename the samples"
        )
    return spectra


def _by_axis(spectra: list[Spectrum]) -> list[list[int]]:
    """Places of the spectra that share an axis (and whether readings have their own uncertainty)."""
    groups: dict[tuple[bytes, bool], list[int]] = {}
    for k, spectrum in enumerate(spectra):
        groups.setdefault((spectrum.wavelength_nm.tobytes(), spectrum.absorbance_u is None), []).append(k)
    return list(groups.values())


def _compare_conditions(resolution: Resolution, conditions: ConditionsIn | None) -> None:
    """Add a flag where the samples were measured under other conditions than a record."""
    if conditions is None:
        return
    own: Conditions = conditions.to_conditions()
    found = [(c.name, own.differences(c.conditions)) for c in resolution.components]
    words = [f"samples and {name!r}: {', '.join(differences)}" for name, differences in found if differences]
    if words:
        resolution.raise_for_all("conditions-differ", "; ".join(words))


def _settings_used(settings: ResolveSettings, units: tuple[str, ...], library: str | None) -> dict[str, Any]:
    used = asdict(settings)
    return {**used, "concentration_unit": list(units), "library": library}
