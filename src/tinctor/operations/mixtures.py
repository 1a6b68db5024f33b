"""The operation mixtures/1: absorptivities of several components from mixtures of known composition."""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from pydantic import Field

from tinctor.arrays import quoted
from tinctor.errors import Fault, InputError
from tinctor.operations.provenance import Provenance, provenance
from tinctor.operations.shared import Number, Numbers, RequestModel, ResponseModel, SpectrumIn, gather
from tinctor.operations.standards_results import ComponentOut, NoteOut, listed
from tinctor.spectrum import Spectrum
from tinctor.standards.mixtures import WEAK_DESIGN, MixtureCalibration, calibrate_mixtures
from tinctor.standards.series import same_axis
from tinctor.units import CONCENTRATION_UNITS, check_unit

__all__ = ["MixturesRequest", "MixturesResponse", "run"]

Schema = Literal["mixtures/1"]


class MixtureIn(RequestModel):
    """One mixture of known composition."""

    id: str
    concentrations: dict[str, Number] = Field(min_length=1, description="by component, in concentration_unit; 0 when left out")
    wavelength_nm: Numbers
    absorbance: Numbers
    path_length_cm: Number = 1.0

    def to_spectrum(self) -> Spectrum:
        """Return the measured spectrum."""
        return Spectrum(self.id, self.wavelength_nm, self.absorbance, path_length_cm=self.path_length_cm)


class MixturesRequest(RequestModel):
    """Absorptivities where pure standards cannot be had."""

    schema_: Annotated[Schema, Field(alias="schema")] = "mixtures/1"
    mixtures: list[MixtureIn] = Field(min_length=2, max_length=10_000)
    concentration_unit: str
    molar_mass_g_per_mol: dict[str, Number] = Field(default={}, description="by component; kept with it")
    blank: list[SpectrumIn] = Field(default=[], max_length=100)
    intercept: Literal["zero", "fitted"] = "zero"
    stock_relative_u: dict[str, Number] = Field(default={}, description="by component: weighing, purity, flask of its stock")
    absorbance_limit: Number = Field(2.0, gt=0)


class DesignOut(ResponseModel):
    """Whether the compositions can tell the components apart."""

    components: list[str]
    condition_number: float
    variance_inflation: list[float]
    degrees_of_freedom: int


class MixtureOut(ResponseModel):
    """One mixture: amounts (concentration times path, base units) as stated and as its spectrum shows them."""

    id: str
    stated: list[float]
    apparent: list[float]
    studentised: list[float]
    leverage: float


class MixturesResponse(ResponseModel):
    """Components ready for resolve, and what stands behind them."""

    schema_: Annotated[Schema, Field(alias="schema")] = "mixtures/1"
    components: list[ComponentOut]
    wavelength_nm: list[float]
    slope_u: list[list[float | None]] = Field(description="standard error of each component's absorptivity")
    intercept: list[float | None]
    intercept_u: list[float | None]
    residual_sd: list[float | None]
    design: DesignOut
    mixtures: list[MixtureOut]
    flags: list[NoteOut]
    provenance: Provenance


def run(request: MixturesRequest) -> MixturesResponse:
    """Find the absorptivities of the components of known mixtures.

    Raises
    ------
    InputError
        Listing every fault of the request, or what the compositions cannot tell apart.

    Examples
    --------
    >>> def mixture(k, a, b):
    ...     return {"id": f"m{k}", "concentrations": {"a": a, "b": b}, "wavelength_nm": [500, 600],
    ...             "absorbance": [20 * a + 5 * b, 2 * a + 30 * b]}
    >>> rows = [mixture(0, 0.01, 0.0), mixture(1, 0.0, 0.01), mixture(2, 0.01, 0.01), mixture(3, 0.02, 0.01)]
    >>> response = run(MixturesRequest.model_validate({"schema": "mixtures/1", "concentration_unit": "g/L", "mixtures": rows}))
    >>> [[round(e, 6) for e in c.mass_absorptivity] for c in response.components]
    [[20.0, 2.0], [5.0, 30.0]]
    """
    names, amounts, spectra = _read(request)
    A = np.stack([s.absorbance for s in spectra])
    if request.blank:
        blanks = gather([(f"$.blank[{k}]", b.to_spectrum) for k, b in enumerate(request.blank)])
        faults = same_axis([("$.mixtures[0]", spectra[0]), *((f"$.blank[{k}]", b) for k, b in enumerate(blanks))])
        if faults:
            raise InputError(faults)
        A = A - np.mean([b.absorbance for b in blanks], axis=0)
    result: MixtureCalibration
    (result,) = gather([("$", lambda: calibrate_mixtures(amounts, A, names, fitted_intercept=request.intercept == "fitted"))])
    molar = CONCENTRATION_UNITS[request.concentration_unit][0] == "molar"
    w = spectra[0].wavelength_nm.tolist()
    return MixturesResponse(
        components=[_component(request, result, names[j], j, w, molar=molar) for j in range(len(names))],
        wavelength_nm=w,
        slope_u=[listed(u) for u in result.absorptivity_u],
        intercept=listed(result.intercept),
        intercept_u=listed(result.intercept_u),
        residual_sd=listed(result.residual_sd),
        design=DesignOut(
            components=list(names),
            condition_number=result.condition_number,
            variance_inflation=result.variance_inflation.tolist(),
            degrees_of_freedom=result.degrees_of_freedom,
        ),
        mixtures=[
            MixtureOut(
                id=m.id,
                stated=amounts[k].tolist(),
                apparent=result.apparent[k].tolist(),
                studentised=result.studentised[k].tolist(),
                leverage=float(result.leverage[k]),
            )
            for k, m in enumerate(request.mixtures)
        ],
        flags=_flags(request, result, names),
        provenance=provenance(
            request, [], request.model_dump(by_alias=True, exclude={"mixtures", "blank", "schema_"}), with_scipy=True
        ),
    )


