"""Flags that follow from the axis and the library alone, and so are the same for every spectrum of a batch."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np

from tinctor.arrays import FloatArray, quoted
from tinctor.axis import covered, resample
from tinctor.component import Component
from tinctor.resolve.resolution import FlagCode, Severity
from tinctor.resolve.settings import ResolveSettings

__all__ = ["batch_notes", "coarseness"]

#: Share of the highest absorptivity by which a record rebuilt from the sample's wavelengths may differ from the record.
COARSE = 0.03


def batch_notes(
    wavelength_nm: FloatArray,
    wanted: np.ndarray,
    inside: np.ndarray,
    components: Sequence[Component],
    settings: ResolveSettings,
) -> tuple[dict[FlagCode, str], dict[FlagCode, np.ndarray]]:
    """Return words and severities, (p,) or scalar, of the flags that hold for the whole batch."""
    words: dict[FlagCode, str] = {}
    grades: dict[FlagCode, np.ndarray] = {}
    if not wanted.any():
        words["range-not-covered"] = (
            f"no reading lies in the range asked for, {settings.wavelength_range_nm}: "
            f"measured {wavelength_nm[0]:g} to {wavelength_nm[-1]:g} nm"
        )
        grades["range-not-covered"] = np.array(Severity.REFUSAL, dtype=np.int8)
    elif (wanted & ~inside).any():
        words["range-not-covered"], grades["range-not-covered"] = _not_covered(wavelength_nm, wanted, inside, components, settings)
    coarse = [c.name for c in components if inside.any() and coarseness(c, wavelength_nm[inside]) > COARSE]
    if coarse:
        words["too-few-points"] = (
            f"the wavelengths used are too far apart to follow the bands of {quoted(coarse)}: results rest on the readings "
            "agreeing with the record at single wavelengths, and an unknown absorber may pass unseen"
        )
        grades["too-few-points"] = np.array(
            [Severity.INFO if c.name in coarse else Severity.NONE for c in components], dtype=np.int8
        )
    differences = _conditions(components)
    if differences:
        words["conditions-differ"] = "records were measured under different conditions: " + "; ".join(differences)
        grades["conditions-differ"] = np.array(Severity.WARNING, dtype=np.int8)
    return words, grades


def coarseness(component: Component, wavelength_nm: FloatArray) -> float:
    """Return how far a record is from what can be rebuilt of it from a sample's wavelengths, over its highest absorptivity.

    Near 0 when the axis follows the record's bands; towards 1 when whole bands fall between its wavelengths.

    Examples
    --------
    >>> w = np.arange(400.0, 601.0)
    >>> narrow = Component("narrow", w, np.exp(-0.5 * ((w - 500) / 5) ** 2))
    >>> coarseness(narrow, w[::2]) < 0.01, coarseness(narrow, w[::25]) > 0.1
    (True, True)
    """
    between = covered(component.wavelength_nm, wavelength_nm)
    if wavelength_nm.size < 2 or not between.any():
        return 0.0
    on_sample = resample(component.wavelength_nm, component.absorptivity, wavelength_nm)
    rebuilt = resample(wavelength_nm, on_sample, component.wavelength_nm[between])
    return float(np.abs(rebuilt - component.absorptivity[between]).max() / component.absorptivity.max())


def _not_covered(
    wavelength_nm: FloatArray, wanted: np.ndarray, inside: np.ndarray, components: Sequence[Component], settings: ResolveSettings
) -> tuple[str, np.ndarray]:
    short = [c for c in components if (wanted & ~covered(wavelength_nm, c.wavelength_nm)).any()]
    ranges = ", ".join(f"{c.name!r} {c.wavelength_nm[0]:g} to {c.wavelength_nm[-1]:g} nm" for c in short)
    left_out = int((wanted & ~inside).sum())
    if not inside.any():
        measured = f"{wavelength_nm[0]:g} to {wavelength_nm[-1]:g} nm"
        return f"no reading lies where every component is known: measured {measured}; known {ranges}", np.array(
            Severity.REFUSAL, np.int8
        )
    asked = settings.wavelength_range_nm is not None or settings.wavelengths_nm is not None
    counted = f"{left_out} of {int(wanted.sum())} readings lie outside a record's range and are not used"
    words = f"{counted}: {ranges}; nothing is extrapolated"
    return words, np.array(Severity.WARNING if asked else Severity.INFO, dtype=np.int8)


def _conditions(components: Sequence[Component]) -> list[str]:
    return [
        f"{a.name!r} and {b.name!r}: {', '.join(found)}"
        for a, b in combinations(components, 2)
        if not (a.analyte and a.analyte == b.analyte)  # forms of one analyte exist side by side
        and (found := a.conditions.differences(b.conditions))
    ]
