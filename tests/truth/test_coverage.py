"""Coverage of the intervals by simulation: the short version of scripts/simulate_coverage.py.

The requirements are those of the script; with 4000 samples the standard error of a coverage of 95 % is 0.34 %.
"""

from __future__ import annotations

import numpy as np
import pytest
from simulations import script

from tinctor import Component, NoiseModel, ResolveSettings, SpectrumBatch, resolve_batch
from tinctor.resolve.interval import non_negative_interval

simulation = script("simulate_coverage")
SAMPLES = 4000
DYES = (450.0, 525.0, 610.0)
CASES = [(count, component) for count in (2, 3, 5) for component in range(count)]


@pytest.mark.parametrize(("count", "component"), CASES)
@pytest.mark.parametrize("level", ["mid", "zero", "decision-limit"])
def test_intervals_hold_the_truth_as_often_as_they_say(count: int, component: int, level: str) -> None:
    result = simulation.outcome(count, component, level, SAMPLES, seed=3)
    assert simulation.required(result), result.line()
    assert abs(result.bias) < 0.1, result.line()
    if level == "zero":
        assert result.detected < 0.07, result.line()  # 5 % by the definition of the decision limit


@pytest.mark.parametrize("count", [2, 3, 5])
def test_what_is_not_declared_is_missed(count: int) -> None:
    """Negative control: with stock, path, dilution and axis undeclared the same intervals must fail."""
    assert simulation.outcome(count, 0, "undeclared", SAMPLES, seed=3).coverage < 0.8


def test_a_detection_limit_is_detected() -> None:
    result = simulation.outcome(2, 0, "detection-limit", SAMPLES, seed=3)
    assert 0.90 < result.detected < 0.97, result.line()


@pytest.mark.parametrize("shift_nm", [0.3, 1.0])
def test_a_fitted_shift_leaves_no_bias(shift_nm: float) -> None:
    """At 1 nm its column alone, the first order, would leave a bias as large as the uncertainty."""
    rng, wavelength_nm = np.random.default_rng(9), simulation.W
    dyes = [
        Component(f"dye-{k}", wavelength_nm, simulation.dye(c, wavelength_nm), scale_relative_u=0.0) for k, c in enumerate(DYES)
    ]
    truth, axis = rng.uniform(0.008, 0.02, (SAMPLES, 3)), wavelength_nm + rng.normal(0, shift_nm, (SAMPLES, 1))
    A = sum(truth[:, [k]] * simulation.dye(c, axis) for k, c in enumerate(DYES))
    noise = NoiseModel(0.0005, 0.0001, 0.0)
    A = A + noise.reading_u(A) * rng.normal(size=A.shape)
    batch = SpectrumBatch([str(k) for k in range(SAMPLES)], wavelength_nm, A)
    result = resolve_batch(batch, dyes, ResolveSettings(noise=noise, background=("offset", "shift")))
    z = (result.unconstrained - truth) / result.u
    assert np.abs(z.mean(axis=0)).max() < 0.1
    covered = ((result.low <= truth) & (truth <= result.high)).mean(axis=0)
    assert covered.min() > 0.93
    assert covered.max() < 0.97


@pytest.mark.parametrize("mean", [0.0, 0.3, 1.0, 1.645, 2.0, 3.0, 6.0])
def test_the_interval_of_one_normal_estimate(mean: float) -> None:
    """Feldman and Cousins 1998: coverage of at least the stated probability wherever the mean lies."""
    x = mean + np.random.default_rng(8).standard_normal(200_000)
    low, high = non_negative_interval(x, np.ones_like(x), 0.95)
    covered = ((low <= mean) & (mean <= high)).mean()
    assert 0.948 < covered < (0.952 if mean > 4 else 0.9999)


def test_table_of_intervals() -> None:
    """Feldman and Cousins 1998, 95 % limits for x = 0, 1, 2, 3, from memory."""
    low, high = non_negative_interval(np.array([0.0, 1.0, 2.0, 3.0, -3.0]), np.ones(5), 0.95)
    assert low.round(2).tolist() == [0.0, 0.0, 0.35, 1.14, 0.0]
    assert high.round(2).tolist() == [1.96, 2.96, 3.96, 4.96, 1.96]  # far below zero it is held at its value for zero


def test_cutting_a_two_sided_interval_at_zero_is_worse() -> None:
    """Negative control: a one-sided limit below 2 u and a two-sided interval above it cover less than 95 %."""
    mean = 1.8
    x = mean + np.random.default_rng(9).standard_normal(200_000)
    chosen_after_looking = np.where(x < 2, mean < x + 1.645, np.abs(x - mean) < 1.96)
    assert chosen_after_looking.mean() < 0.945
