"""What the user may set when standards become a record."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, fields
from typing import Literal, get_args

from tinctor.errors import Fault, InputError
from tinctor.noise import NoiseModel

__all__ = ["Intercept", "Outliers", "StandardsSettings"]

Intercept = Literal["zero", "fitted", "tested"]
Outliers = Literal["mark", "leave-out"]


@dataclass(frozen=True, slots=True)
class StandardsSettings:
    """How to make a record of a series.

    Parameters
    ----------
    intercept
        "zero": through the blank, and through zero; "fitted"; "tested": fitted only where it is significant.
    noise
        Noise model of the readings; the wavelength term is not used here.
    model_error_absorbance, model_error_relative
        Errors of a reading beyond noise, as standard deviations: placing of the cell (common to a spectrum) and departure
        of shape. Common practice: 0.001 and 0.3 %.
    significance
        Level of every test (probability that it rejects what is right).
    allowed_nonlinearity
        A departure from the line below this share is accepted even where it is significant.
    stock_relative_u
        Relative standard uncertainty that all standards share: weighing, purity, the stock's flask. None where not stated.
    path_length_relative_u
        Of the cell, shared by all standards.
    outliers
        "mark" names a bad standard; "leave-out" leaves it out as well.
    leave_out
        Ids of standards to leave out by the user's word.

    Examples
    --------
    >>> StandardsSettings(stock_relative_u=0.004).significance
    0.05
    """

    intercept: Intercept = "tested"
    noise: NoiseModel = field(default_factory=NoiseModel)
    model_error_absorbance: float = 0.001
    model_error_relative: float = 0.003
    significance: float = 0.05
    allowed_nonlinearity: float = 0.0
    stock_relative_u: float | None = None
    path_length_relative_u: float = 0.0
    outliers: Outliers = "mark"
    leave_out: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        faults = []
        for name, choices in (("intercept", get_args(Intercept)), ("outliers", get_args(Outliers))):
            if getattr(self, name) not in choices:
                faults.append(Fault(name, f".{name}", f"expected one of {', '.join(choices)}, found {getattr(self, name)!r}"))
        if not 0.0001 <= self.significance <= 0.2:
            faults.append(Fault("significance", ".significance", f"expected 0.0001 to 0.2, found {self.significance!r}"))
        numbers = [f.name for f in fields(self) if f.name.endswith(("_u", "nonlinearity")) or f.name.startswith("model_error")]
        for name in numbers:
            value = getattr(self, name)
            if value is not None and not (math.isfinite(value) and value >= 0):
                faults.append(Fault("negative", f".{name}", f"expected a number of at least 0, found {value!r}"))
        for name in ("stock_relative_u", "path_length_relative_u"):
            if (getattr(self, name) or 0.0) >= 1.0:
                message = f"expected a share below 1 (0.005 is 0.5 %), found {getattr(self, name)!r}"
                faults.append(Fault("not-a-share", f".{name}", message))
        if faults:
            raise InputError(faults)
