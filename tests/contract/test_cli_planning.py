"""overlap, wavelengths and dilution at the terminal and as documents: contract keys, one answer at each door, charts, refusals."""

from __future__ import annotations

import csv
import io
import json
import os
import re
import subprocess
import sys
from pathlib import Path
from typing import Any
from xml.etree import ElementTree as ET

import pytest

from tinctor import InputError, run_document

ROOT = Path(__file__).resolve().parents[2]
DYES = ["-l", "palewater-dyehouse", "-c", "hollin-yellow,bramble-red,tarn-blue"]
PLANNED = ["--planned", "hollin-yellow=0.8", "--planned", "bramble-red=0.55,tarn-blue=0.6", "--unit", "g/L"]
OPERATIONS = {
    "overlap": [*DYES, *PLANNED, "--dilution-factor", "50"],
    "wavelengths": [*DYES, *PLANNED, "--dilution-factor", "50", "--count", "4", "--step-nm", "5"],
    "dilution": [*DYES, *PLANNED, "--cells-cm", "0.5,1"],
}
DOCUMENT: dict[str, Any] = {
    "library": "palewater-dyehouse",
    "components": ["hollin-yellow", "bramble-red", "tarn-blue"],
    "concentration_unit": "mg/L",
    "concentrations": {"hollin-yellow": 800, "bramble-red": 550, "tarn-blue": 600},
}


def tinctor(*arguments: str, folder: Path = ROOT, code: int = 0, text: str | None = None) -> subprocess.CompletedProcess[str]:
    environment = {key: value for key, value in os.environ.items() if key not in ("COLUMNS", "TINCTOR_LIBRARY")}
    done = subprocess.run(
        [sys.executable, "-m", "tinctor", *arguments],
        cwd=folder,
        capture_output=True,
        text=True,
        env=environment,
        input=text,
        check=False,
    )
    assert done.returncode == code, done.stderr
    if code not in (0, 5):
        assert done.stdout == ""
    assert "Traceback" not in done.stderr
    return done


def run(operation: str, **changes: Any) -> dict[str, Any]:
    return run_document(operation, {"schema": f"{operation}/1", **DOCUMENT, **changes})


@pytest.mark.parametrize("operation", OPERATIONS)
def test_a_command_line_is_the_document_at_every_door(operation: str) -> None:
    request = tinctor(operation, *OPERATIONS[operation], "--request").stdout
    through_json = json.loads(tinctor("json", operation, text=request).stdout)
    assert through_json == json.loads(tinctor(operation, *OPERATIONS[operation], "-f", "json").stdout)
    assert through_json == run_document(operation, request)
    settings = through_json["provenance"]["settings"]
    assert settings["background"] == ["offset"]
    assert [record["name"] for record in through_json["provenance"]["records"]] == DOCUMENT["components"]
    schema = json.loads(tinctor("schema", operation).stdout)
    assert set(schema["response"]["required"]) <= set(through_json)


def test_keys_of_the_contract() -> None:
    overlap = run("overlap", dilution_factor=50)
    assert set(overlap) >= {"schema", "similarity", "condition_number", "components", "groups", "provenance"}
    keys = {
        "selectivity", "sensitivity", "variance_inflation", "percent_per_nm", "expected_u", "expected_relative_u",
        "decision_limit", "detection_limit", "price", "verdict", "reason",
    }  # fmt: skip
    assert all(set(component) >= keys for component in overlap["components"])
    assert set(overlap["components"][0]["price"]) == {"slope", "scatter", "shift"}
    wavelengths = run("wavelengths", dilution_factor=50, step_nm=5)
    assert set(wavelengths) >= {"wavelengths_nm", "expected_u", "condition_number", "efficiency", "exact"}
    dilution = run("dilution")
    assert "choices" in dilution
    assert set(dilution["choices"][0]) >= {
        "path_length_cm",
        "dilution_factor",
        "volumes",
        "highest_absorbance",
        "expected_relative_u",
    }


def test_units_are_those_asked_for() -> None:
    mg, g = (run("overlap", dilution_factor=50), run("overlap", dilution_factor=50, concentration_unit="g/L",
             concentrations={k: v / 1000 for k, v in DOCUMENT["concentrations"].items()}))  # fmt: skip
    for a, b in zip(mg["components"], g["components"], strict=True):
        assert a["expected_u"] == pytest.approx(1000 * b["expected_u"], rel=1e-12)
        assert a["sensitivity"] == pytest.approx(b["sensitivity"] / 1000, rel=1e-12)
        assert a["detection_limit"] == pytest.approx(1000 * b["detection_limit"], rel=1e-12)
        assert a["expected_relative_u"] == pytest.approx(b["expected_relative_u"], rel=1e-12)


