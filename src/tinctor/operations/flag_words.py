"""The flags of one spectrum in words: what was seen, how large, what it could do, what to do about it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.resolve.resolution import Flag, FlagCode, Resolution, Severity

__all__ = ["flags_of"]


@dataclass(frozen=True, slots=True)
class _Seen:
    """One flag code of one spectrum: where it was raised."""

    resolution: Resolution
    row: int
    places: tuple[int, ...]
    scale: tuple[float, ...]
    units: tuple[str, ...]

    def names(self) -> tuple[str, ...]:
        return tuple(self.resolution.names[j] for j in self.places)

    def of(self, array: np.ndarray, j: int) -> str:
        """A concentration of component j in the unit asked for."""
        return f"{array[self.row, j] * self.scale[j]:.3g} {self.units[j]}"

    def each(self, words: Callable[[int], str]) -> str:
        return "; ".join(f"{self.resolution.names[j]}: {words(j)}" for j in self.places)


def flags_of(resolution: Resolution, row: int, scale: tuple[float, ...], units: tuple[str, ...]) -> list[Flag]:
    """Return the flags of spectrum number `row`, the gravest first.

    Parameters
    ----------
    scale, units
        Per component: how many of its unit make one mol/L or g/L, and the unit.
    """
    flags = []
    for code, grades in resolution.severity.items():
        grade = np.atleast_1d(grades[row])
        for severity in (Severity.REFUSAL, Severity.WARNING, Severity.INFO):
            places = tuple(int(j) for j in np.flatnonzero(grade == severity))
            if places:
                whole = grades.ndim == 1
                seen = _Seen(resolution, row, tuple(range(len(resolution.components))) if whole else places, scale, units)
                message = WORDS[code](seen, severity)
                flags.append(Flag(code, severity, message, () if whole else seen.names(), _wavelengths(code, resolution, row)))
    return sorted(flags, key=lambda flag: -flag.severity)


def _wavelengths(code: FlagCode, resolution: Resolution, row: int) -> tuple[float, ...]:
    if code != "saturated" or resolution.saturated is None:
        return ()
    return tuple(float(w) for w in resolution.wavelength_nm[resolution.saturated[row]])


def _saturated(seen: _Seen, severity: Severity) -> str:
    r = seen.resolution
    wavelengths = _wavelengths("saturated", r, seen.row)
    where = f"{wavelengths[0]:g} and {wavelengths[-1]:g} nm" if wavelengths else "?"
    what = f"{len(wavelengths)} readings between {where} are above absorbance {r.settings.absorbance_limit:g} and were not used"
    if severity is Severity.INFO:
        return f"{what}; little of the signal of {', '.join(seen.names())} is lost"
    return f"{what}: {', '.join(seen.names())} rest on the readings that are left. Dilute or use a shorter cell"


def _offset(seen: _Seen, severity: Severity) -> str:
    r = seen.resolution
    if "offset" in r.background:
        value = r.background_value[seen.row, r.background.index("offset")]
        cause = "wrong blank, dirty or mismatched cell, or turbidity"
        return f"offset of {value:.3f} absorbance: {cause}. It was taken out; clean and measure again"
    return (
        "the solution absorbs where none of the components does, and no background term is fitted: results may be "
        f"{'noticeably ' if severity >= Severity.WARNING else ''}too high. Clean the cell, check the blank, or fit an offset"
    )


def _scatter(seen: _Seen, _: Severity) -> str:
    r = seen.resolution
    value = r.background_value[seen.row, r.background.index("scatter")]
    where = f"{r.wavelength_nm[0]:g} nm"
    return f"scatter of {value:.3f} absorbance at {where}: the sample is turbid. Filter or centrifuge and measure again"


def _negative(seen: _Seen, _: Severity) -> str:
    listed = seen.each(lambda j: f"{seen.of(seen.resolution.unconstrained, j)} with u = {seen.of(seen.resolution.u, j)}")
    return f"estimate below zero by more than chance allows ({listed}): wrong blank, wrong record, or an absorber not in the model"


def _unmodelled(seen: _Seen, severity: Severity) -> str:
    r, i = seen.resolution, seen.row
    reasons = []
    if r.chi_square[i] > r.chi_square_limit[i]:
        reasons.append(f"chi-square {r.chi_square[i]:.0f} over its limit {r.chi_square_limit[i]:.0f}")
    if r.structure[i] > r.structure_limit[i]:
        reasons.append(f"smooth residual of {r.structure[i] * 1e3:.1f} mAU over its limit {r.structure_limit[i] * 1e3:.1f} mAU")
    what = f"the components do not explain the spectrum ({', '.join(reasons)})"
    if severity is Severity.INFO:
        return f"{what}; the bias it could cause is small for {', '.join(seen.names())}"
    return (
        f"{what}: an absorber that is not in the model, or a changed spectrum, may bias {', '.join(seen.names())}. "
        "Look at the residual; add the absorber, leave its region out, or separate"
    )


def _collinear(seen: _Seen, severity: Severity) -> str:
    r, limits = seen.resolution, seen.resolution.settings.limits
    limit = limits.collinear_refused if severity is Severity.REFUSAL else limits.collinear_flagged

    def one(j: int) -> str:
        share = r.selectivity[seen.row, j]
        others = [k for k in np.argsort(r.correlation[seen.row, j]) if k != j and r.correlation[seen.row, j, k] < -0.8]
        like = f", like {', '.join(r.names[k] for k in others)}" if others else ""
        return f"{share:.4f} of its signal is its own (limit {1 / limit:.4f}){like}"

    verb = "cannot be told apart from the rest" if severity is Severity.REFUSAL else "can hardly be told apart from the rest"
    return f"{seen.each(one)}: {verb}. Leave one out, report them as a sum, or use other wavelengths"


def _linear(seen: _Seen, severity: Severity) -> str:
    r = seen.resolution

    def one(j: int) -> str:
        linear_to = r.components[j].linear_to or np.inf
        return f"{r.fitted_per_cm[seen.row, j] / linear_to:.2f} times the range in which Beer's law was shown"

    verdict = "far outside, not reported" if severity is Severity.REFUSAL else "outside the standards' range"
    return f"{seen.each(one)}: {verdict}. Dilute or use a shorter cell"


def _not_covered(seen: _Seen, severity: Severity) -> str:
    note = seen.resolution.notes.get("range-not-covered")
    if note and not (severity is Severity.REFUSAL and len(seen.places) < len(seen.resolution.components)):
        return note
    return f"{', '.join(seen.names())} absorb nowhere in the wavelengths used and cannot be determined from them"


def _too_few(seen: _Seen, severity: Severity) -> str:
    r, i = seen.resolution, seen.row
    unknowns = len(r.components) + len(r.background)
    if severity is Severity.REFUSAL:
        return (
            f"{r.points[i]:.0f} readings can be used for {unknowns} unknowns ({len(r.components)} components, "
            f"{len(r.background)} background terms). Measure more wavelengths, fit fewer terms, or dilute saturated samples"
        )
    if r.degrees_of_freedom[i] == 0:
        return f"{r.points[i]:.0f} readings for {unknowns} unknowns: nothing is left over to check the fit with"
    return seen.resolution.notes.get("too-few-points", "few readings")


def _conditions(seen: _Seen, _: Severity) -> str:
    return (
        seen.resolution.notes.get("conditions-differ", "conditions differ")
        + ". Absorptivities change with solvent, pH and temperature"
    )


def _below(seen: _Seen, _: Severity) -> str:
    r = seen.resolution
    return "not detected: " + seen.each(
        lambda j: f"{seen.of(r.unconstrained, j)} is below the decision limit {seen.of(r.decision_limit, j)}"
    )


def _target(seen: _Seen, _: Severity) -> str:
    r = seen.resolution

    def one(j: int) -> str:
        estimate = r.unconstrained[seen.row, j]
        return f"{100 * r.u[seen.row, j] / estimate:.2g} %" if estimate > 0 else "no positive estimate"

    return f"relative standard uncertainty above the target of {100 * (r.settings.target_relative_u or 0):g} %: {seen.each(one)}"


WORDS: Final[dict[FlagCode, Callable[[_Seen, Severity], str]]] = {
    "saturated": _saturated,
    "offset-large": _offset,
    "scatter-large": _scatter,
    "negative-estimate": _negative,
    "unmodelled-absorber": _unmodelled,
    "collinear": _collinear,
    "beyond-linear-range": _linear,
    "range-not-covered": _not_covered,
    "conditions-differ": _conditions,
    "below-decision-limit": _below,
    "target-not-met": _target,
    "too-few-points": _too_few,
}
