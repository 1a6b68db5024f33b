"""The forecast is true: expected uncertainties against the spread of resolved simulated samples, every error drawn anew."""

from __future__ import annotations

import numpy as np
import pytest

from tinctor import Component, NoiseModel, ResolveSettings, SpectrumBatch, planned_sample, resolve_batch

W = np.linspace(400.0, 700.0, 301)
SAMPLES = 3000
NOISE = NoiseModel(0.0008, 0.0002, 0.2)


def band(centre: float, w: np.ndarray) -> np.ndarray:
    return 30.0 * np.exp(-0.5 * ((w - centre) / 28.0) ** 2) + 8.0 * np.exp(-0.5 * ((w - 380.0) / 40.0) ** 2)


@pytest.mark.parametrize(
    ("centres", "concentrations", "background", "path", "dilution"),
    [
        ((500.0, 520.0), (0.6, 0.4), ("offset",), 1.0, 50.0),
        ((450.0, 520.0, 610.0), (0.5, 0.2, 0.8), ("offset", "scatter"), 1.0, 50.0),
        ((450.0, 520.0, 610.0), (0.5, 0.01, 0.8), (), 0.5, 20.0),
        ((450.0, 530.0, 610.0), (0.9, 0.9, 0.9), ("offset", "shift"), 1.0, 13.0),  # readings above the limit are left out
    ],
)
def test_expected_u_is_the_spread_of_results(
    centres: tuple[float, ...], concentrations: tuple[float, ...], background: tuple[str, ...], path: float, dilution: float
) -> None:
    names = [f"dye-{k}" for k in range(len(centres))]
    E = np.stack([band(c, W) for c in centres])
    shape_u, scale_u, path_u, dilution_u = 0.03, 0.008, 0.002 * path, 0.004 * dilution
    dyes = [
        Component(n, W, e, basis="mass", absorptivity_u=shape_u + 0 * W, scale_relative_u=scale_u)
        for n, e in zip(names, E, strict=True)
    ]
    settings = ResolveSettings(background=background, noise=NOISE)
    cell = {"path_length_cm": path, "path_length_u_cm": path_u, "dilution_factor": dilution, "dilution_factor_u": dilution_u}
    sample = planned_sample(dyes, dict(zip(names, concentrations, strict=True)), settings, **cell)

    rng = np.random.default_rng(12)
    c = np.array(concentrations)
    axis = W + rng.normal(0, NOISE.wavelength_nm, (SAMPLES, 1))
    factor = (path + rng.normal(0, path_u, SAMPLES)) / (dilution + rng.normal(0, dilution_u, SAMPLES))
    in_cell = c * factor[:, None] * (1 + rng.normal(0, scale_u, (SAMPLES, len(c))))
    A = sum(
        in_cell[:, [k]] * (band(at, axis) + shape_u * rng.normal(size=axis.shape[:1] + W.shape)) for k, at in enumerate(centres)
    )
    assert isinstance(A, np.ndarray)
    A = A + NOISE.reading_u(A) * rng.normal(size=A.shape)
    batch = SpectrumBatch(
        [str(k) for k in range(SAMPLES)],
        W,
        A,
        path_length_cm=path,
        path_length_u_cm=path_u,
        dilution_factor=dilution,
        dilution_factor_u=dilution_u,
    )
    found = resolve_batch(batch, dyes, settings)
    spread = found.unconstrained.std(axis=0)
    expected = sample.expected.u[0]
    assert np.abs(expected / spread - 1).max() < 0.10, (expected / spread).round(3)
    without_wavelength = np.sqrt(expected**2 - sample.expected.budget[0, :, 5] ** 2 - sample.expected.budget[0, :, 1] ** 2)
    assert np.abs(without_wavelength / spread - 1).max() > 0.10, "negative control: a budget without two of its sources must fail"


def test_the_forecast_is_the_resolver_s_own() -> None:
    """For a noise-free spectrum both must say the same to rounding."""
    dyes = [Component(f"d{k}", W, band(c, W), scale_relative_u=0.01) for k, c in enumerate((470.0, 540.0))]
    sample = planned_sample(dyes, {"d0": 0.01, "d1": 0.02})
    rng = np.random.default_rng(1)
    tiny = sample.absorbance + 1e-9 * rng.normal(size=W.size)  # no correlation between neighbours
    result = resolve_batch(SpectrumBatch(["a"], W, tiny[None]), dyes)
    for name in ("u", "decision_limit", "detection_limit", "relative_per_nm", "selectivity", "budget"):
        assert getattr(sample.expected, name) == pytest.approx(getattr(result, name), rel=1e-6), name
