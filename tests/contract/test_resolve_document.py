"""The document resolve/1: keys, rules and faults that other software relies on."""

from __future__ import annotations

import copy
import json
import re
from pathlib import Path
from typing import Any

import pytest

from tinctor.errors import InputError
from tinctor.operations.faults import error_body
from tinctor.operations.registry import operation, run_document

ROOT = Path(__file__).resolve().parents[2]
REQUEST: dict[str, Any] = json.loads((ROOT / "scripts" / "demo_data" / "request.json").read_text(encoding="utf-8"))

COMPONENT = (
    "name status unit concentration unconstrained u interval decision_limit detection_limit "
    "budget[].source budget[].u percent_per_nm"
)
FIT = "points residual_rms chi_square degrees_of_freedom durbin_watson condition_number effective_points"
PROVENANCE = "software version numpy request_sha256 records[].name records[].sha256 settings"
RESULT = "id status analytes covariance background[].term background[].value background[].u flags"
SHAPE = (
    {f"results[].components[].{key}" for key in COMPONENT.split()}
    | {f"results[].fit.{key}" for key in FIT.split()}
    | {f"results[].{key}" for key in RESULT.split()}
    | {f"provenance.{key}" for key in PROVENANCE.split()}
    | {"schema"}
)


def changed(**changes: Any) -> dict[str, Any]:
    return {**copy.deepcopy(REQUEST), **changes}


def faults(request: Any) -> list[tuple[str, str]]:
    with pytest.raises(InputError) as caught:
        run_document("resolve", request if isinstance(request, str) else json.dumps(request))
    return [(fault.code, fault.path) for fault in caught.value.faults]


def paths(value: Any, at: str = "") -> set[str]:
    if isinstance(value, dict):
        return {at} | {path for key, item in value.items() for path in paths(item, f"{at}.{key}" if at else key)}
    if isinstance(value, list):
        return {at} | {path for item in value for path in paths(item, f"{at}[]")}
    return {at}


def test_every_key_of_the_contract_is_there_and_every_number_is_finite() -> None:
    response = run_document("resolve", REQUEST)
    assert paths(response) >= SHAPE
    json.dumps(response, allow_nan=False)
    assert [part["source"] for part in response["results"][0]["components"][0]["budget"]] == [
        "noise", "library-scale", "library-shape", "path-length", "dilution", "wavelength",
    ]  # fmt: skip
    covariance, u = response["results"][0]["covariance"], response["results"][0]["components"][1]["u"]
    assert covariance[1][1] == pytest.approx(u**2, rel=1e-12)
    budget = sum(part["u"] ** 2 for part in response["results"][0]["components"][1]["budget"])
    assert budget == pytest.approx(u**2, rel=1e-9)


def test_text_bytes_and_object_give_the_same_document() -> None:
    text = json.dumps(REQUEST)
    assert run_document("resolve", text) == run_document("resolve", text.encode()) == run_document("resolve", REQUEST)


def test_the_digest_is_that_of_the_request_whatever_the_order_of_its_keys() -> None:
    reordered = dict(reversed(list(REQUEST.items())))
    digest = run_document("resolve", REQUEST)["provenance"]["request_sha256"]
    assert digest == run_document("resolve", reordered)["provenance"]["request_sha256"]
    assert digest != run_document("resolve", changed(coverage=0.9))["provenance"]["request_sha256"]
    assert re.fullmatch(r"[0-9a-f]{64}", digest)


def test_settings_are_echoed_with_their_defaults() -> None:
    settings = run_document("resolve", REQUEST)["provenance"]["settings"]
    assert settings["absorbance_limit"] == 2.0
    assert settings["noise"] == {"floor": 0.0005, "transmittance": 0.0001, "wavelength_nm": 0.05}
    assert settings["limits"]["model_error_relative"] == 0.003


