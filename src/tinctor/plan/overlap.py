"""Can these components be told apart, and how well at best?

Net analyte signal (Lorber, Anal. Chem. 58 (1986) 1167): the part of a component's spectrum that is orthogonal to all else that
is fitted. Its length per unit of concentration is the sensitivity, its share of the whole spectrum's length the selectivity, and
1 / selectivity^2 the variance inflation. These three belong to the spectra alone, with equal weights; uncertainties and the
verdict come from the resolver, with the weights of the planned sample.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from itertools import combinations
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.plan.groups import Group, groups_of
from tinctor.plan.sample import PlannedSample
from tinctor.plan.verdict import Verdict, verdict_of
from tinctor.resolve.design import orthonormal_factors
from tinctor.resolve.settings import BACKGROUND_TERMS

__all__ = ["LeftOut", "Overlap", "Pair", "columns_of", "net_analyte_signal", "overlap", "scaled_condition"]

#: Sets of components gone through when looking for the smallest that cannot be told apart.
LARGEST_ENUMERATED: Final = 12


def net_analyte_signal(X: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return sensitivity and selectivity of each column of X (m, q): length of the part orthogonal to all the other columns,
    and its share of the column's length; 0 for a column that the others make up.

    Examples
    --------
    >>> sensitivity, selectivity = net_analyte_signal(np.array([[3.0, 0.0], [4.0, 1.0]]))
    >>> sensitivity.round(6), selectivity.round(6)
    (array([3. , 0.6]), array([0.6, 0.6]))
    """
    length = np.sqrt(np.einsum("ij,ij->j", X, X))
    _, Rinv, independent = orthonormal_factors(X)
    spread = np.sqrt(np.einsum("jr,jr->j", Rinv, Rinv))
    sensitivity = np.divide(1.0, spread, out=np.zeros_like(length), where=independent & (spread > 0))
    for k in np.flatnonzero(~independent & (length > 0)):
        unit = X / np.where(length > 0, length, 1.0)
        kept = np.flatnonzero(independent)
        share = np.linalg.lstsq(unit[:, kept], unit[:, k], rcond=None)[0]
        sensitivity[kept[np.abs(share) > 1e-6]] = 0.0  # what a dependent column is made of cannot be told from it
    return sensitivity, np.divide(sensitivity, length, out=np.zeros_like(length), where=length > 0)


def scaled_condition(X: FloatArray) -> float:
    """Return the ratio of the largest to the smallest singular value of the columns of X (m, q) at unit length; infinite where one
    of them is made up by the others.

    Examples
    --------
    >>> round(scaled_condition(np.array([[3.0, 0.0], [4.0, 1.0]])), 6), scaled_condition(np.ones((3, 2)))
    (3.0, inf)
    """
    if not orthonormal_factors(X)[2].all():
        return float("inf")
    sizes = np.linalg.svd(X / np.sqrt(np.einsum("ij,ij->j", X, X)), compute_uv=False)
    return float(sizes[0] / sizes[-1])


@dataclass(frozen=True, slots=True)
class Pair:
    """Two components and the linear background alone: cosine, and the smaller of the selectivities they would have."""

    places: tuple[int, int]
    cosine: float
    selectivity: float


@dataclass(frozen=True, slots=True, eq=False)
class LeftOut:
    """What the rest would be like without one component: verdicts, and relative standard uncertainties (NaN at zero)."""

    place: int
    others: tuple[int, ...]
    relative_u: FloatArray
    verdicts: tuple[Verdict, ...]


@dataclass(frozen=True, eq=False)
class Overlap:
    """Answer for a planned sample with p components.

    Attributes
    ----------
    sample
        What was asked about; `sample.expected` holds the resolver's forecast.
    similarity : array (p, p)
        Cosines of the absorptivity spectra over the wavelengths read.
    condition_number
        Of all fitted columns at unit length; infinite where one is made up by the others.
    sensitivity : array (p,)
        Length of the net analyte signal per unit (mol/L or g/L) in the original sample: absorbance.
    selectivity, variance_inflation : arrays (p,)
        Infinite inflation where the selectivity is 0.
    price : dict of background term to array (p,)
        Factor on the expected standard uncertainty of a term that is not fitted, were it added.
    paid : dict of background term to array (p,)
        The same factor for each term that is fitted, against leaving it out.
    verdicts : p of them
    pairs
        Every pair by itself, least selective first.
    """

    sample: PlannedSample
    similarity: FloatArray
    condition_number: float
    sensitivity: FloatArray
    selectivity: FloatArray
    variance_inflation: FloatArray
    price: dict[str, FloatArray]
    paid: dict[str, FloatArray]
    verdicts: tuple[Verdict, ...]
    pairs: tuple[Pair, ...]

    @property
    def relative_u(self) -> FloatArray:
        """Expected relative standard uncertainties (p,); NaN where none of the component is planned."""
        u, c = self.sample.expected.u[0], self.sample.concentration
        return np.asarray(np.divide(u, c, out=np.full_like(u, np.nan), where=c > 0))

    @cached_property
    def groups(self) -> tuple[Group, ...]:
        """Sets of components that can only be reported together."""
        return groups_of(self.sample, self.verdicts)

    @cached_property
    def left_out(self) -> tuple[LeftOut, ...]:
        """Each component left out in turn; empty where all are separable, or where there are only two."""
        p = len(self.sample.components)
        if p < 3 or all(v.word == "separable" for v in self.verdicts):
            return ()
        return tuple(_without(self.sample, k) for k in range(p))

    @cached_property
    def conflicts(self) -> tuple[tuple[int, ...], ...]:
        """Smallest sets of components that cannot be told apart, whatever their uncertainty."""
        return _conflicts(self.sample) if any(v.word == "inseparable" for v in self.verdicts) else ()


