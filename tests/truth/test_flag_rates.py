"""False alarms and power of the tests for an unmodelled absorber: the short version of scripts/simulate_flags.py."""

from __future__ import annotations

import numpy as np
from simulations import script

simulation = script("simulate_flags")


def test_clean_samples_raise_no_alarm() -> None:
    rates, result = simulation.clean(5000, seed=2)
    assert rates.noticed < 0.002
    for code in ("collinear", "offset-large", "scatter-large", "saturated", "beyond-linear-range"):
        assert code not in result.severity
    negative = result.severity.get("negative-estimate")
    assert negative is None or (negative > 0).mean() < 0.001


def test_model_error_of_the_size_of_the_allowance_rarely_does() -> None:
    assert simulation.with_model_error(3000, seed=2).noticed < 0.05


def test_a_hidden_band_of_the_stated_height_is_noticed_wherever_it_lies() -> None:
    """The answer's own statement: the least visible band of the family is seen at the height it gives."""
    stated = simulation.clean(500, seed=2)[0].smallest_visible
    found = [simulation.with_band(200, 2, 60.0, 1.2 * stated, position) for position in simulation.POSITIONS]
    assert min(rates.noticed for rates in found) > 0.9
    small = [simulation.with_band(200, 2, 60.0, 0.1 * stated, position) for position in simulation.POSITIONS]
    assert max(rates.noticed for rates in small) < 0.1  # negative control: the test does not always speak


def test_the_stated_unseen_bias_bounds_what_missed_bands_do() -> None:
    missed = []
    for height in (0.005, 0.01, 0.02):
        for position in simulation.POSITIONS:
            rates = simulation.with_band(200, 2, 60.0, height, position)
            if rates.noticed < 0.5:
                missed.append((rates.bias_percent, rates.stated_bias_percent))
    bias, stated = np.array(missed).T
    assert len(missed) > 10
    assert (bias <= stated).all()
    assert bias.max() > 0.2 * stated.max()  # and it is not a bound by being huge


def test_a_changed_scale_leaves_no_trace() -> None:
    """Path, dilution and purity errors are invisible in any residual: they have to be declared (practice, simulated here)."""
    rng = np.random.default_rng(5)
    c, A = simulation.mixtures(500, rng)
    result = simulation.resolved(1.1 * A, rng)
    assert "unmodelled-absorber" not in result.severity
    assert np.abs(result.unconstrained / c - 1.1).max() < 0.05
