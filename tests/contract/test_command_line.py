"""The command line: exit codes, streams, forms of output, and what it loads."""

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
LIBRARY = ["--library", "palewater-dyehouse", "-c", "hollin-yellow,bramble-red", "-c", "tarn-blue"]
RUN = [
    "resolve",
    str(DATA / "vat-run.csv"),
    "--samples",
    str(DATA / "vat-run-samples.csv"),
    *LIBRARY,
    "-b",
    "offset",
    "-b",
    "scatter",
]


def tinctor(*arguments: str, stdin: bytes = b"", **environment: str) -> subprocess.CompletedProcess[str]:
    env = {**{k: v for k, v in os.environ.items() if k not in ("COLUMNS", "TINCTOR_LIBRARY")}, **environment}
    done = subprocess.run([sys.executable, "-m", "tinctor", *arguments], input=stdin, capture_output=True, env=env, check=False)
    return subprocess.CompletedProcess(done.args, done.returncode, done.stdout.decode(), done.stderr.decode())


def written(folder: Path, text: str, name: str = "x.csv") -> str:
    (folder / name).write_text(text, encoding="utf-8")
    return str(folder / name)


def test_table_for_people() -> None:
    done = tinctor(*RUN)
    assert done.returncode == 0
    assert done.stderr == ""
    lines = done.stdout.splitlines()
    assert "vat3-0800" in lines[3]
    assert "0.8036 ± 0.0092" in lines[3]
    assert "15 accepted, 5 flagged of 20 spectra" in done.stdout
    for word in ("saturated", "scatter-large", "unmodelled-absorber", "offset-large", "beyond-linear-range"):
        assert word in done.stdout
    assert "\x1b" not in done.stdout  # no terminal codes into a pipe


def test_json_is_the_document_of_the_other_door() -> None:
    request = tinctor(*RUN, "--request")
    through_json = tinctor("json", "resolve", stdin=request.stdout.encode())
    direct = tinctor(*RUN, "--format", "json")
    assert direct.returncode == through_json.returncode == 0
    assert direct.stdout == through_json.stdout
    assert json.loads(direct.stdout)["schema"] == "resolve/1"


def test_csv_holds_every_number_in_full() -> None:
    rows = list(csv.DictReader(io.StringIO(tinctor(*RUN, "--format", "csv").stdout)))
    document = json.loads(tinctor(*RUN, "--format", "json").stdout)
    assert len(rows) == 60
    first = document["results"][0]["components"][0]
    assert float(rows[0]["concentration"]) == first["concentration"]
    assert float(rows[0]["u"]) == first["u"]
    assert [float(rows[0][f"interval_{end}"]) for end in ("low", "high")] == first["interval"]
    special = [row for row in rows if row["id"] == "vat3-0915"]
    assert all(row["flags"] == "unmodelled-absorber" for row in special)


def test_standard_input_and_other_layouts_give_the_same_figures() -> None:
    piped = tinctor(
        "resolve", "-", *LIBRARY, "--format", "csv", "--dilution-factor", "25", stdin=(DATA / "single.csv").read_bytes()
    )
    rows = tinctor("resolve", str(DATA / "vat-run-rows.csv"), *LIBRARY, "--format", "csv")
    columns = tinctor(*RUN[:4], *LIBRARY, "--format", "csv")
    assert piped.returncode == rows.returncode == 0
    few, many = (list(csv.DictReader(io.StringIO(done.stdout)))[:12] for done in (rows, columns))
    for one, other in zip(few, many, strict=True):
        assert one["id"] == other["id"]
        assert float(one["concentration"]) == pytest.approx(float(other["concentration"]), rel=1e-12)
        assert float(one["u"]) == pytest.approx(float(other["u"]), rel=1e-12)
    concentration = {
        r["component"]: r["concentration"] for r in csv.DictReader(io.StringIO(columns.stdout)) if r["id"] == "vat3-0820"
    }
    for row in csv.DictReader(io.StringIO(piped.stdout)):
        assert float(row["concentration"]) == pytest.approx(float(concentration[row["component"]]), rel=1e-12)


def test_strict_exits_with_5_and_still_prints(tmp_path: Path) -> None:
    assert tinctor(*RUN, "--strict").returncode == 5
    assert "vat3-0800" in tinctor(*RUN, "--strict").stdout
    sound = tinctor("resolve", str(DATA / "single.csv"), *LIBRARY, "--dilution-factor", "25", "--strict")
    assert sound.returncode == 0


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "empty"),
        ("nm,a\n400,0.1\n", "at least 2 wavelengths"),
        ("nm,a\n400,0.1\n402,****\n404,0.1\n", "line 3, column 2"),
        ("nm,a\n400,0.1\n402,>3.5\n404,0.1\n", "'>3.5'"),
        ("nm,a\n400,NaN\n402,0.1\n404,0.1\n", "'NaN'"),
        ("nm,a\n400,0.1\n402,0.2\n402,0.1\n", "402 nm stands twice"),
        ("nm,a\n400,88\n402,92\n404,99\n", "per cent transmittance"),
    ],
)
def test_files_that_cannot_be_used_exit_with_3(tmp_path: Path, text: str, said: str) -> None:
    done = tinctor("resolve", written(tmp_path, text), *LIBRARY)
    assert (done.returncode, done.stdout) == (3, "")
    assert said in done.stderr
    assert "x.csv" in done.stderr


