"""A sample that has not been measured: components, planned concentrations, cell, and the wavelengths that will be read."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray, quoted
from tinctor.axis import SAME_WAVELENGTH_NM, covered
from tinctor.component import Component
from tinctor.errors import Fault, InputError
from tinctor.resolve.design import Design, build_design, median_step
from tinctor.resolve.forecast import Forecast, forecast
from tinctor.resolve.settings import ResolveSettings
from tinctor.resolve.uncertainty import Cell

__all__ = ["ASSUMED_ABSORBANCE", "PlannedSample", "planned_axis", "planned_sample"]

#: Where no concentration is planned, all together reach this absorbance at their highest: the middle of what is measured well.
ASSUMED_ABSORBANCE: Final = 0.8
#: A planned absorbance above this is a slip of the unit: a saturated solution of a strong dye stays below it.
HIGHEST_ABSORBANCE: Final = 1e6
#: More readings than any instrument writes.
MOST_READINGS: Final = 20_000


@dataclass(frozen=True, eq=False)
class PlannedSample:
    """What will be measured. Concentrations in the original sample, in mol/L or g/L as each component's absorptivity has it.

    Attributes
    ----------
    components : p of them
    wavelength_nm : array (m,)
        Where readings will be taken; every component covers it.
    concentration : array (p,)
    path_length_cm, path_length_u_cm, dilution_factor, dilution_factor_u
    noise_correlation_nm
        Distance over which errors of neighbouring readings are alike; 0 where they are independent. Reading more finely than
        this brings nothing.
    settings
        How it will be resolved: background, noise, absorbance limit, target.
    assumed
        Whether the concentrations were assumed because none was planned.
    notes
        What was noticed on the way.
    """

    components: tuple[Component, ...]
    wavelength_nm: FloatArray
    concentration: FloatArray
    settings: ResolveSettings
    path_length_cm: float = 1.0
    path_length_u_cm: float = 0.0
    dilution_factor: float = 1.0
    dilution_factor_u: float = 0.0
    noise_correlation_nm: float = 0.0
    assumed: bool = False
    notes: tuple[str, ...] = ()

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the components."""
        return tuple(c.name for c in self.components)

    @property
    def in_cell(self) -> FloatArray:
        """Concentration times path after dilution, array (p,)."""
        return np.asarray(self.concentration * self.path_length_cm / self.dilution_factor)

    @property
    def cell(self) -> Cell:
        """Path and dilution as the resolver takes them."""
        return Cell(
            np.array([self.dilution_factor / self.path_length_cm]),
            np.array([self.path_length_u_cm / self.path_length_cm]),
            np.array([self.dilution_factor_u / self.dilution_factor]),
        )

    @cached_property
    def design(self) -> Design:
        """The resolver's design on the planned wavelengths."""
        return build_design(self.wavelength_nm, self.components, self.settings.background)

    @property
    def absorbance_by_component(self) -> FloatArray:
        """Planned absorbance of each component, (m, p)."""
        return self.design.X[:, : len(self.components)] * self.in_cell

    @property
    def absorbance(self) -> FloatArray:
        """Planned absorbance of the whole sample, (m,)."""
        return np.asarray(self.absorbance_by_component.sum(axis=1))

    @property
    def noise_inflation(self) -> float:
        """Readings over effective readings, at least 1."""
        step = median_step(self.wavelength_nm)
        return max(1.0, self.noise_correlation_nm / step) if step > 0 else 1.0

    @cached_property
    def expected(self) -> Forecast:
        """What resolving is expected to give, by the resolver's own code; one row."""
        return forecast(self.design, self.components, self.in_cell[None], self.cell, self.settings, self.noise_inflation)

    def of(self, places: Sequence[int]) -> PlannedSample:
        """Return the same sample with some of the components only."""
        some = list(places)
        other = replace(self, components=tuple(self.components[k] for k in some), concentration=self.concentration[some])
        return other._with_design(self.design.of(some))

    def with_background(self, background: Sequence[str]) -> PlannedSample:
        """Return the same sample, resolved with other background terms."""
        settings = replace(self.settings, background=tuple(background))
        return replace(self, settings=settings)._with_design(self.design.with_background(settings.background))

    def _with_design(self, design: Design) -> PlannedSample:
        """Put a design where the cached one would come, so that the library is not resampled again."""
        self.__dict__["design"] = design
        return self

    def at(self, wavelength_nm: FloatArray) -> PlannedSample:
        """Return the same sample, read at other wavelengths."""
        return replace(self, wavelength_nm=wavelength_nm)


