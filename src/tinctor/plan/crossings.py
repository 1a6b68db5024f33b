"""Wavelengths worth knowing: where two components absorb equally, where one absorbs alone, where none does."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations, pairwise
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import resample
from tinctor.component import Component
from tinctor.plan.sample import PlannedSample

__all__ = ["Crossing", "Window", "clear_windows", "crossings"]

#: Two spectra cross only where their difference goes beyond this share of the highest absorptivity on both sides, and they absorb
#: that much there: noise of the records, and spectra that fade out together, make no crossing.
CROSSING_SHARE: Final = 0.01
#: A component absorbs alone where the others together have at most this share of its absorbance.
ALONE_SHARE: Final = 0.01
#: ... and its own is at least this share of its highest.
SEEN_SHARE: Final = 0.05
#: Two windows of one component no further apart than this are one: noise of the records at the limit does not divide it.
SAME_WINDOW_NM: Final = 5.0
#: None absorbs where no component has more than this share of its highest absorptivity (as in resolving).
NONE_SHARE: Final = 0.01


@dataclass(frozen=True, slots=True)
class Crossing:
    """Two components (by place) have the same absorptivity here; isosbestic when both are forms of one analyte."""

    places: tuple[int, int]
    wavelength_nm: float
    absorptivity: float
    isosbestic: bool


@dataclass(frozen=True, slots=True)
class Window:
    """A range in which one component (by place) absorbs alone, or none does (`None`).

    Attributes
    ----------
    best_nm
        Where the component absorbs most; for a window of none, where all together absorb least.
    absorbance
        Planned absorbance of the whole sample at `best_nm`.
    others_share
        Largest planned absorbance of the others over the component's anywhere in the window; 0 for a window of none.
    """

    place: int | None
    low_nm: float
    high_nm: float
    best_nm: float
    absorbance: float
    others_share: float


def crossings(sample: PlannedSample) -> tuple[Crossing, ...]:
    """Return where two components have equal absorptivities, in order of wavelength.

    Molar absorptivities are compared with molar ones and those by mass with those by mass; pairs of both kinds are compared by
    the molar mass of the molar one, and left out where it is not known. Between the readings the records are interpolated.
    """
    low, high = sample.wavelength_nm[0], sample.wavelength_nm[-1]
    found = []
    for a, b in combinations(range(len(sample.components)), 2):
        one, two = sample.components[a], sample.components[b]
        factors = _common_basis(one, two)
        if factors is None:
            continue
        axis = np.unique(np.concatenate([one.wavelength_nm, two.wavelength_nm, [low, high]]))
        axis = axis[(axis >= low) & (axis <= high)]
        first = factors[0] * resample(one.wavelength_nm, one.absorptivity, axis)
        second = factors[1] * resample(two.wavelength_nm, two.absorptivity, axis)
        isosbestic = one.analyte is not None and one.analyte == two.analyte
        found += [Crossing((a, b), w, e / factors[0], isosbestic) for w, e in _equal(axis, first, second)]
    return tuple(sorted(found, key=lambda c: (c.wavelength_nm, c.places)))


def clear_windows(sample: PlannedSample) -> tuple[Window, ...]:
    """Return the ranges in which one component absorbs alone at the planned concentrations, by component, then those in which none
    does.

    Alone: the others together have at most 1 % of its absorbance, and its own is at least 5 % of its highest. None: no component
    has more than 1 % of its highest absorptivity, the place to look at the baseline.
    """
    parts = sample.absorbance_by_component
    total = sample.absorbance
    found = []
    for k in range(parts.shape[1]):
        own = parts[:, k]
        others = total - own
        alone = (own > 0) & (np.abs(others) <= ALONE_SHARE * own) & (own >= SEEN_SHARE * own.max())
        found += [_window(sample, k, run, int(run[np.argmax(own[run])]), others) for run in _runs(alone, sample.wavelength_nm)]
    E = sample.design.X[:, : parts.shape[1]]
    none = (np.abs(E) <= NONE_SHARE * E.max(axis=0)).all(axis=1)
    found += [
        _window(sample, None, run, int(run[np.argmin(np.abs(total[run]))]), total) for run in _runs(none, sample.wavelength_nm)
    ]
    return tuple(found)


def _common_basis(one: Component, two: Component) -> tuple[float, float] | None:
    """Factors that bring two absorptivities to one basis; None where a molar mass is wanting."""
    if one.basis == two.basis:
        return 1.0, 1.0
    molar = one if one.basis == "molar" else two
    if molar.molar_mass_g_per_mol is None:
        return None
    per_gram = 1.0 / molar.molar_mass_g_per_mol
    return (per_gram, 1.0) if molar is one else (1.0, per_gram)


def _equal(axis: FloatArray, first: FloatArray, second: FloatArray) -> list[tuple[float, float]]:
    """Wavelength and value of each crossing of two curves that goes beyond the noise of the records on both sides."""
    difference = first - second
    least = CROSSING_SHARE * min(first.max(), second.max())
    clear = np.flatnonzero(np.abs(difference) > least)
    found = []
    for before, after in pairwise(clear):
        if difference[before] * difference[after] > 0:
            continue
        inner = np.arange(before, after + 1)
        k = int(inner[np.flatnonzero(difference[inner[:-1]] * difference[inner[1:]] <= 0)[0]])
        share = difference[k] / (difference[k] - difference[k + 1]) if difference[k] != difference[k + 1] else 0.5
        value = first[k] + share * (first[k + 1] - first[k])
        if value > least:
            found.append((float(axis[k] + share * (axis[k + 1] - axis[k])), float(value)))
    return found


def _runs(mask: np.ndarray, wavelength_nm: FloatArray) -> list[np.ndarray]:
    """Places from the first to the last true value of each run; runs close to one another are one."""
    places = np.flatnonzero(mask)
    if places.size == 0:
        return []
    apart = (np.diff(places) > 1) & (np.diff(wavelength_nm[places]) > SAME_WINDOW_NM)
    return [np.arange(part[0], part[-1] + 1) for part in np.split(places, np.flatnonzero(apart) + 1)]


def _window(sample: PlannedSample, place: int | None, run: np.ndarray, best: int, others: FloatArray) -> Window:
    w, total = sample.wavelength_nm, sample.absorbance
    own = np.abs((total - others)[run])
    shares = np.divide(np.abs(others[run]), own, out=np.zeros(run.size), where=own > 0)
    share = 0.0 if place is None else float(shares.max())
    return Window(place, float(w[run[0]]), float(w[run[-1]]), float(w[best]), float(total[best]), share)
