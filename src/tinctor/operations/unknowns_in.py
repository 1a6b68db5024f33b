"""Unknowns of one substance as they come in: replicates together, on the standards' axis."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from tinctor.axis import SAME_WAVELENGTH_NM
from tinctor.errors import Fault, InputError
from tinctor.operations.series_in import UnknownIn
from tinctor.operations.shared import gather
from tinctor.spectrum import Spectrum
from tinctor.standards.series import same_axis

if TYPE_CHECKING:
    from tinctor.operations.determine import DetermineRequest

__all__ = ["unknown_groups"]

CELL: Final = ("path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u")


def unknown_groups(request: DetermineRequest) -> list[list[Spectrum]]:
    """Return the replicates of each unknown together, in order of first mention, inside the wavelength range.

    Raises
    ------
    InputError
        Listing every fault with its JSON path: another axis, replicates of nothing or in another cell.
    """
    if not request.unknowns:
        raise InputError.single("no-unknowns", "$.unknowns", "expected at least one unknown, found none")
    spectra: list[Spectrum] = gather([(f"$.unknowns[{k}]", u.to_spectrum) for k, u in enumerate(request.unknowns)])
    (first,) = gather([("$.standards[0]", request.standards[0].to_spectrum)])
    faults = same_axis([("$.standards[0]", first), *((f"$.unknowns[{k}]", s) for k, s in enumerate(spectra))])
    groups, of_groups = _together(request.unknowns, spectra)
    faults += of_groups
    if faults:
        raise InputError(faults)
    kept = _in_range(first.wavelength_nm, request)
    return [[_cut(s, kept) for s in group] for group in groups]


def _together(unknowns: Sequence[UnknownIn], spectra: Sequence[Spectrum]) -> tuple[list[list[Spectrum]], list[Fault]]:
    groups: dict[str, list[Spectrum]] = {}
    faults = []
    for k, (u, s) in enumerate(zip(unknowns, spectra, strict=True)):
        if u.replicate_of is None:
            if u.id in groups:
                faults.append(Fault("duplicate-id", f"$.unknowns[{k}].id", f"the id {u.id!r} stands twice"))
            groups.setdefault(u.id, [s])
    for k, (u, s) in enumerate(zip(unknowns, spectra, strict=True)):
        if u.replicate_of is None:
            continue
        group = groups.get(u.replicate_of)
        path = f"$.unknowns[{k}].replicate_of"
        if group is None:
            message = f"{u.id!r} is said to repeat {u.replicate_of!r}, which is no unknown of its own"
            faults.append(Fault("replicate", path, message))
        elif any(getattr(s, key) != getattr(group[0], key) for key in CELL):
            message = f"{u.id!r} repeats {u.replicate_of!r} in another cell or dilution"
            faults.append(Fault("replicate", path, message, "make it an unknown of its own"))
        else:
            group.append(s)
    return list(groups.values()), faults


def _in_range(axis_nm: np.ndarray, request: DetermineRequest) -> np.ndarray:
    low, high = request.wavelength_range_nm or (axis_nm[0], axis_nm[-1])
    kept: np.ndarray = (axis_nm >= low - SAME_WAVELENGTH_NM) & (axis_nm <= high + SAME_WAVELENGTH_NM)
    return kept


def _cut(s: Spectrum, kept: np.ndarray) -> Spectrum:
    if kept.all():
        return s
    cell = {key: getattr(s, key) for key in CELL}
    u = None if s.absorbance_u is None else s.absorbance_u[kept]
    return replace(Spectrum(s.id, s.wavelength_nm[kept], s.absorbance[kept], absorbance_u=u), **cell)
