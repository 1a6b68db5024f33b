"""How much of each known absorber is in a mixed solution, from its UV-visible absorbance spectrum.

    >>> import tinctor
    >>> collection = tinctor.load_collection("palewater-dyehouse")
    >>> dyes = [collection.component(name) for name in ("hollin-yellow", "bramble-red", "tarn-blue")]
    >>> spectra = tinctor.read_spectra("scripts/demo_data/vat-run.csv").spectra
    >>> result = tinctor.resolve_batch(tinctor.SpectrumBatch.of(spectra), dyes)
    >>> result.concentration.shape, result.names
    ((20, 3), ('hollin-yellow', 'bramble-red', 'tarn-blue'))

`tinctor.resolve` is the subpackage with the numerics; the function is exported as `resolve_batch`. Names are loaded when
they are first used, so that `import tinctor` costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from tinctor.version import __version__

if TYPE_CHECKING:
    from tinctor.component import Component, Conditions
    from tinctor.errors import InputError, TinctorError, UndeterminedError
    from tinctor.files import read_spectra
    from tinctor.library import Collection, load_collection
    from tinctor.noise import NoiseModel
    from tinctor.operations.registry import run_document
    from tinctor.plan.crossings import clear_windows, crossings
    from tinctor.plan.dilution import DilutionAsked, choose_dilution
    from tinctor.plan.overlap import overlap
    from tinctor.plan.sample import PlannedSample, planned_sample
    from tinctor.plan.wavelengths import WavelengthsAsked, choose_wavelengths
    from tinctor.resolve.engine import resolve as resolve_batch
    from tinctor.resolve.resolution import Resolution
    from tinctor.resolve.settings import ResolveSettings
    from tinctor.spectrum import Spectrum, SpectrumBatch
    from tinctor.standards.characterise import characterise as characterise_standards
    from tinctor.standards.determine import determine as determine_unknowns
    from tinctor.standards.series import Standard, series_of
    from tinctor.standards.settings import StandardsSettings

__all__ = [
    "Collection",
    "Component",
    "Conditions",
    "DilutionAsked",
    "InputError",
    "NoiseModel",
    "PlannedSample",
    "Resolution",
    "ResolveSettings",
    "Spectrum",
    "SpectrumBatch",
    "Standard",
    "StandardsSettings",
    "TinctorError",
    "UndeterminedError",
    "WavelengthsAsked",
    "__version__",
    "characterise_standards",
    "choose_dilution",
    "choose_wavelengths",
    "clear_windows",
    "crossings",
    "determine_unknowns",
    "load_collection",
    "overlap",
    "planned_sample",
    "read_spectra",
    "resolve_batch",
    "run_document",
    "series_of",
]

_HOMES = {
    "Collection": "tinctor.library",
    "Component": "tinctor.component",
    "Conditions": "tinctor.component",
    "DilutionAsked": "tinctor.plan.dilution",
    "InputError": "tinctor.errors",
    "NoiseModel": "tinctor.noise",
    "PlannedSample": "tinctor.plan.sample",
    "Resolution": "tinctor.resolve.resolution",
    "ResolveSettings": "tinctor.resolve.settings",
    "Spectrum": "tinctor.spectrum",
    "SpectrumBatch": "tinctor.spectrum",
    "Standard": "tinctor.standards.series",
    "StandardsSettings": "tinctor.standards.settings",
    "TinctorError": "tinctor.errors",
    "UndeterminedError": "tinctor.errors",
    "WavelengthsAsked": "tinctor.plan.wavelengths",
    "characterise_standards": "tinctor.standards.characterise:characterise",
    "choose_dilution": "tinctor.plan.dilution",
    "choose_wavelengths": "tinctor.plan.wavelengths",
    "clear_windows": "tinctor.plan.crossings",
    "crossings": "tinctor.plan.crossings",
    "determine_unknowns": "tinctor.standards.determine:determine",
    "load_collection": "tinctor.library",
    "overlap": "tinctor.plan.overlap",
    "planned_sample": "tinctor.plan.sample",
    "read_spectra": "tinctor.files",
    "resolve_batch": "tinctor.resolve.engine:resolve",
    "run_document": "tinctor.operations.registry",
    "series_of": "tinctor.standards.series",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'tinctor' has no attribute {name!r}")
    module, _, attribute = _HOMES[name].partition(":")
    return getattr(import_module(module), attribute or name)


def __dir__() -> list[str]:
    return sorted(__all__)
