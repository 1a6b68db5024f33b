"""From spectra of known mixtures to a model: one analyte at a time, or all jointly."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.pls.limits import q_limit, t2_limit_new, t2_limit_training, t_quantile
from tinctor.pls.model import Limits, Model
from tinctor.pls.preprocess import Step, fit_steps
from tinctor.pls.train import Latent, train

__all__ = ["fit_model"]

#: Residual eigenvalues below this share of their sum are rounding.
ROUNDING: Final = 1e-12


def fit_model(
    X: FloatArray,
    wavelength_nm: FloatArray,
    Y: FloatArray,
    names: Sequence[str],
    unit: str,
    steps: Sequence[Step],
    components: int,
    *,
    preparations: int | None = None,
    reference_u: FloatArray | None = None,
    coverage: float = 0.95,
) -> Model:
    """Return the model of references on spectra.

    Parameters
    ----------
    X : array (n, m)
        Spectra before any step, on an ascending axis.
    wavelength_nm : array (m,)
    Y : array (n, q)
        References of the analytes `names`, in `unit`.
    steps, components
    preparations
        Different preparations among the spectra; all of them when left out.
    reference_u : array (q,)
        Standard uncertainties of the references.
    coverage
        Of intervals and limits.

    Raises
    ------
    InputError
        For steps that cannot be done, or more components than the spectra hold.

    Examples
    --------
    >>> w = np.array([400.0, 500.0, 600.0])
    >>> X = np.array([[0.1, 0.2, 0.1], [0.2, 0.5, 0.2], [0.3, 0.5, 0.4], [0.4, 0.9, 0.4]])
    >>> model = fit_model(X, w, X @ np.array([[1.0], [2.0], [0.5]]), ["a"], "g/L", [], 3)
    >>> model.predict(X[:1]).value.round(6)
    array([[0.55]])
    """
    fitted, Z = fit_steps(X, wavelength_nm, steps)
    latent = train(Z, Y, components)
    n, count = len(X), preparations or len(X)
    degrees = max(count - components - 1, 1)
    # replicates of one preparation share its errors: they do not add degrees of freedom
    mse = ((latent.predict(Z, components) - Y) ** 2).mean(axis=0) * count / degrees
    coefficients = latent.coefficients(components)
    return Model(
        names=tuple(names),
        unit=unit,
        wavelength_nm=wavelength_nm,
        steps=tuple(fitted),
        components=components,
        intercept=latent.mean_y - latent.mean_x @ coefficients,
        coefficients=coefficients,
        mean_x=latent.mean_x,
        rotations=latent.rotations[:, :components],
        loadings=latent.loadings[:, :components],
        score_variance=latent.scores.var(axis=0, ddof=1),
        mse=mse,
        degrees_of_freedom=degrees,
        t_factor=t_quantile(0.5 + coverage / 2, degrees),
        reference_u=np.zeros(Y.shape[1]) if reference_u is None else reference_u,
        limits=_limits(Z, Y, latent, n, count, coverage),
    )


def _limits(Z: FloatArray, Y: FloatArray, latent: Latent, n: int, preparations: int, coverage: float) -> Limits:
    h = latent.components
    residual = (Z - latent.mean_x) - latent.scores @ latent.loadings.T
    # mean and components were fitted to these residuals: those of new spectra are larger
    sizes = np.linalg.svd(residual, compute_uv=False) ** 2 / max(n - 1 - h, 1) * (1 + 1 / n)
    each = 1 - (1 - coverage) / 2  # two limits for one spectrum: together they hold at the coverage (Bonferroni)
    t2 = (latent.scores**2 / latent.scores.var(axis=0, ddof=1)).sum(axis=1)
    return Limits(
        samples=n,
        preparations=preparations,
        coverage=coverage,
        t2=t2_limit_training(coverage, n, h) if n > h else np.inf,
        t2_new=t2_limit_new(each, n, h) if n > h else np.inf,
        q=q_limit(each, sizes[sizes > ROUNDING * max(float(sizes.sum()), 1e-300)]),
        leverage=float((1.0 / n + t2 / (n - 1)).max()),
        reference=np.column_stack([Y.min(axis=0), Y.max(axis=0)]),
    )