def planned_sample(
    components: Sequence[Component],
    concentration: Mapping[str, float] | None = None,
    settings: ResolveSettings | None = None,
    *,
    step_nm: float | None = None,
    path_length_cm: float = 1.0,
    path_length_u_cm: float = 0.0,
    dilution_factor: float = 1.0,
    dilution_factor_u: float = 0.0,
    noise_correlation_nm: float = 0.0,
) -> PlannedSample:
    """Return a planned sample, checked.

    Parameters
    ----------
    components
        At least two, with different names.
    concentration
        Planned, by name, in mol/L for a molar absorptivity and g/L for one by mass, in the original sample; all or none. Where
        none is given each component is taken to reach the same absorbance at its highest, all together 0.8.
    settings
        How the sample will be resolved; `wavelength_range_nm` or `wavelengths_nm` choose the readings.
    step_nm
        Distance of the readings; that of the coarsest record where it is not given.
    noise_correlation_nm
        Distance over which errors of neighbouring readings are alike (drift, stray light, imperfect records); repeat scans and the
        residuals of standards show it.

    Raises
    ------
    InputError
        Listing what is wrong with components, concentrations, cell or range.

    Examples
    --------
    >>> w = np.arange(400.0, 601.0)
    >>> bands = [np.exp(-0.5 * ((w - centre) / 20.0) ** 2) for centre in (470.0, 530.0)]
    >>> sample = planned_sample([Component("a", w, bands[0]), Component("b", w, bands[1])], {"a": 0.5, "b": 0.5})
    >>> sample.expected.u.shape, round(float(sample.absorbance.max()), 2)
    ((1, 2), 0.51)
    """
    settings = settings or ResolveSettings()
    _check_components(components)
    _check_cell(path_length_cm, path_length_u_cm, dilution_factor, dilution_factor_u, noise_correlation_nm)
    axis, notes = planned_axis(components, settings, step_nm)
    in_original = dilution_factor / path_length_cm
    design = build_design(axis, components, settings.background)
    values = _concentrations(design, concentration, in_original)
    cell = (path_length_cm, path_length_u_cm, dilution_factor, dilution_factor_u)
    sample = PlannedSample(
        tuple(components), axis, values, settings, *cell, noise_correlation_nm, assumed=not concentration, notes=tuple(notes)
    )
    sample = sample._with_design(design)
    _check_readings(sample)
    return sample


def _check_readings(sample: PlannedSample) -> None:
    """Enough of them, and something to read."""
    p, asked, axis = len(sample.components), sample.design.asked, sample.wavelength_nm
    if asked > axis.size:
        raise InputError.single(
            "too-few-wavelengths",
            ".wavelengths_nm" if sample.settings.wavelengths_nm else ".wavelength_range_nm",
            f"{p} components and {asked - p} background term(s) need at least {asked} wavelengths, found {axis.size}",
            "read at more wavelengths, leave a component out, or take a blank and fit no background",
        )
    highest, noise = float(sample.absorbance.max()), float(sample.settings.noise.reading_u(0.0))
    if not highest <= HIGHEST_ABSORBANCE:
        raise InputError.single(
            "too-strong",
            ".concentrations",
            f"the planned absorbance is {highest:.2g} at its highest: no solution absorbs like that",
            "check the concentrations and their unit",
        )
    if highest < noise:
        raise InputError.single(
            "below-noise",
            ".concentrations",
            f"the planned absorbance is {highest:.2g} at its highest, below the noise of a reading, {noise:.2g}",
            "plan a higher concentration or less dilution, use a longer cell, or look at other wavelengths",
        )


def planned_axis(components: Sequence[Component], settings: ResolveSettings, step_nm: float | None) -> tuple[FloatArray, list[str]]:
    """Return the wavelengths that will be read, and what was noticed.

    Raises
    ------
    InputError
        When a wavelength asked for, or the whole range, lies where a component is not known.
    """
    if settings.wavelengths_nm is not None:
        return _listed_axis(components, np.sort(np.asarray(settings.wavelengths_nm, dtype=np.float64))), []
    low, high = max(c.wavelength_nm[0] for c in components), min(c.wavelength_nm[-1] for c in components)
    notes = []
    asked = settings.wavelength_range_nm
    if asked is not None:
        if asked[0] < low - SAME_WAVELENGTH_NM or asked[1] > high + SAME_WAVELENGTH_NM:
            notes.append(
                f"the range asked for, {asked[0]:g} to {asked[1]:g} nm, goes beyond what is known of every component "
                f"({low:g} to {high:g} nm): nothing is extrapolated"
            )
        low, high = max(low, asked[0]), min(high, asked[1])
    if not low <= high:
        ranges = ", ".join(f"{c.name!r} {c.wavelength_nm[0]:g} to {c.wavelength_nm[-1]:g} nm" for c in components)
        raise InputError.single(
            "no-common-range",
            ".wavelength_range_nm",
            f"there is no wavelength in the range asked for at which every component is known: {ranges}",
            "change the range, or measure a record over a wider one",
        )
    return _axis_of(components, low, high, step_nm), notes


