"""Where to measure when only a few wavelengths can be read: filters, LEDs, a flow cell with fixed wavelengths.

A reading counts with the weight the resolver gives it at the planned absorbance: noise, transmittance, library shape, and the
wavelength error as if independent from reading to reading, which holds for filters and LEDs. The criterion is made from
the covariance of the fit under these weights, without library scale, path and dilution: no choice of wavelengths changes them.
The uncertainties reported are the full ones of the resolver.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray, quoted
from tinctor.axis import covered, resample
from tinctor.errors import Fault, InputError
from tinctor.plan.overlap import columns_of, scaled_condition
from tinctor.plan.sample import PlannedSample
from tinctor.plan.search import Found, best_set
from tinctor.plan.selection import CRITERIA, Criterion, Problem, criterion_value, objectives
from tinctor.resolve.design import orthonormal_factors, shape_variance

__all__ = ["Choice", "ChosenWavelengths", "WavelengthsAsked", "choose_wavelengths"]

#: The table goes from as few wavelengths as there are unknowns to this many more.
TABLE_EXTRA: Final = 6
#: Nodes for each line of the table but the one asked for.
TABLE_NODES: Final = 20
#: A larger error of the wavelength axis is a defect and no uncertainty.
LARGEST_ERROR_NM: Final = 20.0
#: More candidates than this are refused: no monochromator has so fine an axis.
MOST_CANDIDATES: Final = 4000


@dataclass(frozen=True, slots=True)
class WavelengthsAsked:
    """What is wanted of a choice.

    Attributes
    ----------
    count
        How many wavelengths; None for as many as there are unknowns.
    candidates_nm
        Where one can measure; all planned readings where it is not given.
    minimum_spacing_nm
        Smallest distance between two of them.
    absorbance_window
        Planned absorbance of a reading from low to high; None for anything up to the absorbance limit.
    criterion
        "worst-relative-u", "determinant" or "trace".
    wavelength_error_nm
        The axis may be off by this much either way: the worst case counts as a bias. 0 for none.
    """

    count: int | None = None
    candidates_nm: Sequence[float] | None = None
    minimum_spacing_nm: float = 0.0
    absorbance_window: tuple[float, float] | None = None
    criterion: Criterion = "worst-relative-u"
    wavelength_error_nm: float = 0.0

    def __post_init__(self) -> None:
        faults = []
        if self.criterion not in CRITERIA:
            faults.append(Fault("criterion", ".criterion", f"expected one of {', '.join(CRITERIA)}, found {self.criterion!r}"))
        for name in ("minimum_spacing_nm", "wavelength_error_nm"):
            value = getattr(self, name)
            if not (np.isfinite(value) and value >= 0):
                faults.append(
                    Fault(name.replace("_", "-"), f".{name}", f"{name} must be a finite number of at least 0, found {value!r}")
                )
        if self.wavelength_error_nm > LARGEST_ERROR_NM:
            words = f"wavelength_error_nm must be at most {LARGEST_ERROR_NM:g} nm, found {self.wavelength_error_nm:g}"
            faults.append(Fault("wavelength-error-nm", ".wavelength_error_nm", words, "such an instrument is to be mended first"))
        window = self.absorbance_window
        if window is not None and not (np.isfinite(window).all() and window[0] < window[1]):
            faults.append(Fault("absorbance-window", ".absorbance_window", f"expected [low, high], found {list(window)}"))
        if faults:
            raise InputError(faults)


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """A set of wavelengths and what it gives.

    Attributes
    ----------
    sample
        The planned sample read at the wavelengths; `sample.expected` holds the full forecast.
    criterion
        Relative standard uncertainty by the criterion.
    efficiency
        Criterion of all candidates used together over that of this choice: 0 to 1, and above 1 where a wavelength error makes
        candidates on flanks do more harm than good.
    relative_bias : array (p,)
        Largest relative error that the wavelength error asked about causes; 0 without one. It is in the criterion and not in the
        forecast.
    exact
        Whether it was proved that no allowed set of this size is better by the criterion.
    proven_within
        No allowed set has a criterion smaller than this one's by a larger share.
    """

    sample: PlannedSample
    criterion: float
    efficiency: float
    relative_bias: FloatArray
    exact: bool
    proven_within: float

    @property
    def wavelength_nm(self) -> FloatArray:
        """The wavelengths, ascending."""
        return self.sample.wavelength_nm

    @property
    def condition_number(self) -> float:
        """Of all fitted columns at unit length."""
        return scaled_condition(columns_of(self.sample))


@dataclass(frozen=True, slots=True, eq=False)
class ChosenWavelengths:
    """The choice, the same for other counts, and all candidates together.

    Attributes
    ----------
    choice
        Of the count asked for.
    table
        From as few as there are unknowns to six more, as far as candidates and spacing allow.
    everything
        All candidates used.
    nodes
        Parts of the search tree looked at for the choice.
    """

    choice: Choice
    table: tuple[Choice, ...]
    everything: Choice
    nodes: int


def choose_wavelengths(sample: PlannedSample, asked: WavelengthsAsked | None = None) -> ChosenWavelengths:
    """Return the best wavelengths for a planned sample.

    Parameters
    ----------
    sample
        From `planned_sample`: its wavelengths are the candidates unless others are given.
    asked
        How many, from which, how far apart, by which criterion.

    Raises
    ------
    InputError
        When there are fewer wavelengths than unknowns, when no set fits spacing and window, or when a component cannot be told
        from the others at the candidates.

    Examples
    --------
    >>> from tinctor.component import Component
    >>> from tinctor.plan.sample import planned_sample
    >>> w = np.arange(400.0, 601.0, 5.0)
    >>> dyes = [Component(n, w, np.exp(-0.5 * ((w - at) / 20.0) ** 2)) for n, at in (("a", 450.0), ("b", 530.0))]
    >>> found = choose_wavelengths(planned_sample(dyes, {"a": 0.5, "b": 0.5}), WavelengthsAsked(count=3))
    >>> found.choice.wavelength_nm, found.choice.exact
    (array([450., 530., 600.]), True)
    """
    asked = asked or WavelengthsAsked()
    pool = _pool(sample, asked)
    _check_told_apart(pool)
    problem = _problem(pool, asked)
    count = _count(pool, asked)
    found = best_set(problem, count)
    if found is None:
        raise _does_not_fit(problem, count, asked)
    everything = _choice_of_all(pool, problem)
    choice = _choice(pool, problem, found, everything.criterion)
    table = [choice if k == count else _row(pool, problem, k, everything.criterion) for k in _counts(pool)]
    return ChosenWavelengths(choice, tuple(row for row in table if row is not None), everything, found.nodes)


def _pool(sample: PlannedSample, asked: WavelengthsAsked) -> PlannedSample:
    """The sample at all candidates: listed or planned, with an absorbance that may be read."""
    pool = sample if asked.candidates_nm is None else sample.at(_listed(sample, asked.candidates_nm))
    low, high = asked.absorbance_window or (-np.inf, sample.settings.absorbance_limit)
    A = pool.absorbance
    usable = (low <= A) & (min(high, sample.settings.absorbance_limit) >= A)
    needed = pool.design.asked
    if A.size < needed:
        raise InputError.single(
            "no-candidates",
            ".candidates_nm" if asked.candidates_nm is not None else ".wavelength_range_nm",
            f"{needed} wavelengths are needed for {len(pool.components)} components and the background, found {A.size} candidates",
            "name more candidates, leave a component out, or take a blank and fit no background",
        )
    if usable.sum() < needed:
        window = f"at or below {high:g}" if asked.absorbance_window is None else f"from {low:g} to {high:g}"
        raise InputError.single(
            "no-candidates",
            ".absorbance_window" if asked.absorbance_window else ".absorbance_limit",
            f"only {usable.sum()} of {A.size} candidates have a planned absorbance {window}, and {needed} are needed "
            f"(planned: {A.min():.3g} to {A.max():.3g})",
            "change the dilution, the cell or the window; `tinctor dilution` finds a dilution that fits",
        )
    _check_seen(pool, usable)
    if usable.sum() > MOST_CANDIDATES:
        raise InputError.single(
            "too-many-candidates",
            ".step_nm",
            f"at most {MOST_CANDIDATES} candidate wavelengths can be searched, found {usable.sum()}",
            "give step_nm, a narrower range, or candidates_nm",
        )
    return pool if usable.all() else pool.at(pool.wavelength_nm[usable])


def _check_told_apart(pool: PlannedSample) -> None:
    """What the resolver would refuse with all candidates together no choice of them can mend."""
    if "slope" in pool.design.terms and "offset" not in pool.design.terms:
        raise InputError.single(
            "slope-alone",
            ".background",
            "a slope without an offset is another model on each set of wavelengths: its zero lies in their middle",
            "fit offset and slope, or neither",
        )
    limits, expected = pool.settings.limits, pool.expected
    alike = [
        name
        for k, name in enumerate(pool.names)
        if expected.points[0] >= pool.design.asked and expected.selectivity[0, k] * limits.collinear_refused < 1.0
    ]
    if alike:
        raise InputError.single(
            "inseparable",
            ".components",
            f"{quoted(alike)} cannot be told from the other components and background terms with all {pool.wavelength_nm.size} "
            "candidates together",
            "`tinctor overlap` says which can only be reported together; leave one out or drop the background term",
        )


def _check_seen(pool: PlannedSample, usable: np.ndarray) -> None:
    """No wavelength is good for a component that stays below the noise at all of them."""
    parts, noise = pool.absorbance_by_component[usable], float(pool.settings.noise.reading_u(0.0))
    highest = parts.max(axis=0)
    unseen = [n for n, top, c in zip(pool.names, highest, pool.concentration, strict=True) if c > 0 and top < noise]
    if unseen:
        raise InputError.single(
            "below-noise",
            ".concentrations",
            f"{quoted(unseen)} has a planned absorbance below the noise of a reading, {noise:.2g}, at every candidate",
            "plan a higher concentration, use less dilution or a longer cell, or add candidates where it absorbs",
        )


def _listed(sample: PlannedSample, candidates_nm: Sequence[float]) -> FloatArray:
    candidates = np.unique(np.asarray(candidates_nm, dtype=np.float64))
    faults = [
        Fault(
            "range-not-covered",
            ".candidates_nm",
            f"{c.name!r} is known from {c.wavelength_nm[0]:g} to {c.wavelength_nm[-1]:g} nm, found {outside[0]:g} nm",
            "leave such candidates out: nothing is extrapolated",
        )
        for c in sample.components
        if (outside := candidates[~covered(candidates, c.wavelength_nm)]).size
    ]
    if faults:
        raise InputError(faults)
    return candidates


def _problem(pool: PlannedSample, asked: WavelengthsAsked) -> Problem:
    p = len(pool.components)
    absent = [name for name, c in zip(pool.names, pool.concentration, strict=True) if c == 0]
    if absent and asked.criterion != "determinant":
        raise InputError.single(
            "zero-concentration",
            ".concentrations",
            f"the criterion {asked.criterion} is a relative uncertainty, and nothing is planned of {quoted(absent)}",
            "plan the lowest concentration that matters, or use the criterion determinant",
        )
    design, noise = pool.design, pool.settings.noise
    A, slope = pool.absorbance, design.slope @ pool.in_cell
    # each reading by itself: a choice is sparse, and what neighbours share in a dense axis does not concern it
    shape = np.column_stack([shape_variance(c, pool.wavelength_nm, dense=False) for c in pool.components])
    variance = noise.reading_variance(A) + (noise.wavelength_nm * slope) ** 2 + shape @ pool.in_cell**2
    weight = 1.0 / np.sqrt(variance)
    Q, Rinv, independent = orthonormal_factors(columns_of(pool) * weight[:, None])
    assert independent.all(), "what is dependent was refused"
    s = pool.in_cell
    scale = np.where(s > 0, s, 1.0)
    shifted = None if asked.wavelength_error_nm == 0 else _shifted(pool, asked.wavelength_error_nm) * weight[:, None]
    return Problem(pool.wavelength_nm, Q, Rinv[:p] / scale[:, None], asked.criterion, asked.minimum_spacing_nm, shifted)


def _shifted(pool: PlannedSample, error_nm: float) -> FloatArray:
    """Change of the planned absorbance when the axis is off either way, (m, 2); nothing is extrapolated at the ends of a record."""
    changes = []
    for sign in (-1.0, 1.0):
        moved = np.zeros(pool.wavelength_nm.size)
        for c, s in zip(pool.components, pool.in_cell, strict=True):
            inside = np.clip(pool.wavelength_nm + sign * error_nm, c.wavelength_nm[0], c.wavelength_nm[-1])
            moved += s * resample(c.wavelength_nm, c.absorptivity, inside)
        changes.append(moved - pool.absorbance)
    return np.column_stack(changes)


def _count(pool: PlannedSample, asked: WavelengthsAsked) -> int:
    needed = pool.design.asked
    if asked.count is None:
        return needed
    if asked.count < needed:
        p = len(pool.components)
        raise InputError.single(
            "count-too-small",
            ".count",
            f"{p} components and {needed - p} background term(s) need at least {needed} wavelengths, found {asked.count}",
            "ask for more, leave a component out, or take a blank and fit no background",
        )
    if asked.count > pool.wavelength_nm.size:
        raise InputError.single(
            "count-too-large", ".count", f"there are {pool.wavelength_nm.size} candidates, found a count of {asked.count}"
        )
    return asked.count


def _does_not_fit(problem: Problem, count: int, asked: WavelengthsAsked) -> InputError:
    most, at = 0, -np.inf
    for w in problem.wavelength_nm:  # from the left, each as early as it may stand
        if w - at >= asked.minimum_spacing_nm * (1 - 1e-9):
            most, at = most + 1, w
    return InputError.single(
        "spacing-too-wide",
        ".minimum_spacing_nm",
        f"{count} wavelengths at least {asked.minimum_spacing_nm:g} nm apart do not fit between "
        f"{problem.wavelength_nm[0]:g} and {problem.wavelength_nm[-1]:g} nm: {most} would",
        "ask for fewer wavelengths, a smaller spacing or a wider range",
    )


def _counts(pool: PlannedSample) -> range:
    needed = pool.design.asked
    return range(needed, min(needed + TABLE_EXTRA, pool.wavelength_nm.size) + 1)


def _row(pool: PlannedSample, problem: Problem, k: int, best: float) -> Choice | None:
    found = best_set(problem, k, TABLE_NODES)
    return None if found is None else _choice(pool, problem, found, best)


def _choice(pool: PlannedSample, problem: Problem, found: Found, best: float) -> Choice:
    value, bound = (criterion_value(problem, objective) for objective in (found.objective, found.bound))
    read_there = pool.at(pool.wavelength_nm[found.chosen])
    bias = _relative_bias(problem, found.chosen)
    return Choice(read_there, value, best / value, bias, found.exact, max(0.0, 1.0 - bound / value))


def _choice_of_all(pool: PlannedSample, problem: Problem) -> Choice:
    """All candidates, whatever their spacing. With a wavelength error a choice can be better than all of them, and its efficiency
    above 1: candidates on flanks do more harm than good."""
    whole = np.arange(problem.n)
    value = criterion_value(problem, float(objectives(problem, whole[None])[0]))
    return Choice(pool, value, 1.0, _relative_bias(problem, whole), True, 0.0)


def _relative_bias(problem: Problem, chosen: np.ndarray) -> FloatArray:
    if problem.shifted is None:
        return np.zeros(len(problem.T))
    Z = problem.Z[chosen]
    bias = problem.T @ np.linalg.solve(Z.T @ Z, Z.T @ problem.shifted[chosen])
    return np.asarray(np.abs(bias).max(axis=1))