def test_results_can_be_computed_again_from_the_records_inline() -> None:
    """By name from the library, or inline: the same numbers."""
    from tinctor.library import load_collection

    collection = load_collection(REQUEST["library"])
    inline = []
    for name in REQUEST["components"]:
        c = collection.component(name)
        assert c.absorptivity_u is not None
        inline.append(
            {
                "name": name, "wavelength_nm": c.wavelength_nm.tolist(), "mass_absorptivity": c.absorptivity.tolist(),
                "absorptivity_u": c.absorptivity_u.tolist(), "scale_relative_u": c.scale_relative_u, "linear_to": c.linear_to,
            }
        )  # fmt: skip
    request = changed(components=inline)
    del request["library"]
    assert run_document("resolve", request)["results"] == run_document("resolve", REQUEST)["results"]


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        ({"colour": 1}, [("unknown-key", "$.colour")]),
        ({"schema": "resolve/2"}, [("unknown-word", "$.schema")]),
        ({"components": []}, [("too-short", "$.components")]),
        ({"components": ["hollin-yellow", "no-such-dye"]}, [("unknown-component", "$.components[1]")]),
        ({"components": ["hollin-yellow", "hollin-yellow"]}, [("duplicate-component", "$.components")]),
        ({"components": [5]}, [("not-an-object", "$.components[0]")]),
        ({"library": None}, [("no-library", "$.library")]),
        ({"library": "nowhere"}, [("unknown-collection", "$.library")]),
        ({"concentration_unit": "ppm"}, [("unknown-unit", "$.concentration_unit")]),
        ({"background": ["offset", "wiggle"]}, [("unknown-word", "$.background[1]")]),
        ({"background": ["offset", "offset"]}, [("duplicate-background", "$.background")]),
        ({"coverage": 1.5}, [("coverage", "$.coverage")]),
        ({"coverage": "0.95"}, [("not-a-number", "$.coverage")]),
        ({"coverage": True}, [("not-a-number", "$.coverage")]),
        ({"noise": {"floor": -1.0}}, [("noise", "$.noise.floor")]),
        ({"wavelength_range_nm": [600, 500]}, [("empty-range", "$.wavelength_range_nm")]),
        ({"wavelengths_nm": [401.0]}, [("wavelength-not-measured", "$.wavelengths_nm[0]")]),
        ({"target_relative_u": 0}, [("target", "$.target_relative_u")]),
        ({"spectra": []}, [("too-short", "$.spectra")]),
    ],
)
def test_faults_of_a_request_carry_their_path(changes: dict[str, Any], expected: list[tuple[str, str]]) -> None:
    assert faults(changed(**changes)) == expected


@pytest.mark.parametrize(
    ("key", "value", "expected"),
    [
        ("path_length_cm", 0, ("path-length", "$.spectra[0].path_length_cm")),
        ("dilution_factor", 0.5, ("dilution-factor", "$.spectra[0].dilution_factor")),
        ("id", "", ("empty-id", "$.spectra[0].id")),
        ("id", 5, ("not-text", "$.spectra[0].id")),
        ("wavelength_nm", [400, 400], ("duplicate-wavelength", "$.spectra[0].wavelength_nm[1]")),
        ("absorbance", [0.1], ("wrong-length", "$.spectra[0].absorbance")),
    ],
)
def test_faults_of_a_spectrum_carry_their_path(key: str, value: Any, expected: tuple[str, str]) -> None:
    request = changed()
    request["spectra"][0][key] = value
    assert expected in faults(request)


def test_all_faults_are_reported_together() -> None:
    request = changed(coverage=2.0)
    request["components"] = ["zzz", "hollin-yellow"]
    request["spectra"][0]["path_length_cm"] = -1
    assert {path for _, path in faults(request)} == {"$.coverage", "$.components[0]", "$.spectra[0].path_length_cm"}


@pytest.mark.parametrize("number", ["NaN", "Infinity", "-Infinity", "1e400", "1" + "0" * 400])
def test_numbers_that_are_not_finite_are_refused(number: str) -> None:
    text = json.dumps(changed(coverage=0.123456)).replace("0.123456", number)
    assert faults(text) == [("not-finite", "$.coverage")]


def test_duplicate_keys_are_refused() -> None:
    text = json.dumps(REQUEST).replace('"coverage"', '"x"')
    assert faults(text[:-1] + ', "library": "published"}') == [("duplicate-key", "$.library")]


def test_a_request_must_be_an_object_with_its_schema() -> None:
    assert faults("[]") == [("not-an-object", "$")]
    request = changed()
    del request["schema"]
    assert faults(request) == [("missing-key", "$.schema")]


def test_mass_units_need_the_molar_mass() -> None:
    component = {"name": "x", "wavelength_nm": [400, 700], "molar_absorptivity": [1e4, 1e4]}
    assert faults(changed(components=[component], concentration_unit="mg/L")) == [("molar-mass-needed", "$.concentration_unit")]


def test_an_inline_component_needs_exactly_one_absorptivity() -> None:
    both = {"name": "x", "wavelength_nm": [400, 700], "molar_absorptivity": [1, 2], "mass_absorptivity": [1, 2]}
    assert faults(changed(components=[both])) == [("one-absorptivity", "$.components[0]")]
    assert faults(changed(components=[{"name": "x", "wavelength_nm": [400, 700]}])) == [("one-absorptivity", "$.components[0]")]


def test_spectra_on_different_axes_are_each_resolved_on_their_own() -> None:
    first = copy.deepcopy(REQUEST["spectra"][0])
    second = {**first, "id": "half", "wavelength_nm": first["wavelength_nm"][::2], "absorbance": first["absorbance"][::2]}
    both = run_document("resolve", changed(spectra=[second, first]))["results"]
    assert [result["id"] for result in both] == ["half", first["id"]]
    assert both[1]["components"] == run_document("resolve", REQUEST)["results"][0]["components"]
    assert [r["fit"]["points"] for r in both] == [76, 151]