def test_per_cent_on_fibre_is_the_same_as_its_concentration() -> None:
    plain = run("dilution", concentration_unit="g/L", concentrations={"hollin-yellow": 2.0, "bramble-red": 1.0, "tarn-blue": 0.5})
    keys = {key: value for key, value in DOCUMENT.items() if key not in ("concentrations", "concentration_unit")}
    fibre = {"hollin-yellow": 2.0, "bramble-red": 1.0, "tarn-blue": 0.5}
    on_fibre = run_document("dilution", {"schema": "dilution/1", **keys, "on_fibre_percent": fibre, "liquor_ratio_l_per_kg": 10})
    assert on_fibre["choices"] == plain["choices"]


def test_two_dilutions_are_a_warning() -> None:
    answer = run("dilution", components=["bramble-red", "tarn-blue"], concentrations={"bramble-red": 5000, "tarn-blue": 10})
    assert answer["choices"] == []
    assert len(answer["together"]) == 2
    assert "two do together" in answer["warning"]
    served = [[part["served"] for part in choice["expected_relative_u"]] for choice in answer["together"]]
    assert [any(column) for column in zip(*served, strict=True)] == [True, True]
    assert {part["why_not"] for choice in answer["together"] for part in choice["expected_relative_u"]} > {""}


def test_words_of_the_answer() -> None:
    yes = run("overlap", dilution_factor=50, target_relative_u=0.05)
    assert yes["summary"].startswith("Yes")
    assert yes["target_met"] is True
    no = run("overlap", dilution_factor=50, target_relative_u=0.001)
    assert no["summary"].startswith("No")
    assert no["target_met"] is False
    assert run("overlap", dilution_factor=50)["target_met"] is None


def inline(name: str, values: list[float]) -> dict[str, Any]:
    return {"name": name, "wavelength_nm": [400, 450, 500, 550, 600, 650], "molar_absorptivity": values, "scale_relative_u": 0.01}


def test_which_dye_makes_it_impossible() -> None:
    a, b, c = inline("a", [1, 9, 3, 1, 0, 0]), inline("b", [0, 1, 3, 9, 2, 0]), inline("c", [0.5, 5, 3, 5, 1, 0])
    answer = run_document(
        "overlap", {"schema": "overlap/1", "background": [], "components": [a, b, c, inline("d", [0, 0, 0, 1, 5, 9])]}
    )
    assert answer["conflicts"] == [["a", "b", "c"]]
    assert answer["groups"][0]["components"] == ["a", "b", "c"]
    assert "Without any one of 'a', 'b', 'c' the rest would do." in answer["summary"]
    assert [c["expected_u"] for c in answer["components"]][:3] == [None] * 3
    assert {part["left_out"]: part["verdict"] for part in answer["left_out"]}["d"] == "inseparable"
    text = json.dumps(answer)
    assert "NaN" not in text
    assert "Infinity" not in text


@pytest.mark.parametrize("operation", OPERATIONS)
def test_tables_and_csv(operation: str) -> None:
    table = tinctor(operation, *OPERATIONS[operation]).stdout
    assert "bramble-red" in table
    rows = list(csv.DictReader(io.StringIO(tinctor(operation, *OPERATIONS[operation], "-f", "csv").stdout)))
    document = json.loads(tinctor(operation, *OPERATIONS[operation], "-f", "json").stdout)
    if operation == "overlap":
        assert [float(row["expected_u"]) for row in rows] == [c["expected_u"] for c in document["components"]]
    elif operation == "wavelengths":
        chosen = [row for row in rows if row["chosen"] == "yes"]
        assert [float(w) for w in chosen[0]["wavelengths_nm"].split()] == document["wavelengths_nm"]
        assert ", ".join(f"{w:g}" for w in document["wavelengths_nm"]) in table
    else:
        assert float(rows[0]["dilution_factor"]) == document["choices"][0]["dilution_factor"]
        assert len(rows) == 3 * len(document["choices"])


@pytest.mark.parametrize("operation", OPERATIONS)
@pytest.mark.parametrize("kind", ["svg", "png", "pdf"])
def test_charts_are_files_of_their_kind(operation: str, kind: str, tmp_path: Path) -> None:
    chart = tmp_path / f"chart.{kind}"
    plain = tinctor(operation, *OPERATIONS[operation]).stdout
    assert tinctor(operation, *OPERATIONS[operation], "--plot", str(chart)).stdout == plain
    content = chart.read_bytes()
    starts = {"svg": b"<?xml", "png": b"\x89PNG", "pdf": b"%PDF"}
    assert content.startswith(starts[kind])
    assert list(tmp_path.iterdir()) == [chart]
    if kind != "svg":
        return
    root = ET.fromstring(content)
    words = " ".join(filter(None, (e.text for e in root.iter("{http://www.w3.org/2000/svg}text"))))
    assert "wavelength / nm" in words
    assert "absorptivity / (L g⁻¹ cm⁻¹)" in words or operation == "dilution"
    assert "bramble-red" in words
    assert "relative standard uncertainty / %" in words or operation == "overlap"
    again = tmp_path / "again.svg"
    tinctor(operation, *OPERATIONS[operation], "--plot", str(again))
    assert again.read_bytes() == content  # no date in it


