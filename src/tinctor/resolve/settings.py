"""What the user may set when resolving, with the limits that judgement uses. All are echoed with each result."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Final

import numpy as np

from tinctor.axis import ascending
from tinctor.errors import Fault, InputError
from tinctor.noise import NoiseModel

__all__ = ["BACKGROUND_TERMS", "JudgementLimits", "ResolveSettings"]

#: Background shapes in the order in which they stand in a result.
BACKGROUND_TERMS: Final = ("offset", "slope", "scatter", "shift")


@dataclass(frozen=True, slots=True)
class JudgementLimits:
    """Where a figure is flagged or refused. Common practice unless a source is named beside the value.

    Examples
    --------
    >>> JudgementLimits().model_error_relative
    0.003
    """

    #: Model error that is to be expected of real spectra, as a standard deviation: this much of the absorbance, and this
    #: much besides. Structure in the residual below it is not called an unmodelled absorber.
    model_error_relative: float = 0.003
    model_error_absorbance: float = 0.001
    #: Error rate of each of the two tests for an unmodelled absorber when the model is right, before the allowance.
    residual_test_level: float = 0.01
    #: A component is flagged, and refused, when the others take this share of its signal: sqrt(variance inflation).
    collinear_flagged: float = 30.0
    collinear_refused: float = 100.0
    #: Above the linear range a figure is flagged, and beyond this factor it is refused.
    linear_range_refused: float = 2.0
    #: An offset this large, and significant, points to a wrong blank or a dirty cell.
    offset_flagged: float = 0.02
    #: Scatter above this share of the highest fitted component absorbance is flagged.
    scatter_flagged: float = 0.10
    #: Bias that makes a flag a warning: this share of the concentration, or the standard uncertainty if larger.
    bias_relative: float = 0.02


@dataclass(frozen=True, slots=True, eq=False)
class ResolveSettings:
    """How to resolve a batch.

    Parameters
    ----------
    background
        Any of "offset", "slope", "scatter", "shift"; order does not matter.
    wavelength_range_nm
        (low, high): only readings inside are used.
    wavelengths_nm
        Only readings at these wavelengths are used; each must be on the sample's axis.
    absorbance_limit
        Readings above are not used, wavelength by wavelength.
    noise
        The noise model of a reading.
    coverage
        Coverage probability of the interval, between 0.68 and 0.9999.
    target_relative_u
        Relative standard uncertainty wanted; a component that misses it is flagged.
    """

    background: tuple[str, ...] = ("offset",)
    wavelength_range_nm: tuple[float, float] | None = None
    wavelengths_nm: tuple[float, ...] | None = None
    absorbance_limit: float = 2.0
    noise: NoiseModel = field(default_factory=NoiseModel)
    coverage: float = 0.95
    target_relative_u: float | None = None
    limits: JudgementLimits = field(default_factory=JudgementLimits)

    def __post_init__(self) -> None:
        faults = [
            Fault("unknown-background", ".background", f"expected background terms of {BACKGROUND_TERMS}, found {term!r}")
            for term in self.background
            if term not in BACKGROUND_TERMS
        ]
        if len(set(self.background)) != len(self.background):
            faults.append(
                Fault("duplicate-background", ".background", f"each background term may stand once, found {self.background}")
            )
        faults += _number_faults(self)
        if self.wavelength_range_nm is not None and self.wavelengths_nm is not None:
            faults.append(Fault("two-selections", ".wavelengths_nm", "give wavelength_range_nm or wavelengths_nm, not both"))
        if self.wavelength_range_nm is not None and not self.wavelength_range_nm[0] < self.wavelength_range_nm[1]:
            faults.append(
                Fault("empty-range", ".wavelength_range_nm", f"expected [low, high], found {list(self.wavelength_range_nm)}")
            )
        if faults:
            raise InputError(faults)
        if self.wavelengths_nm is not None:
            ascending(np.sort(np.asarray(self.wavelengths_nm, dtype=np.float64)))
        object.__setattr__(self, "background", tuple(t for t in BACKGROUND_TERMS if t in self.background))


def _number_faults(settings: ResolveSettings) -> list[Fault]:
    faults = []
    if not (math.isfinite(settings.absorbance_limit) and settings.absorbance_limit > 0):
        faults.append(Fault("absorbance-limit", ".absorbance_limit", f"must be above 0, found {settings.absorbance_limit}"))
    if not 0.68 <= settings.coverage <= 0.9999:
        faults.append(Fault("coverage", ".coverage", f"must lie between 0.68 and 0.9999, found {settings.coverage}"))
    target = settings.target_relative_u
    if target is not None and not (math.isfinite(target) and target > 0):
        faults.append(Fault("target", ".target_relative_u", f"must be above 0, found {target}"))
    return faults
