"""Components that can only be reported together.

Inseparable components whose estimates can be exchanged for one another form a group. Its sum is what resolving gives when one
component with their mean spectrum, in the planned proportions, stands for all of them. How far the sum goes wrong when the
proportions are others is the response of that component to each member alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.axis import resample
from tinctor.component import Component
from tinctor.plan.sample import PlannedSample
from tinctor.plan.verdict import Verdict, partners
from tinctor.resolve.design import shape_variance

__all__ = ["Group", "groups_of"]


@dataclass(frozen=True, slots=True, eq=False)
class Group:
    """Members by place, and what their sum is worth.

    Attributes
    ----------
    places
        Components of the group.
    relative_u
        Expected relative standard uncertainty of their sum; NaN where none of them is planned or they count differently.
    response : array (members,)
        What the sum shows per unit of each member, were it there alone: 1 for each if the sum holds in all proportions.
    """

    places: tuple[int, ...]
    relative_u: float
    response: FloatArray

    @property
    def proportion_error(self) -> float:
        """Largest relative error of the sum when only one of the members is there."""
        return float(np.abs(self.response - 1.0).max()) if self.response.size else np.nan


def groups_of(sample: PlannedSample, verdicts: Sequence[Verdict]) -> tuple[Group, ...]:
    """Return the groups among the components that overlap makes inseparable, in order of their first member."""
    inseparable = [k for k, verdict in enumerate(verdicts) if verdict.word == "inseparable" and verdict.overlapping]
    names = sample.names
    linked = {k: {names.index(n) for n in partners(sample, k) if n in names} & set(inseparable) for k in inseparable}
    groups: list[set[int]] = []
    for k in inseparable:
        joined = {k, *linked[k]}
        touching = [g for g in groups if g & joined]
        groups = [g for g in groups if not g & joined] + [joined.union(*touching)]
    return tuple(_group(sample, tuple(sorted(g))) for g in sorted(groups, key=min) if len(g) > 1)


def _group(sample: PlannedSample, places: tuple[int, ...]) -> Group:
    members = [sample.components[k] for k in places]
    planned = sample.concentration[list(places)]
    if len({c.basis for c in members}) > 1 or not planned.any():
        return Group(places, np.nan, np.zeros(0))
    shares = planned / planned.sum()
    merged = _merged(sample, places, shares)
    others = [k for k in range(len(sample.components)) if k not in places]
    together = replace(
        sample,
        components=(merged, *(sample.components[k] for k in others)),
        concentration=np.array([planned.sum(), *sample.concentration[others]]),
    )
    if not together.expected.determined[0, 0]:
        return Group(places, np.nan, np.zeros(0))
    weight = _weights(together)[:, None]
    design = together.design
    response = np.linalg.lstsq(design.X * weight, sample.design.X[:, list(places)] * weight, rcond=None)[0][0]
    return Group(places, float(together.expected.u[0, 0] / planned.sum()), response)


def _weights(sample: PlannedSample) -> FloatArray:
    """Square roots of the weights that resolving gives the readings."""
    slope, noise = sample.design.slope @ sample.in_cell, sample.settings.noise
    variance = noise.reading_variance(sample.absorbance) + (noise.wavelength_nm * slope) ** 2
    return np.asarray(1.0 / np.sqrt(variance + sample.design.shape_variance @ sample.in_cell**2))


def _merged(sample: PlannedSample, places: tuple[int, ...], shares: FloatArray) -> Component:
    """One component with the mean spectrum, on all wavelengths at which any of the members is tabulated."""
    members = [sample.components[k] for k in places]
    low, high = max(c.wavelength_nm[0] for c in members), min(c.wavelength_nm[-1] for c in members)
    axis = np.unique(np.concatenate([c.wavelength_nm for c in members]))
    axis = axis[(axis >= low) & (axis <= high)]
    E = np.column_stack([resample(c.wavelength_nm, c.absorptivity, axis) for c in members])
    shape = np.column_stack([shape_variance(c, axis, dense=False) for c in members])
    scale = np.array([c.scale_relative_u or 0.0 for c in members])
    return Component(
        " + ".join(c.name for c in members),
        axis,
        E @ shares,
        basis=members[0].basis,
        absorptivity_u=np.sqrt(shape @ shares**2),
        scale_relative_u=float(np.sqrt(((scale * shares) ** 2).sum())),
    )