def overlap(sample: PlannedSample) -> Overlap:
    """Return whether the components of a planned sample can be told apart, and how well.

    Parameters
    ----------
    sample
        From `planned_sample`.

    Examples
    --------
    >>> from tinctor.component import Component
    >>> from tinctor.plan.sample import planned_sample
    >>> w = np.arange(400.0, 601.0)
    >>> red, blue = (Component(n, w, np.exp(-0.5 * ((w - at) / 30.0) ** 2)) for n, at in (("red", 490.0), ("blue", 520.0)))
    >>> answer = overlap(planned_sample([red, blue], {"red": 0.5, "blue": 0.5}))
    >>> [verdict.word for verdict in answer.verdicts], answer.selectivity.round(2)
    (['separable', 'separable'], array([0.58, 0.58]))
    """
    p = len(sample.components)
    X = columns_of(sample)
    sensitivity, selectivity = net_analyte_signal(X)
    with np.errstate(divide="ignore"):
        inflation = 1.0 / selectivity[:p] ** 2
    return Overlap(
        sample=sample,
        similarity=_cosines(sample.design.X[:, :p]),
        condition_number=scaled_condition(X),
        sensitivity=sensitivity[:p] / float(sample.cell.factor[0]),
        selectivity=selectivity[:p],
        variance_inflation=inflation,
        price={term: _factor(sample, term, added=True) for term in BACKGROUND_TERMS if term not in sample.settings.background},
        paid={term: _factor(sample, term, added=False) for term in sample.settings.background},
        verdicts=tuple(verdict_of(sample, k) for k in range(p)),
        pairs=_pairs(sample),
    )


def columns_of(sample: PlannedSample) -> FloatArray:
    """Return all that is fitted, (m, q): components, background, and with a shift its column at the planned concentrations."""
    design = sample.design
    return np.column_stack([design.X, design.slope @ sample.in_cell]) if design.shift else design.X


def _cosines(E: FloatArray) -> FloatArray:
    length = np.sqrt((E**2).sum(axis=0))
    unit = E / np.where(length > 0, length, 1.0)
    return np.clip(unit.T @ unit, -1.0, 1.0)


def _factor(sample: PlannedSample, term: str, *, added: bool) -> FloatArray:
    """u with a background term over u without it, (p,); infinite where the term leaves too few readings or is not told apart."""
    before = sample.settings.background
    other = sample.with_background((*before, term) if added else [t for t in before if t != term])
    with_it, without = (other, sample) if added else (sample, other)
    if with_it.design.asked > with_it.wavelength_nm.size:
        return np.full(len(sample.components), np.inf)
    both = with_it.expected.determined[0] & without.expected.determined[0]
    u, base = with_it.expected.u[0], without.expected.u[0]
    return np.asarray(np.divide(u, base, out=np.full(both.shape, np.inf), where=both))


def _pairs(sample: PlannedSample) -> tuple[Pair, ...]:
    """Every pair with the background, least selective first; ties by place."""
    design, p = sample.design, len(sample.components)
    cosines = _cosines(design.X[:, :p])
    Q = orthonormal_factors(design.X[:, p:])[0] if design.X.shape[1] > p else np.zeros((len(design.X), 0))
    E = design.X[:, :p]
    rest = E - Q @ (Q.T @ E)
    rest -= Q @ (Q.T @ rest)
    own = (rest**2).sum(axis=0) / np.maximum((E**2).sum(axis=0), np.finfo(float).tiny)
    remaining = _cosines(rest)
    pairs = [
        Pair((a, b), float(cosines[a, b]), float(np.sqrt(max(1 - remaining[a, b] ** 2, 0.0) * min(own[a], own[b]))))
        for a, b in combinations(range(p), 2)
    ]
    return tuple(sorted(pairs, key=lambda pair: (round(pair.selectivity, 12), pair.places)))


def _without(sample: PlannedSample, k: int) -> LeftOut:
    others = tuple(j for j in range(len(sample.components)) if j != k)
    rest = sample.of(others)
    if not rest.concentration.any():
        return LeftOut(k, others, np.full(len(others), np.nan), ())
    u, c = rest.expected.u[0], rest.concentration
    relative = np.divide(u, c, out=np.full_like(u, np.nan), where=c > 0)
    return LeftOut(k, others, relative, tuple(verdict_of(rest, j) for j in range(len(others))))


def _conflicts(sample: PlannedSample) -> tuple[tuple[int, ...], ...]:
    """Smallest sets, none holding another, in which overlap with one another and the background takes more than the resolver
    allows; a single component is one that the background imitates."""
    p = len(sample.components)
    limit = sample.settings.limits.collinear_refused
    found: list[tuple[int, ...]] = []
    # in the coordinates of the orthonormal basis lengths and angles are the same, and the columns short
    X = sample.design.Q.T @ sample.design.X
    for size in range(1, p + 1 if p <= LARGEST_ENUMERATED else 4):
        for places in combinations(range(p), size):
            if any(set(known) <= set(places) for known in found):
                continue
            columns = np.column_stack([X[:, list(places)], X[:, p:]])
            if (net_analyte_signal(columns)[1][:size] * limit < 1.0).any():
                found.append(places)
    return tuple(found)
