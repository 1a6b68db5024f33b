"""What resolving would give for samples that have not been measured: the resolver's own fit of noise-free spectra.

Uncertainties come from the same code as those of measured samples. What only a measurement can show is left at its
expectation: residuals as large as declared, and as correlated between neighbours as is said.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.component import Component
from tinctor.resolve.design import Design, dependent_components
from tinctor.resolve.fit import fit_columns, fit_rows
from tinctor.resolve.resolver import SINGULAR_PIVOT
from tinctor.resolve.settings import ResolveSettings
from tinctor.resolve.uncertainty import Cell, estimates, limits_of_detection

__all__ = ["QUANTIFICATION_RELATIVE_U", "Forecast", "forecast"]

#: Relative standard uncertainty at the quantification limit (k_Q = 10: Currie, Pure Appl. Chem. 67 (1995) 1699), from the sources
#: that do not grow with the concentration: library scale, path and dilution are not mended by more of it.
QUANTIFICATION_RELATIVE_U: Final = 0.1


@dataclass(frozen=True, slots=True, eq=False)
class Forecast:
    """Expected results of n samples with p components; concentrations in the original sample, mol/L or g/L.

    Attributes
    ----------
    concentration, u : arrays (n, p)
    budget : array (n, p, 6)
        In the order of `tinctor.resolve.uncertainty.SOURCES`.
    covariance, correlation : arrays (n, p, p)
        Of all sources; of the fit alone.
    decision_limit, detection_limit : arrays (n, p)
        The second is infinite where the uncertainty that grows with the concentration is too large by itself.
    quantification_limit : array (n, p)
        Ten times the standard uncertainty at zero.
    relative_per_nm : array (n, p)
    selectivity : array (n, p)
        1 / sqrt(variance inflation) under the weights of the fit; 0 for an exact dependence.
    points : array (n,)
        Readings at or below the highest absorbance allowed.
    determined : bool array (n, p)
        Whether there are enough readings that show the component.
    """

    concentration: FloatArray
    u: FloatArray
    budget: FloatArray
    covariance: FloatArray
    correlation: FloatArray
    decision_limit: FloatArray
    detection_limit: FloatArray
    quantification_limit: FloatArray
    relative_per_nm: FloatArray
    selectivity: FloatArray
    points: FloatArray
    determined: np.ndarray


def forecast(
    design: Design,
    components: Sequence[Component],
    in_cell: FloatArray,
    cell: Cell,
    settings: ResolveSettings,
    noise_inflation: float = 1.0,
) -> Forecast:
    """Return what resolving is expected to give.

    Parameters
    ----------
    design
        On the wavelengths that will be read.
    components
        Those of the design.
    in_cell : array (n, p)
        Concentration times path after dilution, mol L-1 cm or g L-1 cm: what gives rise to the absorbance.
    cell
        Path and dilution of each sample.
    settings
        Noise and absorbance limit: readings above are left out, as in resolving.
    noise_inflation
        Readings over effective readings, at least 1: how much correlation of neighbours enlarges the variance of the noise part.

    Examples
    --------
    >>> from tinctor.resolve.design import build_design
    >>> red, blue = Component("red", [400.0, 500.0], [1.0, 20.0]), Component("blue", [400.0, 500.0], [10.0, 1.0])
    >>> cell = Cell(np.ones(1), np.zeros(1), np.zeros(1))
    >>> design = build_design(np.array([400.0, 500.0]), [red, blue], ())
    >>> forecast(design, [red, blue], np.array([[0.05, 0.05]]), cell, ResolveSettings()).u.shape
    (1, 2)
    """
    p = len(components)
    absorbance = in_cell @ design.X[:, :p].T
    keep = absorbance <= settings.absorbance_limit
    points = keep.sum(axis=1)
    # rows with too few readings left are computed with all of them, so that no number is undefined; they are not determined
    keep |= (points < design.asked)[:, None]
    columns = fit_columns(design)
    fit = fit_rows(columns, absorbance, settings.noise, None if keep.all() else keep)
    with np.errstate(invalid="ignore"):  # variances of rows that are all but singular may round to less than nothing
        e = estimates(columns, fit, components, cell, settings.noise, np.full(len(in_cell), noise_inflation))
    decision, detection = limits_of_detection(e.u_at_zero, e.proportional)
    enough = (fit.smallest_pivot >= SINGULAR_PIVOT) & (points >= design.asked)
    selectivity = 1.0 / np.sqrt(e.variance_inflation)
    dependent = dependent_components(design)
    selectivity[:, dependent] = 0.0
    return Forecast(
        concentration=in_cell * cell.factor[:, None],
        u=np.sqrt(np.maximum(np.einsum("nii->ni", e.covariance), 0.0)),
        budget=e.budget,
        covariance=e.covariance,
        correlation=e.correlation,
        decision_limit=decision,
        detection_limit=detection,
        quantification_limit=e.u_at_zero / QUANTIFICATION_RELATIVE_U,
        relative_per_nm=e.relative_per_nm,
        selectivity=selectivity,
        points=points.astype(np.float64),
        determined=enough[:, None] & ~dependent & (np.abs(design.X[:, :p]) > 0).any(axis=0),
    )
