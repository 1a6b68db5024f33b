"""What comes out of resolving a batch: arrays, one row per spectrum, and the flags raised."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from typing import Literal

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.component import Component
from tinctor.resolve.interferent import Interferent
from tinctor.resolve.settings import ResolveSettings

__all__ = ["Flag", "FlagCode", "Resolution", "Severity", "Status"]

FlagCode = Literal[
    "saturated",
    "offset-large",
    "scatter-large",
    "negative-estimate",
    "unmodelled-absorber",
    "collinear",
    "beyond-linear-range",
    "range-not-covered",
    "conditions-differ",
    "below-decision-limit",
    "target-not-met",
    "too-few-points",
]


class Severity(IntEnum):
    """How much a flag matters: worth knowing, needs a look, no figure can be stood behind."""

    NONE = 0
    INFO = 1
    WARNING = 2
    REFUSAL = 3


class Status(IntEnum):
    """Of a component in a spectrum, or of a spectrum."""

    ACCEPTED = 0
    FLAGGED = 1
    REFUSED = 2


@dataclass(frozen=True, slots=True)
class Flag:
    """One flag of one spectrum, in words."""

    code: FlagCode
    severity: Severity
    message: str
    components: tuple[str, ...] = ()
    wavelength_nm: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Resolution:
    """Results of n spectra on one axis with p components and b background terms.

    Concentrations are in the original sample, in the component's base unit: mol/L for a molar absorptivity, g/L for one by
    mass. Rows of refused components hold numbers that are not to be used: ask `status`.

    Attributes
    ----------
    ids : n texts
    components, background, settings
        What was fitted and how.
    wavelength_nm : array (m,)
        Wavelengths that could be used.
    unconstrained, concentration, u : arrays (n, p)
        The estimate without sign constraint, the non-negative estimate, and the combined standard uncertainty (of the
        first).
    low, high : arrays (n, p)
        Coverage interval.
    decision_limit, detection_limit : arrays (n, p)
    budget : array (n, p, 6)
        Standard uncertainties in the order of `tinctor.resolve.uncertainty.SOURCES`.
    covariance : array (n, p, p)
        Of the unconstrained estimates.
    relative_per_nm : array (n, p)
        Relative change of the estimate per nm shift of the wavelength axis.
    fitted_per_cm : array (n, p)
        Concentration times path in the cell, after dilution: what `linear_to` is compared with.
    background_value, background_u : arrays (n, b)
    points, residual_rms, chi_square, degrees_of_freedom, durbin_watson : arrays (n,)
    condition_number, effective_points, optimality : arrays (n,)
    visible_residual, excess_residual : arrays (n,)
        Residual that the tests for an unmodelled absorber would notice, and the one found beyond noise; absorbance.
    structure, structure_limit, chi_square_limit : arrays (n,)
    selectivity, correlation : arrays (n, p), (n, p, p)
    saturated : bool array (n, m)-like or None
        Readings above the limit; `None` when there are none.
    severity : dict of code to int8 array (n,) or (n, p)
    status : int8 array (n, p)
    interferent
        Hypothetical bands put through the fit, or `None`.
    notes : dict of code to text
        Words for flags that are the same for the whole batch.
    """

    ids: tuple[str, ...]
    components: tuple[Component, ...]
    background: tuple[str, ...]
    settings: ResolveSettings
    wavelength_nm: FloatArray
    unconstrained: FloatArray
    concentration: FloatArray
    u: FloatArray
    low: FloatArray
    high: FloatArray
    decision_limit: FloatArray
    detection_limit: FloatArray
    budget: FloatArray
    covariance: FloatArray
    relative_per_nm: FloatArray
    fitted_per_cm: FloatArray
    background_value: FloatArray
    background_u: FloatArray
    points: FloatArray
    residual_rms: FloatArray
    chi_square: FloatArray
    degrees_of_freedom: FloatArray
    durbin_watson: FloatArray
    condition_number: FloatArray
    effective_points: FloatArray
    optimality: FloatArray
    visible_residual: FloatArray
    excess_residual: FloatArray
    structure: FloatArray
    structure_limit: FloatArray
    chi_square_limit: FloatArray
    selectivity: FloatArray
    correlation: FloatArray
    saturated: np.ndarray | None
    severity: dict[FlagCode, np.ndarray]
    status: np.ndarray
    interferent: Interferent | None
    notes: dict[FlagCode, str]

    def __len__(self) -> int:
        return len(self.ids)

    @property
    def names(self) -> tuple[str, ...]:
        """Component names in column order."""
        return tuple(component.name for component in self.components)

    def raise_for_all(self, code: FlagCode, words: str) -> None:
        """Add a warning that holds for every spectrum of the batch."""
        grades = self.severity.get(code, np.zeros(len(self), dtype=np.int8))
        self.severity[code] = np.maximum(grades, np.int8(Severity.WARNING))
        self.notes[code] = "; ".join(filter(None, [self.notes.get(code, ""), words]))

    def spectrum_status(self) -> np.ndarray:
        """Return the status of each spectrum, (n,): refused when every component is, flagged when anything needs a look."""
        refused = (self.status == Status.REFUSED).all(axis=1)
        look = (self.status != Status.ACCEPTED).any(axis=1)
        for severity in self.severity.values():
            look |= (severity if severity.ndim == 1 else severity.max(axis=1, initial=0)) >= Severity.WARNING
        result: np.ndarray = np.where(refused, Status.REFUSED, np.where(look, Status.FLAGGED, Status.ACCEPTED)).astype(np.int8)
        return result
