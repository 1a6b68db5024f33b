"""The verdict on one component of a planned sample, with its reason in words.

inseparable   the resolver would refuse it, or would not detect it at the planned concentration, or what overlap amplifies
              (noise, library shape, wavelength) misses the target by itself
marginal      the resolver would flag it, or it lies below its quantification limit, or the target is missed for reasons that
              better separation would not mend (library scale, path, dilution)
separable     otherwise
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from tinctor.arrays import quoted
from tinctor.plan.sample import PlannedSample
from tinctor.resolve.uncertainty import SOURCES

__all__ = ["Verdict", "VerdictWord", "overlap_relative_u", "partners", "percent", "verdict_of"]

VerdictWord = Literal["separable", "marginal", "inseparable"]

#: Sources that overlap amplifies; the others pass through one to one.
AMPLIFIED: Final = ("noise", "library-shape", "wavelength")
#: Correlation of two estimates, in size, from which one is named as what takes the other's signal.
EXCHANGED: Final = 0.8


@dataclass(frozen=True, slots=True)
class Verdict:
    """One word, why, and whether the target is met (`None` where there is no target, or nothing is planned of it)."""

    word: VerdictWord
    reason: str
    target_met: bool | None = None
    overlapping: bool = False


def verdict_of(sample: PlannedSample, k: int) -> Verdict:
    """Return the verdict on component k of a planned sample."""
    expected, limits = sample.expected, sample.settings.limits
    if not sample.design.X[:, k].any():
        return Verdict("inseparable", "it absorbs nowhere at the wavelengths read", _target(sample, k, np.inf))
    left = int(expected.points[0])
    if left < sample.wavelength_nm.size and not expected.determined[0, k]:
        limit = sample.settings.absorbance_limit
        words = f"only {left} of {sample.wavelength_nm.size} readings are at or below absorbance {limit:g}, and do not determine it"
        return Verdict("inseparable", f"{words}: dilute or use a shorter cell", _target(sample, k, np.inf))
    selectivity = float(expected.selectivity[0, k])
    if selectivity * limits.collinear_refused < 1.0 or not expected.determined[0, k]:
        return Verdict("inseparable", _taken(sample, k, selectivity), _target(sample, k, np.inf), overlapping=True)
    c, u = float(sample.concentration[k]), float(expected.u[0, k])
    flagged = selectivity * limits.collinear_flagged < 1.0
    if c == 0:
        word: VerdictWord = "marginal" if flagged else "separable"
        return Verdict(
            word, _taken(sample, k, selectivity) if flagged else "none of it is planned; see its limits", overlapping=flagged
        )
    relative, met = u / c, _target(sample, k, u / c)
    if c < expected.decision_limit[0, k]:
        words = f"the planned concentration is {c / expected.decision_limit[0, k]:.2g} of its decision limit"
        return Verdict("inseparable", f"{words}: {_main_source(sample, k)}", met, overlapping=_is_overlap(sample, k))
    if met is False:
        return _target_missed(sample, k, relative)
    if flagged:
        return Verdict("marginal", _taken(sample, k, selectivity), met, overlapping=True)
    if c < expected.quantification_limit[0, k]:
        words = f"the planned concentration is below its quantification limit: expected {percent(relative)} %"
        return Verdict("marginal", f"{words}, {_main_source(sample, k)}", met, overlapping=_is_overlap(sample, k))
    return Verdict("separable", f"expected {percent(relative)} %, {_main_source(sample, k)}", met)


def overlap_relative_u(sample: PlannedSample, k: int) -> float:
    """Return the relative standard uncertainty from the sources that overlap amplifies."""
    budget = sample.expected.budget[0, k]
    amplified = [budget[SOURCES.index(source)] for source in AMPLIFIED]
    return float(np.sqrt(np.sum(np.square(amplified))) / sample.concentration[k])


def partners(sample: PlannedSample, k: int) -> list[str]:
    """Return the components and background terms for which component k can be exchanged, the closest first."""
    design = sample.design
    unit = design.X / np.maximum(np.sqrt((design.X**2).sum(axis=0)), np.finfo(float).tiny)
    # a trace on the diagonal: exact copies have a correlation of -1 too
    inverse = np.linalg.inv(unit.T @ unit + 1e-12 * np.eye(unit.shape[1]))
    size = np.sqrt(np.diag(inverse))
    correlation = np.abs(inverse[k] / size[k] / size)
    correlation[k] = 0.0
    names = [*sample.names, *design.terms]
    order = np.argsort(-correlation, kind="stable")
    return [names[j] for j in order if correlation[j] >= EXCHANGED]


def percent(share: float) -> str:
    """Return a share as per cent to two figures, in plain digits.

    Examples
    --------
    >>> percent(0.0123), percent(1.04), percent(0.999)
    ('1.2', '100', '100')
    """
    return f"{float(f'{100 * share:.2g}'):g}"


def _target(sample: PlannedSample, k: int, relative: float) -> bool | None:
    """Whether the target is met; nothing is asked of a component of which nothing is planned."""
    target = sample.settings.target_relative_u
    return None if target is None or sample.concentration[k] == 0 else bool(relative <= target)


def _target_missed(sample: PlannedSample, k: int, relative: float) -> Verdict:
    target = sample.settings.target_relative_u
    assert target is not None
    words = f"expected {percent(relative)} % misses the target of {percent(target)} %: {_main_source(sample, k)}"
    if overlap_relative_u(sample, k) > target:
        return Verdict("inseparable", words, False, overlapping=_is_overlap(sample, k))
    return Verdict("marginal", f"{words}; better separation would not mend it", False)


def _taken(sample: PlannedSample, k: int, selectivity: float) -> str:
    by = partners(sample, k) or [n for n in sample.names if n != sample.names[k]]
    if selectivity * 1e6 < 1.0:
        return f"its spectrum is made up by {quoted(by)}"
    return f"{quoted(by)} take all but {percent(selectivity)} % of its signal"


def _is_overlap(sample: PlannedSample, k: int) -> bool:
    """Whether overlap more than doubles the uncertainty that counts."""
    return float(sample.expected.selectivity[0, k]) < 0.5


def _main_source(sample: PlannedSample, k: int) -> str:
    """The largest part of the budget in words, with what overlap makes of it."""
    budget = sample.expected.budget[0, k]
    largest = int(np.argmax(budget))
    words = f"mostly {SOURCES[largest]}"
    times = 1.0 / float(sample.expected.selectivity[0, k])
    if SOURCES[largest] not in AMPLIFIED or times < 2:
        return words
    by = partners(sample, k)
    beside = f" with {quoted(by)}" if by else ""
    if SOURCES[largest] == "wavelength":  # how much overlap makes of it depends on the flanks: see % per nm
        return f"{words}, through overlap{beside}"
    return f"{words}, {float(f'{times:.2g}'):g} times enlarged by overlap{beside}"
