"""What cannot be used is refused with the right exit code, an empty standard output and a message that names the place."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

ROOT = Path(__file__).resolve().parents[2]
SINGLE = ROOT / "scripts" / "demo_data" / "single.csv"
REQUEST = ROOT / "scripts" / "demo_data" / "request.json"
LIBRARY = ["--library", "palewater-dyehouse", "-c", "hollin-yellow,bramble-red,tarn-blue"]
#: Two components inline, one without a molar mass.
INLINE: dict[str, Any] = {
    "schema": "resolve/1",
    "background": [],
    "components": [{"name": "Cu", "wavelength_nm": [700, 800], "molar_absorptivity": [6.0, 12.0]}],
    "spectra": [{"id": "a", "wavelength_nm": [700, 800], "absorbance": [0.3, 0.6]}],
}


def tinctor(*arguments: str, stdin: bytes = b"") -> subprocess.CompletedProcess[str]:
    environment = {key: value for key, value in os.environ.items() if key not in ("COLUMNS", "TINCTOR_LIBRARY")}
    done = subprocess.run(
        [sys.executable, "-m", "tinctor", *arguments], input=stdin, capture_output=True, env=environment, check=False
    )
    return subprocess.CompletedProcess(done.args, done.returncode, done.stdout.decode(), done.stderr.decode())


def error_document(done: subprocess.CompletedProcess[str]) -> dict[str, Any]:
    """The error document that standard error must be, whole."""
    assert done.stdout == ""
    document: dict[str, Any] = json.loads(done.stderr)
    assert document["schema"] == "error/1"
    return document


def written(folder: Path, text: str, name: str = "x.csv") -> str:
    (folder / name).write_text(text, encoding="utf-8", newline="")
    return str(folder / name)


@pytest.mark.parametrize(
    ("text", "places"),
    [
        ("", ["x.csv", "empty"]),
        ("nm,a\n400,0.1\n", ["x.csv", "at least 2 wavelengths"]),
        ("nm,a,b\n400,0.1,0.2\n402,0.1,****\n404,0.1,0.2\n", ["x.csv, line 3, column 3", "'****'"]),
        ("nm,a\n400,0.1\n402,0.2\n402,0.1\n", ["x.csv", "402 nm"]),
        ("nm,a\n400,88\n402,92\n404,99\n", ["x.csv", "'a'", "per cent transmittance"]),
    ],
    ids=["empty", "one-point", "asterisks", "duplicate-wavelength", "transmittance"],
)
@pytest.mark.parametrize("form", ["table", "json", "csv"])
def test_bad_files_are_refused_in_every_form(tmp_path: Path, text: str, places: list[str], form: str) -> None:
    done = tinctor("resolve", written(tmp_path, text), *LIBRARY, "-f", form)
    assert (done.returncode, done.stdout) == (3, "")
    said = done.stderr if form != "json" else " ".join(str(f) for f in error_document(done)["faults"])
    for place in places:
        assert place in said.replace('"', "'")


def test_a_component_that_is_not_there_is_named_with_its_collection() -> None:
    done = tinctor("resolve", str(SINGLE), "--library", "palewater-dyehouse", "-c", "hollin-yelow", "-f", "json")
    assert done.returncode == 3
    (fault,) = error_document(done)["faults"]
    assert fault["path"] == "$.components[0]"
    assert "'palewater-dyehouse' has no component 'hollin-yelow'" in fault["message"]
    assert "hollin-yellow" in fault["hint"]


def test_samples_and_library_that_do_not_overlap_exit_with_4_and_both_ranges(tmp_path: Path) -> None:
    beyond = written(tmp_path, "nm,deep-red\n" + "".join(f"{w},0.{w}\n" for w in range(800, 860, 2)))
    done = tinctor("resolve", beyond, *LIBRARY)
    assert (done.returncode, done.stdout) == (4, "")
    assert "deep-red: range-not-covered" in done.stderr
    assert "measured 800 to 858 nm" in done.stderr
    assert "'tarn-blue' 380 to 720 nm" in done.stderr
    assert error_document(tinctor("resolve", beyond, *LIBRARY, "-f", "json"))["code"] == "undetermined"


@pytest.mark.parametrize(
    ("change", "path"),
    [
        ({"path_length_cm": 0}, "$.spectra[0].path_length_cm"),
        ({"dilution_factor": 0.99}, "$.spectra[0].dilution_factor"),
        ({"absorbance": [0.3]}, "$.spectra[0].absorbance"),
        ({"absorbance": [0.3, True]}, "$.spectra[0].absorbance[1]"),
        ({"absorbance": [0.3, "0.6"]}, "$.spectra[0].absorbance[1]"),
        ({"colour": "blue"}, "$.spectra[0].colour"),
    ],
)
def test_a_bad_value_in_a_request_is_placed_by_its_json_path(change: dict[str, Any], path: str) -> None:
    request = {**INLINE, "spectra": [{**INLINE["spectra"][0], **change}]}
    done = tinctor("json", "resolve", stdin=json.dumps(request).encode())
    assert done.returncode == 3
    assert path in [fault["path"] for fault in error_document(done)["faults"]]


def test_mass_units_without_a_molar_mass_name_the_component() -> None:
    done = tinctor("json", "resolve", stdin=json.dumps({**INLINE, "concentration_unit": "mg/L"}).encode())
    assert done.returncode == 3
    (fault,) = error_document(done)["faults"]
    assert "Cu" in fault["message"]
    assert "molar mass" in fault["message"] + fault["hint"]
    sound = tinctor("json", "resolve", stdin=json.dumps({**INLINE, "concentration_unit": "mmol/L"}).encode())
    assert sound.returncode == 0  # the mass unit it was, and nothing else


def test_more_components_than_wavelengths_exit_with_4_and_say_how_many() -> None:
    done = tinctor("resolve", str(SINGLE), *LIBRARY, "--wavelengths-nm", "450,600", "-b", "none")
    assert (done.returncode, done.stdout) == (4, "")
    assert "vat3-0820: too-few-points: 2 readings can be used for 3 unknowns" in done.stderr


@pytest.mark.parametrize("number", ["NaN", "Infinity", "-Infinity", "1e400", "1" + "0" * 400])
def test_numbers_that_float64_cannot_hold_are_refused_with_their_path(number: str) -> None:
    text = json.dumps(INLINE).replace("0.6", number)
    done = tinctor("json", "resolve", stdin=text.encode())
    assert done.returncode == 3
    assert [fault["path"] for fault in error_document(done)["faults"]] == ["$.spectra[0].absorbance[1]"]


def test_repeated_keys_are_refused_with_their_path() -> None:
    text = json.dumps(INLINE).replace('"id": "a"', '"id": "a", "id": "b"')
    document = error_document(tinctor("json", "resolve", stdin=text.encode()))
    assert (document["code"], document["faults"][0]["path"]) == ("duplicate-key", "$.spectra[0].id")


def test_a_spectra_file_with_repeated_keys_is_refused_with_its_name(tmp_path: Path) -> None:
    text = '{"spectra": [{"id": "a", "id": "b", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2]}]}'
    done = tinctor("resolve", written(tmp_path, text, "s.json"), *LIBRARY)
    assert (done.returncode, done.stdout) == (3, "")
    assert "s.json" in done.stderr
    assert "more than once" in done.stderr


def test_many_faults_are_counted_and_the_first_fifty_listed() -> None:
    spectra = [{**INLINE["spectra"][0], "id": f"s{k}", "path_length_cm": 0} for k in range(60)]
    document = error_document(tinctor("json", "resolve", stdin=json.dumps({**INLINE, "spectra": spectra}).encode()))
    assert (len(document["faults"]), document["more_faults"]) == (50, 10)


def test_one_id_in_files_of_one_name_is_told_apart_by_their_folders(tmp_path: Path) -> None:
    names = []
    for folder in ("monday", "friday"):
        (tmp_path / folder).mkdir()
        names.append(written(tmp_path / folder, SINGLE.read_text(encoding="utf-8"), "run.csv"))
    done = tinctor("resolve", *names, *LIBRARY)
    assert (done.returncode, done.stdout) == (3, "")
    assert f"is in {names[0]} already [at {names[1]}]" in done.stderr


def test_a_blank_on_another_axis_names_the_option_and_its_file(tmp_path: Path) -> None:
    blank = written(tmp_path, "nm,blank\n800,0.1\n802,0.1\n", "blank.csv")
    done = tinctor("resolve", str(SINGLE), "--blank", blank, *LIBRARY, "-f", "json")
    assert done.returncode == 3
    (fault,) = error_document(done)["faults"]
    assert fault["path"] == f"--blank {blank}"
    assert "800 to 802 nm" in fault["message"]
    assert "separate batches" not in fault["hint"]


def test_an_option_settles_how_an_ambiguous_blank_is_read(tmp_path: Path) -> None:
    # a row of wavelengths over one spectrum, or a column of one wavelength too few: `rows` makes it one spectrum of 3 points
    blank = written(tmp_path, "id,400,402\n500,0.1,0.2\n502,0.1,0.3\n503,0.1,0.3\n", "blank.csv")
    for options, said in (([], "--layout"), (["--layout", "columns"], "found 2"), (["--layout", "rows"], "found 3")):
        sample = written(tmp_path, "id,400,402\na,0.1,0.2\n" if "rows" in options else "nm,a,b\n400,1,1\n402,1,1\n", "s.csv")
        done = tinctor("resolve", sample, "--blank", blank, *LIBRARY, *options)
        assert (done.returncode, done.stdout) == (3, "")
        assert said in done.stderr


def test_no_background_and_a_background_at_once_is_a_usage_error() -> None:
    done = tinctor("resolve", str(SINGLE), *LIBRARY, "-b", "none", "-b", "offset")
    assert (done.returncode, done.stdout) == (2, "")
    assert "--background" in done.stderr


def test_standard_error_is_the_error_document_alone_even_when_a_reader_noticed_something(tmp_path: Path) -> None:
    lines = "".join(f"{w};0,{w}\n" for w in range(400, 460, 2))  # no header row: the reader says where it took the id from
    nameless = written(tmp_path, lines, "nameless.csv")
    text = tinctor("resolve", nameless, *LIBRARY, "--unit", "ppm")
    assert text.returncode == 3
    assert text.stderr.startswith("nameless.csv: ")
    document = error_document(tinctor("resolve", nameless, *LIBRARY, "--unit", "ppm", "-f", "json"))
    assert document["faults"][0]["path"] == "$.concentration_unit"
    sound = tinctor("resolve", nameless, *LIBRARY, "-f", "json")
    assert sound.returncode == 0
    assert sound.stderr.startswith("nameless.csv: ")
    assert json.loads(sound.stdout)["results"][0]["id"] == "nameless"


def test_a_collection_with_a_bad_record_exits_with_3_and_names_record_and_code(tmp_path: Path) -> None:
    source = ROOT / "spectra_library" / "published"
    copy = tmp_path / "mine"
    copy.mkdir()
    (copy / "collection.toml").write_text(
        (source / "collection.toml").read_text(encoding="utf-8").replace('"published"', '"mine"'), encoding="utf-8"
    )
    for name in ("methylene-blue.toml", "methylene-blue.csv"):
        (copy / name).write_bytes((source / name).read_bytes())
    assert tinctor("library", "check", str(copy)).returncode == 0
    record = copy / "methylene-blue.toml"
    record.write_text(record.read_text(encoding="utf-8").replace("61-73-4", "61-73-5"), encoding="utf-8")
    done = tinctor("library", "check", str(copy))
    assert (done.returncode, done.stdout) == (3, "")
    assert done.stderr.startswith("mine/methylene-blue: ")
    assert "61-73-5" in done.stderr
