"""Rounding of numbers far from one, and properties that hold for any of them."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tinctor.report.rounding import rounded, significant


@pytest.mark.parametrize(
    ("value", "u", "shown"),
    [
        (0.0, 0.0012, ("0.0000", "0.0012")),
        (0.0, 1e-10, ("0.0e-10", "1.0e-10")),
        (-1e-13, 1e-10, ("0.0e-10", "1.0e-10")),  # no minus before a zero
        (9.9999e-10, 1e-11, ("1.000e-09", "0.010e-09")),  # rounding carries into the exponent
        (1.234e12, 3e10, ("1.234e+12", "0.030e+12")),
        (99.96, 0.996, ("100.0", "1.0")),
        (0.3, 2.0, ("0.3", "2.0")),
        (1.0, 0.0, ("1.000", "0")),
    ],
)
def test_numbers_at_the_edges(value: float, u: float, shown: tuple[str, str]) -> None:
    """Two significant digits of the uncertainty, the value to the same place: GUM 7.2.6 (JCGM 100:2008)."""
    assert rounded(value, u) == shown


@given(st.floats(-1e14, 1e14), st.floats(1e-14, 1e12))
def test_what_is_shown_is_the_number_to_half_a_last_digit(value: float, u: float) -> None:
    shown, shown_u = rounded(value, u)
    assert float(shown_u) == pytest.approx(u, rel=0.0501)  # two significant digits: 0.05 of 1.0 at most
    last = 10.0 ** (math.floor(math.log10(float(shown_u) * (1 + 1e-12))) - 1)
    assert abs(float(shown) - value) <= 0.5001 * last + 1e-15 * abs(value)
    assert not shown.startswith("-") or float(shown) < 0


@given(st.floats(-1e14, 1e14), st.integers(1, 6))
def test_significant_figures_hold_the_number_to_their_last_digit(value: float, figures: int) -> None:
    assert float(significant(value, figures)) == pytest.approx(value, rel=0.501 * 10.0 ** (1 - figures), abs=0)


@pytest.mark.parametrize(
    ("value", "u", "shown"),
    [
        (0.0201, 0.0003, ("0.02010", "0.00030")),
        (12.3456, 0.0996, ("12.35", "0.10")),
        (12.3456, 0.0994, ("12.346", "0.099")),
        (-0.0004, 0.0012, ("-0.0004", "0.0012")),
        (-0.00001, 0.012, ("0.000", "0.012")),
        (98765.0, 4321.0, ("98800", "4300")),
        (1.5e-9, 2.345e-10, ("1.50e-09", "0.23e-09")),
        (0.0, 0.0, ("0", "0")),
    ],
)
def test_two_significant_figures_of_the_uncertainty_and_a_value_to_match(value: float, u: float, shown: tuple[str, str]) -> None:
    """GUM 7.2.6 (JCGM 100:2008): at most two significant digits."""
    assert rounded(value, u) == shown


def test_significant_figures() -> None:
    assert [significant(v, 2) for v in (0.0000662, 1234.0, 0.995, -0.0125, 3e-12)] == [
        "0.000066",
        "1200",
        "0.99",
        "-0.013",
        "3.0e-12",
    ]
