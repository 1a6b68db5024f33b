"""How far a line holds: tests of a set of standards, and the largest set that passes.

Lack of fit against replicate preparations (Draper and Smith, Applied Regression Analysis, chapter 1), and the test of the
quadratic term of Mandel (The Statistical Analysis of Experimental Data, 1964), as ISO 8466-1 uses it; both from memory.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.standards.distributions import f_tail, t_quantile
from tinctor.standards.line import linear_model

__all__ = [
    "ROUNDING",
    "LinearityTest",
    "Outlier",
    "find_outliers",
    "lack_of_fit",
    "linearity_test",
    "quadratic_term",
    "tested_ranges",
]

#: Degrees of freedom that replicate preparations must give before lack of fit is tested against them.
LEAST_PURE_ERROR = 2
#: Amounts closer than this share of the highest are one level: a curve through them would be one through a point.
SAME_LEVEL = 1e-4
#: Levels below this share of the highest say little about how straight a line is.
LEAST_SHARE = 0.1
#: Share of the significance level that goes to the highest level alone: a sudden bend hides from the quadratic term.
HIGHEST_LEVEL_SHARE = 0.2
#: Departures of this size are those of the last decimals: data without scatter would fail every test on them.
ROUNDING = 1e-9


@dataclass(frozen=True, slots=True)
class LinearityTest:
    """One test of one set of standards.

    Attributes
    ----------
    method
        "lack-of-fit", "quadratic-term", "highest-level" (passed either, and its highest level is off the curve of the others:
        a sudden bend hides from the quadratic term), or "none" where the standards are too few.
    amount
        Highest concentration times path of the set.
    points, f, degrees_of_freedom, probability
        Preparations in the set; F, its two degrees of freedom and the probability of such an F or more when the line holds.
    departure_relative
        Largest distance of a level's mean from the line, as a share of the line there; levels below a tenth of the highest
        are left out, where any offset is a large share.
    passed
        Whether the line is accepted.
    """

    method: Literal["lack-of-fit", "quadratic-term", "highest-level", "none"]
    amount: float
    points: int
    f: float | None
    degrees_of_freedom: tuple[int, int] | None
    probability: float | None
    departure_relative: float
    passed: bool


@dataclass(frozen=True, slots=True)
class Outlier:
    """A preparation off the curve of the others: place in the series, studentised residual with its degrees of freedom, limit."""

    row: int
    studentised: float
    limit: float
    leverage: float
    degrees_of_freedom: int


def quadratic_term(x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool) -> tuple[float, int, int]:
    """Return F and its degrees of freedom for what a quadratic term explains beyond the line.

    Examples
    --------
    >>> x = np.array([1.0, 2.0, 3.0, 4.0, 5.0])
    >>> f, between, within = quadratic_term(x, np.array([1.0, 2.1, 2.9, 4.1, 4.9]), np.ones(5), through_zero=False)
    >>> round(f, 3), between, within
    (0.172, 1, 2)
    """
    powers = (1, 2) if through_zero else (0, 1, 2)
    X = x[:, None] ** np.array(powers, dtype=np.float64) / x.max() ** np.array(powers, dtype=np.float64)
    line, curve = linear_model(X[:, :-1], y, weight), linear_model(X, y, weight)
    return _f(line.squares - curve.squares, 1, curve.squares, curve.degrees_of_freedom), 1, curve.degrees_of_freedom


def lack_of_fit(x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool) -> tuple[float, int, int]:
    """Return F and its degrees of freedom for the level means about the line against the scatter within levels."""
    line = linear_model(x[:, None] if through_zero else np.column_stack([np.ones_like(x), x]), y, weight)
    level = _levels(x)
    pure = 0.0
    for k in range(level.max() + 1):
        at = level == k
        mean = np.average(y[at], weights=weight[at])
        pure += float((weight[at] * (y[at] - mean) ** 2).sum())
    count = int(level.max()) + 1
    between, within = count - (1 if through_zero else 2), x.size - count
    return _f(line.squares - pure, between, pure, within), between, within


def linearity_test(
    x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool, significance: float, allowed: float = 0.0
) -> LinearityTest:
    """Return the test of one set of standards: lack of fit where replicate preparations allow it, quadratic term otherwise."""
    parameters = 1 if through_zero else 2
    level = _levels(x)
    levels, departure = int(level.max()) + 1, _departure(x, y, weight, level, through_zero=through_zero)
    method: Literal["lack-of-fit", "quadratic-term"]
    if levels > parameters and x.size - levels >= LEAST_PURE_ERROR:
        method = "lack-of-fit"
        f, between, within = lack_of_fit(x, y, weight, through_zero=through_zero)
    elif levels > parameters and x.size > parameters + 1:
        method = "quadratic-term"
        f, between, within = quadratic_term(x, y, weight, through_zero=through_zero)
    else:
        return LinearityTest("none", float(x.max()), x.size, None, None, None, departure, False)
    probability = float(f_tail(f, between, within))
    passed = probability >= significance or departure <= max(allowed, ROUNDING)
    return LinearityTest(method, float(x.max()), x.size, f, (between, within), probability, departure, passed)


def tested_ranges(
    x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool, significance: float, allowed: float
) -> tuple[LinearityTest, ...]:
    """Return the tests from the whole series downwards, a level less each time, to the first that passes.

    The last one is the answer: the largest set that passes, or the smallest that can be tested and does not.
    """
    tests: list[LinearityTest] = []
    for top in np.unique(x)[::-1]:
        rows = x <= top
        test = _one_range(x[rows], y[rows], weight[rows], through_zero=through_zero, significance=significance, allowed=allowed)
        if test.method == "none" and tests:
            break
        tests.append(test)
        if test.passed or test.method == "none":
            break
    return tuple(tests)


def _one_range(
    x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool, significance: float, allowed: float
) -> LinearityTest:
    """Test one set. Where its highest level is one preparation, the level of significance is shared with a test of that."""
    alone = int((x == x.max()).sum()) == 1
    share = 1.0 - HIGHEST_LEVEL_SHARE if alone else 1.0
    test = linearity_test(x, y, weight, through_zero=through_zero, significance=share * significance, allowed=allowed)
    if not (alone and test.passed and test.departure_relative > max(allowed, ROUNDING)):
        return test
    top = next((o for o in _studentised(x, y, weight, through_zero=through_zero) if x[o.row] == x.max()), None)
    if top is None:
        return test
    probability = float(f_tail(top.studentised**2, 1, top.degrees_of_freedom))
    if probability >= HIGHEST_LEVEL_SHARE * significance:
        return test
    freedom = (1, top.degrees_of_freedom)
    return replace(
        test, method="highest-level", f=top.studentised**2, degrees_of_freedom=freedom, probability=probability, passed=False
    )


def find_outliers(
    x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool, significance: float
) -> tuple[Outlier, ...]:
    """Return the preparations off the curve of the others, worst first.

    Externally studentised residuals from a quadratic (so that curvature is not taken for a bad standard), from the line
    where there are too few points, against the Bonferroni limit of all of them.
    """
    found = _studentised(x, y, weight, through_zero=through_zero)
    if not found:
        return ()
    limit = float(t_quantile(1.0 - significance / (2.0 * x.size), float(found[0].degrees_of_freedom)))
    return tuple(replace(o, limit=limit) for o in found if abs(o.studentised) > limit)


def _studentised(x: FloatArray, y: FloatArray, weight: FloatArray, *, through_zero: bool) -> list[Outlier]:
    """Externally studentised residuals of all points that have one, the largest first; the limit is left open."""
    powers = [1, 2] if through_zero else [0, 1, 2]
    if x.size < len(powers) + 2 or _levels(x).max() + 1 <= len(powers):
        powers = powers[:-1]
    k = len(powers)
    if x.size < k + 2:
        return []
    model = linear_model((x[:, None] / x.max()) ** np.array(powers, dtype=np.float64), y, weight)
    if model.squares <= ROUNDING**2 * float(weight @ y**2):
        return []
    squares = weight * model.residual**2
    free = np.maximum(1.0 - model.leverage, 1e-9)
    degrees = x.size - k - 1
    without = np.maximum(model.squares - squares / free, 0.0) / degrees
    studentised = model.residual * np.sqrt(weight) / np.sqrt(np.maximum(without, 1e-300) * free)
    # a leverage of 1 leaves no residual to judge
    rows = [int(j) for j in np.argsort(-np.abs(studentised)) if model.leverage[j] < 1 - 1e-9]
    return [Outlier(j, float(studentised[j]), np.inf, float(model.leverage[j]), degrees) for j in rows]


def _f(between_squares: float, between: int, within_squares: float, within: int) -> float:
    if within_squares <= 0:
        return 0.0 if between_squares <= 0 else float("inf")
    return max(between_squares, 0.0) / between / (within_squares / within)


def _levels(x: FloatArray) -> np.ndarray:
    """Number of the level of each point, from 0; amounts equal to 1e-4 of the highest are one level."""
    order = np.argsort(x, kind="stable")
    step = np.diff(x[order]) > SAME_LEVEL * max(float(np.abs(x).max()), 1e-300)
    level = np.zeros(x.size, dtype=int)
    level[order] = np.concatenate([[0], np.cumsum(step)])
    return level


def _departure(x: FloatArray, y: FloatArray, weight: FloatArray, level: np.ndarray, *, through_zero: bool) -> float:
    if x.size < 2 or level.max() == 0:
        return 0.0
    X = x[:, None] if through_zero else np.column_stack([np.ones_like(x), x])
    line = X @ linear_model(X, y, weight).coefficients
    departures = [
        abs(float(np.average(y[at] - line[at], weights=weight[at]))) / float(np.abs(line[at]).mean())
        for at in (level == k for k in range(level.max() + 1))
        if x[at][0] >= LEAST_SHARE * x.max()
    ]
    return max(departures, default=0.0)
