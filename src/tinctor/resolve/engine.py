"""From a batch of spectra and a set of components to concentrations, uncertainties and flags.

The batch goes through in blocks, as many at a time as there are cores; no number of one spectrum depends on another's.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np

from tinctor.arrays import quoted
from tinctor.component import Component
from tinctor.errors import InputError
from tinctor.resolve.batch_notes import batch_notes
from tinctor.resolve.design import build_design, usable_wavelengths
from tinctor.resolve.judge import status_of
from tinctor.resolve.parts import Collector, strongest
from tinctor.resolve.resolution import FlagCode, Resolution
from tinctor.resolve.resolver import Readings, Resolver
from tinctor.resolve.settings import ResolveSettings
from tinctor.resolve.threads import workers
from tinctor.resolve.uncertainty import Cell
from tinctor.spectrum import SpectrumBatch

__all__ = ["resolve"]

#: Spectra per block: what one thread works on at a time.
BLOCK: Final = 8192


def resolve(batch: SpectrumBatch, components: Sequence[Component], settings: ResolveSettings | None = None) -> Resolution:
    """Return the concentration of each component in each spectrum, with uncertainty, interval and flags.

    Parameters
    ----------
    batch
        n spectra on one axis.
    components
        At least one, with different names.
    settings
        How to resolve; the defaults of `ResolveSettings` otherwise.

    Raises
    ------
    InputError
        For no components, repeated names, or wavelengths asked for that were not measured.

    Examples
    --------
    >>> w = [400.0, 450.0, 500.0]
    >>> red = Component("red", w, [1.0, 5.0, 20.0], scale_relative_u=0.01)
    >>> blue = Component("blue", w, [10.0, 4.0, 1.0], scale_relative_u=0.01)
    >>> batch = SpectrumBatch(["bath"], w, [[0.55, 0.45, 1.05]])
    >>> resolve(batch, [red, blue], ResolveSettings(background=())).unconstrained.round(3)
    array([[0.05, 0.05]])
    """
    settings = settings or ResolveSettings()
    _check_components(components)
    wanted, inside = usable_wavelengths(batch.wavelength_nm, components, settings)
    design = build_design(batch.wavelength_nm[inside], components, settings.background)
    notes, common = batch_notes(batch.wavelength_nm, wanted, inside, components, settings)
    columns_used: slice | np.ndarray = _as_slice(inside)
    context = Resolver(design, components, settings)

    collector = Collector(len(batch))

    def block(rows: slice) -> None:
        reading_u = None if batch.absorbance_u is None else batch.absorbance_u[rows, columns_used]
        readings = Readings(batch.absorbance[rows, columns_used], reading_u, _cell(batch, rows))
        collector.put(rows, context.block(readings))

    starts = range(0, len(batch), BLOCK)
    with workers(len(starts)) as run:
        list(run(block, (slice(start, start + BLOCK) for start in starts)))
    merged = collector.part
    severity: dict[FlagCode, np.ndarray] = merged.pop("severity")
    for code, grade in common.items():
        severity[code] = strongest(severity.get(code), grade, len(batch))
    severity = {code: grades for code, grades in severity.items() if grades.any()}
    return Resolution(
        ids=batch.ids,
        components=tuple(components),
        background=(*design.terms, *(["shift"] if design.shift else [])),
        settings=settings,
        wavelength_nm=design.wavelength_nm,
        severity=severity,
        status=status_of(severity, len(batch), len(components)),
        interferent=context.interferent,
        notes=notes,
        **merged,
    )


def _check_components(components: Sequence[Component]) -> None:
    if not components:
        raise InputError.single("no-components", ".components", "expected at least one component, found none")
    names = [c.name for c in components]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise InputError.single(
            "duplicate-component", ".components", f"each component may stand once, found twice: {quoted(twice)}"
        )


def _cell(batch: SpectrumBatch, rows: slice) -> Cell:
    path, dilution = batch.path_length_cm[rows], batch.dilution_factor[rows]
    return Cell(dilution / path, batch.path_length_u_cm[rows] / path, batch.dilution_factor_u[rows] / dilution)


def _as_slice(mask: np.ndarray) -> slice | np.ndarray:
    """A contiguous mask as a slice, which costs no copy."""
    places = np.flatnonzero(mask)
    if places.size and places[-1] - places[0] + 1 == places.size:
        return slice(int(places[0]), int(places[-1]) + 1)
    return places
