"""PLS regression by scikit-learn, for every number of components at once; the only module that imports it.

What is known of the library is kept out of the way: `scale=False` (its default divides every wavelength by its spread),
references in two dimensions and in units of order one, means taken here, coefficients made from rotations and loadings and not
from attributes whose meaning has changed between versions. A model of fewer components is part of a larger one.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import InputError

__all__ = ["Latent", "train"]

#: A component whose spectra scores hold less than this share of the total sum of squares cannot be told from rounding.
EXHAUSTED = 1e-13


@dataclass(frozen=True, slots=True, eq=False)
class Latent:
    """A trained model with h components at most, for q references, on m readings.

    Attributes
    ----------
    mean_x : array (m,)
    mean_y : array (q,)
    rotations : array (m, h)
        Centred spectra times these are the scores.
    loadings : array (m, h)
        Of the spectra.
    y_loadings : array (q, h)
        Of the references, in their own units.
    scores : array (n, h)
        Of the training spectra.
    """

    mean_x: FloatArray
    mean_y: FloatArray
    rotations: FloatArray
    loadings: FloatArray
    y_loadings: FloatArray
    scores: FloatArray

    @property
    def components(self) -> int:
        """Largest number of components."""
        return int(self.rotations.shape[1])

    def coefficients(self, components: int) -> FloatArray:
        """Return the regression vectors of so many components, (m, q)."""
        return np.asarray(self.rotations[:, :components] @ self.y_loadings[:, :components].T)

    def predict(self, X: FloatArray, components: int) -> FloatArray:
        """Return the values of spectra, (n, q)."""
        return np.asarray(self.mean_y + (X - self.mean_x) @ self.coefficients(components))

    def predict_all(self, X: FloatArray) -> FloatArray:
        """Return the values for 0 to `components` components, (components + 1, n, q); 0 is the mean of the references."""
        steps = ((X - self.mean_x) @ self.rotations)[:, :, None] * self.y_loadings.T
        path = np.concatenate([np.zeros((len(X), 1, self.mean_y.size)), np.cumsum(steps, axis=1)], axis=1)
        return np.asarray(self.mean_y + path.transpose(1, 0, 2))


def train(X: FloatArray, Y: FloatArray, components: int) -> Latent:
    """Return the PLS model of references on spectra.

    Parameters
    ----------
    X : array (n, m)
        Spectra after preprocessing, samples in rows.
    Y : array (n, q)
        References.
    components
        At most n - 1 (the means take one) and m.

    Raises
    ------
    InputError
        For more components than the spectra hold, or a reference that does not vary.

    Examples
    --------
    >>> X = np.array([[1.0, 0.0], [0.0, 1.0], [1.0, 1.0], [2.0, 1.0]])
    >>> train(X, X @ np.array([[2.0], [3.0]]), 2).coefficients(2).round(9).ravel()
    array([2., 3.])
    """
    _check(X, Y, components)
    # a second of loading: only where a model is trained
    from sklearn.cross_decomposition import PLSRegression

    mean_x, mean_y = X.mean(axis=0), Y.mean(axis=0)
    centred_x, centred_y = X - mean_x, Y - mean_y
    unit_x, unit_y = np.sqrt((centred_x**2).mean()), centred_y.std(axis=0)
    model = PLSRegression(n_components=components, scale=False, tol=1e-12, max_iter=5000)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        try:
            model.fit(centred_x / unit_x, centred_y / unit_y)
        except (UserWarning, ValueError, np.linalg.LinAlgError) as error:
            raise _exhausted(components, str(error)) from error
    scores = centred_x @ (model.x_rotations_ / unit_x)
    held = (scores**2).sum(axis=0)
    if not np.isfinite(scores).all() or held.min() <= EXHAUSTED * held.max():
        raise _exhausted(components, "a component holds nothing but rounding")
    return Latent(
        mean_x=mean_x,
        mean_y=mean_y,
        rotations=model.x_rotations_ / unit_x,
        loadings=model.x_loadings_ * unit_x,
        y_loadings=model.y_loadings_ * unit_y[:, None],
        scores=scores,
    )


def _check(X: FloatArray, Y: FloatArray, components: int) -> None:
    n, m = X.shape
    most = min(n - 1, m)
    if not 1 <= components <= most:
        raise InputError.single(
            "too-many-components",
            ".max_components",
            f"{n} training spectra of {m} readings allow from 1 to {most} components, found {components}",
            "ask for fewer components, or prepare more mixtures",
        )
    flat = np.flatnonzero(np.ptp(Y, axis=0) == 0)
    if flat.size:
        raise InputError.single(
            "constant-reference",
            ".references",
            f"reference {int(flat[0])} has the same value in all training spectra: nothing to learn",
        )
    if not np.ptp(X, axis=0).any():
        raise InputError.single("constant-spectra", ".spectra", "all training spectra are the same")


def _exhausted(components: int, why: str) -> InputError:
    return InputError.single(
        "rank",
        ".max_components",
        f"the training spectra do not hold {components} components: {why}",
        "ask for fewer components: there are no more independent changes in these spectra",
    )
