"""The names of the Python package: none is lost or added unawares, each is the thing it says, and none costs before it is used."""

from __future__ import annotations

import subprocess
import sys
from importlib import import_module
from types import ModuleType

import pytest

import tinctor

#: Name -> module and name of what it stands for.
NAMES = {
    "Collection": "tinctor.library Collection",
    "Component": "tinctor.component Component",
    "Conditions": "tinctor.component Conditions",
    "DilutionAsked": "tinctor.plan.dilution DilutionAsked",
    "InputError": "tinctor.errors InputError",
    "NoiseModel": "tinctor.noise NoiseModel",
    "PlannedSample": "tinctor.plan.sample PlannedSample",
    "Resolution": "tinctor.resolve.resolution Resolution",
    "ResolveSettings": "tinctor.resolve.settings ResolveSettings",
    "Spectrum": "tinctor.spectrum Spectrum",
    "SpectrumBatch": "tinctor.spectrum SpectrumBatch",
    "Standard": "tinctor.standards.series Standard",
    "StandardsSettings": "tinctor.standards.settings StandardsSettings",
    "TinctorError": "tinctor.errors TinctorError",
    "UndeterminedError": "tinctor.errors UndeterminedError",
    "WavelengthsAsked": "tinctor.plan.wavelengths WavelengthsAsked",
    "__version__": "tinctor.version __version__",
    "characterise_standards": "tinctor.standards.characterise characterise",
    "choose_dilution": "tinctor.plan.dilution choose_dilution",
    "choose_wavelengths": "tinctor.plan.wavelengths choose_wavelengths",
    "clear_windows": "tinctor.plan.crossings clear_windows",
    "crossings": "tinctor.plan.crossings crossings",
    "determine_unknowns": "tinctor.standards.determine determine",
    "load_collection": "tinctor.library load_collection",
    "overlap": "tinctor.plan.overlap overlap",
    "planned_sample": "tinctor.plan.sample planned_sample",
    "read_spectra": "tinctor.files read_spectra",
    "resolve_batch": "tinctor.resolve.engine resolve",
    "run_document": "tinctor.operations.registry run_document",
    "series_of": "tinctor.standards.series series_of",
}


#: What needs distributions that a cold start of the resolver does without.
WITH_SCIPY = ("characterise_standards", "determine_unknowns")


def test_the_names_are_these_in_order() -> None:
    assert tinctor.__all__ == sorted(NAMES)
    assert dir(tinctor) == sorted(NAMES)


@pytest.mark.parametrize(("name", "home"), NAMES.items())
def test_each_name_is_what_it_says(name: str, home: str) -> None:
    module, attribute = home.split()
    assert getattr(tinctor, name) is getattr(import_module(module), attribute)


def test_resolve_is_the_subpackage_and_stays_it() -> None:
    assert callable(tinctor.resolve_batch)
    assert isinstance(import_module("tinctor.resolve"), ModuleType)
    assert import_module("tinctor.resolve") is tinctor.resolve  # type: ignore[attr-defined]


@pytest.mark.parametrize("name", sorted(set(NAMES) - {"__version__"}))
def test_a_name_can_be_the_first_thing_imported(name: str) -> None:
    code = (
        "import sys, tinctor\n"
        "assert not {'numpy', 'pydantic', 'typer'} & set(sys.modules)\n"
        f"from tinctor import {name}\n"
        "assert not {'typer', 'rich'} & set(sys.modules)\n"
        f"assert ('scipy' in sys.modules) == {name in WITH_SCIPY}\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