def test_refused_figures_are_null_and_their_analyte_keeps_its_total_out() -> None:
    twin = {"name": "twin", "wavelength_nm": [380, 720], "mass_absorptivity": [5.0, 10.0], "analyte": "pair"}
    other = {**twin, "name": "other", "mass_absorptivity": [10.0, 20.0]}
    result = run_document("resolve", changed(components=["hollin-yellow", twin, other]))["results"][0]
    assert [c["status"] for c in result["components"]][1:] == ["refused", "refused"]
    assert result["components"][1]["concentration"] is None
    assert result["components"][1]["interval"] is None
    assert result["covariance"][1] == [None, None, None]
    assert result["components"][0]["concentration"] is not None
    assert result["analytes"][0]["concentration"] is None
    assert [flag["code"] for flag in result["flags"] if flag["severity"] == "refusal"] == ["collinear"]
    assert result["flags"][0]["components"] == ["twin", "other"]


def test_components_of_one_analyte_are_also_reported_as_a_total() -> None:
    w = REQUEST["spectra"][0]["wavelength_nm"]
    acid = {"name": "acid", "wavelength_nm": w, "mass_absorptivity": [30 - 0.09 * (x - 400) for x in w], "analyte": "dye"}
    base = {"name": "base", "wavelength_nm": w, "mass_absorptivity": [3 + 0.09 * (x - 400) for x in w], "analyte": "dye"}
    A = [0.01 * a + 0.02 * b for a, b in zip(acid["mass_absorptivity"], base["mass_absorptivity"], strict=True)]  # type: ignore[arg-type]
    spectrum = {"id": "s", "wavelength_nm": w, "absorbance": A}
    result = run_document("resolve", changed(components=[acid, base], spectra=[spectrum], background=[]))["results"][0]
    total = result["analytes"][0]
    assert total["components"] == ["acid", "base"]
    assert total["concentration"] == pytest.approx(0.03, rel=1e-6)
    variance = sum(sum(row) for row in result["covariance"])
    assert total["u"] ** 2 == pytest.approx(variance, rel=1e-9)
    assert total["u"] < sum(c["u"] for c in result["components"])


def test_conditions_of_the_samples_are_compared_with_the_records() -> None:
    same = run_document("resolve", changed(conditions={"solvent": "water", "ph": 6.5}))["results"][0]
    other = run_document("resolve", changed(conditions={"solvent": "ethanol"}))["results"][0]
    assert "conditions-differ" not in [flag["code"] for flag in same["flags"]]
    assert "conditions-differ" in [flag["code"] for flag in other["flags"]]
    assert (same["status"], other["status"]) == ("accepted", "flagged")


def test_undeclared_uncertainties_are_listed() -> None:
    bare = {"name": "x", "wavelength_nm": [380, 720], "mass_absorptivity": [20.0, 5.0]}
    component = run_document("resolve", changed(components=[bare]))["results"][0]["components"][0]
    assert component["not_declared"] == ["library-scale", "library-shape"]
    assert run_document("resolve", REQUEST)["results"][0]["components"][0]["not_declared"] == []


def test_error_bodies_have_their_fixed_keys_and_at_most_fifty_faults() -> None:
    request = changed(spectra=[{"id": str(k)} for k in range(60)])
    with pytest.raises(InputError) as caught:
        run_document("resolve", request)
    body = error_body(caught.value)
    assert list(body) == ["schema", "status", "code", "message", "faults", "more_faults"]
    assert (body["schema"], body["status"], len(body["faults"]), body["more_faults"]) == ("error/1", 422, 50, 70)
    assert list(body["faults"][0]) == ["code", "path", "message", "hint"]
    json.dumps(body, allow_nan=False)


def test_unknown_operations_are_refused() -> None:
    with pytest.raises(
        InputError, match="one of calibrate determine dilution mixtures overlap predict resolve standards transfer wavelengths"
    ):
        operation("conjure")


def test_schemas_describe_the_documents() -> None:
    op = operation("resolve")
    request = op.request.model_json_schema(by_alias=True)
    assert set(REQUEST) <= set(request["properties"])
    assert request["additionalProperties"] is False
    assert "results" in op.response.model_json_schema(by_alias=True, mode="serialization")["properties"]


def test_provenance_does_not_depend_on_what_else_the_process_has_done() -> None:
    import tinctor.standards.distributions  # noqa: F401  (loads scipy, which resolve does not use)

    assert run_document("resolve", changed())["provenance"]["scipy"] is None
