"""What was left out, and what needs a look, in words."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from tinctor.arrays import quoted
from tinctor.standards.series import Series
from tinctor.standards.settings import StandardsSettings

if TYPE_CHECKING:
    from tinctor.standards.characterise import Characterisation

__all__ = ["Dropped", "Note", "dropped_for_range", "notes_of"]


@dataclass(frozen=True, slots=True)
class Dropped:
    """A standard left out, or readings of it (then their wavelengths), and why."""

    id: str
    reason: str
    wavelength_nm: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True)
class Note:
    """Something that needs a look."""

    code: str
    severity: Literal["info", "warning"]
    message: str
    standards: tuple[str, ...] = ()
    wavelength_nm: tuple[float, ...] = ()


#: A level this far off the line is no matter of pipettes (common practice).
LARGE_SCATTER = 0.05


def dropped_for_range(points: Series, linear_to: float, linear: float | None) -> list[Dropped]:
    """Return the standards above the range that passed, each with the test that it did not."""
    return [
        Dropped(
            i, "above the range that was shown to be linear" if linear is None or x > linear else "its shape departs from the rest"
        )
        for i, x in zip(points.ids, points.amount, strict=True)
        if x > linear_to
    ]


def notes_of(result: Characterisation, series: Series, settings: StandardsSettings) -> tuple[Note, ...]:
    """Return the notes of a characterisation."""
    return (
        *_coverage_notes(result, series),
        *_range_notes(result),
        *_standard_notes(result),
        *_uncertainty_notes(result, settings),
    )


def _coverage_notes(result: Characterisation, series: Series) -> Iterator[Note]:
    lost = series.wavelength_nm.size - result.wavelength_nm.size
    if lost:
        gone = np.setdiff1d(series.wavelength_nm, result.wavelength_nm)
        message = f"{lost} wavelengths ({gone[0]:g} to {gone[-1]:g} nm) are above the absorbance limit in every standard used"
        yield Note("saturated", "warning", message, wavelength_nm=tuple(gone.tolist()))
    masked = ~result.points.used
    if masked.any():
        rows = np.flatnonzero(masked.any(axis=1))
        ids = tuple(result.points.ids[k] for k in rows)
        where = result.wavelength_nm[masked.any(axis=0)]
        message = f"readings above the absorbance limit were not used: {int(masked.sum())} of {quoted(ids)}"
        yield Note("saturated", "info", message, ids, (float(where[0]), float(where[-1])))


def _range_notes(result: Characterisation) -> Iterator[Note]:
    preparations = int((result.points.amount > 0).sum())
    test = result.tests[-1]
    if preparations == 1 and len(result.dropped) == 0:
        yield Note(
            "single-standard",
            "warning",
            "one standard cannot show that the line is straight, that it goes through zero, or how standards scatter",
        )
    elif test.method == "none":
        yield Note("linearity-not-tested", "warning", f"{test.points} points are too few to test whether the line is straight")
    elif not test.passed:
        f, p = test.f or 0.0, test.probability or 0.0
        message = (
            f"no set of standards passes: the {test.method} test of the smallest gives F = {f:.3g} (probability {p:.2g}), "
            f"{100 * test.departure_relative:.2g} % off the line"
        )
        yield Note("not-linear", "warning", message)
    elif len(result.tests) > 1:
        whole = result.tests[0]
        message = (
            f"the line holds to {test.amount:.4g}, not to {whole.amount:.4g} (concentration x path): with all standards "
            f"F = {whole.f or 0:.3g}, {100 * whole.departure_relative:.2g} % off the line"
        )
        yield Note("linear-range-shortened", "warning", message)
    if not result.shape.agree:
        worst = max(result.shape.departures, key=lambda d: abs(d.relative))
        holds = (
            "no two standards agree"
            if result.shape.holds_to is None
            else f"standards up to {result.shape.holds_to:.4g} (concentration x path) agree"
        )
        message = (
            f"spectra divided by concentration do not agree: largest at {worst.wavelength_nm:g} nm in {worst.id!r}, "
            f"{1000 * worst.absorbance:+.1f} mAU or {100 * worst.relative:+.1f} % of its maximum (aggregation, pH, adsorption or "
            f"stray light); {holds}"
        )
        ids = tuple(dict.fromkeys(d.id for d in result.shape.departures))
        yield Note("superposition", "warning", message, ids, (worst.low_nm, worst.high_nm))


def _standard_notes(result: Characterisation) -> Iterator[Note]:
    whole = result.tests[0]
    if whole.passed and whole.departure_relative > LARGE_SCATTER:
        message = (
            f"the standards lie up to {100 * whole.departure_relative:.2g} % off the line: so much scatter hides any curvature; "
            "look for exchanged labels and for faults of dilution"
        )
        yield Note("standards-scatter", "warning", message)
    dropped = {d.id for d in result.dropped}
    for m in result.marked:
        what = "left out" if m.id in dropped else "kept: leave it out by name, or by the rule"
        message = f"{m.id!r} is off the curve of the others: studentised residual {m.studentised:.1f} against {m.limit:.1f}; {what}"
        yield Note("standard-off-the-curve", "warning", message, (m.id,))
    if result.intercept.fitted and (result.intercept.probability or 1.0) < 0.05:
        message = (
            f"the line does not go through zero: intercept {result.intercept.amount or 0:.3g} (concentration x path), "
            f"t = {result.intercept.t or 0:.1f}; look at the blank"
        )
        yield Note("intercept", "warning", message)


def _uncertainty_notes(result: Characterisation, settings: StandardsSettings) -> Iterator[Note]:
    spread = result.spread
    if settings.stock_relative_u is None:
        message = (
            "stock_relative_u is not stated (weighing, purity, flask of the stock): nothing in the spectra can show it, "
            "and the record's scale uncertainty is not known without it"
        )
        yield Note("stock-not-stated", "warning", message)
    if spread.series_basis == "declared, enlarged":
        message = (
            f"the standards scatter more than declared (probability {spread.series_probability or 0:.2g}): the scale uncertainty "
            f"is enlarged to {100 * (spread.series_relative_u or 0):.2g} %"
        )
        yield Note("scatter-exceeds-declared", "warning", message)
    elif not result.points.declared and spread.series_relative_u is not None:
        relative = float((result.points.amount_u / np.maximum(result.points.amount, np.finfo(float).tiny)).max())
        message = (
            f"concentration_u is not stated: {100 * relative:.2g} % is taken for the dilution of each standard, from their "
            "scatter and no less than 0.3 % (common practice)"
        )
        yield Note("dilution-not-stated", "info", message)
    if spread.series_relative_u is None:
        yield Note(
            "dilution-not-stated",
            "warning",
            "the uncertainty of the standard's concentration is not stated, and one point cannot show it",
        )
