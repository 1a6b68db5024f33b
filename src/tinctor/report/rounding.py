"""Numbers for people: the uncertainty to two significant figures, the value to match (GUM 7.2.6)."""

from __future__ import annotations

import math

__all__ = ["rounded", "significant"]


def rounded(value: float, u: float) -> tuple[str, str]:
    """Return (value, uncertainty) as text, with as many decimals as the uncertainty's two significant figures need.

    Examples
    --------
    >>> rounded(0.803589, 0.009163)
    ('0.8036', '0.0092')
    >>> rounded(1234.6, 87.2)
    ('1235', '87')
    >>> rounded(12346.0, 870.0)
    ('12350', '870')
    >>> rounded(3.2e-9, 1.234e-10)
    ('3.20e-09', '0.12e-09')
    >>> rounded(1.234e12, 3e10)
    ('1.234e+12', '0.030e+12')
    """
    if not (u > 0 and math.isfinite(u)):
        return significant(value, 4), significant(u, 2)
    exponent = math.floor(math.log10(u))
    if round(u, 1 - exponent) >= 10.0 ** (exponent + 1):  # 0.0996 becomes 0.10
        exponent += 1
    decimals = 1 - exponent
    if decimals > 7 or exponent > 9:
        return _scientific(value, u, decimals)
    shown_value, shown_u = round(value, decimals) + 0.0, round(u, decimals)
    places = max(decimals, 0)
    return f"{shown_value:.{places}f}", f"{shown_u:.{places}f}"


def significant(value: float, figures: int) -> str:
    """Return a number to so many significant figures, plain where that is readable.

    Examples
    --------
    >>> significant(0.00021347, 2), significant(0.0, 2), significant(1534.2, 2)
    ('0.00021', '0', '1500')
    """
    if value == 0 or not math.isfinite(value):
        return "0" if value == 0 else str(value)
    exponent = math.floor(math.log10(abs(value)))
    if exponent < -7 or exponent > 9:
        return f"{value:.{figures - 1}e}"
    places = figures - 1 - exponent
    return f"{round(value, places):.{max(places, 0)}f}"


def _scientific(value: float, u: float, decimals: int) -> tuple[str, str]:
    """Both numbers with the exponent of the larger, so that they can be compared at a glance."""
    power = math.floor(math.log10(max(abs(value), u)))
    if round(max(abs(value), u), decimals) >= 10.0 ** (power + 1):  # 9.9996 becomes 10.000
        power += 1
    places = max(decimals + power, 0)
    # + 0.0: no minus before a zero
    shown_value, shown_u = (round(number / 10.0**power, places) + 0.0 for number in (value, u))
    return f"{shown_value:.{places}f}e{power:+03d}", f"{shown_u:.{places}f}e{power:+03d}"
