"""The answer on overlap in words."""

from __future__ import annotations

from typing import Final

import numpy as np

from tinctor.arrays import quoted
from tinctor.plan.groups import Group
from tinctor.plan.overlap import Overlap
from tinctor.plan.verdict import percent

__all__ = ["NO_SUM", "group_words", "summary"]

#: A sum whose error in other proportions stays below this is a sum.
SUM_HOLDS: Final = 0.02
#: ... and above this it is none.
NO_SUM: Final = 0.2


def summary(answer: Overlap) -> str:
    """Return the answer in one or two sentences: yes or no where there is a target, and which component is in the way."""
    names, target = answer.sample.names, answer.sample.settings.target_relative_u
    verdicts = list(zip(names, answer.verdicts, strict=True))
    alike = [n for n, v in verdicts if v.word == "inseparable" and v.overlapping]
    weak = [n for n, v in verdicts if v.word == "inseparable" and not v.overlapping]
    barely = [n for n, v in verdicts if v.word == "marginal"]
    if target is not None:
        missed = [n for n, v in verdicts if v.target_met is False]
        # of a component of which nothing is planned no target can be missed, and it can still be in the way
        absent = [n for n, v in verdicts if v.target_met is None and v.word == "inseparable"]
        said = "No:" if missed or absent else f"Yes: every component is expected within {100 * target:.3g} %."
        said += f" {quoted(missed)} would miss {100 * target:.3g} %." if missed else ""
        said += f" {quoted(absent)} could not be told from the others." if absent else ""
    elif alike or weak:
        parts = [f"{quoted(alike)} cannot be told apart as planned"] if alike else []
        parts += [f"{quoted(weak)} cannot be determined as planned, for reasons other than overlap"] if weak else []
        said = f"No: {'; '.join(parts)}."
    elif barely:
        said = f"Barely: {quoted(barely)} can be determined with little to spare."
    else:
        said = f"Yes: all {len(names)} components can be told apart."
    return " ".join(filter(None, [said, _in_the_way(answer)]))


def _in_the_way(answer: Overlap) -> str:
    """Which single component makes it impossible, if leaving one out makes the rest possible."""
    names = answer.sample.names
    with_target = answer.sample.settings.target_relative_u is not None
    alone = [
        names[part.place]
        for part in answer.left_out
        if part.verdicts and all((v.target_met is not False) if with_target else v.word == "separable" for v in part.verdicts)
    ]
    if not answer.left_out or not any(v.overlapping for v in answer.verdicts):
        return ""
    if not alone:
        return "Leaving out one component would not do."
    return (
        f"Without {alone[0]!r} the rest would do." if len(alone) == 1 else f"Without any one of {quoted(alone)} the rest would do."
    )


def group_words(answer: Overlap, group: Group) -> str:
    """Return what can be reported of a group."""
    members = quoted([answer.sample.names[k] for k in group.places])
    if not np.isfinite(group.relative_u):
        return f"{members} cannot be told apart, and have no sum: leave one out, or separate them first"
    words = f"{members} can only be reported as a sum, expected within {percent(group.relative_u)} % in the planned proportions"
    error = group.proportion_error
    if error <= SUM_HOLDS:
        return f"{words}, and within {percent(error)} % of that in any other"
    if error <= NO_SUM:
        return f"{words}; in others it is off by up to {percent(error)} %"
    only = f"their sum holds in the planned proportions only (off by up to {percent(error)} % in others)"
    return f"{members} cannot be told apart, and {only}"
