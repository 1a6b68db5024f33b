"""Standards and blanks as they come in, shared by the operations that calibrate."""

from __future__ import annotations

from typing import Literal

import numpy as np
from pydantic import Field

from tinctor.axis import SAME_WAVELENGTH_NM
from tinctor.errors import InputError
from tinctor.operations.shared import NoiseIn, Number, Numbers, RequestModel, SpectrumIn, gather
from tinctor.spectrum import Spectrum
from tinctor.standards.series import Series, Standard, series_of
from tinctor.standards.settings import StandardsSettings
from tinctor.units import CONCENTRATION_UNITS, Basis, check_unit, conversion_factor

__all__ = ["SeriesIn", "StandardIn", "UnknownIn", "within"]


class StandardIn(RequestModel):
    """One scan of one standard solution."""

    id: str = Field(description="its name")
    concentration: Number = Field(description="in the cell, in concentration_unit")
    wavelength_nm: Numbers
    absorbance: Numbers
    path_length_cm: Number = 1.0
    replicate_of: str | None = Field(None, description="id of the standard of which this is another scan: the same solution")
    concentration_u: Number | None = Field(
        None, description="standard uncertainty of the concentration by dilution alone, independent of the other standards"
    )

    def to_spectrum(self) -> Spectrum:
        """Return the measured spectrum."""
        return Spectrum(self.id, self.wavelength_nm, self.absorbance, path_length_cm=self.path_length_cm)

    def to_standard(self, factor: float) -> Standard:
        """Return the domain value; `factor` units make one mol/L or g/L."""
        u = None if self.concentration_u is None else self.concentration_u / factor
        return Standard(self.to_spectrum(), self.concentration / factor, u, self.replicate_of)


class UnknownIn(SpectrumIn):
    """One measured spectrum of an unknown."""

    replicate_of: str | None = Field(None, description="id of the unknown of which this is a replicate: their mean is read")


class ModelErrorIn(RequestModel):
    """Errors of a reading beyond noise, as standard deviations."""

    absorbance: Number = Field(default=0.001, description="placing of the cell, common to a spectrum")
    relative: Number = Field(default=0.003, description="departure of shape, as a share of the absorbance")


class SeriesIn(RequestModel):
    """What every calibration with standards of one substance needs."""

    name: str = Field("substance", min_length=1, description="of the substance")
    standards: list[StandardIn] = Field(min_length=1, max_length=1000)
    concentration_unit: str = Field(description="mol/L mmol/L umol/L g/L mg/L ug/L")
    basis: Literal["molar", "mass"] | None = Field(
        None, description="of the absorptivity; when left out, that of the unit. The other one needs the molar mass"
    )
    molar_mass_g_per_mol: Number | None = Field(None, gt=0)
    stock_relative_u: Number | None = Field(
        None, description="relative standard uncertainty that all standards share: weighing, purity, flask of the stock"
    )
    path_length_relative_u: Number = Field(0.0, description="of the cell of the standards")
    blank: list[SpectrumIn] = Field(default=[], max_length=100)
    intercept: Literal["zero", "fitted", "tested"] = "tested"
    absorbance_limit: Number = Field(2.0, gt=0)
    wavelength_range_nm: list[Number] | None = Field(None, min_length=2, max_length=2)
    noise: NoiseIn = NoiseIn()
    model_error: ModelErrorIn = ModelErrorIn()
    significance: Number = Field(0.05, description="level of every test")
    allowed_nonlinearity: Number = Field(0.0, description="departure from the line, as a share, accepted even if significant")
    outliers: Literal["mark", "leave-out"] = Field("mark", description="whether a standard off the curve of the others is left out")
    leave_out: list[str] = Field(default=[], description="ids of standards to leave out by your word")

    @property
    def chosen_basis(self) -> Basis:
        """Basis of the absorptivity."""
        return self.basis or CONCENTRATION_UNITS[check_unit(self.concentration_unit)][0]

    def factor(self) -> float:
        """Return how many of the unit make one mol/L or g/L."""
        check_unit(self.concentration_unit)
        return conversion_factor(self.chosen_basis, self.concentration_unit, self.molar_mass_g_per_mol, self.name)

    def to_settings(self) -> StandardsSettings:
        """Return the settings.

        Raises
        ------
        InputError
            With the JSON path of each value that cannot be.
        """
        (noise,) = gather([("$.noise", self.noise.to_noise)])
        for key in ("absorbance", "relative"):
            if getattr(self.model_error, key) < 0:
                raise InputError.single("negative", f"$.model_error.{key}", "expected a number of at least 0")
        made: StandardsSettings
        (made,) = gather(
            [
                (
                    "$",
                    lambda: StandardsSettings(
                        intercept=self.intercept,
                        noise=noise,
                        model_error_absorbance=self.model_error.absorbance,
                        model_error_relative=self.model_error.relative,
                        significance=self.significance,
                        allowed_nonlinearity=self.allowed_nonlinearity,
                        stock_relative_u=self.stock_relative_u,
                        path_length_relative_u=self.path_length_relative_u,
                        outliers=self.outliers,
                        leave_out=tuple(self.leave_out),
                    ),
                )
            ]
        )
        return made

    def to_series(self) -> Series:
        """Return the series, inside the wavelength range.

        Raises
        ------
        InputError
            Listing the faults of every standard and blank with its JSON path.
        """
        factor = self.factor()
        parts = gather([(f"$.standards[{k}]", lambda s=s: s.to_standard(factor)) for k, s in enumerate(self.standards)])
        blanks = gather([(f"$.blank[{k}]", b.to_spectrum) for k, b in enumerate(self.blank)])
        series: Series
        (series,) = gather([("$", lambda: series_of(parts, blanks, self.absorbance_limit))])
        return within(series, self.wavelength_range_nm)


def within(series: Series, range_nm: list[float] | None) -> Series:
    """Return the series inside a wavelength range [low, high].

    Raises
    ------
    InputError
        When no reading lies inside.
    """
    if range_nm is None:
        return series
    low, high = range_nm
    w = series.wavelength_nm
    inside = (w >= low - SAME_WAVELENGTH_NM) & (w <= high + SAME_WAVELENGTH_NM)
    if not np.any(inside):
        raise InputError.single(
            "empty-range",
            "$.wavelength_range_nm",
            f"no reading lies from {low:g} to {high:g} nm: the standards run from {w[0]:g} to {w[-1]:g} nm",
        )
    return series.on(inside)