def test_lines_differ_by_dash_and_grey_fields_by_their_numbers(tmp_path: Path) -> None:
    """In black and white print and without colour vision: each component has a dash of its own, each field its number."""
    chart = tmp_path / "chart.svg"
    tinctor("overlap", *OPERATIONS["overlap"], "--plot", str(chart))
    text = chart.read_text(encoding="utf-8")
    lines = re.findall(r'style="fill: none; ([^"]*)stroke: (#[0-9a-f]{6}); stroke-width: 1.5', text)
    dashes = {re.search(r"stroke-dasharray: ([^;]*)", before).group(1) if "dasharray" in before else "" for before, _ in lines}  # type: ignore[union-attr]
    assert len({colour for _, colour in lines}) == 3
    assert len(dashes) == 3
    assert text.count(">1.000<") == 3


def test_names_are_drawn_as_they_are(tmp_path: Path) -> None:
    components = [{**inline("a$b_{c}$", [1, 9, 3, 1, 0, 0])}, inline("x", [0, 1, 3, 9, 2, 0])]
    response = run_document("overlap", {"schema": "overlap/1", "background": [], "include_spectra": True, "components": components})
    from tinctor.operations.overlap import OverlapResponse
    from tinctor.report import charts

    charts.save(charts.overlap_figure(OverlapResponse.model_validate(response)), tmp_path / "chart.svg", "svg")
    assert "a$b_{c}$" in (tmp_path / "chart.svg").read_text(encoding="utf-8")


def test_matplotlib_is_loaded_for_a_chart_only(tmp_path: Path) -> None:
    code = (
        "import sys\nfrom tinctor.cli.main import app\n"
        "try:\n    app(sys.argv[1:])\nexcept SystemExit:\n    pass\n"
        "sys.stderr.write('loaded' if 'matplotlib' in sys.modules else 'not loaded')"
    )
    for more, expected in ((), "not loaded"), (("--plot", str(tmp_path / "c.svg")), "loaded"):
        done = subprocess.run(
            [sys.executable, "-c", code, "overlap", *OPERATIONS["overlap"], *more],
            capture_output=True,
            text=True,
            cwd=ROOT,
            check=True,
        )
        assert done.stderr == expected


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (["overlap", "-l", "palewater-dyehouse", "-c", "tarn-blue"], 3, "expected at least two components, found 1"),
        (["overlap", "-l", "palewater-dyehouse", "-c", "tarn-blue,tarn-blue"], 3, "found twice: 'tarn-blue'"),
        (["overlap", "-l", "palewater-dyehouse", "-c", "tarn-blue,tarm-blue"], 3, "did you mean 'tarn-blue'"),
        (
            ["overlap", *DYES, "--planned", "tarn-blue=1"],
            3,
            "no concentration is planned for 'hollin-yellow', 'bramble-red' [at --planned]",
        ),
        (["overlap", *DYES, "--planned", "tarn-blue"], 2, "expected NAME=VALUE, found 'tarn-blue'"),
        (["overlap", *DYES, "--planned", "tarn-blue=much"], 2, "expected a number, found 'much'"),
        (["overlap", *DYES, "--planned", "tarn-blue=1,tarn-blue=2"], 2, "stands twice"),
        (["overlap", *DYES, "--background", "none,offset"], 2, "none stands alone"),
        (["overlap", *DYES, "--plot", "chart.gif"], 2, "ends in .svg, .png, .pdf"),
        (["overlap", *DYES, "--plot", "no/such/folder/chart.svg"], 3, "the chart cannot be written"),
        (["overlap", *DYES, "--range-nm", "800", "900"], 3, "no wavelength in the range asked for"),
        (["wavelengths", *DYES, "--count", "3"], 3, "need at least 4 wavelengths, found 3"),
        (["wavelengths", *DYES, "--count", "6", "--minimum-spacing-nm", "100"], 3, "4 would"),
        (["wavelengths", *DYES, "--candidates-nm", "450,500,blue"], 2, "expected a number, found 'blue'"),
        (["wavelengths", *DYES, "--criterion", "best"], 2, "worst-relative-u"),
        (["wavelengths", *DYES, "--candidates-nm", "250,450,500,550,600"], 3, "found 250 nm"),
        (["dilution", *DYES], 3, "none is given"),
        (["dilution", *DYES, "--on-fibre", "tarn-blue=1"], 3, "belong together"),
        (["dilution", *DYES, *PLANNED, "--absorbance-window", "1", "x"], 2, "'--absorbance-window'"),
        (["dilution", *DYES, *PLANNED, "--flasks-ml", "10", "--pipettes-ml", "9", "--steps", "1"], 3, "[at --flasks-ml]"),
        (["dilution", *DYES, *PLANNED, "--on-fibre", "tarn-blue=1", "--liquor-ratio", "10"], 3, "not both"),
    ],
)
def test_refusals_say_what_was_expected_and_what_to_do(arguments: list[str], code: int, words: str, tmp_path: Path) -> None:
    done = tinctor(*arguments, code=code)
    flat = " ".join(re.sub(r"[│╭╮╰╯─]", " ", done.stderr).split())
    assert words in flat


