"""Which dilution and cell to measure at, from the glassware there is.

A dilution in a cell serves the sample when its highest absorbance lies in the window and every component planned is above its
quantification limit (and meets the target, where there is one). Where none serves all, two together can: readings above the window
are then left out, as resolving does above the absorbance limit, and each of the two serves the components whose own highest
absorbance is not above the window.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray, quoted
from tinctor.errors import Fault, InputError
from tinctor.plan.glassware import FLASKS_ML, PIPETTES_ML, Dilution, dilutions
from tinctor.plan.sample import PlannedSample
from tinctor.resolve.forecast import Forecast, forecast
from tinctor.resolve.uncertainty import Cell

__all__ = [
    "AbsorbanceWindow",
    "DilutionAnswer",
    "DilutionAsked",
    "DilutionChoice",
    "choose_dilution",
    "on_fibre_g_per_l",
]

AbsorbanceWindow = tuple[float, float]

#: Choices whose worst relative uncertainty is within this share of the best are as good (by judgement): fewer steps decide.
AS_GOOD: Final = 0.2
#: Choices looked at when two are sought.
MOST_FOR_PAIRS: Final = 200
#: Readings of all choices held at a time.
BLOCK_READINGS: Final = 4_000_000


@dataclass(frozen=True, slots=True)
class DilutionAsked:
    """What there is and what is wanted.

    Attributes
    ----------
    cells_cm
        Path lengths of the cells there are.
    absorbance_window
        The highest absorbance is to lie between low and high.
    pipettes_ml, flasks_ml
        Volumes of the glassware there is.
    steps
        Most steps of a dilution, 1 or 2.
    cell_relative_u
        Relative standard uncertainty of a path length.
    """

    cells_cm: Sequence[float] = (1.0,)
    absorbance_window: AbsorbanceWindow = (0.1, 1.0)
    pipettes_ml: Sequence[float] = PIPETTES_ML
    flasks_ml: Sequence[float] = FLASKS_ML
    steps: int = 2
    cell_relative_u: float = 0.0

    def __post_init__(self) -> None:
        low, high = self.absorbance_window
        faults = [
            Fault("cell", f".cells_cm[{k}]", f"a path length must be a finite number above 0 cm, found {b!r}")
            for k, b in enumerate(self.cells_cm)
            if not (np.isfinite(b) and b > 0)
        ]
        if not self.cells_cm:
            faults.append(Fault("cell", ".cells_cm", "expected at least one path length, found none"))
        if not (np.isfinite(low) and np.isfinite(high) and 0 <= low < high):
            words = f"expected [low, high] with 0 <= low < high, found {[low, high]}"
            faults.append(Fault("absorbance-window", ".absorbance_window", words))
        if not (np.isfinite(self.cell_relative_u) and 0 <= self.cell_relative_u < 1):
            faults.append(Fault("cell", ".cell_relative_u", f"expected a share from 0 to 1, found {self.cell_relative_u!r}"))
        if faults:
            raise InputError(faults)


@dataclass(frozen=True, slots=True, eq=False)
class DilutionChoice:
    """One dilution in one cell.

    Attributes
    ----------
    dilution, path_length_cm
    highest_absorbance, highest_nm
        Of the whole sample, and where.
    relative_u : array (p,)
        Expected relative standard uncertainties; NaN where none of a component is planned, infinite where it is not determined.
    quantified : bool array (p,)
        Which components are above their quantification limit and meet the target.
    beyond_linear : bool array (p,)
        Which would be above the range in which Beer's law was shown.
    overshoots : bool array (p,)
        Which would have their own highest absorbance above the window, and be read on their flanks alone.
    in_window
        Whether the highest absorbance lies in the window.
    readings_left_out
        Readings above the window.
    """

    dilution: Dilution
    path_length_cm: float
    highest_absorbance: float
    highest_nm: float
    relative_u: FloatArray
    quantified: np.ndarray
    beyond_linear: np.ndarray
    overshoots: np.ndarray
    in_window: bool
    readings_left_out: int

    @property
    def serves_all(self) -> bool:
        """Whether this one choice serves the whole sample."""
        return self.in_window and bool(self.serves.all())

    @property
    def serves(self) -> np.ndarray:
        """Which components this choice gives a figure for, bool (p,)."""
        return np.asarray(self.quantified & ~self.beyond_linear & ~self.overshoots)

    @property
    def worst_relative_u(self) -> float:
        """Largest relative standard uncertainty of the components served; infinite where none is."""
        served = self.relative_u[self.serves & ~np.isnan(self.relative_u)]
        return float(served.max()) if served.size else np.inf


@dataclass(frozen=True, slots=True, eq=False)
class DilutionAnswer:
    """Choices that serve the whole sample, best first; or the two that do together.

    Attributes
    ----------
    choices
        Best first; empty where none serves all.
    pair
        Two choices that serve all components together, where no single one does.
    """

    choices: tuple[DilutionChoice, ...]
    pair: tuple[DilutionChoice, DilutionChoice] | None


def choose_dilution(sample: PlannedSample, asked: DilutionAsked | None = None) -> DilutionAnswer:
    """Return dilutions and cells that serve a planned sample, best first.

    Parameters
    ----------
    sample
        From `planned_sample`, with the concentrations of the undiluted sample; its own path and dilution do not count.
    asked
        Cells, glassware and window.

    Raises
    ------
    InputError
        When no concentration is planned, or nothing that there is comes near.

    Examples
    --------
    >>> from tinctor.component import Component
    >>> from tinctor.plan.sample import planned_sample
    >>> w = np.arange(400.0, 601.0, 5.0)
    >>> dyes = [Component(n, w, np.exp(-0.5 * ((w - at) / 20.0) ** 2)) for n, at in (("a", 450.0), ("b", 530.0))]
    >>> answer = choose_dilution(planned_sample(dyes, {"a": 60.0, "b": 40.0}), DilutionAsked(steps=1))
    >>> answer.choices[0].dilution.factor, round(answer.choices[0].highest_absorbance, 2)
    (100.0, 0.6)
    """
    asked = asked or DilutionAsked()
    if sample.assumed:
        raise InputError.single(
            "missing-concentration",
            ".concentrations",
            "a dilution is chosen for planned concentrations, and none is given",
            "plan one for each component, in the undiluted sample; or give percent on weight of fibre and the liquor ratio",
        )
    ways = dilutions(asked.pipettes_ml, asked.flasks_ml, asked.steps)
    choices = _all_choices(sample, asked, ways)
    serving = sorted((c for c in choices if c.serves_all), key=lambda c: c.worst_relative_u)
    pair = None if serving else _two(choices, asked.absorbance_window[1])
    if not serving and pair is None:
        raise _out_of_reach(sample, asked, max(choices, key=lambda c: (int(c.serves.sum()), c.in_window, -c.worst_relative_u)))
    return DilutionAnswer(tuple(_ranked(serving, asked.absorbance_window[1])), pair)


def on_fibre_g_per_l(percent: float, liquor_ratio_l_per_kg: float) -> float:
    """Return the concentration in a dye bath, in g/L, of so many per cent of dye on the weight of fibre.

    Parameters
    ----------
    percent
        g of dye for 100 g of fibre.
    liquor_ratio_l_per_kg
        Litres of bath for a kilogram of fibre.

    Examples
    --------
    >>> on_fibre_g_per_l(2.0, 10.0)
    2.0
    """
    return percent / 100.0 * 1000.0 / liquor_ratio_l_per_kg


def _all_choices(sample: PlannedSample, asked: DilutionAsked, ways: Sequence[Dilution]) -> list[DilutionChoice]:
    """Every dilution in every cell, judged in blocks."""
    pairs = [(way, path) for path in sorted({float(b) for b in asked.cells_cm}) for way in ways]
    size = max(1, BLOCK_READINGS // sample.wavelength_nm.size)
    return [choice for start in range(0, len(pairs), size) for choice in _choices(sample, asked, pairs[start : start + size])]


def _choices(sample: PlannedSample, asked: DilutionAsked, pairs: Sequence[tuple[Dilution, float]]) -> list[DilutionChoice]:
    path, factor = np.array([b for _, b in pairs]), np.array([way.factor for way, _ in pairs])
    E = sample.design.X[:, : len(sample.components)]
    in_cell = sample.concentration * (path / factor)[:, None]
    absorbance = in_cell @ E.T
    low, high = asked.absorbance_window
    limit = min(high, sample.settings.absorbance_limit)
    settings = replace(sample.settings, absorbance_limit=limit)
    cell = Cell(factor / path, np.full(path.size, asked.cell_relative_u), np.array([way.relative_u for way, _ in pairs]))
    expected = forecast(sample.design, sample.components, in_cell, cell, settings, sample.noise_inflation)
    relative, quantified = _judged(sample, expected)
    linear_to = np.array([np.inf if c.linear_to is None else c.linear_to for c in sample.components])
    top, highest = absorbance.argmax(axis=1), E.max(axis=0)
    return [
        DilutionChoice(
            dilution=way,
            path_length_cm=float(path[k]),
            highest_absorbance=float(absorbance[k, top[k]]),
            highest_nm=float(sample.wavelength_nm[top[k]]),
            relative_u=relative[k],
            quantified=quantified[k],
            beyond_linear=in_cell[k] > linear_to * (1 + 1e-9),
            overshoots=in_cell[k] * highest > limit,
            in_window=bool(low <= absorbance[k, top[k]] <= limit),
            readings_left_out=int((absorbance[k] > limit).sum()),
        )
        for k, (way, _) in enumerate(pairs)
    ]


def _judged(sample: PlannedSample, expected: Forecast) -> tuple[FloatArray, np.ndarray]:
    """Relative uncertainties, and which components are quantified; one of which nothing is planned is not asked about."""
    c, limits = sample.concentration, sample.settings.limits
    with np.errstate(divide="ignore", invalid="ignore"):
        relative = np.where(c > 0, np.where(expected.determined, expected.u / c, np.inf), np.nan)
    told_apart = expected.determined & (expected.selectivity * limits.collinear_refused >= 1.0)
    target = sample.settings.target_relative_u
    enough = (c >= expected.quantification_limit) & (True if target is None else relative <= target)
    return relative, told_apart & (enough | (c == 0))


def _ranked(serving: list[DilutionChoice], high: float) -> list[DilutionChoice]:
    """As good as the best first: of these fewer steps, then an absorbance in the upper half of the window (what leaves no trace in
    the noise, a blank or a smudge, weighs less there) but for its last tenth (a plan is not exact), then less volume; then the rest
    by uncertainty."""
    if not serving:
        return []
    as_good = serving[0].worst_relative_u * (1 + AS_GOOD)

    def merit(c: DilutionChoice) -> tuple[float, ...]:
        if c.worst_relative_u > as_good:
            return (1, c.worst_relative_u)
        return (0, len(c.dilution.steps), not _well_placed(c, high), c.dilution.flask_total_ml, c.worst_relative_u)

    return sorted(serving, key=merit)


def _two(choices: list[DilutionChoice], high: float) -> tuple[DilutionChoice, DilutionChoice] | None:
    """The two that serve every component together, each component read where it is better: of those as good as the best, fewer
    steps, then better placed absorbances, then less volume; the more dilute first."""
    useful = sorted((c for c in choices if c.serves.any()), key=lambda c: (not c.in_window, c.worst_relative_u))
    kept = [c for served in _patterns(useful) for c in useful if c.serves.tolist() == served][:MOST_FOR_PAIRS]
    pairs = []
    for one, two in combinations(kept, 2):
        apart = (one.serves & ~two.serves).any() and (two.serves & ~one.serves).any()
        if apart and (one.serves | two.serves).all():
            relative = np.fmin(np.where(one.serves, one.relative_u, np.inf), np.where(two.serves, two.relative_u, np.inf))
            pairs.append((float(np.nanmax(relative)), one, two))
    if not pairs:
        return None
    as_good = min(u for u, _, _ in pairs) * (1 + AS_GOOD)

    def merit(pair: tuple[float, DilutionChoice, DilutionChoice]) -> tuple[float, ...]:
        both = pair[1:]
        misplaced = sum(c.in_window and not _well_placed(c, high) for c in both)
        volume = sum(c.dilution.flask_total_ml for c in both)
        return (sum(len(c.dilution.steps) for c in both), sum(not c.in_window for c in both), misplaced, volume, pair[0])

    _, one, two = min((pair for pair in pairs if pair[0] <= as_good), key=merit)
    return (one, two) if one.highest_absorbance <= two.highest_absorbance else (two, one)


def _patterns(choices: list[DilutionChoice]) -> list[list[bool]]:
    """The different sets of components that choices serve, those that serve most first."""
    found = {tuple(c.serves.tolist()) for c in choices}
    return [list(pattern) for pattern in sorted(found, key=lambda pattern: (-sum(pattern), pattern))]


def _well_placed(choice: DilutionChoice, high: float) -> bool:
    return high / 2 <= choice.highest_absorbance <= 0.9 * high


def _misses(sample: PlannedSample, nearest: DilutionChoice, missed: list[str]) -> InputError:
    """The error where dilutions fit the window, and components are not determined well enough in any."""
    target = sample.settings.target_relative_u
    places = [k for k, name in enumerate(sample.names) if name in missed]
    expected = ", ".join(f"{sample.names[k]} {100 * nearest.relative_u[k]:.2g} %" for k in places)
    wanted = "the quantification limit" if target is None else f"the target of {100 * target:.2g} % or the quantification limit"
    return InputError.single(
        "no-dilution-serves",
        ".concentrations" if target is None else ".target_relative_u",
        f"{nearest.dilution.factor:.4g} times in {nearest.path_length_cm:g} cm fits the window, but {quoted(missed)} misses "
        f"{wanted} or its linear range there (expected {expected}), and no other dilution, nor two together, serves all",
        "`tinctor overlap` names the largest part of each uncertainty: no dilution mends the scale of a library record",
    )


def _out_of_reach(sample: PlannedSample, asked: DilutionAsked, nearest: DilutionChoice) -> InputError:
    """The error for glassware and cells that do not serve, with what would."""
    served = [n for n, ok in zip(sample.names, nearest.serves, strict=True) if ok]
    missed = [n for n, ok in zip(sample.names, nearest.serves, strict=True) if not ok]
    low, high = asked.absorbance_window
    if nearest.in_window:
        return _misses(sample, nearest, missed)
    factor = nearest.dilution.factor * nearest.highest_absorbance / nearest.path_length_cm
    found = f"the nearest, {nearest.dilution.factor:.4g} times in {nearest.path_length_cm:g} cm, "
    found += f"reaches absorbance {nearest.highest_absorbance:.3g}"
    found += (f", serves {quoted(served)}" if served else "") + (f" and misses {quoted(missed)}" if missed else "")
    return InputError.single(
        "no-dilution-fits",
        ".flasks_ml",
        f"no dilution that can be made brings the highest absorbance between {low:g} and {high:g} with every component "
        f"quantified, nor do two together; {found}",
        f"in a 1 cm cell the window asks for a factor from {factor / high:.3g} to {factor / max(low, 1e-9):.3g}: add glassware, "
        "cells or steps, widen the window, or see `tinctor overlap` for what the spectra allow",
    )
