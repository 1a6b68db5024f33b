"""Coverage and size by simulation: the short version of scripts/simulate_standards.py.

With 600 series the standard error of 95 % is 0.9 %, that of 5 % is 0.9 %: bounds are those of the script widened by two of them.
"""

from __future__ import annotations

import numpy as np
import pytest
from simulations import script

simulation = script("simulate_standards")
SERIES = 600


@pytest.mark.parametrize(("levels", "intercept"), [("5 levels", "zero"), ("5 levels", "fitted"), ("8 levels", "fitted")])
def test_intervals_hold_the_truth(levels: str, intercept: str) -> None:
    held = np.mean(simulation.results(simulation.LEVELS[levels], intercept, SERIES, 5), axis=0)
    assert held.min() > 0.912, held
    assert held.max() < 0.988, held


def test_an_undeclared_stock_error_is_missed() -> None:
    """Negative control."""
    held = np.mean(simulation.results(simulation.LEVELS["8 levels"], "zero", 200, 5, declared=False), axis=0)
    assert held[1] < 0.85


@pytest.mark.parametrize("levels", ["5 levels", "4 levels, 3 preparations each"])
def test_size_and_power_of_the_linearity_test(levels: str) -> None:
    chosen = simulation.LEVELS[levels]
    assert 0.022 < simulation.rejected(chosen, "zero", 0.0, SERIES, 5) < 0.078
    assert simulation.rejected(chosen, "zero", 0.04, 100, 5) > 0.7
