"""calibrate/1 and predict/1 as documents: contract keys, honest validation, refusals, models that travel as JSON."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tinctor import InputError, run_document

ROOT = Path(__file__).resolve().parents[2]
W = np.arange(420.0, 621.0, 4.0)
BANDS = np.stack([np.exp(-0.5 * ((W - at) / 25.0) ** 2) for at in (470.0, 505.0, 560.0)])


def spectrum(name: str, c: np.ndarray, rng: np.random.Generator, extra: float = 0.0, **more: Any) -> dict[str, Any]:
    A = c @ BANDS + extra * np.exp(-0.5 * ((W - 600.0) / 8.0) ** 2) + 0.001 * rng.normal(size=W.size)
    return {"id": name, "wavelength_nm": W.tolist(), "absorbance": A.tolist(), **more}


def request(n: int = 24, seed: int = 1, **changes: Any) -> dict[str, Any]:
    rng = np.random.default_rng(seed)
    C = rng.uniform(0.1, 1.0, (n, 3))
    return {
        "schema": "calibrate/1",
        "unit": "mg/L",
        "max_components": 6,
        "spectra": [spectrum(f"m{k}", c, rng) for k, c in enumerate(C)],
        "references": [{"id": f"m{k}", "values": {"red": c[0], "blue": c[2]}} for k, c in enumerate(C)],
        **changes,
    }


def calibrated(**changes: Any) -> dict[str, Any]:
    return run_document("calibrate", request(**changes))


@pytest.fixture(scope="module")
def model() -> dict[str, Any]:
    result: dict[str, Any] = calibrated(reference_u={"red": 0.001, "blue": 0.001})["model"]
    return result


def test_keys_and_sizes_of_the_answer() -> None:
    answer = calibrated()
    json.dumps(answer, allow_nan=False)
    assert set(answer) == {"schema", "model", "analytes", "samples", "limits", "outliers", "flags", "provenance"}
    assert [a["name"] for a in answer["analytes"]] == ["red", "blue"]
    for analyte in answer["analytes"]:
        assert [row["components"] for row in analyte["table"]] == list(range(7))
        assert set(analyte["table"][1]) == {"components", "rmsec", "rmsecv", "rmsecv_u", "rmsep", "bias", "sep", "r2"}
        assert analyte["chosen_components"] == 3  # as many as there are absorbers
        assert analyte["table"][3]["rmsecv"] < 0.1 * analyte["table"][1]["rmsecv"]
        assert analyte["table"][3]["rmsep"] is None
        assert analyte["figures_of_merit"]["sensitivity"] > 0
        low, high = analyte["figures_of_merit"]["detection_limit"]
        assert 0 < low <= high
    assert len(answer["samples"]) == 48
    assert all(len(sample["scores"]) == 3 for sample in answer["samples"])
    assert answer["provenance"]["scipy"]


def test_a_test_set_takes_no_part_in_training() -> None:
    more = request(n=10, seed=7)
    test = {
        "spectra": [{**s, "id": f"t{k}"} for k, s in enumerate(more["spectra"])],
        "references": [{**r, "id": f"t{k}"} for k, r in enumerate(more["references"])],
    }
    with_test, without = calibrated(test=test), calibrated()
    assert with_test["model"]["models"] == without["model"]["models"]
    rmsep = [row["rmsep"] for row in with_test["analytes"][0]["table"]]
    assert rmsep[0] is None
    assert rmsep[3] < 0.01
    leaked = {"spectra": more["spectra"][:1], "references": more["references"][:1]}
    with pytest.raises(InputError, match="in training and in the test set"):
        calibrated(test=leaked)


def test_the_sample_s_cell_and_dilution_are_undone(model: dict[str, Any]) -> None:
    rng = np.random.default_rng(3)
    c = np.array([0.5, 0.4, 0.6])
    plain = spectrum("a", c, rng)
    half = {**plain, "id": "b", "absorbance": [a / 8 for a in plain["absorbance"]], "path_length_cm": 0.5, "dilution_factor": 4.0}
    first, second = run_document("predict", {"schema": "predict/1", "model": model, "spectra": [plain, half]})["results"]
    assert second["analytes"][0]["value"] == pytest.approx(first["analytes"][0]["value"], rel=1e-9)
    assert first["analytes"][0]["value"] == pytest.approx(0.5, abs=0.01)
    assert first["status"] == "accepted"


def test_what_was_not_taught_is_flagged_or_refused(model: dict[str, Any]) -> None:
    rng = np.random.default_rng(3)
    c = np.array([0.5, 0.4, 0.6])
    spectra = [
        spectrum("stranger", c, rng, extra=0.008),
        spectrum("much", c, rng, extra=0.5),
        spectrum("strong", 4 * c, rng),
        spectrum("little-above", np.array([1.05, 0.4, 0.6]), rng),
    ]
    results = run_document("predict", {"schema": "predict/1", "model": model, "spectra": spectra})["results"]
    by_id = {r["id"]: r for r in results}
    assert by_id["stranger"]["status"] == "flagged"
    assert "unmodelled-absorber" in {f["code"] for f in by_id["stranger"]["flags"]}
    for name in ("much", "strong"):
        assert by_id[name]["status"] == "refused"
        assert [a["value"] for a in by_id[name]["analytes"]] == [None, None]
        assert "refusal" in {f["severity"] for f in by_id[name]["flags"]}
    assert "outside-reference-range" in {f["code"] for f in by_id["little-above"]["flags"]}
    assert by_id["little-above"]["analytes"][0]["value"] == pytest.approx(1.05, abs=0.02)


def test_joint_and_separate_models() -> None:
    joint = calibrated(joint=True)
    assert len(joint["model"]["models"]) == 1
    assert joint["model"]["models"][0]["names"] == ["red", "blue"]
    assert len(calibrated()["model"]["models"]) == 2


@pytest.mark.parametrize("selection", ["one-standard-error", "f-test", "minimum", 4])
def test_rules_of_selection(selection: Any) -> None:
    answer = calibrated(selection=selection)
    chosen = [a["chosen_components"] for a in answer["analytes"]]
    assert chosen == [4, 4] if selection == 4 else all(3 <= h <= 6 for h in chosen)


def test_replicates_need_groups_and_stay_together() -> None:
    document = request(n=10, max_components=4)
    rng = np.random.default_rng(5)
    for k in range(10):
        copy = {**document["spectra"][k], "id": f"m{k}b"}
        copy["absorbance"] = (np.array(copy["absorbance"]) + 0.001 * rng.normal(size=W.size)).tolist()
        document["spectra"].append(copy)
        document["references"].append({**document["references"][k], "id": f"m{k}b"})
    with pytest.raises(InputError, match="replicates of one preparation") as caught:
        run_document("calibrate", document)
    assert {fault.code for fault in caught.value.faults} == {"groups-needed"}
    groups = {f"m{k}{b}": f"preparation {k}" for k in range(10) for b in ("", "b")}
    answer = run_document("calibrate", {**document, "groups": groups})
    assert len(answer["analytes"][0]["rmsecv_by_level"]) == 10


def test_a_wrong_reference_is_named() -> None:
    document = request(reference_u={"red": 0.001, "blue": 0.001}, selection=3)
    document["references"][5]["values"]["red"] += 0.2
    outliers = [o for o in run_document("calibrate", document)["outliers"] if o["analytes"] == ["red"]]
    assert [o["id"] for o in outliers if any("reference off the model" in reason for reason in o["reasons"])] == ["m5"]
    alarms = 0
    for seed in range(20, 40):
        outliers = run_document("calibrate", request(seed=seed, selection=3, max_components=3))["outliers"]
        alarms += sum(any("reference off" in reason for reason in o["reasons"]) for o in outliers)
    assert alarms <= 7  # 40 models, a chance of 5 % each, and PLS uses up more degrees of freedom than it has components


@pytest.mark.parametrize(
    ("changes", "path", "words"),
    [
        ({"max_components": 30}, "$.max_components", "allows 22 components"),
        ({"selection": 9}, "$.selection", "at most max_components"),
        ({"folds": 50}, "$.folds", "from 2 to 24 folds"),
        ({"reference_u": {"green": 0.1}}, "$.reference_u.green", "not among the analytes"),
        ({"reference_u": {"red": -0.1}}, "$.reference_u.red", "negative"),
        ({"groups": {"m99": "a"}}, "$.groups.m99", "not among the spectra"),
        ({"preprocess": [{"step": "savitzky-golay", "window": 4}]}, "$.preprocess[0].window", "odd number"),
        ({"preprocess": [{"step": "range", "low_nm": 700, "high_nm": 800}]}, "$.preprocess[0]", "no reading lies"),
        ({"preprocess": [{"step": "smooth"}]}, "$.preprocess[0].step", "expected"),
        ({"unit": 5}, "$.unit", "expected text"),
    ],
)
def test_faults_of_a_calibration(changes: dict[str, Any], path: str, words: str) -> None:
    with pytest.raises(InputError) as caught:
        calibrated(**changes)
    assert any(fault.path.startswith(path) and words in fault.message for fault in caught.value.faults), caught.value


def test_references_and_spectra_must_belong_together() -> None:
    for change, code in (
        (lambda d: d["references"].pop(), "missing-reference"),
        (lambda d: d["spectra"].pop(), "missing-spectrum"),
        (lambda d: d["references"][2]["values"].pop("blue"), "analytes-differ"),
        (lambda d: d["spectra"][3].__setitem__("id", "m2"), "duplicate-id"),
        (lambda d: [r["values"].__setitem__("red", 0.5) for r in d["references"]], "constant-reference"),
    ):
        document = request()
        change(document)
        with pytest.raises(InputError) as caught:
            run_document("calibrate", document)
        assert code in {fault.code for fault in caught.value.faults}


def test_a_damaged_model_predicts_nothing(model: dict[str, Any]) -> None:
    rng = np.random.default_rng(3)
    spectra = [spectrum("a", np.array([0.5, 0.4, 0.6]), rng)]
    damaged = json.loads(json.dumps(model))
    damaged["models"][0]["intercept"][0] += 1e-9
    with pytest.raises(InputError, match="checksum") as caught:
        run_document("predict", {"schema": "predict/1", "model": damaged, "spectra": spectra})
    assert caught.value.faults[0].path == "$.model.checksum"
    narrow = {**spectra[0], "wavelength_nm": W[5:].tolist(), "absorbance": spectra[0]["absorbance"][5:]}
    with pytest.raises(InputError, match="nothing is extrapolated"):
        run_document("predict", {"schema": "predict/1", "model": model, "spectra": [narrow]})


def test_documents_go_through_the_terminal() -> None:
    def through(operation: str, document: dict[str, Any]) -> dict[str, Any]:
        done = subprocess.run(
            [sys.executable, "-m", "tinctor", "json", operation],
            input=json.dumps(document),
            capture_output=True,
            text=True,
            cwd=ROOT,
            check=True,
        )
        result: dict[str, Any] = json.loads(done.stdout)
        return result

    document = request(n=12, max_components=4)
    answer = through("calibrate", document)
    assert answer == run_document("calibrate", document)
    predict = {"schema": "predict/1", "model": answer["model"], "spectra": document["spectra"][:2]}
    assert through("predict", predict) == run_document("predict", predict)
