"""determine/1 and mixtures/1 as documents: results, refusals, faults with their paths. Invented data."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tinctor.errors import InputError, UndeterminedError
from tinctor.operations.registry import run_document

W = np.linspace(450.0, 650.0, 51)
E = 40.0 * np.exp(-0.5 * ((W - 550.0) / 30.0) ** 2)
RNG = np.random.default_rng(2)


def spectrum(name: str, mg_per_l: float, **more: Any) -> dict[str, Any]:
    A = E * mg_per_l / 1000 + 0.0005 * RNG.normal(size=W.size)
    return {"id": name, "wavelength_nm": W.tolist(), "absorbance": A.tolist(), **more}


STANDARDS = [spectrum(f"s{k}", 4.0 * k, concentration=4.0 * k) for k in range(1, 7)]


def request(*unknowns: dict[str, Any], **changes: Any) -> dict[str, Any]:
    base = {"schema": "determine/1", "concentration_unit": "mg/L", "stock_relative_u": 0.003, "standards": STANDARDS}
    return {**base, "unknowns": list(unknowns), **changes}


def faults(document: dict[str, Any], operation: str = "determine") -> dict[str, str]:
    with pytest.raises(InputError) as caught:
        run_document(operation, document)
    return {f.path: f.code for f in caught.value.faults}


@pytest.mark.parametrize("wavelength_nm", [None, 550.0])
def test_unknowns_come_back_with_path_and_dilution_undone(wavelength_nm: float | None) -> None:
    extra = {} if wavelength_nm is None else {"wavelength_nm": wavelength_nm}
    unknown = spectrum("u", 10.0, dilution_factor=25.0, dilution_factor_u=0.1)
    thin = spectrum("thin", 10.0, path_length_cm=0.5)
    response = run_document("determine", request(unknown, thin, **extra))
    first, second = response["results"]
    assert (first["status"], first["unit"]) == ("accepted", "mg/L")
    assert first["interval"][0] < 250.0 < first["interval"][1]
    assert second["interval"][0] < 20.0 < second["interval"][1]
    for one in (first, second):
        assert one["interval"][0] < one["interval_line"][0] < one["concentration"] < one["interval_line"][1] < one["interval"][1]
        assert one["interval_approximate"][0] == pytest.approx(one["interval_line"][0], rel=1e-3)
    assert [limit["definition"].split(",")[0] for limit in response["limits"]] == [
        "calibration line",
        "known standard deviation",
        "ICH Q2(R2)",
    ]


def test_replicates_are_averaged_and_narrow_the_interval() -> None:
    single = run_document("determine", request(spectrum("u", 10.0)))["results"][0]
    several = request(spectrum("u", 10.0), *(spectrum(f"u{k}", 10.0, replicate_of="u") for k in range(3)))
    (mean,) = run_document("determine", several)["results"]
    assert mean["replicates"] == 4
    assert mean["u"] < single["u"]
    assert mean["replicate_sd"] > 0


def test_outside_the_range_is_refused_unless_asked_for() -> None:
    (refused,) = run_document("determine", request(spectrum("u", 40.0)))["results"]
    assert (refused["status"], refused["concentration"], refused["u"], refused["interval"]) == ("refused", None, None, None)
    assert refused["flags"][0]["code"] == "outside-standards-range"
    assert refused["outside_range_percent"] == pytest.approx(66.7, abs=0.5)
    (given,) = run_document("determine", request(spectrum("u", 40.0), extrapolate=True))["results"]
    assert given["status"] == "flagged"
    assert given["concentration"] == pytest.approx(40.0, rel=0.01)
    assert "66.7 %" in given["flags"][0]["message"] or "66" in given["flags"][0]["message"]


def test_a_saturated_unknown_is_refused_alone() -> None:
    good, bad = run_document("determine", request(spectrum("good", 10.0), spectrum("bad", 70.0)))["results"]
    assert (good["status"], bad["status"]) == ("accepted", "refused")
    assert bad["flags"][0]["code"] == "saturated"


def test_another_absorber_in_the_unknown_is_seen_by_the_whole_spectrum() -> None:
    odd = spectrum("u", 10.0)
    odd["absorbance"] = (np.array(odd["absorbance"]) + 0.05 * np.exp(-0.5 * ((W - 500) / 15) ** 2)).tolist()
    (found,) = run_document("determine", request(odd))["results"]
    assert (found["status"], found["flags"][0]["code"]) == ("flagged", "unmodelled-absorber")
    assert abs(found["flags"][0]["wavelength_nm"][0] - 500) < 10


def test_nothing_there_is_below_the_decision_limit() -> None:
    (found,) = run_document("determine", request(spectrum("u", 0.0)))["results"]
    assert "below-decision-limit" in [f["code"] for f in found["flags"]]


def test_a_single_standard_is_a_proportion_with_its_caution() -> None:
    document = request(
        spectrum("u", 3.0),
        standards=[{**STANDARDS[0], "concentration_u": 0.02}],
        model_error={"absorbance": 0.0, "relative": 0.003},
    )
    (found,) = run_document("determine", document)["results"]
    assert found["concentration"] == pytest.approx(3.0, rel=0.02)
    assert found["u"] == pytest.approx(3.0 * np.hypot(0.005, 0.003), rel=0.4)
    assert "single-standard" in [f["code"] for f in found["flags"]]


def test_standard_addition_finds_what_was_there() -> None:
    added = [spectrum(f"a{k}", 6.0 + 4.0 * k, concentration=4.0 * k) for k in range(5)]
    document = request(standards=added, design="addition", wavelength_nm=550.0, blank=[spectrum("blank", 0.0)])
    del document["unknowns"]
    (found,) = run_document("determine", document)["results"]
    assert found["interval"][0] < 6.0 < found["interval"][1]
    assert found["status"] == "accepted"
    (without,) = run_document("determine", {**document, "blank": []})["results"]
    assert "no-blank" in [f["code"] for f in without["flags"]]
    assert faults({**document, "standards": added[1:]}) == {"$.standards": "too-few-additions"}


def test_every_fault_of_a_request_is_placed() -> None:
    other = {**spectrum("other", 5.0), "wavelength_nm": (W + 1).tolist()}
    found = faults(request(spectrum("u", 5.0), spectrum("u", 6.0), other, spectrum("v", 5.0, replicate_of="nobody")))
    assert found == {
        "$.unknowns[1].id": "duplicate-id",
        "$.unknowns[2].wavelength_nm": "axes-differ",
        "$.unknowns[3].replicate_of": "replicate",
    }
    assert faults(request()) == {"$.unknowns": "no-unknowns"}
    assert faults(request(spectrum("u", 5.0), wavelength_nm=551.0)) == {"$.wavelength_nm": "wavelength-not-measured"}
    assert faults(request(spectrum("u", 5.0), concentration_unit="ppm")) == {"$.concentration_unit": "unknown-unit"}
    negative = [{**STANDARDS[0], "concentration": -1.0}, *STANDARDS[1:]]
    assert faults(request(spectrum("u", 5.0), standards=negative)) == {"$.standards[0].concentration": "concentration"}
    far = faults(request(spectrum("u", 5.0), wavelength_range_nm=[700.0, 800.0]))
    assert far == {"$.wavelength_range_nm": "empty-range"}
    mixed = request(spectrum("u", 5.0), basis="molar")
    assert faults(mixed) == {"$.concentration_unit": "molar-mass-needed"}
    assert faults(request(spectrum("u", 5.0), significance=2.0)) == {"$.significance": "significance"}


def mixture(name: str, a: float, b: float) -> dict[str, Any]:
    A = (E * a + np.roll(E, 12) * b) / 1000 + 0.0003 * RNG.normal(size=W.size)
    return {"id": name, "concentrations": {"a": a, "b": b}, "wavelength_nm": W.tolist(), "absorbance": A.tolist()}


COMPOSITIONS = [(5, 5), (10, 5), (5, 10), (15, 5), (5, 15), (10, 10), (15, 15), (12, 8)]
MIXTURES = [mixture(f"m{k}", a, b) for k, (a, b) in enumerate(COMPOSITIONS)]


def mixtures(rows: list[dict[str, Any]], **changes: Any) -> dict[str, Any]:
    return {"schema": "mixtures/1", "concentration_unit": "mg/L", "mixtures": rows, **changes}


def test_components_of_mixtures_come_out_with_their_uncertainties() -> None:
    response = run_document("mixtures", mixtures(MIXTURES, stock_relative_u={"a": 0.004}))
    a, b = response["components"]
    np.testing.assert_allclose(a["mass_absorptivity"], E, atol=0.1)
    np.testing.assert_allclose(b["mass_absorptivity"], np.roll(E, 12), atol=0.1)
    assert a["scale_relative_u"] > 0.004
    assert b["scale_relative_u"] is None
    assert {f["code"] for f in response["flags"]} == {"stock-not-stated", "linearity-not-tested", "blank-not-given"}


def test_a_wrong_composition_is_named() -> None:
    rows = [*MIXTURES[:3], {**MIXTURES[3], "concentrations": {"a": 5, "b": 15}}, *MIXTURES[4:]]
    response = run_document("mixtures", mixtures(rows))
    named = [f for f in response["flags"] if f["code"] == "standard-off-the-curve"]
    assert [f["standards"] for f in named] == [["m3"]]
    assert "stated 5, shows" in named[0]["message"]


def test_compositions_that_cannot_tell_are_refused_or_flagged() -> None:
    tied = [mixture(f"m{k}", c, 2 * c) for k, c in enumerate((2, 4, 6, 8))]
    assert faults(mixtures(tied), "mixtures") == {"$.standards": "design"}
    nearly = [mixture(f"m{k}", c, 2 * c + 0.1 * (k % 2)) for k, c in enumerate((2, 4, 6, 8))]
    assert "design-weak" in [f["code"] for f in run_document("mixtures", mixtures(nearly))["flags"]]
    assert faults(mixtures(MIXTURES[:2]), "mixtures") == {"$.standards": "too-few-mixtures"}
    found = faults(mixtures([{**MIXTURES[0], "concentrations": {"a": -1.0, "b": 1.0}}, *MIXTURES[1:]]), "mixtures")
    assert found == {"$.mixtures[0].concentrations.a": "negative"}
    assert faults(mixtures(MIXTURES, stock_relative_u={"c": 0.1}), "mixtures") == {"$.stock_relative_u": "unknown-component"}


def test_nothing_can_be_read_from_a_line_that_does_not_rise() -> None:
    flat = [{**s, "absorbance": [0.0] * W.size} for s in STANDARDS]
    with pytest.raises(UndeterminedError):
        run_document("determine", request(spectrum("u", 3.0), standards=flat))
    with pytest.raises(UndeterminedError):
        run_document("determine", request(spectrum("u", 3.0), standards=flat, wavelength_nm=550.0))


def test_what_is_just_beyond_the_last_standard_is_at_it_and_noise_below_zero_is_a_figure() -> None:
    found = run_document("determine", request(spectrum("top", 24.02), spectrum("none", -0.02), model_error={"absorbance": 0.001}))
    assert [r["status"] for r in found["results"]] == ["accepted", "accepted"]
    assert found["results"][1]["interval"][0] < 0


def test_the_blank_is_in_the_decision_limit() -> None:
    plain = run_document("determine", request(spectrum("u", 3.0), intercept="zero"))["limits"][0]["decision"]
    blanked = request(spectrum("u", 3.0), intercept="zero", blank=[spectrum("blank", 0.0)])
    assert run_document("determine", blanked)["limits"][0]["decision"] > 1.2 * plain


def test_path_lengths_of_mixtures_count() -> None:
    thin = [{**m, "absorbance": (np.array(m["absorbance"]) / 2).tolist(), "path_length_cm": 0.5} for m in MIXTURES]
    a, _ = run_document("mixtures", mixtures(thin))["components"]
    np.testing.assert_allclose(a["mass_absorptivity"], E, atol=0.1)


def test_fewer_wavelengths_than_components_are_refused() -> None:
    narrow = [{**m, "wavelength_nm": [550.0], "absorbance": m["absorbance"][25:26]} for m in MIXTURES]
    assert faults(mixtures(narrow), "mixtures") == {"$.mixtures": "too-few-wavelengths"}


def test_components_of_one_shape_are_said_to_be_alike() -> None:
    def twin(name: str, a: float, b: float) -> dict[str, Any]:
        A = E * (a + 2 * b) / 1000 + 0.0003 * RNG.normal(size=W.size)
        return {"id": name, "concentrations": {"a": a, "b": b}, "wavelength_nm": W.tolist(), "absorbance": A.tolist()}

    response = run_document("mixtures", mixtures([twin(f"m{k}", a, b) for k, (a, b) in enumerate(COMPOSITIONS[:6])]))
    assert "collinear" in [f["code"] for f in response["flags"]]
    assert "standard-off-the-curve" not in [f["code"] for f in response["flags"]]


def test_scatter_of_the_standards_is_in_the_unknown_whatever_was_declared() -> None:
    wild = [
        {**s, "absorbance": (np.array(s["absorbance"]) * (1 + 0.02 * (-1) ** k)).tolist(), "concentration_u": 0.001}
        for k, s in enumerate(STANDARDS)
    ]
    (declared,) = run_document("determine", request(spectrum("u", 20.0), standards=wild, intercept="zero"))["results"]
    assert declared["u"] > 0.01 * 20.0
    exact = [{**s, "absorbance": (E * s["concentration"] / 1000).tolist()} for s in STANDARDS]
    (lucky,) = run_document("determine", request(spectrum("u", 20.0), standards=exact, intercept="zero"))["results"]
    # 0.3 % of dilution for each of six standards, and 0.3 % of the stock
    assert lucky["u"] > 1.1 * 0.003 * 20.0


def test_a_blank_on_other_wavelengths_is_refused_in_standard_addition_too() -> None:
    added = [spectrum(f"a{k}", 6.0 + 4.0 * k, concentration=4.0 * k) for k in range(5)]
    document = {k: v for k, v in request(standards=added, design="addition").items() if k != "unknowns"}
    blank = spectrum("blank", 0.0)
    for w, A in ((W + 200, blank["absorbance"]), (W[:25], blank["absorbance"][:25])):
        wrong = {**blank, "wavelength_nm": w.tolist(), "absorbance": A}
        assert faults({**document, "blank": [wrong]}) == {"$.blank[0].wavelength_nm": "axes-differ"}
    assert faults({**document, "wavelength_range_nm": [500.0, 600.0]}) == {"$.wavelength_range_nm": "range-with-addition"}


def test_replicates_of_two_samples_are_flagged_and_a_share_is_below_one() -> None:
    document = request(spectrum("u", 5.3), spectrum("v", 10.7, replicate_of="u"))
    (found,) = run_document("determine", document)["results"]
    assert "replicates-differ" in [f["code"] for f in found["flags"]]
    (sound,) = run_document("determine", request(spectrum("u", 5.3), spectrum("v", 5.3, replicate_of="u")))["results"]
    assert "replicates-differ" not in [f["code"] for f in sound["flags"]]
    assert faults(request(spectrum("u", 5.0), stock_relative_u=40.0)) == {"$.stock_relative_u": "not-a-share"}
