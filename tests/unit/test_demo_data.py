"""The demonstration data: plausible, complete, reproducible, and right by a plain least-squares fit.

Nothing here is an outside number: the data are invented, and the truth is in truth.csv beside them.
"""

from __future__ import annotations

import csv
import json
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from tinctor.arrays import FloatArray
from tinctor.files import apply_sample_sheet, read_sample_sheet, read_spectra
from tinctor.library import Collection, check_collection, load_collection
from tinctor.spectrum import Spectrum

ROOT = Path(__file__).resolve().parents[2]
SCRIPT = ROOT / "scripts" / "make_demo_data.py"
SAMPLES = ROOT / "scripts" / "demo_data"
RECORDS = ROOT / "spectra_library" / "palewater-dyehouse"
TRIO = ("hollin-yellow", "bramble-red", "tarn-blue")
NAMES = sorted(path.stem for path in RECORDS.glob("*.csv"))


@pytest.fixture(scope="module")
def collection() -> Collection:
    return load_collection("palewater-dyehouse")


@pytest.fixture(scope="module")
def truth() -> dict[str, dict[str, str]]:
    with (SAMPLES / "truth.csv").open(encoding="utf-8", newline="") as file:
        return {row["id"]: row for row in csv.DictReader(file)}


@pytest.fixture(scope="module")
def samples() -> list[Spectrum]:
    return apply_sample_sheet(
        read_spectra(SAMPLES / "vat-run.csv").spectra,
        read_sample_sheet(SAMPLES / "vat-run-samples.csv"),
    )


def check(root: Path) -> subprocess.CompletedProcess[str]:
    script = root / "scripts" / "make_demo_data.py"
    return subprocess.run([sys.executable, str(script), "--check"], capture_output=True, text=True, check=False)


def on_axis(collection: Collection, name: str, wavelength_nm: FloatArray) -> FloatArray:
    component = collection.component(name)
    return np.interp(wavelength_nm, component.wavelength_nm, component.absorptivity)


def fit(collection: Collection, sample: Spectrum, names: tuple[str, ...]) -> tuple[FloatArray, float]:
    """Return g/L in the bath by least squares with an offset, and the rms residual."""
    used = sample.absorbance < 2
    columns = [on_axis(collection, name, sample.wavelength_nm) for name in names]
    design = np.column_stack([*columns, np.ones(sample.wavelength_nm.size)])[used]
    found = np.asarray(np.linalg.lstsq(design, sample.absorbance[used], rcond=None)[0], dtype=np.float64)
    residual = sample.absorbance[used] - design @ found
    grams = found[:-1] * sample.dilution_factor / sample.path_length_cm
    return grams, float(np.sqrt(np.mean(residual**2)))


def true_grams(row: dict[str, str]) -> FloatArray:
    return np.array([float(row[f"{name}_g_per_L"]) for name in TRIO])


def is_usable(row: dict[str, str]) -> bool:
    return row["special"] == "sound"


def test_the_check_of_the_collection_finds_nothing(collection: Collection) -> None:
    assert check_collection(collection.folder) == []
    assert len(collection.records) == 8


def test_everything_says_that_it_is_invented(collection: Collection) -> None:
    assert collection.invented
    assert "invented" in collection.title
    for record in collection.records.values():
        assert record.file.invented
        assert "(invented)" in record.file.title
    assert "invented" in (SAMPLES / "README.md").read_text(encoding="utf-8")


@pytest.mark.parametrize("name", NAMES)
def test_spectrum_is_plausible(collection: Collection, name: str) -> None:
    component = collection.component(name)
    assert component.basis == "mass"
    assert 20 < component.absorptivity.max() < 70  # L g-1 cm-1, as dyes by weight of product
    assert component.absorptivity_u is not None
    assert (component.absorptivity > -5 * component.absorptivity_u).all()  # below zero by noise only
    assert component.scale_relative_u is not None
    assert 0.006 <= component.scale_relative_u <= 0.02


@pytest.mark.parametrize("name", NAMES)
def test_spectrum_has_several_bands(collection: Collection, name: str) -> None:
    """One band that is Gaussian in wavenumber has a logarithm that is a parabola; these spectra are far from it."""
    component = collection.component(name)
    seen = component.absorptivity > 0.05 * component.absorptivity.max()
    wavenumber = 1e7 / component.wavelength_nm[seen]
    x = (wavenumber - wavenumber.mean()) / np.ptp(wavenumber)
    logarithm = np.log(component.absorptivity[seen])
    assert np.std(logarithm - np.polyval(np.polyfit(x, logarithm, 2), x)) > 0.02


def test_one_pair_lies_close_and_two_forms_share_an_analyte(collection: Collection) -> None:
    top = {name: c.wavelength_nm[c.absorptivity.argmax()] for name in NAMES for c in [collection.component(name)]}
    assert 15 <= top["bramble-red"] - top["sorrel-red"] <= 25
    assert [name for name in NAMES if collection.component(name).analyte] == ["quill-violet-acid", "quill-violet-alkaline"]
    assert len({collection.component(name).analyte for name in NAMES} - {None}) == 1


