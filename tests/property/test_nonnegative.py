"""Exactness of the non-negative solver against scipy.optimize.nnls, an independent implementation (Lawson and Hanson 1974)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import nnls

from tinctor.component import Component
from tinctor.noise import NoiseModel
from tinctor.resolve import nonnegative
from tinctor.resolve.design import build_design
from tinctor.resolve.engine import resolve
from tinctor.resolve.nonnegative import nearest_nonnegative, nonnegative_least_squares
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import SpectrumBatch


def problem(rng: np.random.Generator, k: int, most: int) -> tuple[np.ndarray, np.ndarray]:
    """A random problem, every seventh kind of trouble in turn."""
    m, q = int(rng.integers(1, 14)), int(rng.integers(1, most + 1))
    X = rng.normal(size=(m, q)) if k % 2 else rng.uniform(size=(m, q))
    kind = k % 7
    if kind == 1:
        X[:, -1] = X[:, 0] * rng.uniform(0.1, 3)  # collinear
    elif kind == 2:
        X[:, -1] = X[:, 0] + 1e-7 * rng.normal(size=m)  # nearly
    elif kind == 3:
        X[:, 0] = 0
    elif kind == 4:
        X *= 10.0 ** rng.integers(-20, 20)
    elif kind == 5:
        X *= 10.0 ** rng.integers(-9, 9, size=q)
    b = rng.normal(size=m) * 10.0 ** rng.integers(-15, 6)
    return X, b * (k % 41 != 0)


@pytest.mark.parametrize(("enumerated", "most", "count"), [(6, 6, 5000), (0, 12, 5000)], ids=["all supports", "Lawson-Hanson"])
def test_ten_thousand_random_problems(monkeypatch: pytest.MonkeyPatch, enumerated: int, most: int, count: int) -> None:
    monkeypatch.setattr(nonnegative, "ENUMERATED", enumerated)
    rng = np.random.default_rng(20260301)
    compared = 0
    for k in range(count):
        X, b = problem(rng, k, most)
        size = np.linalg.norm(b) or 1.0
        x, _ = nnls(X, b)
        fit = nonnegative_least_squares(X, b[None])
        assert (fit.coefficients >= 0).all()
        assert fit.residual_norm[0] <= np.linalg.norm(X @ x - b) + 1e-10 * size, (k, X.shape)
        assert fit.optimality[0] < 1e-9, (k, X.shape)
        norms = np.linalg.norm(X, axis=0)
        if k % 7 in (0, 4, 5, 6) and X.shape[0] >= X.shape[1] + 2 and np.linalg.cond(X / norms) < 1e4:
            assert np.abs((fit.coefficients[0] - x) * norms).max() <= 1e-10 * size, (k, X.shape)
            compared += 1
    assert compared > count / 8


def test_one_batch_is_as_good_as_one_at_a_time() -> None:
    rng = np.random.default_rng(1)
    X, a = rng.uniform(size=(30, 4)), rng.normal(size=(500, 30))
    whole = nonnegative_least_squares(X, a).coefficients
    alone = np.vstack([nonnegative_least_squares(X, row[None]).coefficients for row in a])
    assert whole == pytest.approx(alone, rel=1e-12, abs=1e-14)
    assert (whole == 0).any(axis=1).mean() > 0.5


def test_coefficients_of_free_sign_may_be_negative() -> None:
    rng = np.random.default_rng(2)
    X = np.column_stack([rng.uniform(size=(20, 2)), np.ones(20)])
    free = np.array([False, False, True])
    for a in rng.normal(size=(300, 20)) - 0.5:
        split = np.column_stack([X, -X[:, 2]])  # a free coefficient is the difference of two that are not
        x, _ = nnls(split, a)
        fit = nonnegative_least_squares(X, a[None], free=free)
        assert fit.coefficients[0] == pytest.approx([x[0], x[1], x[2] - x[3]], abs=1e-10)


@pytest.mark.parametrize("enumerated", [6, 0])
def test_nearest_in_the_metric_of_a_covariance(monkeypatch: pytest.MonkeyPatch, enumerated: int) -> None:
    monkeypatch.setattr(nonnegative, "ENUMERATED", enumerated)
    rng = np.random.default_rng(3)
    n, q = 400, 4
    X = rng.normal(size=(n, 9, q))
    estimate = rng.normal(size=(n, q))
    found = nearest_nonnegative(estimate, np.linalg.inv(np.swapaxes(X, 1, 2) @ X), np.ones(q, dtype=bool))
    for k in range(n):
        x, _ = nnls(X[k], X[k] @ estimate[k])
        assert found[k] == pytest.approx(x, abs=1e-9)


def test_the_weighted_batch_is_the_weighted_problem() -> None:
    """The batched path against scipy on each row's own weighted problem, the weights made here from the formula."""
    rng = np.random.default_rng(4)
    w = np.arange(400.0, 601.0, 2.0)
    noise = NoiseModel(0.0005, 0.0002, 0.1)
    dyes = [
        Component(f"c{k}", w, 30 * np.exp(-0.5 * ((w - c) / 25) ** 2), basis="mass", absorptivity_u=0.05 + 0 * w)
        for k, c in enumerate((460.0, 500.0, 540.0))
    ]
    K = np.column_stack([dye.absorptivity for dye in dyes])
    c = rng.uniform(0, 0.03, (200, 3)) * (rng.uniform(size=(200, 3)) < 0.6)
    A = c @ K.T + rng.normal(size=(200, w.size)) * 0.004
    result = resolve(SpectrumBatch([str(k) for k in range(200)], w, A), dyes, ResolveSettings(background=(), noise=noise))
    design = build_design(w, dyes, ())
    assert (result.concentration == 0).sum() > 40
    for k in range(200):
        first = np.linalg.lstsq(K, A[k], rcond=None)[0]
        variance = noise.reading_variance(K @ first) + (0.1 * design.slope @ first) ** 2 + design.shape_variance @ first**2
        root = 1 / np.sqrt(variance)
        x, _ = nnls(K * root[:, None], A[k] * root)
        assert result.concentration[k] == pytest.approx(x, rel=1e-9, abs=1e-13)