def _axis_of(components: Sequence[Component], low: float, high: float, step_nm: float | None) -> FloatArray:
    """Readings from low to high: those of the coarsest record, or evenly spaced where a distance is given."""
    if step_nm is None:
        coarsest = max(components, key=lambda c: median_step(c.wavelength_nm)).wavelength_nm
        return np.asarray(coarsest[(coarsest >= low - SAME_WAVELENGTH_NM) & (coarsest <= high + SAME_WAVELENGTH_NM)])
    if not (np.isfinite(step_nm) and step_nm > 0):
        raise InputError.single("step", ".step_nm", f"step_nm must be a finite number above 0 nm, found {step_nm!r}")
    if (high - low) / step_nm >= MOST_READINGS:
        raise InputError.single("step", ".step_nm", f"steps of {step_nm:g} nm give more than {MOST_READINGS} readings")
    return np.asarray(np.minimum(low + step_nm * np.arange(int((high - low) / step_nm + 1e-9) + 1), high))


def _listed_axis(components: Sequence[Component], axis: FloatArray) -> FloatArray:
    faults = []
    for c in components:
        outside = axis[~covered(axis, c.wavelength_nm)]
        if outside.size:
            faults.append(
                Fault(
                    "range-not-covered",
                    ".wavelengths_nm",
                    f"{c.name!r} is known from {c.wavelength_nm[0]:g} to {c.wavelength_nm[-1]:g} nm, "
                    f"found {', '.join(f'{w:g}' for w in outside[:6])} nm",
                    "leave these wavelengths out: nothing is extrapolated",
                )
            )
    if faults:
        raise InputError(faults)
    return axis


def _check_components(components: Sequence[Component]) -> None:
    names = [c.name for c in components]
    if len(names) < 2:
        raise InputError.single(
            "one-component",
            ".components",
            f"expected at least two components, found {len(names)}: there is nothing to tell apart",
            "name every absorber that may be in the sample; for a single one `tinctor determine` reads a calibration line",
        )
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise InputError.single(
            "duplicate-component", ".components", f"each component may stand once, found twice: {quoted(twice)}"
        )


def _check_cell(path_cm: float, path_u_cm: float, dilution: float, dilution_u: float, correlation_nm: float) -> None:
    faults = []
    for name, value, least in (("path_length_cm", path_cm, "above 0"), ("dilution_factor", dilution, "at least 1")):
        if not (np.isfinite(value) and (value > 0 if least == "above 0" else value >= 1)):
            faults.append(Fault(name.replace("_", "-"), f".{name}", f"{name} must be a finite number {least}, found {value!r}"))
    for name, value in (
        ("path_length_u_cm", path_u_cm),
        ("dilution_factor_u", dilution_u),
        ("noise_correlation_nm", correlation_nm),
    ):
        if not (np.isfinite(value) and value >= 0):
            faults.append(
                Fault(name.replace("_", "-"), f".{name}", f"{name} must be a finite number of at least 0, found {value!r}")
            )
    if faults:
        raise InputError(faults)


def _concentrations(design: Design, planned: Mapping[str, float] | None, in_original: float) -> FloatArray:
    """Concentrations in the order of the components; assumed ones where none is planned."""
    names = design.names
    if not planned:
        return _assumed(design) * in_original
    faults = [
        Fault(
            "unknown-name", f".concentrations.{name}", f"a concentration is planned for {name!r}, which is not among the components"
        )
        for name in planned
        if name not in names
    ]
    missing = [name for name in names if name not in planned]
    if missing:
        faults.append(
            Fault(
                "missing-concentration",
                ".concentrations",
                f"no concentration is planned for {quoted(missing)}",
                "plan one for each component (0 for one that may be absent), or for none",
            )
        )
    faults += [
        Fault("concentration", f".concentrations.{name}", f"a planned concentration must be finite and at least 0, found {value!r}")
        for name, value in planned.items()
        if not (np.isfinite(value) and value >= 0)
    ]
    if not faults and not any(planned.values()):
        faults.append(
            Fault("concentration", ".concentrations", "every planned concentration is 0", "plan one for at least one component")
        )
    if faults:
        raise InputError(faults)
    return np.array([planned[name] for name in names], dtype=np.float64)


def _assumed(design: Design) -> FloatArray:
    """Concentration times path at which each has the same highest absorbance and all together `ASSUMED_ABSORBANCE`."""
    E, axis = design.X[:, : design.p], design.wavelength_nm
    highest = E.max(axis=0)
    if not (highest > 0).all():
        blind = [name for name, top in zip(design.names, highest, strict=True) if not top > 0]
        raise InputError.single(
            "no-absorption",
            ".wavelength_range_nm",
            f"{quoted(blind)} absorbs nowhere at the wavelengths used, {axis[0]:g} to {axis[-1]:g} nm",
            "widen the range, or leave it out",
        )
    result: FloatArray = ASSUMED_ABSORBANCE / (E / highest).sum(axis=1).max() / highest
    return result
