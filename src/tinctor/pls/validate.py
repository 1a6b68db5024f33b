"""Cross-validation with every step inside the folds, and the number of components it supports.

Replicates of one preparation stay together: a replicate left in would make the model look better than it is (a measured case:
0.22 against a true 0.37). Folds are drawn with a seed and spread over the reference range.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import InputError
from tinctor.pls.preprocess import Step, apply_steps, fit_steps
from tinctor.pls.train import train

__all__ = ["CrossValidation", "Folds", "cross_validate", "folds_of", "haaland_thomas", "one_standard_error"]

#: A fold as training rows and test rows.
Folds = list[tuple[np.ndarray, np.ndarray]]
#: Significance of the F ratio of Haaland and Thomas (Anal. Chem. 60 (1988) 1193).
HAALAND_THOMAS_LEVEL: Final = 0.25


@dataclass(frozen=True, slots=True, eq=False)
class CrossValidation:
    """Errors of spectra that were left out, for 0 to h components.

    Attributes
    ----------
    predicted : array (h + 1, n, q)
        Each spectrum by the model of the folds that did not hold it; 0 components is the mean of the others.
    errors : array (h + 1, n, q)
        Predicted less reference.
    groups : int array (n,)
        Preparation of each spectrum.
    """

    predicted: FloatArray
    errors: FloatArray
    groups: np.ndarray

    @property
    def rmsecv(self) -> FloatArray:
        """Root mean square error, (h + 1, q)."""
        return np.asarray(np.sqrt((self.errors**2).mean(axis=1)))

    @property
    def press(self) -> FloatArray:
        """Sum of squared errors, (h + 1, q)."""
        return np.asarray((self.errors**2).sum(axis=1))

    def mean_square_and_u(self) -> tuple[FloatArray, FloatArray]:
        """Return the mean squared error over preparations and its standard error, both (h + 1, q); replicates count as one."""
        ids = np.unique(self.groups)
        by_group = np.stack([(self.errors[:, self.groups == g] ** 2).mean(axis=1) for g in ids], axis=1)
        return by_group.mean(axis=1), by_group.std(axis=1, ddof=1) / np.sqrt(len(ids))


def folds_of(groups: np.ndarray, reference: FloatArray, folds: int | None, seed: int) -> Folds:
    """Return folds in which a preparation is never on both sides.

    Parameters
    ----------
    groups : int array (n,)
        Preparation of each spectrum.
    reference : array (n,)
        What the folds are spread over.
    folds
        How many; None leaves one preparation out at a time.
    seed
        Of the draw.

    Raises
    ------
    InputError
        For fewer preparations than folds, or fewer than two.

    Examples
    --------
    >>> [test.tolist() for _, test in folds_of(np.array([0, 0, 1, 2]), np.array([1.0, 1.0, 2.0, 3.0]), None, 0)]
    [[0, 1], [2], [3]]
    """
    ids, places = np.unique(groups, return_inverse=True)
    count = len(ids) if folds is None else folds
    if not 2 <= count <= len(ids):
        raise InputError.single(
            "folds",
            ".folds",
            f"{len(ids)} preparations allow from 2 to {len(ids)} folds, found {count}",
            "leave-one-group-out always fits",
        )
    if folds is None:
        fold = np.arange(len(ids))
    else:
        level = np.array([reference[places == k].mean() for k in range(len(ids))])
        order = np.argsort(level, kind="stable")
        rng = np.random.default_rng(seed)
        fold = np.empty(len(ids), dtype=np.intp)
        for start in range(0, len(ids), count):  # one of each run of neighbouring levels to every fold
            run = order[start : start + count]
            fold[run] = rng.permutation(count)[: run.size]
    rows = np.arange(len(groups))
    return [(rows[fold[places] != k], rows[fold[places] == k]) for k in range(count)]


def cross_validate(
    X: FloatArray,
    wavelength_nm: FloatArray,
    Y: FloatArray,
    steps: Sequence[Step],
    components: int,
    folds: Folds,
    groups: np.ndarray,
    progress: Callable[[], None] = lambda: None,
) -> CrossValidation:
    """Return the errors of spectra left out, with every step of preprocessing learned anew in each fold.

    Parameters
    ----------
    X : array (n, m)
        Spectra before any step.
    wavelength_nm : array (m,)
    Y : array (n, q)
        References; their models are joint.
    steps, components
    folds
        From `folds_of`.
    groups : int array (n,)
    progress
        Called after each fold.
    """
    predicted = np.empty((components + 1, *Y.shape))
    for inside, outside in folds:
        fitted, Z = fit_steps(X[inside], wavelength_nm, steps)
        model = train(Z, Y[inside], components)
        predicted[:, outside] = model.predict_all(apply_steps(X[outside], fitted))
        progress()
    return CrossValidation(predicted, predicted - Y, groups)


def one_standard_error(cv: CrossValidation, column: int) -> int:
    """Return the smallest number of components whose mean squared error is within one standard error of the smallest (Breiman et
    al. 1984)."""
    mean, u = cv.mean_square_and_u()
    best = int(np.argmin(mean[1:, column])) + 1
    enough = np.flatnonzero(mean[1:, column] <= mean[best, column] + u[best, column])
    return int(enough[0]) + 1


def haaland_thomas(cv: CrossValidation, column: int, critical: Callable[[int], float]) -> int:
    """Return the smallest number of components whose sum of squared errors is not significantly above the smallest: F = PRESS(h) /
    PRESS(h*) below the critical value for as many degrees of freedom as preparations, on both sides, at a level of 0.25."""
    press = cv.press[1:, column]
    best = int(np.argmin(press))
    limit = critical(len(np.unique(cv.groups)))
    enough = np.flatnonzero(press[: best + 1] / press[best] < limit)
    return int(enough[0]) + 1 if enough.size else best + 1