def test_truth_names_every_sample_once_and_every_trouble(samples: list[Spectrum], truth: dict[str, dict[str, str]]) -> None:
    assert [sample.id for sample in samples] == list(truth)
    assert len(truth) == 20
    special = " | ".join(row["special"] for row in truth.values())
    for word in (
        "saturated",
        "turbid",
        "not in the library",
        "below its decision limit",
        "linear range",
        "dirty cell",
        "nothing in it",
    ):
        assert special.count(word) == 1, word


def test_the_saturated_sample_stops_at_the_stray_light(samples: list[Spectrum], truth: dict[str, dict[str, str]]) -> None:
    over = {sample.id for sample in samples if sample.absorbance.max() > 2}
    assert over == {i for i, row in truth.items() if "saturated" in row["special"]}
    # 0.03 % of stray light: no reading above -log10(0.0003) = 3.52, short of noise
    assert max(sample.absorbance.max() for sample in samples) < 3.7


def test_dilutions_and_cells_differ(samples: list[Spectrum]) -> None:
    assert len({sample.dilution_factor for sample in samples}) >= 5
    assert len({sample.path_length_cm for sample in samples}) >= 2


def test_sound_samples_are_recovered(collection: Collection, samples: list[Spectrum], truth: dict[str, dict[str, str]]) -> None:
    sound = [sample for sample in samples if is_usable(truth[sample.id])]
    assert len(sound) >= 12
    for sample in sound:
        grams, rms = fit(collection, sample, TRIO)
        np.testing.assert_allclose(grams, true_grams(truth[sample.id]), rtol=0.05, err_msg=sample.id)
        assert rms < 0.004, sample.id


def test_a_wrong_dye_does_not_recover_them(
    collection: Collection, samples: list[Spectrum], truth: dict[str, dict[str, str]]
) -> None:
    """Negative control: with Marrow Orange in place of Bramble Red no sound sample comes out right."""
    for sample in (sample for sample in samples if is_usable(truth[sample.id])):
        grams, rms = fit(collection, sample, ("hollin-yellow", "marrow-orange", "tarn-blue"))
        assert np.abs(grams / true_grams(truth[sample.id]) - 1).max() > 0.05, sample.id
        assert rms > 2 * fit(collection, sample, TRIO)[1], sample.id


@pytest.mark.parametrize("trouble", ["turbid", "not in the library"])
def test_troubles_that_leave_a_trace_leave_one(
    collection: Collection, samples: list[Spectrum], truth: dict[str, dict[str, str]], trouble: str
) -> None:
    residual = {sample.id: fit(collection, sample, TRIO)[1] for sample in samples}
    troubled = next(i for i, row in truth.items() if trouble in row["special"])
    assert residual[troubled] > 2 * max(residual[i] for i, row in truth.items() if is_usable(row))


def test_other_layouts_hold_the_same_readings(samples: list[Spectrum]) -> None:
    by_id = {sample.id: sample for sample in samples}
    others = [*read_spectra(SAMPLES / "vat-run-rows.csv").spectra, *read_spectra(SAMPLES / "single.csv").spectra]
    assert len(others) == 5
    for other in others:
        np.testing.assert_array_equal(other.absorbance, by_id[other.id].absorbance)
    for other in others[:4]:
        assert other.dilution_factor == by_id[other.id].dilution_factor


def test_the_request_is_one_of_the_samples(samples: list[Spectrum]) -> None:
    request = json.loads((SAMPLES / "request.json").read_text(encoding="utf-8"))
    assert (request["schema"], request["library"], request["components"]) == ("resolve/1", "palewater-dyehouse", list(TRIO))
    (spectrum,) = request["spectra"]
    sample = next(sample for sample in samples if sample.id == spectrum["id"])
    np.testing.assert_array_equal(spectrum["absorbance"], sample.absorbance)
    assert spectrum["dilution_factor"] == sample.dilution_factor


def test_shipped_files_are_as_the_script_makes_them() -> None:
    done = check(ROOT)
    assert done.returncode == 0, done.stdout


def test_the_script_makes_every_file_that_is_shipped(tmp_path: Path) -> None:
    """A record that names the script as its source must come from it."""
    (tmp_path / "scripts").mkdir()
    shutil.copy(SCRIPT, tmp_path / "scripts")
    subprocess.run([sys.executable, str(tmp_path / "scripts" / SCRIPT.name)], check=True, capture_output=True)
    for folder in (RECORDS, SAMPLES):
        made = {path.name for path in (tmp_path / folder.relative_to(ROOT)).iterdir()}
        assert {path.name for path in folder.iterdir()} - {"README.md"} == made


@pytest.mark.parametrize("name", ["spectra_library/palewater-dyehouse/bramble-red.csv", "scripts/demo_data/vat-run.csv"])
def test_the_check_sees_a_changed_reading(tmp_path: Path, name: str) -> None:
    """Negative control of the check."""
    for folder in (RECORDS, SAMPLES):
        shutil.copytree(folder, tmp_path / folder.relative_to(ROOT))
    shutil.copy(SCRIPT, tmp_path / "scripts")
    assert check(tmp_path).returncode == 0
    lines = (tmp_path / name).read_text(encoding="utf-8").splitlines()
    cells = lines[40].split(",")
    lines[40] = ",".join([cells[0], str(float(cells[1]) + 0.01), *cells[2:]])
    (tmp_path / name).write_text("\n".join(lines) + "\n", encoding="utf-8")
    assert check(tmp_path).returncode == 1