@pytest.mark.parametrize(
    ("operation", "changes", "path"),
    [
        ("overlap", {"path_length_cm": "1"}, "$.path_length_cm"),
        ("overlap", {"targets": 1}, "$.targets"),
        ("overlap", {"concentrations": {"hollin-yellow": 1}}, "$.concentrations"),
        ("overlap", {"concentrations": {}}, "$.concentrations"),
        ("overlap", {"noise": {"floor": -1}}, "$.noise.floor"),
        ("wavelengths", {"count": 0}, "$.count"),
        ("wavelengths", {"count": True}, "$.count"),
        ("wavelengths", {"candidates_nm": []}, "$.candidates_nm"),
        ("dilution", {"cells_cm": [0.0]}, "$.cells_cm[0]"),
        ("dilution", {"steps": 3}, "$.steps"),
        ("dilution", {"liquor_ratio_l_per_kg": 10}, "$.on_fibre_percent"),
    ],
)
def test_faults_of_a_document_have_their_path(operation: str, changes: dict[str, Any], path: str) -> None:
    with pytest.raises(InputError) as caught:
        run(operation, **changes)
    assert path in [fault.path for fault in caught.value.faults]


def test_strict_means_anything_that_needs_a_look() -> None:
    assert tinctor("overlap", *OPERATIONS["overlap"], "--strict").stdout
    tinctor("overlap", *OPERATIONS["overlap"], "--strict", "--target-relative-u", "0.001", code=5)
    tinctor("overlap", *DYES, *PLANNED, "--strict", code=5)  # undiluted: saturated, and beyond the linear range
    few = ["dilution", "-l", "palewater-dyehouse", "-c", "bramble-red,tarn-blue", "--planned", "bramble-red=5,tarn-blue=0.01"]
    tinctor(*few, "--unit", "g/L", "--strict", code=5)


def test_flags_of_a_plan() -> None:
    codes = {flag["code"]: flag["message"] for flag in run("overlap")["flags"]}
    assert set(codes) == {"saturated", "beyond-linear-range"}
    assert "bramble-red: 17.19 times" in codes["beyond-linear-range"]  # 0.55 g/L in 1 cm against 0.032 g/L cm
    assert run("overlap", dilution_factor=50)["flags"] == []
    few = run("overlap", dilution_factor=50, wavelengths_nm=[420, 520, 600, 700])
    assert [flag["code"] for flag in few["flags"]] == ["too-few-points"]


def test_the_uncertainty_of_a_dilution_is_that_of_its_volumes() -> None:
    choice = run("dilution", pipettes_ml=[10], flasks_ml=[500], steps=1)["choices"][0]
    relative = ((0.020 / 10) ** 2 + (0.25 / 500) ** 2) ** 0.5 / 6**0.5  # class A, triangular
    assert choice["dilution_factor_u"] == pytest.approx(50 * relative, rel=1e-9)


def test_a_component_of_which_nothing_is_planned_can_still_be_in_the_way() -> None:
    a, b = inline("a", [1, 9, 3, 1, 0, 0]), inline("b", [2, 18, 6, 2, 0, 0])
    request = {
        "schema": "overlap/1",
        "background": [],
        "components": [a, b],
        "target_relative_u": 0.05,
        "concentration_unit": "mol/L",
    }
    answer = run_document("overlap", {**request, "concentrations": {"a": 0.05, "b": 0.0}})
    assert answer["summary"] == "No: 'a' would miss 5 %. 'b' could not be told from the others."
    assert [c["target_met"] for c in answer["components"]] == [False, None]
    assert answer["condition_number"] is None
