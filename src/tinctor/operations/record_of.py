"""From a response document to the file of a library record: what the numbers say, and the operator's word on the rest."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from pydantic import ValidationError

from tinctor.component import Component
from tinctor.errors import InputError
from tinctor.operations.mixtures import MixturesResponse
from tinctor.operations.shared import ComponentIn
from tinctor.operations.standards import StandardsResponse
from tinctor.operations.standards_results import ComponentOut
from tinctor.operations.transfer import TransferResponse

__all__ = ["Word", "record_of"]

RESPONSES: dict[str, type[StandardsResponse] | type[MixturesResponse] | type[TransferResponse]] = {
    "standards/1": StandardsResponse,
    "mixtures/1": MixturesResponse,
    "transfer/1": TransferResponse,
}


@dataclass(frozen=True, slots=True)
class Word:
    """What only the operator can say. `None` and "" are left out of the record, or filled from the response."""

    operator: str
    title: str
    name: str | None = None
    component: str | None = None
    formula: str | None = None
    cas: str | None = None
    lot: str | None = None
    analyte: str | None = None
    caution: str = ""
    citation: str | None = None
    link: str | None = None
    licence: str | None = None
    scale_relative_u: float | None = None
    scale_reason: str | None = None


def record_of(document: dict[str, Any], word: Word) -> tuple[dict[str, Any], Component]:
    """Return the keys of a record's TOML file and its component.

    Parameters
    ----------
    document
        Response of standards, mixtures or transfer, as read from its JSON.
    word
        The operator's.

    Raises
    ------
    InputError
        For another document, a component that is not in it, or a scale uncertainty that nobody has stated.
    """
    response = _response(document)
    out = _component(response, word.component)
    component = _domain(out, word.name or out.name)
    scale, reason = _scale(response, out, word)
    obtained, changed = _history(response)
    settings = response.provenance.settings
    conditions = {**(out.conditions or {}), **({"lot": word.lot} if word.lot else {})}
    record: dict[str, Any] = {
        "schema": "record/1",
        "name": word.name or out.name,
        "title": word.title,
        "formula": word.formula,
        "cas": word.cas,
        "molar_mass_g_per_mol": out.molar_mass_g_per_mol,
        "basis": component.basis,
        "analyte": word.analyte,
        "caution": word.caution,
        "operator": word.operator,
        "parent": response.parent if isinstance(response, TransferResponse) else None,
        "scale_relative_u": scale,
        "scale_relative_u_reason": reason,
        "conditions": conditions,
        "source": {
            "citation": word.citation or settings.get("source") or f"own measurement, entered by {word.operator}",
            "link": word.link or "not known: the laboratory's own measurement",
            "licence": word.licence or "the laboratory's own",
            "obtained": obtained,
            "changed": changed,
        },
    }
    if out.linear_to is not None:
        record["linear_range"] = {"linear_to": out.linear_to, "reason": _linear_reason(response)}
    return {key: value for key, value in record.items() if value not in (None, {}, "")}, component


def _response(document: dict[str, Any]) -> StandardsResponse | MixturesResponse | TransferResponse:
    schema = document.get("schema") if isinstance(document, dict) else None
    if schema not in RESPONSES:
        raise InputError.single(
            "not-a-response",
            "$.schema",
            f"expected the JSON result of standards, mixtures or transfer, found schema {schema!r}",
            "make it with `tinctor standards ... --format json`",
        )
    try:
        return RESPONSES[schema].model_validate(document)
    except ValidationError as error:
        from tinctor.operations.faults import faults_of

        raise faults_of(error) from error


def _component(response: StandardsResponse | MixturesResponse | TransferResponse, name: str | None) -> ComponentOut:
    components = response.components if isinstance(response, MixturesResponse) else [response.component]
    if name is None and len(components) == 1:
        return components[0]
    found = [c for c in components if c.name == name]
    if not found:
        names = ", ".join(repr(c.name) for c in components)
        raise InputError.single(
            "unknown-component", "--component", f"the result holds {names}, asked for {name!r}", "name one of them"
        )
    return found[0]


def _domain(out: ComponentOut, name: str) -> Component:
    values = out.model_dump(exclude_none=True)
    return ComponentIn.model_validate({**values, "name": name}).to_component()


def _scale(response: StandardsResponse | MixturesResponse | TransferResponse, out: ComponentOut, word: Word) -> tuple[float, str]:
    if word.scale_relative_u is not None:
        if not word.scale_reason:
            raise InputError.single("scale-reason", "--scale-reason", "a scale uncertainty by your word needs its reason")
        return word.scale_relative_u, word.scale_reason
    if out.scale_relative_u is None:
        raise InputError.single(
            "scale-not-known",
            "--scale-relative-u",
            "the result has no scale uncertainty: the stock's was not stated, or one standard alone cannot show its own",
            "state stock_relative_u (and concentration_u) with the standards, or give --scale-relative-u with --scale-reason",
        )
    if isinstance(response, StandardsResponse):
        u = response.uncertainty
        series = f"{100 * (u.series or 0):.2g} % from the standards ({u.series_basis})"
        return out.scale_relative_u, f"stock {100 * (u.stock or 0):.2g} %, {series}, path length {100 * u.path_length:.2g} %"
    if isinstance(response, MixturesResponse):
        return out.scale_relative_u, "stock as stated, and the scatter of the mixtures about the model"
    return out.scale_relative_u, f"that of the record it was made from ({response.parent or 'given inline'})"


def _history(response: StandardsResponse | MixturesResponse | TransferResponse) -> tuple[str, str]:
    software = f"tinctor {response.provenance.version}, request SHA-256 {response.provenance.request_sha256}"
    if isinstance(response, StandardsResponse):
        used = [s for s in response.standards_used if s.amount > 0]
        amounts = f"{used[0].amount:.4g} to {used[-1].amount:.4g} {response.base_unit} cm"
        obtained = f"{len(used)} preparations, {amounts} (concentration times path): {', '.join(s.id for s in used)}"
        left_out = "; ".join(f"{d.id}: {d.reason}" for d in response.dropped) or "nothing"
        line = "fitted intercept" if response.intercept_test.fitted else "through zero, blank taken off where one was given"
        return obtained, f"slope at each wavelength, {line}; left out: {left_out}. {software}"
    if isinstance(response, MixturesResponse):
        return (
            f"{len(response.mixtures)} mixtures of known composition, condition number {response.design.condition_number:.3g}",
            f"least squares at each wavelength for {', '.join(response.design.components)} together. {software}",
        )
    return (
        f"corrected from {response.parent or 'a component given inline'} by a check spectrum",
        f"shift {response.shift_nm:+.3f} nm, broadening {response.broadening_nm2:+.3f} nm2 applied. {software}",
    )


def _linear_reason(response: StandardsResponse | MixturesResponse | TransferResponse) -> str:
    if not isinstance(response, StandardsResponse):
        return "that of the record it was made from"
    test = response.linearity.tests[-1]
    words = f"{test.method} test on {test.points} points"
    if test.f is not None and test.probability is not None:
        words += f": F = {test.f:.3g}, probability {test.probability:.2g}"
    shapes = "shapes of all standards agree" if response.superposition.agree else "shapes of the standards agree up to there"
    return f"{words}; {shapes}"
