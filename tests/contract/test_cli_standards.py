"""The commands on standards: from files and a sheet to a record that resolves; what cannot be used, and exit codes."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
DATA = ROOT / "scripts" / "demo_data"
SERIES = [
    str(DATA / "standards.csv"),
    "--sheet",
    str(DATA / "standards-sheet.csv"),
    "--unit",
    "mg/L",
    "--stock-relative-u",
    "0.004",
]
NAMED = [*SERIES, "--name", "tarn-blue-p208"]
DETERMINE = ["determine", str(DATA / "unknowns.csv"), "--standards", *SERIES]


def tinctor(*arguments: str, folder: Path = ROOT, code: int = 0) -> subprocess.CompletedProcess[str]:
    environment = {key: value for key, value in os.environ.items() if key not in ("COLUMNS", "TINCTOR_LIBRARY")}
    done = subprocess.run(
        [sys.executable, "-m", "tinctor", *arguments], cwd=folder, capture_output=True, text=True, env=environment, check=False
    )
    assert done.returncode == code, done.stderr
    if code not in (0, 5):
        assert done.stdout == ""
    return done


def test_from_files_to_a_record_that_resolves(tmp_path: Path) -> None:
    result = str(tmp_path / "lot.json")
    tinctor("standards", *NAMED, "-f", "json", "-o", result, "--solvent", "water", "--ph", "6.5")
    place = str(tmp_path / "our-dyes")
    words = ["--to", place, "--title", "Tarn Blue, lot P-208 (invented)", "--operator", "A. Moor"]
    done = tinctor("library", "add", result, *words, "--new-collection", "Our dyes", "--lot", "P-208")
    assert "filed as our-dyes/tarn-blue-p208" in done.stderr
    assert "sound" in tinctor("library", "check", place).stderr
    again = tinctor("library", "add", result, *words, code=3)
    assert "never changed" in again.stderr
    rows = tinctor("resolve", str(DATA / "unknowns.csv"), "-l", place, "-c", "tarn-blue-p208", "--unit", "mg/L", "-f", "csv").stdout
    found = {row["id"]: row for row in csv.DictReader(io.StringIO(rows))}
    assert abs(float(found["vat7-start"]["concentration"]) - 21.37) < 3 * float(found["vat7-start"]["u"])
    assert "beyond-linear-range" in found["vat7-strong"]["flags"]


def test_tables_say_what_was_left_out_and_why() -> None:
    text = tinctor("standards", *NAMED).stdout
    assert "left out: s7: above the range that was shown to be linear" in text
    assert "6 preparations" in text
    assert tinctor("standards", *NAMED, "--strict", code=5).stdout == text
    kept = tinctor("standards", *NAMED, "--leave-out", "s7").stdout
    assert "left out: s7: left out by the user's word" in kept


def test_the_request_is_the_operation() -> None:
    request = tinctor("standards", *NAMED, "--request").stdout
    document = json.loads(request)
    assert [s["id"] for s in document["blank"]] == ["blank"]
    assert [s["id"] for s in document["standards"] if s.get("replicate_of")] == ["s3-again"]
    done = subprocess.run(
        [sys.executable, "-m", "tinctor", "json", "standards"], input=request, cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert json.loads(done.stdout) == json.loads(tinctor("standards", *NAMED, "-f", "json").stdout)


def test_csv_has_a_line_for_each_wavelength() -> None:
    rows = list(csv.DictReader(io.StringIO(tinctor("standards", *NAMED, "-f", "csv").stdout)))
    assert len(rows) == 151
    top = max(rows, key=lambda row: float(row["mass_absorptivity"]))
    assert float(top["low"]) < float(top["mass_absorptivity"]) < float(top["high"])


def test_unknowns_by_table_and_csv() -> None:
    rows = list(csv.DictReader(io.StringIO(tinctor(*DETERMINE, "-f", "csv").stdout)))
    truth = {"vat7-start": 21.37, "vat7-end": 2.94}
    for row in rows[:2]:
        assert float(row["low"]) < truth[row["id"]] < float(row["high"])
    assert (rows[2]["status"], rows[2]["concentration"], rows[2]["flags"]) == (
        "refused",
        "",
        "outside-standards-range unmodelled-absorber",
    )
    table = tinctor(*DETERMINE, "--wavelength-nm", "612", "--dilution-factor", "10").stdout
    assert "DIN 32645" in table
    assert "vat7-start" in table


def test_one_sample_of_several_scans(tmp_path: Path) -> None:
    lines = (DATA / "unknowns.csv").read_text(encoding="utf-8").splitlines()
    two = "\n".join(",".join([w, a, a]) for w, a, *_ in (line.split(",") for line in lines)).replace("vat7-start,vat7-start", "a,b")
    (tmp_path / "two.csv").write_text(two + "\n", encoding="utf-8")
    rows = tinctor("determine", str(tmp_path / "two.csv"), "--standards", *SERIES, "--one-sample", "-f", "csv").stdout
    assert [row["replicates"] for row in csv.DictReader(io.StringIO(rows))] == ["2"]


def test_all_refused_is_nothing_determined(tmp_path: Path) -> None:
    lines = (DATA / "unknowns.csv").read_text(encoding="utf-8").splitlines()
    strong = "\n".join(",".join([x.split(",")[0], x.split(",")[3]]) for x in lines)
    (tmp_path / "strong.csv").write_text(strong + "\n", encoding="utf-8")
    done = tinctor("determine", str(tmp_path / "strong.csv"), "--standards", *SERIES, code=4)
    assert "outside-standards-range" in done.stderr


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["determine", "x.csv", "--sheet", "s.csv", "--unit", "mg/L"], "--standards"),
        (["determine", "--standards", "x.csv", "--sheet", "s.csv", "--unit", "mg/L"], "unknowns"),
        (["determine", "x.csv", "--additions", "y.csv", "--sheet", "s.csv", "--unit", "mg/L"], "--additions"),
        (["mixtures", "x.csv", "--sheet", "s.csv", "--unit", "mg/L", "--molar-mass", "a"], "x.csv"),
    ],
)
def test_usage(arguments: list[str], words: str) -> None:
    done = subprocess.run([sys.executable, "-m", "tinctor", *arguments], cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode in (2, 3)
    assert done.stdout == ""
    assert words in done.stderr


SHEET = "id,concentration\nblank,0\ns1,4\ns2,8\ns3,12\ns4,18\ns5,24\ns6,32\ns7,44\ns3-again,12\n"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (SHEET.replace("s7,44\n", ""), "no line for 's7'"),
        (SHEET + "s8,50\n", "no spectrum for 's8'"),
        (SHEET.replace("id,", "name,"), "id is the first column"),
        (SHEET.replace("concentration", "conc"), "concentration"),
        ("id,concentration,colour\ns1,4,blue\n", "sheet-columns"),
        (SHEET.replace("s4,18", "s4,eighteen"), "line 6, concentration"),
        (SHEET.replace("s4,18", "s4,"), "line 6, concentration"),
        (SHEET.replace("s4,18", "s4,-18"), "above 0"),
        (SHEET.replace("s4,18", "s3,18"), "stands twice"),
        (SHEET.replace("s4,18", "s4,18,1"), "expected 2 columns"),
        ("id,concentration\n", "one line for each"),
        (SHEET.replace(",", ";").replace("18", "18,5").replace("24", "24.5"), "same decimal mark"),
    ],
)
def test_sheets_that_cannot_be_used(tmp_path: Path, text: str, words: str) -> None:
    (tmp_path / "sheet.csv").write_text(text, encoding="utf-8")
    arguments = [str(DATA / "standards.csv"), "--sheet", str(tmp_path / "sheet.csv"), "--unit", "mg/L", "--name", "x"]
    done = tinctor("standards", *arguments, "-f", "json", code=3)
    assert json.loads(done.stderr)["schema"] == "error/1"
    assert words in done.stderr


def test_a_sheet_with_decimal_commas(tmp_path: Path) -> None:
    (tmp_path / "sheet.csv").write_text(SHEET.replace(",", ";").replace(";18\n", ";18,0\n"), encoding="utf-8")
    arguments = [str(DATA / "standards.csv"), "--sheet", str(tmp_path / "sheet.csv"), "--unit", "mg/L", "--name", "x"]
    assert json.loads(tinctor("standards", *arguments, "--request").stdout)["standards"][3]["concentration"] == 18.0


def test_mixtures_from_files(tmp_path: Path) -> None:
    header = "wavelength_nm," + ",".join(f"m{k}" for k in range(5))
    amounts = [(2, 1), (4, 1), (1, 4), (3, 3), (5, 2)]
    rows = [[0.01 * a * (w + 1) + 0.02 * b * (20 - w) for a, b in amounts] for w in range(20)]
    lines = [f"{400 + 10 * w}," + ",".join(f"{A:.6f}" for A in row) for w, row in enumerate(rows)]

    (tmp_path / "m.csv").write_text("\n".join([header, *lines]) + "\n", encoding="utf-8")
    compositions = "\n".join(f"m{k},{a},{b}" for k, (a, b) in enumerate(amounts))
    (tmp_path / "s.csv").write_text(f"id,first,second\n{compositions}\n", encoding="utf-8")
    command = ["mixtures", str(tmp_path / "m.csv"), "--sheet", str(tmp_path / "s.csv"), "--unit", "mg/L"]
    table = tinctor(*command, "--stock-relative-u", "first=0.004").stdout
    assert "condition number" in table
    out = list(csv.DictReader(io.StringIO(tinctor(*command, "-f", "csv").stdout)))
    assert float(out[0]["first mass_absorptivity"]) == pytest.approx(10.0, rel=1e-6)
    result = str(tmp_path / "m.json")
    tinctor(*command, "--stock-relative-u", "first=0.004", "-f", "json", "-o", result)
    words = ["--to", str(tmp_path / "dyes"), "--title", "First", "--operator", "A. Moor", "--new-collection", "Dyes"]
    tinctor("library", "add", result, *words, "--component", "first")
    refused = tinctor("library", "add", result, *words, "--component", "second", code=3)
    assert "scale" in refused.stderr
    assert "asked for None" in tinctor("library", "add", result, *words, code=3).stderr


def test_transfer_from_files(tmp_path: Path) -> None:
    record = "palewater-dyehouse/tarn-blue"
    lines = (DATA / "unknowns.csv").read_text(encoding="utf-8").splitlines()
    (tmp_path / "check.csv").write_text("\n".join(",".join(x.split(",")[:2]) for x in lines) + "\n", encoding="utf-8")
    text = tinctor("transfer", str(tmp_path / "check.csv"), "--record", record).stdout
    assert "shift" in text
    result = str(tmp_path / "t.json")
    tinctor("transfer", str(tmp_path / "check.csv"), "--record", record, "-f", "json", "-o", result)
    words = ["--to", str(tmp_path / "dyes"), "--title", "Tarn Blue B", "--operator", "A. Moor", "--new-collection", "Dyes"]
    tinctor("library", "add", result, *words, "--name", "tarn-blue-b")
    shown = tinctor("library", "show", str(tmp_path / "dyes" / "tarn-blue-b"))
    assert "parent           palewater-dyehouse/tarn-blue" in shown.stdout
    assert "COLLECTION/RECORD" in tinctor("transfer", str(tmp_path / "check.csv"), "--record", "tarn-blue", code=3).stderr


def test_standard_addition_from_files(tmp_path: Path) -> None:
    sheet = "id,concentration\ns3,0\ns4,6\ns5,12\ns6,20\nblank,0\n"
    lines = [line.split(",") for line in (DATA / "standards.csv").read_text(encoding="utf-8").splitlines()]
    columns = [lines[0].index(name) for name in ("s3", "s4", "s5", "s6")]
    spiked = "\n".join(",".join([row[0], *(row[k] for k in columns)]) for row in lines) + "\n"
    blank = "\n".join(",".join([row[0], row[1]]) for row in lines) + "\n"
    for name, text in (("spiked.csv", spiked), ("blank.csv", blank), ("sheet.csv", sheet.replace("blank,0\n", ""))):
        (tmp_path / name).write_text(text, encoding="utf-8")
    command = ["determine", "--additions", str(tmp_path / "spiked.csv"), "--sheet", str(tmp_path / "sheet.csv"), "--unit", "mg/L"]
    done = tinctor(*command, "--blank", str(tmp_path / "blank.csv"), "--stock-relative-u", "0.004", "-f", "csv")
    (row,) = csv.DictReader(io.StringIO(done.stdout))
    assert float(row["low"]) < 12.0 < float(row["high"])
    assert "no-blank" in tinctor(*command, "-f", "csv").stdout


def test_the_component_of_a_response_goes_into_resolve_as_it_is() -> None:
    component = json.loads(tinctor("standards", *NAMED, "-f", "json").stdout)["component"]
    spectrum = json.loads(tinctor(*DETERMINE, "--request").stdout)["unknowns"][0]
    request = {"schema": "resolve/1", "components": [component], "concentration_unit": "mg/L", "spectra": [spectrum]}
    done = subprocess.run(
        [sys.executable, "-m", "tinctor", "json", "resolve"], input=json.dumps(request), capture_output=True, text=True, check=True
    )
    (found,) = json.loads(done.stdout)["results"][0]["components"]
    assert abs(found["concentration"] - 21.37) < 3 * found["u"]