@pytest.mark.parametrize(
    ("options", "code", "said"),
    [
        (["--path-length-cm", "0"], 3, "must be above 0 cm, found 0 [at --path-length-cm]"),
        (["--dilution-factor", "0.5"], 3, "must be at least 1, found 0.5 [at --dilution-factor]"),
        (["--unit", "ppm"], 3, "expected a concentration unit"),
        (["-c", "no-such-dye"], 3, "no component 'no-such-dye'"),
        (["--background", "wiggle"], 3, "wiggle"),
        (["--range-nm", "900", "950"], 4, "no reading lies"),
        (["--wavelengths-nm", "400,402"], 4, "too-few-points"),
        (["--wavelengths-nm", "400;402"], 2, "separated by commas"),
        (["--coverage", "high"], 2, "coverage"),
        (["--delimiter", "pipe"], 3, "comma, semicolon, tab"),
        (["--samples", str(DATA / "vat-run-samples.csv")], 3, "no spectrum for"),
        (["--blank", str(DATA / "vat-run.csv")], 3, "one blank spectrum, found 20"),
        (["--output", "/no/such/folder/x"], 3, "cannot be written"),
    ],
)
def test_options_that_cannot_be_used(options: list[str], code: int, said: str) -> None:
    done = tinctor("resolve", str(DATA / "single.csv"), *LIBRARY, *options)
    assert (done.returncode, done.stdout) == (code, ""), done.stderr
    assert said in done.stderr


def test_faults_as_a_document_on_standard_error() -> None:
    done = tinctor("resolve", str(DATA / "single.csv"), *LIBRARY, "--unit", "ppm", "--format", "json")
    assert (done.returncode, done.stdout) == (3, "")
    assert json.loads(done.stderr)["faults"][0]["path"] == "$.concentration_unit"
    for request in (b"", b"[]", b'{"schema":"resolve/1","x":NaN}'):
        piped = tinctor("json", "resolve", stdin=request)
        assert (piped.returncode, piped.stdout) == (3, "")
        assert json.loads(piped.stderr)["schema"] == "error/1"


def test_usage_errors_exit_with_2() -> None:
    for arguments in (["resolve"], ["resolve", "x.csv"], ["frobnicate"], ["resolve", "x.csv", "--no-such-option"]):
        done = tinctor(*arguments)
        assert (done.returncode, done.stdout) == (2, "")


def test_a_fault_of_the_tool_exits_with_1(tmp_path: Path) -> None:
    broken = tmp_path / "sitecustomize.py"
    broken.write_text(
        "import tinctor.operations.registry as r\ndef boom(*a): raise ZeroDivisionError('planted')\nr.run_document = boom\n",
        encoding="utf-8",
    )
    done = tinctor("json", "resolve", stdin=b"{}", PYTHONPATH=str(tmp_path))
    assert (done.returncode, done.stdout) == (1, "")
    assert "planted" in done.stderr
    assert "Traceback" not in done.stderr


def test_two_files_with_different_axes_are_each_resolved_on_their_own_axis(tmp_path: Path) -> None:
    lines = (DATA / "single.csv").read_text(encoding="utf-8").splitlines()
    coarse = written(tmp_path, "\n".join(["nm,coarse", *lines[1::2]]) + "\n")
    both = tinctor("resolve", str(DATA / "single.csv"), coarse, *LIBRARY, "--format", "csv")
    assert both.returncode == 0
    rows = list(csv.DictReader(io.StringIO(both.stdout)))
    assert [row["id"] for row in rows] == ["vat3-0820"] * 3 + ["coarse"] * 3
    for fine, half in zip(rows[:3], rows[3:], strict=True):
        assert float(fine["concentration"]) == pytest.approx(float(half["concentration"]), rel=0.01)


def test_the_same_id_in_two_files_is_refused(tmp_path: Path) -> None:
    copy = written(tmp_path, (DATA / "single.csv").read_text(encoding="utf-8"), "copy.csv")
    done = tinctor("resolve", str(DATA / "single.csv"), copy, *LIBRARY)
    assert (done.returncode, done.stdout) == (3, "")
    assert "'vat3-0820' is in single.csv already" in done.stderr


