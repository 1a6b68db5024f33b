"""A series of standards to an absorptivity spectrum: what was used, how far it holds, how sure it is."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from tinctor.arrays import FloatArray, quoted
from tinctor.errors import InputError, UndeterminedError
from tinctor.standards.distributions import t_tail_two_sided
from tinctor.standards.line import Lines
from tinctor.standards.linearity import ROUNDING, LinearityTest, Outlier, find_outliers, tested_ranges
from tinctor.standards.notes import Dropped, Note, dropped_for_range, notes_of
from tinctor.standards.score import Scores, dilution_relative_u, fitted_lines, scored
from tinctor.standards.series import Series, points_of
from tinctor.standards.settings import StandardsSettings
from tinctor.standards.spread import Spread, spread_of
from tinctor.standards.superposition import Superposition, superposition

__all__ = ["Characterisation", "InterceptTest", "MarkedStandard", "characterise"]

#: Fewer preparations than this have none left out by rule.
LEAST_LEFT = 3
#: Where nobody stated the dilution's relative uncertainty, weights take it for no less (common practice for pipettes and
#: flasks): with weights of noise alone the strongest standard, whose dilution error is the largest, would decide everything.
LEAST_DILUTION_U = 0.003


@dataclass(frozen=True, slots=True)
class InterceptTest:
    """Intercept of the whole-spectrum line as an amount, its t and probability; None where there is no degree of freedom."""

    fitted: bool
    amount: float | None
    t: float | None
    probability: float | None


@dataclass(frozen=True, slots=True)
class MarkedStandard:
    """A standard off the curve of the others, and whether it was left out."""

    id: str
    studentised: float
    limit: float
    leverage: float
    left_out: bool


@dataclass(frozen=True, slots=True, eq=False)
class Characterisation:
    """What a series says.

    Attributes
    ----------
    wavelength_nm : array (m,)
        Where at least one standard could be read.
    lines : Lines
        Over the standards used, at those wavelengths.
    points, scores
        The standards used (with the blanks where there is an intercept) and their whole-spectrum scores.
    spread
        Uncertainties: common to all wavelengths, and of each.
    linear_to
        Highest concentration times path shown to be linear and of one shape; None where nothing shows it.
    tests, marked, shape, intercept
        Linearity tests, standards marked, superposition, test of the intercept.
    dropped, notes
        What was left out, and what needs a look, in words.
    """

    wavelength_nm: FloatArray
    lines: Lines
    points: Series
    scores: Scores
    spread: Spread
    linear_to: float | None
    tests: tuple[LinearityTest, ...]
    marked: tuple[MarkedStandard, ...]
    shape: Superposition
    intercept: InterceptTest
    dropped: tuple[Dropped, ...]
    notes: tuple[Note, ...]

    @property
    def absorptivity(self) -> FloatArray:
        """Slope of the lines, L mol-1 cm-1 or L g-1 cm-1, (m,)."""
        return self.lines.slope


def characterise(series: Series, settings: StandardsSettings | None = None) -> Characterisation:
    """Return the absorptivity spectrum of a series of standards.

    Raises
    ------
    InputError
        When nothing is left to fit, or an id to leave out is not there.
    UndeterminedError
        When no absorption grows with concentration.

    Examples
    --------
    >>> from tinctor.spectrum import Spectrum
    >>> from tinctor.standards.series import Standard, series_of
    >>> scans = [Standard(Spectrum(f"s{k}", [500.0, 510.0], [0.1 * k, 0.2 * k]), 0.01 * k) for k in (1, 2, 3, 4)]
    >>> result = characterise(series_of(scans))
    >>> result.absorptivity.round(6), result.linear_to
    (array([10., 20.]), 0.04)
    """
    settings = settings or StandardsSettings()
    kept, dropped = _without(series, settings.leave_out, "left out by the user's word")
    fits = _Fits(settings)
    kept, hidden = _with_readings(kept, fits)
    through_zero, _ = _intercept(kept, fits)
    found = _found(kept, fits, [*dropped, *hidden], through_zero=through_zero)
    again, intercept = _intercept(found.kept, fits)
    if again != through_zero:
        # what was left out made the intercept, or hid it: decide anew without it
        found = _found(kept, fits, [*dropped, *hidden], through_zero=again)
    return _finished(found, intercept, series, fits)


class _Fits:
    """Lines and scores of the sets of standards met on the way, each fitted once."""

    def __init__(self, settings: StandardsSettings) -> None:
        self.settings = settings
        self._made: dict[tuple[tuple[str, ...], bool], tuple[Series, Lines, Scores, np.ndarray]] = {}

    def of(self, series: Series, *, through_zero: bool) -> tuple[Series, Lines, Scores, np.ndarray]:
        """Return points, lines, scores, and which points have a score."""
        key = (series.ids, through_zero)
        if key not in self._made:
            points = points_of(series, through_zero=through_zero)
            lines = fitted_lines(points, self.settings, through_zero=through_zero)
            if not (lines.slope > 0).any():
                raise UndeterminedError(
                    "the standards show no absorption that grows with concentration: nothing can be made of them"
                )
            scores, shown = scored(points, lines, self.settings)
            if not points.declared:
                relative = max(dilution_relative_u(scores), LEAST_DILUTION_U)
                points = replace(points, amount_u=relative * points.amount)
                lines = fitted_lines(points, self.settings, through_zero=through_zero)
                scores, shown = scored(points, lines, self.settings)
            self._made[key] = (points, lines, scores, shown)
        return self._made[key]


@dataclass(frozen=True, slots=True, eq=False)
class _Found:
    """The standards that remain, without blanks, and what was decided on the way."""

    kept: Series
    linear_to: float | None
    tests: tuple[LinearityTest, ...]
    marked: tuple[MarkedStandard, ...]
    shape: Superposition
    dropped: tuple[Dropped, ...]
    through_zero: bool


def _found(kept: Series, fits: _Fits, dropped: list[Dropped], *, through_zero: bool) -> _Found:
    """Screen for bad standards, find the linear range and that of one shape, and keep what lies in both."""
    settings = fits.settings
    kept, marked = _screened(kept, fits, through_zero=through_zero)
    dropped = dropped + [Dropped(m.id, "off the curve of the others, left out by rule") for m in marked if m.left_out]
    points, lines, scores, _ = fits.of(kept, through_zero=through_zero)
    tests = tested_ranges(
        scores.amount,
        scores.value,
        scores.weight,
        through_zero=through_zero,
        significance=settings.significance,
        allowed=settings.allowed_nonlinearity,
    )
    linear = tests[-1].amount if tests[-1].passed else None
    shape = superposition(points, lines, settings)
    linear_to = None if linear is None or shape.holds_to is None else min(linear, shape.holds_to)
    if linear_to is not None:
        dropped += dropped_for_range(points, linear_to, linear)
        kept = kept.take(np.flatnonzero(kept.amount <= linear_to))
    return _Found(kept, linear_to, tests, marked, shape, tuple(dropped), through_zero)


def _finished(found: _Found, intercept: InterceptTest, series: Series, fits: _Fits) -> Characterisation:
    """Fit what was kept."""
    through_zero, settings = found.through_zero, fits.settings
    points, lines, scores, _ = fits.of(found.kept, through_zero=through_zero)
    shown = (points.amount[:, None] * points.used).any(axis=0)
    if not shown.all():
        points = points.on(shown)
        lines = fitted_lines(points, settings, through_zero=through_zero)
        scores, _ = scored(points, lines, settings)
    result = Characterisation(
        wavelength_nm=points.wavelength_nm,
        lines=lines,
        points=points,
        scores=scores,
        spread=spread_of(points, lines, scores, settings),
        linear_to=found.linear_to,
        tests=found.tests,
        marked=found.marked,
        shape=found.shape,
        intercept=replace(intercept, fitted=not through_zero),
        dropped=found.dropped,
        notes=(),
    )
    return replace(result, notes=notes_of(result, series, settings))


def _without(series: Series, ids: tuple[str, ...], reason: str) -> tuple[Series, list[Dropped]]:
    unknown = [i for i in ids if i not in series.ids]
    if unknown:
        raise InputError.single(
            "unknown-standard", ".leave_out", f"no preparation is called {quoted(unknown)}", f"they are {quoted(series.ids)}"
        )
    rows = np.array([k for k, i in enumerate(series.ids) if i not in ids], dtype=int)
    if not rows.size:
        raise InputError.single("no-standards", ".leave_out", "every standard is to be left out: nothing remains")
    return series.take(rows), [Dropped(i, reason) for i in ids]


def _with_readings(series: Series, fits: _Fits) -> tuple[Series, list[Dropped]]:
    """Leave out standards of which so much is saturated that the rest says little about the band."""
    if not series.used.any():
        raise InputError.single(
            "saturated",
            ".standards",
            "every reading of every standard is above the absorbance limit",
            "dilute, or use a shorter cell",
        )
    if series.used.all():
        return series, []
    _, _, _, shown = fits.of(series, through_zero=True)
    rows = np.flatnonzero(shown)
    if not rows.size:
        raise InputError.single(
            "saturated", ".standards", "no standard shows half of its band below the absorbance limit", "dilute"
        )
    reason = "more than half of the band is above the absorbance limit"
    return series.take(rows), [Dropped(series.ids[k], reason) for k in np.flatnonzero(~shown)]


def _intercept(series: Series, fits: _Fits) -> tuple[bool, InterceptTest]:
    """Whether the line goes through zero, and the test behind that."""
    settings = fits.settings
    if settings.intercept == "zero" or series.levels + bool(len(series.blanks)) < 2:
        if settings.intercept == "fitted":
            message = "a fitted intercept needs two levels (a blank is one), found one"
            raise InputError.single("too-few-levels", ".intercept", message, 'use "zero"')
        return True, InterceptTest(False, None, None, None)
    line = fits.of(series, through_zero=False)[2].line
    degrees = float(line.degrees_of_freedom[0])
    if degrees <= 0:
        return settings.intercept != "fitted", InterceptTest(settings.intercept == "fitted", float(line.intercept[0]), None, None)
    u = float(line.intercept_u[0])
    t = float(line.intercept[0]) / u if u > 0 else 0.0
    probability = float(t_tail_two_sided(t, degrees))
    there = abs(float(line.intercept[0])) > ROUNDING * float(series.amount.max())
    fitted = settings.intercept == "fitted" or (probability < settings.significance and there)
    return not fitted, InterceptTest(fitted, float(line.intercept[0]), t, probability)


def _screened(series: Series, fits: _Fits, *, through_zero: bool) -> tuple[Series, tuple[MarkedStandard, ...]]:
    """Mark standards off the curve; leave them out, the worst first and one at a time, where that is the rule."""
    left_out: list[MarkedStandard] = []
    while True:
        outliers = _outliers(series, fits, through_zero=through_zero)
        if fits.settings.outliers != "leave-out" or not outliers or len(series) <= LEAST_LEFT:
            return series, (*left_out, *(_marked(series, o, left_out=False) for o in outliers))
        left_out.append(_marked(series, outliers[0], left_out=True))
        series = series.take(np.array([k for k in range(len(series)) if k != outliers[0].row]))


def _outliers(series: Series, fits: _Fits, *, through_zero: bool) -> list[Outlier]:
    points, _, scores, _ = fits.of(series, through_zero=through_zero)
    blanks = len(points) - len(series)
    found = find_outliers(
        scores.amount, scores.value, scores.weight, through_zero=through_zero, significance=fits.settings.significance
    )
    return [replace(o, row=o.row - blanks) for o in found if o.row >= blanks]


def _marked(series: Series, outlier: Outlier, *, left_out: bool) -> MarkedStandard:
    return MarkedStandard(series.ids[outlier.row], outlier.studentised, outlier.limit, outlier.leverage, left_out)
