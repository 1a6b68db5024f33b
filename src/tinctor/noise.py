"""The noise of an absorbance reading."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.errors import Fault, InputError

__all__ = ["NoiseModel"]

LN10: Final = math.log(10.0)


@dataclass(frozen=True, slots=True)
class NoiseModel:
    """Standard uncertainties that make up the variance of a reading of absorbance A:

        floor**2 + (transmittance * 10**A / ln 10)**2 + (wavelength_nm * dA/dw)**2

    The first two are independent from reading to reading. The third is the wavelength axis: it lowers the weight of
    band flanks as if it were independent, and enters the uncertainty of a result as one shift common to the axis.

    Parameters
    ----------
    floor
        Of a reading at low absorbance, in absorbance.
    transmittance
        Of the measured transmittance, as a fraction (0.0001 is 0.01 % T).
    wavelength_nm
        Of the wavelength axis, in nm.

    Notes
    -----
    The defaults are those of a sound bench instrument by common practice; put in what your own checks show.

    Examples
    --------
    >>> NoiseModel().reading_u(1.0).round(6)
    np.float64(0.000662)
    """

    floor: float = 0.0005
    transmittance: float = 0.0001
    wavelength_nm: float = 0.05

    def __post_init__(self) -> None:
        faults = [
            Fault("noise", f".{name}", f"noise.{name} must be a finite number of at least 0, found {getattr(self, name)!r}")
            for name in ("floor", "transmittance", "wavelength_nm")
            if not (math.isfinite(getattr(self, name)) and getattr(self, name) >= 0)
        ]
        if not faults and self.floor == 0 and self.transmittance == 0:
            faults.append(
                Fault("noise", ".floor", "noise.floor and noise.transmittance are both 0", "no instrument is free of noise")
            )
        if faults:
            raise InputError(faults)

    def reading_variance(self, absorbance: FloatArray | float) -> FloatArray:
        """Return floor**2 + (transmittance * 10**A / ln 10)**2, the same shape as `absorbance`."""
        return self.floor**2 + (self.transmittance / LN10) ** 2 * np.exp(2 * LN10 * np.asarray(absorbance, dtype=np.float64))

    def reading_u(self, absorbance: FloatArray | float) -> FloatArray:
        """Return the standard uncertainty of a reading, without the wavelength part."""
        return np.sqrt(self.reading_variance(absorbance))
