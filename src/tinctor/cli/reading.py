"""From files and options to the spectra of a request, shared by the commands."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import typer

if TYPE_CHECKING:
    from collections.abc import Iterable

    from tinctor.files import ReadOptions
    from tinctor.spectrum import Spectrum

__all__ = ["background_terms", "cautions", "document_of", "given", "read_all", "say", "with_blank", "with_cells"]


def read_all(files: list[str], options: ReadOptions) -> tuple[list[Spectrum], list[str]]:
    """Return the spectra of all files, and what the readers noticed."""
    from tinctor.errors import InputError
    from tinctor.files import read_spectra

    spectra: list[Spectrum] = []
    notes: list[str] = []
    seen: dict[str, tuple[str, str]] = {}
    for name in files:
        reading = read_spectra(name, options)
        notes += [f"{reading.source}: {note}" for note in reading.notes]
        for spectrum in reading.spectra:
            if spectrum.id in seen:
                first_name, first_source = seen[spectrum.id]
                # files of one name in two folders are told apart by their paths
                here, there = (reading.source, first_source) if reading.source != first_source else (name, first_name)
                raise InputError.single("duplicate-id", here, f"{spectrum.id!r} is in {there} already", "rename one of the samples")
            seen[spectrum.id] = (name, reading.source)
        spectra += reading.spectra
    return spectra, notes


def with_cells(spectra: list[Spectrum], samples: Path | None, *values: float | None) -> list[Spectrum]:
    """Return the spectra with the bench sheet, then what holds for all; both for one value would be a contradiction."""
    from dataclasses import replace

    from tinctor.errors import InputError
    from tinctor.files import apply_sample_sheet, read_sample_sheet

    names = ("path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u")
    given: dict[str, Any] = {name: value for name, value in zip(names, values, strict=True) if value is not None}
    if samples is not None:
        sheet = read_sample_sheet(samples)
        twice = sorted({key for row in sheet.values() for key in row} & given.keys())
        if twice:
            raise InputError.single("given-twice", str(samples), f"{twice[0]} stands on the sheet and is given as an option too")
        spectra = apply_sample_sheet(spectra, sheet)
    if not given:
        return spectra
    changed = []
    for spectrum in spectra:
        try:
            changed.append(replace(spectrum, **given))
        except InputError as error:
            places = [replace(f, path="--" + f.path.lstrip(".").replace("_", "-")) for f in error.faults]
            raise InputError(places) from error
    return changed


def with_blank(spectra: list[Spectrum], blank: str | None, options: ReadOptions) -> list[Spectrum]:
    """Return the spectra less a blank."""
    if blank is None:
        return spectra
    from tinctor.errors import InputError
    from tinctor.spectrum import SpectrumBatch

    found = _blank(blank, options)
    if len(found) != 1:
        raise InputError.single("one-blank", blank, f"expected one blank spectrum, found {len(found)}")
    changed = []
    for spectrum in spectra:
        try:
            changed.append(SpectrumBatch.of([spectrum]).minus_blank(found[0])[0])
        except InputError as error:
            hint = "measure the blank at the wavelengths of the samples"
            raise InputError.single("blank", f"--blank {blank}", error.faults[0].message, hint) from error
    return changed


def _blank(blank: str, options: ReadOptions) -> tuple[Spectrum, ...]:
    """The blank as its file shows it (its layout need not be the samples'); the options settle what that leaves open."""
    from tinctor.errors import InputError
    from tinctor.files import read_spectra

    try:
        return read_spectra(blank).spectra
    except InputError as error:
        if error.faults[0].code != "ambiguous":
            raise
    return read_spectra(blank, options).spectra


def document_of(spectrum: Spectrum) -> dict[str, Any]:
    """Return a spectrum as it stands in a request."""
    from tinctor.operations.shared import SpectrumIn

    return SpectrumIn.of(spectrum).model_dump(exclude_none=True)


def given(**values: Any) -> dict[str, Any]:
    """Return the values that are not None."""
    return {key: value for key, value in values.items() if value is not None}


def say(lines: Iterable[str]) -> None:
    """Print lines on standard error."""
    for line in lines:
        typer.echo(line, err=True)


def background_terms(terms: list[str] | None) -> list[str] | None:
    """Return the background terms of an option that repeats or holds commas; none stands alone."""
    if terms is None:
        return None
    listed = [term.strip() for item in terms for term in item.split(",")]
    if "none" in listed and len(listed) > 1:
        raise typer.BadParameter(f"none stands alone, found {', '.join(listed)}", param_hint="--background")
    return [] if listed == ["none"] else listed


def cautions(response: Any) -> list[str]:
    """Return what the records warn of, each once, where the result is read."""
    return [f"caution, {record.name}: {record.caution}" for record in response.provenance.records if record.caution]