def test_a_blank_is_taken_off(tmp_path: Path) -> None:
    lines = (DATA / "single.csv").read_text(encoding="utf-8").splitlines()[1:]
    blank = written(tmp_path, "\n".join(["nm,blank", *(f"{line.split(',')[0]},0.1" for line in lines)]) + "\n", "blank.csv")
    raised = written(tmp_path, "\n".join(["nm,s", *(f"{w},{float(a) + 0.1:.4f}" for w, a in (x.split(",") for x in lines))]) + "\n")
    options = [*LIBRARY, "-b", "none", "--format", "csv"]
    with_blank = list(csv.DictReader(io.StringIO(tinctor("resolve", raised, "--blank", blank, *options).stdout)))
    plain = list(csv.DictReader(io.StringIO(tinctor("resolve", str(DATA / "single.csv"), *options).stdout)))
    for a, b in zip(with_blank, plain, strict=True):
        assert float(a["concentration"]) == pytest.approx(float(b["concentration"]), rel=1e-9)


def test_output_is_written_whole_or_not_at_all(tmp_path: Path) -> None:
    target = tmp_path / "result.csv"
    done = tinctor(*RUN, "--format", "csv", "--output", str(target))
    assert (done.returncode, done.stdout) == (0, "")
    assert target.read_text(encoding="utf-8").startswith("id,component")
    plain = tmp_path / "plain"
    plain.touch()
    assert target.stat().st_mode == plain.stat().st_mode
    plain.unlink()
    before = target.read_bytes()
    failed = tinctor(*RUN, "--unit", "ppm", "--output", str(target))
    assert failed.returncode == 3
    assert target.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["result.csv"]


def test_cautions_of_records_are_said_where_the_result_is_read(tmp_path: Path) -> None:
    spectrum = written(tmp_path, "nm,a\n" + "".join(f"{w},{0.2 + 0.001 * (w - 500)}\n" for w in range(500, 601, 2)))
    done = tinctor("resolve", spectrum, "-l", "published", "-c", "oxyhaemoglobin", "-c", "deoxyhaemoglobin")
    assert "Not for diagnosis" in done.stderr
    assert "Not for diagnosis" not in done.stdout


def test_library_commands() -> None:
    assert "methylene-blue" in tinctor("library", "list").stdout
    assert tinctor("library", "list", "published", "-f", "csv").stdout.startswith("collection,record\npublished,1-methylpyrene\n")
    assert "61-73-4" in tinctor("library", "show", "published/methylene-blue").stdout
    shown = json.loads(tinctor("library", "show", "published/methylene-blue", "-f", "json").stdout)
    assert len(shown["wavelength_nm"]) == len(shown["molar_absorptivity"]) == 256
    spectrum = tinctor("library", "show", "published/methylene-blue", "-f", "csv").stdout
    assert spectrum.startswith("wavelength_nm,molar_absorptivity,absorptivity_u\n240.0,")
    check = tinctor("library", "check")
    assert (check.returncode, check.stdout) == (0, "")
    assert "published: sound" in check.stderr
    for arguments in (["show", "methylene-blue"], ["show", "published/none"], ["list", "nowhere"], ["check", "/no/such"]):
        done = tinctor("library", *arguments)
        assert (done.returncode, done.stdout) == (3, "")


def test_schema_prints_both_schemas() -> None:
    schemas = json.loads(tinctor("schema", "resolve").stdout)
    assert {"components", "spectra"} <= set(schemas["request"]["required"])
    assert "results" in schemas["response"]["properties"]
    assert tinctor("schema", "nothing").returncode == 3


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["resolve", "--help"], ["library", "--help"], ["json", "--help"]])
def test_help_is_light(arguments: list[str]) -> None:
    code = (
        "import sys\nsys.argv = ['tinctor', *sys.argv[1:]]\nfrom tinctor.cli.main import main\n"
        "try:\n    main()\nexcept SystemExit as left:\n    assert not left.code\n"
        "heavy = {'numpy', 'scipy', 'sklearn', 'matplotlib'} & set(sys.modules)\nassert not heavy, heavy\n"
    )
    done = subprocess.run([sys.executable, "-c", code, *arguments], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


def test_resolving_loads_no_heavy_package() -> None:
    code = (
        "import sys\nsys.argv = ['tinctor', *sys.argv[1:]]\nfrom tinctor.cli.main import main\n"
        "try:\n    main()\nexcept SystemExit as left:\n    assert not left.code\n"
        "heavy = {'scipy', 'sklearn', 'matplotlib', 'pandas', 'rich'} & set(sys.modules)\nassert not heavy, heavy\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, "resolve", str(DATA / "single.csv"), *LIBRARY, "-f", "json"],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr


def test_help_teaches() -> None:
    wide = tinctor("resolve", "--help", COLUMNS="200").stdout
    for option in (
        "--library",
        "--component",
        "--background",
        "--samples",
        "--blank",
        "--dilution-factor",
        "--strict",
        "--request",
    ):
        assert option in wide
    assert "Examples:" in wide
    assert "nothing could be determined" in wide
