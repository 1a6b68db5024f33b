"""The operation transfer/1: shift and bandwidth difference between a record and a check spectrum of the same substance."""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from pydantic import Field

from tinctor.component import Component
from tinctor.errors import InputError
from tinctor.library import load_collection
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.shared import ComponentChoice, NoiseIn, Number, RecordUsed, RequestModel, ResponseModel, SpectrumIn, gather
from tinctor.operations.standards_results import ComponentOut, NoteOut, finite
from tinctor.standards.transfer import Transfer, corrected_absorptivity, estimate_transfer

__all__ = ["TransferRequest", "TransferResponse", "run"]

Schema = Literal["transfer/1"]


class TransferRequest(RequestModel):
    """Compare a record with a check spectrum of the same substance on another instrument."""

    schema_: Annotated[Schema, Field(alias="schema")] = "transfer/1"
    library: str | None = None
    component: ComponentChoice = Field(description="name in the library, or a component inline")
    check: SpectrumIn = Field(description="the same substance on the other instrument; its concentration need not be known")
    blank: SpectrumIn | None = None
    noise: NoiseIn = NoiseIn()
    absorbance_limit: Number = Field(2.0, gt=0, description="readings of the check above are not used")


class TransferResponse(ResponseModel):
    """Shift and broadening with standard uncertainties, and the record as the other instrument would have measured it."""

    schema_: Annotated[Schema, Field(alias="schema")] = "transfer/1"
    shift_nm: float = Field(description="how much further to the red the check spectrum lies")
    shift_u_nm: float
    broadening_nm2: float = Field(description="variance of the check's slit function less that of the record's; below 0: sharper")
    broadening_u_nm2: float
    bandwidth_nm: float | None = Field(description="of the check, where that of the record is known (triangular slit function)")
    amount: float = Field(description="concentration times path of the check by the record, mol L-1 cm or g L-1 cm")
    amount_u: float
    offset: float
    residual_rms: float
    points: int
    component: ComponentOut = Field(description="the corrected record, to be filed as a new one")
    parent: str | None = Field(description="the record it was made from")
    flags: list[NoteOut]
    provenance: Provenance


def run(request: TransferRequest) -> TransferResponse:
    """Estimate the transfer and correct the record.

    Raises
    ------
    InputError
        Listing every fault of the request with its JSON path.

    Examples
    --------
    >>> w = list(range(400, 601, 4))
    >>> band = lambda x: 50.0 / (1.0 + ((x - 500.0) / 40.0) ** 2)
    >>> request = TransferRequest.model_validate({"schema": "transfer/1",
    ...     "component": {"name": "dye", "wavelength_nm": w, "mass_absorptivity": [band(x) for x in w], "scale_relative_u": 0.01},
    ...     "check": {"id": "b", "wavelength_nm": w, "absorbance": [0.01 * band(x - 1.0) for x in w]}})
    >>> round(run(request).shift_nm, 2)
    1.0
    """
    component, used = _component(request)
    noise, check = gather([("$.noise", request.noise.to_noise), ("$.check", request.check.to_spectrum)])
    A = check.absorbance
    if request.blank is not None:
        (blank,) = gather([("$.blank", request.blank.to_spectrum)])
        if blank.wavelength_nm.shape != check.wavelength_nm.shape or abs(blank.wavelength_nm - check.wavelength_nm).max() > 1e-6:
            raise InputError.single("axes-differ", "$.blank.wavelength_nm", "the blank has other wavelengths than the check")
        A = A - blank.absorbance
    used_readings = check.absorbance <= request.absorbance_limit
    found: Transfer
    (found,) = gather(
        [
            (
                "$",
                lambda: estimate_transfer(
                    component.wavelength_nm,
                    component.absorptivity,
                    check.wavelength_nm[used_readings],
                    A[used_readings],
                    noise,
                    component.conditions.bandwidth_nm,
                ),
            )
        ]
    )
    corrected = _corrected(component, found, f"{component.name}-transferred")
    return TransferResponse(
        shift_nm=found.shift_nm,
        shift_u_nm=found.shift_u_nm,
        broadening_nm2=found.broadening_nm2,
        broadening_u_nm2=found.broadening_u_nm2,
        bandwidth_nm=finite(found.bandwidth_nm),
        amount=found.amount,
        amount_u=found.amount_u,
        offset=found.offset,
        residual_rms=found.residual_rms,
        points=found.points,
        component=corrected,
        parent=used[0].record if used else None,
        flags=[*_saturated(used_readings), *_flags(found, float(A[used_readings].max()))],
        provenance=provenance(
            request, used, request.model_dump(by_alias=True, exclude={"component", "check", "blank", "schema_"}), with_scipy=True
        ),
    )


def _component(request: TransferRequest) -> tuple[Component, list[RecordUsed]]:
    if not isinstance(request.component, str):
        (component,) = gather([("$.component", request.component.to_component)])
        return component, []
    if request.library is None:
        raise InputError.single("missing-key", "$.library", "a component by name needs the library it is in")
    name, library = request.component, request.library
    (collection,) = gather([("$", lambda: load_collection(library))])
    (component,) = gather([("$.component", lambda: collection.component(name))])
    record = collection.records[name]
    return component, [RecordUsed(name=name, record=record.reference, sha256=record.sha256, caution=component.caution)]


def _corrected(component: Component, found: Transfer, name: str) -> ComponentOut:
    w, e, u = corrected_absorptivity(component.wavelength_nm, component.absorptivity, component.absorptivity_u, found)
    molar = component.basis == "molar"
    c = component.conditions
    bandwidth = found.bandwidth_nm if found.bandwidth_nm is not None else None
    conditions = {"solvent": c.solvent, "ph": c.ph, "temperature_c": c.temperature_c, "bandwidth_nm": bandwidth}
    known: dict[str, str | float] = {key: value for key, value in conditions.items() if value is not None}
    return ComponentOut(
        name=name,
        wavelength_nm=w.tolist(),
        molar_absorptivity=e.tolist() if molar else None,
        mass_absorptivity=None if molar else e.tolist(),
        absorptivity_u=u.tolist(),
        scale_relative_u=component.scale_relative_u,
        molar_mass_g_per_mol=component.molar_mass_g_per_mol,
        linear_to=component.linear_to,
        conditions=known or None,
    )


def _saturated(used: np.ndarray) -> list[NoteOut]:
    if used.all():
        return []
    message = f"{int((~used).sum())} readings of the check are above the absorbance limit and were not used"
    return [NoteOut(code="saturated", severity="info", message=message)]


def _flags(found: Transfer, highest: float) -> list[NoteOut]:
    flags = []
    if not found.shift_significant and not found.broadening_significant:
        message = "neither shift nor bandwidth difference is beyond twice its uncertainty: the record needs no correction"
        flags.append(NoteOut(code="nothing-to-correct", severity="info", message=message))
    if found.broadening_nm2 < 0 and found.broadening_significant:
        message = "the check is sharper than the record: sharpening enlarges noise; better measure standards on this instrument"
        flags.append(NoteOut(code="sharpened", severity="warning", message=message))
    if found.residual_rms > max(0.01 * highest, 0.003):
        message = (
            f"shift and bandwidth leave {1000 * found.residual_rms:.1f} mAU unexplained: another substance, solvent or form, "
            "or stray light; the corrected record should not be used"
        )
        flags.append(NoteOut(code="not-alike", severity="warning", message=message))
    return flags
