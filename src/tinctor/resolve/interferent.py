"""What an absorber that is not in the library could do: hypothetical bands put through the fit.

A band under the components is partly taken up by them: that part biases the concentrations and leaves no trace. For a
family of bands the ratio between the two parts is a property of the design alone, and tells which bias hides behind a
residual of a given size.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from tinctor.arrays import FloatArray
from tinctor.resolve.design import Design, median_step

__all__ = ["BAND_WIDTH_NM", "Interferent", "interferent"]

#: Full width at half maximum of the hypothetical bands: that of a usual dye band in solution (common practice, no source).
BAND_WIDTH_NM: Final = 60.0
#: How many bands, with centres spread evenly over the wavelengths used.
BANDS: Final = 41
#: A band that leaves less than this share of itself in the residual looks like a component and is counted as that component:
#: no residual can tell, whatever its size. Such bands are not in the family.
SEEN_SHARE: Final = 0.1


@dataclass(frozen=True, slots=True, eq=False)
class Interferent:
    """The least visible of the hypothetical bands, and the worst bias, both per unit of residual.

    Attributes
    ----------
    centre_nm, width_nm
        The band of the family that leaves the smallest residual, and the full width at half maximum of all.
    height_per_residual
        Peak absorbance of that band per root mean square residual that it leaves.
    bias_per_residual : array (p,)
        Largest bias of each fitted coefficient (per cm), over the family, per root mean square residual.
    """

    centre_nm: float
    width_nm: float
    height_per_residual: float
    bias_per_residual: FloatArray


def interferent(design: Design) -> Interferent | None:
    """Return what hypothetical bands do in a design; `None` without readings to spare.

    The unweighted fit stands for the weighted one of each spectrum, from which it differs little below A = 1.

    Examples
    --------
    >>> from tinctor.component import Component
    >>> from tinctor.resolve.design import build_design
    >>> w = np.arange(400.0, 601.0, 5.0)
    >>> dye = Component("dye", w, 30 * np.exp(-0.5 * ((w - 500) / 30) ** 2), basis="mass")
    >>> bool(interferent(build_design(w, [dye], ())).height_per_residual > 1)
    True
    """
    w, Q = design.wavelength_nm, design.Q
    if w.size < Q.shape[1] + 4:
        return None
    width = max(BAND_WIDTH_NM, 4.0 * median_step(w))
    centres = np.linspace(w[0], w[-1], BANDS)
    bands = np.exp(-4.0 * np.log(2.0) * ((w[None, :] - centres[:, None]) / width) ** 2)
    along = bands @ Q
    left = bands - along @ Q.T
    residual = np.sqrt(np.einsum("ij,ij->i", left, left) / w.size)
    share = residual / np.sqrt(np.einsum("ij,ij->i", bands, bands) / w.size)
    family = np.flatnonzero(share >= min(SEEN_SHARE, share.max()))
    seen = np.maximum(residual[family], 1e-12)
    bias = np.abs(along[family] @ design.Rinv[: design.p].T) / seen[:, None]
    least = int(np.argmin(seen))
    return Interferent(float(centres[family[least]]), width, float(1.0 / seen[least]), bias.max(axis=0))
