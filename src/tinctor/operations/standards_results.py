"""What the operations on standards send back."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Literal

import numpy as np
from pydantic import Field

from tinctor.arrays import FloatArray
from tinctor.operations.shared import ResponseModel
from tinctor.standards.characterise import Characterisation
from tinctor.standards.notes import Note

__all__ = [
    "ComponentOut",
    "DroppedOut",
    "HandbookOut",
    "InterceptOut",
    "LinearityOut",
    "LinearityTestOut",
    "NoteOut",
    "StandardOut",
    "SuperpositionOut",
    "UncertaintyOut",
    "departures_out",
    "finite",
    "intercept_out",
    "linearity_out",
    "listed",
    "notes_out",
    "standards_out",
    "uncertainty_out",
]


class ComponentOut(ResponseModel):
    """An inline component, ready for resolve."""

    name: str
    wavelength_nm: list[float]
    molar_absorptivity: list[float] | None = Field(None, description="L mol-1 cm-1")
    mass_absorptivity: list[float] | None = Field(None, description="L g-1 cm-1")
    absorptivity_u: list[float] | None = None
    scale_relative_u: float | None = None
    molar_mass_g_per_mol: float | None = None
    linear_to: float | None = None
    conditions: dict[str, str | float] | None = None


class LinearityTestOut(ResponseModel):
    """One test of one set of standards."""

    method: Literal["lack-of-fit", "quadratic-term", "highest-level", "none"]
    highest: float = Field(description="highest concentration times path of the set, mol L-1 cm or g L-1 cm")
    points: int
    f: float | None
    degrees_of_freedom: list[int] | None
    probability: float | None
    departure_relative: float = Field(description="largest distance of a level from the line, as a share of the line")
    passed: bool


class LinearityOut(ResponseModel):
    """How far the line holds."""

    linear_to: float | None = Field(description="concentration times path, mol L-1 cm or g L-1 cm; null where nothing shows it")
    highest_concentration: float | None = Field(description="the same for a path of 1 cm, in concentration_unit")
    tests: list[LinearityTestOut]


class DroppedOut(ResponseModel):
    """A standard left out, and why."""

    id: str
    reason: str
    wavelength_nm: list[float] = Field(default=[])


class DepartureOut(ResponseModel):
    """One stretch of wavelengths in which one standard has not the shape of the others."""

    id: str
    wavelength_range_nm: list[float]
    wavelength_nm: float
    absorbance: float
    relative: float = Field(description="as a share of the spectrum's highest fitted absorbance")


class SuperpositionOut(ResponseModel):
    """Whether the spectra divided by concentration agree in shape."""

    agree: bool
    holds_to: float | None = Field(description="concentration times path up to which a set of standards agrees")
    departures: list[DepartureOut]


class UncertaintyOut(ResponseModel):
    """Relative standard uncertainties of the scale."""

    stock: float | None
    path_length: float
    series: float | None = Field(description="from dilution and scatter of the standards")
    series_basis: str
    series_probability: float | None = Field(description="of so large a scatter if the declared uncertainties are right")
    common: float | None = Field(description="all of them; null where one is not known")


class InterceptOut(ResponseModel):
    """The test of the intercept of the whole-spectrum line."""

    fitted: bool
    amount: float | None
    t: float | None
    probability: float | None


class StandardOut(ResponseModel):
    """One preparation on the whole-spectrum line."""

    id: str
    amount: float = Field(description="concentration times path as weighed, mol L-1 cm or g L-1 cm")
    apparent: float = Field(description="as its whole spectrum shows it")
    difference_percent: float | None
    scans: int
    readings_used: int


class NoteOut(ResponseModel):
    """Something that needs a look, in words."""

    code: str
    severity: Literal["info", "warning"]
    message: str
    standards: list[str] = Field(default=[])
    wavelength_nm: list[float] = Field(default=[])


class HandbookOut(ResponseModel):
    """Comparison with one published specific absorbance."""

    substance: str
    solvent: str
    ph: str
    published_wavelength_nm: float
    published_specific_absorbance: float = Field(description="E(1 %, 1 cm), dL g-1 cm-1, of the pure substance")
    from_memory: bool
    source: str
    note: str
    maximum_nm: float
    specific_absorbance: float
    difference_percent: float
    dye_content_percent: float = Field(description="share of pure substance that would explain it, if nothing else is amiss")
    at_maximum: bool = Field(description="whether the spectrum has a maximum of its own near the published wavelength")


def listed(values: FloatArray) -> list[float | None]:
    """Return an array as a list; what is not finite is null."""
    return [float(v) if np.isfinite(v) else None for v in values.tolist()]


def finite(value: float | None) -> float | None:
    """Return a number, or None where it is not finite."""
    return None if value is None or not np.isfinite(value) else float(value)


def linearity_out(result: Characterisation, factor: float) -> LinearityOut:
    """Return the linearity part; `factor` units make one mol/L or g/L."""
    tests = [
        LinearityTestOut(
            method=t.method,
            highest=t.amount,
            points=t.points,
            f=finite(t.f),
            degrees_of_freedom=list(t.degrees_of_freedom) if t.degrees_of_freedom else None,
            probability=finite(t.probability),
            departure_relative=t.departure_relative,
            passed=t.passed,
        )
        for t in result.tests
    ]
    to = result.linear_to
    return LinearityOut(linear_to=to, highest_concentration=None if to is None else to * factor, tests=tests)


def departures_out(result: Characterisation) -> SuperpositionOut:
    """Return the superposition part."""
    departures = [
        DepartureOut(
            id=d.id,
            wavelength_range_nm=[d.low_nm, d.high_nm],
            wavelength_nm=d.wavelength_nm,
            absorbance=d.absorbance,
            relative=d.relative,
        )
        for d in result.shape.departures
    ]
    return SuperpositionOut(agree=result.shape.agree, holds_to=result.shape.holds_to, departures=departures)


def uncertainty_out(result: Characterisation) -> UncertaintyOut:
    """Return the uncertainty part."""
    s = result.spread
    return UncertaintyOut(
        stock=s.stock_relative_u,
        path_length=s.path_relative_u,
        series=finite(s.series_relative_u),
        series_basis=s.series_basis,
        series_probability=finite(s.series_probability),
        common=finite(s.common_relative_u),
    )


def intercept_out(result: Characterisation) -> InterceptOut:
    """Return the intercept part."""
    i = result.intercept
    return InterceptOut(fitted=i.fitted, amount=finite(i.amount), t=finite(i.t), probability=finite(i.probability))


def standards_out(result: Characterisation) -> list[StandardOut]:
    """Return the preparations used."""
    scores, points = result.scores, result.points
    intercept = float(scores.line.intercept[0])
    return [
        StandardOut(
            id=points.ids[k],
            amount=float(points.amount[k]),
            apparent=float(scores.value[k]) - intercept,
            difference_percent=100.0 * ((float(scores.value[k]) - intercept) / float(points.amount[k]) - 1.0)
            if points.amount[k] > 0
            else None,
            scans=int(points.scans[k]),
            readings_used=int(points.used[k].sum()),
        )
        for k in range(len(points))
    ]


def notes_out(notes: Iterable[Note]) -> list[NoteOut]:
    """Return notes as flags."""
    return [
        NoteOut(
            code=n.code, severity=n.severity, message=n.message, standards=list(n.standards), wavelength_nm=list(n.wavelength_nm)
        )
        for n in notes
    ]