def _read(request: MixturesRequest) -> tuple[tuple[str, ...], np.ndarray, list[Spectrum]]:
    """Names in order of first mention, amounts (n, p) in base units times cm, spectra."""
    factor = CONCENTRATION_UNITS[check_unit(request.concentration_unit)][1]
    names = tuple(dict.fromkeys(name for m in request.mixtures for name in m.concentrations))
    spectra = gather([(f"$.mixtures[{k}]", m.to_spectrum) for k, m in enumerate(request.mixtures)])
    faults = same_axis([(f"$.mixtures[{k}]", s) for k, s in enumerate(spectra)])
    seen: set[str] = set()
    for k, m in enumerate(request.mixtures):
        if m.id in seen:
            faults.append(Fault("duplicate-id", f"$.mixtures[{k}].id", f"the id {m.id!r} stands twice"))
        seen.add(m.id)
        faults += [
            Fault("negative", f"$.mixtures[{k}].concentrations.{name}", f"expected at least 0, found {c:g}")
            for name, c in m.concentrations.items()
            if c < 0
        ]
        if spectra[k].absorbance.max() > request.absorbance_limit:
            top = int(spectra[k].absorbance.argmax())
            reading, at = spectra[k].absorbance[top], spectra[k].wavelength_nm[top]
            message = f"{m.id!r} reads {reading:.3g} at {at:g} nm, above the absorbance limit {request.absorbance_limit:g}"
            faults.append(Fault("saturated", f"$.mixtures[{k}].absorbance[{top}]", message, "dilute, or leave the wavelength out"))
    for key in ("molar_mass_g_per_mol", "stock_relative_u"):
        unknown = [name for name in getattr(request, key) if name not in names]
        if unknown:
            faults.append(Fault("unknown-component", f"$.{key}", f"{quoted(unknown)} is in no mixture"))
        faults += [
            Fault("negative", f"$.{key}.{name}", f"expected above 0, found {value:g}")
            for name, value in getattr(request, key).items()
            if value <= 0
        ]
    if faults:
        raise InputError(faults)
    amounts = np.array([[m.concentrations.get(name, 0.0) * m.path_length_cm / factor for name in names] for m in request.mixtures])
    return names, amounts, spectra


def _component(
    request: MixturesRequest, result: MixtureCalibration, name: str, j: int, wavelength_nm: list[float], *, molar: bool
) -> ComponentOut:
    stock = request.stock_relative_u.get(name)
    spectrum = result.absorptivity[j].tolist()
    return ComponentOut(
        name=name,
        wavelength_nm=wavelength_nm,
        molar_absorptivity=spectrum if molar else None,
        mass_absorptivity=None if molar else spectrum,
        absorptivity_u=result.absorptivity_u[j].tolist(),
        scale_relative_u=None if stock is None else float(np.hypot(stock, result.scale_relative_u[j])),
        molar_mass_g_per_mol=request.molar_mass_g_per_mol.get(name),
    )


def _flags(request: MixturesRequest, result: MixtureCalibration, names: tuple[str, ...]) -> list[NoteOut]:
    flags = []
    weak = [j for j in range(len(names)) if result.variance_inflation[j] > WEAK_DESIGN]
    if weak:
        words = ", ".join(f"{names[j]} {result.variance_inflation[j]:.3g}" for j in weak)
        message = (
            f"the compositions hardly tell components apart: variance inflation {words} (above {WEAK_DESIGN:g}); "
            "add mixtures in which they vary independently"
        )
        flags.append(NoteOut(code="design-weak", severity="warning", message=message))
    for k, m in enumerate(request.mixtures):
        off = [j for j in range(len(names)) if abs(result.studentised[k, j]) > result.studentised_limit]
        if off:
            words = ", ".join(f"{names[j]} stated {_shown(request, result, k, j)}" for j in off)
            message = f"{m.id!r} does not show what is stated: {words} (studentised beyond {result.studentised_limit:.1f})"
            flags.append(NoteOut(code="standard-off-the-curve", severity="warning", message=message, standards=[m.id]))
    if result.alike:
        message = "the spectra found are nearly the same: labels were not looked at, and a fit can hardly tell them apart"
        flags.append(NoteOut(code="collinear", severity="warning", message=message))
    if not request.blank and request.intercept == "zero":
        message = (
            "no blank is given and the lines go through zero: what solvent and cell absorb is counted as the components'; "
            "give a blank, or fit an intercept"
        )
        flags.append(NoteOut(code="blank-not-given", severity="warning", message=message))
    missing = [name for name in names if name not in request.stock_relative_u]
    if missing:
        message = f"stock_relative_u is not stated for {quoted(missing)}: the scale uncertainty is not known without it"
        flags.append(NoteOut(code="stock-not-stated", severity="warning", message=message))
    message = "mixtures do not show up to which concentration each component follows Beer's law: linear_to is left open"
    flags.append(NoteOut(code="linearity-not-tested", severity="info", message=message))
    return flags


def _shown(request: MixturesRequest, result: MixtureCalibration, k: int, j: int) -> str:
    m = request.mixtures[k]
    name = list(dict.fromkeys(name for one in request.mixtures for name in one.concentrations))[j]
    factor = CONCENTRATION_UNITS[request.concentration_unit][1]
    apparent = result.apparent[k, j] / m.path_length_cm * factor
    return f"{m.concentrations.get(name, 0.0):g}, shows {apparent:.4g} {request.concentration_unit}"
