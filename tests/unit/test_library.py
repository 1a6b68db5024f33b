"""The library: what is shipped is sound, and each kind of unsoundness is found."""

from __future__ import annotations

import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from tinctor.errors import InputError, UnreadableFileError
from tinctor.library import check_collection, collections, load_collection
from tinctor.library.check import cas_is_valid, formula_mass

ROOT = Path(__file__).resolve().parents[2]


@pytest.fixture
def collection(tmp_path: Path) -> Path:
    """A small sound collection of two records, to be spoilt."""
    source = load_collection("published").folder
    folder = tmp_path / "mine"
    folder.mkdir()
    for name in ("naphthalene", "pyrene"):
        for suffix in ("toml", "csv"):
            shutil.copy(source / f"{name}.{suffix}", folder)
    (folder / "collection.toml").write_text(
        'schema = "collection/1"\nname = "mine"\ntitle = "Mine"\ndescription = "For a test"\n', encoding="utf-8"
    )
    return folder


def replaced(path: Path, old: str, new: str) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")


def keep_lines(path: Path, count: int) -> None:
    path.write_text("".join(path.read_text(encoding="utf-8").splitlines(keepends=True)[:count]), encoding="utf-8")


def turn_round(path: Path) -> None:
    header, *lines = path.read_text(encoding="utf-8").splitlines(keepends=True)
    path.write_text("".join([header, *reversed(lines)]), encoding="utf-8")


def call_mass(record: Path) -> None:
    replaced(record.with_suffix(".toml"), 'basis = "molar"', 'basis = "mass"')
    replaced(record.with_suffix(".csv"), "molar_absorptivity", "mass_absorptivity")


@pytest.mark.parametrize("name", collections())
def test_shipped_collections_are_sound(name: str) -> None:
    collection = load_collection(name)
    assert check_collection(collection.folder) == []
    assert len(collection.records) >= 8


def test_published_holds_what_it_should() -> None:
    records = load_collection("published").records
    assert {"methylene-blue", "oxyhaemoglobin", "deoxyhaemoglobin"} <= set(records)
    assert len(records) >= 15
    assert not any(records[name].file.invented for name in records)
    assert all(
        load_collection("palewater-dyehouse").records[name].file.invented for name in load_collection("palewater-dyehouse").records
    )
    for name in ("oxyhaemoglobin", "deoxyhaemoglobin"):
        assert "Not for diagnosis" in records[name].component.caution
    assert "ydrate" in records["methylene-blue"].file.scale_relative_u_reason


def test_a_sound_copy_is_sound(collection: Path) -> None:
    assert check_collection(collection) == []


@pytest.mark.parametrize(
    ("code", "spoil"),
    [
        ("cas", lambda folder: replaced(folder / "pyrene.toml", "129-00-0", "129-00-1")),
        (
            "molar-mass",
            lambda folder: replaced(folder / "pyrene.toml", "molar_mass_g_per_mol = 202.25", "molar_mass_g_per_mol = 220.25"),
        ),
        ("scale-u", lambda folder: replaced(folder / "pyrene.toml", "scale_relative_u = 0.1", "scale_relative_u = 0.0")),
        ("scale-u-reason", lambda folder: replaced(folder / "pyrene.toml", 'reason = "The table', 'reason = "?"  # "')),
        ("link", lambda folder: replaced(folder / "pyrene.toml", "https://", "somewhere ")),
        ("check-point", lambda folder: replaced(folder / "pyrene.toml", "value = 54082.0", "value = 60000.0")),
        (
            "check-point",
            lambda folder: replaced(
                folder / "pyrene.toml", "[[check_points]]\nwavelength_nm = 3", "[[check_points]]\nwavelength_nm = 9"
            ),
        ),
        ("source", lambda folder: replaced(folder / "pyrene.toml", 'licence = "Apache-2.0"', 'licence = ""')),
        ("formula", lambda folder: replaced(folder / "pyrene.toml", 'formula = "C16H10"', 'formula = "(C8H5)2"')),
        ("grid", lambda folder: keep_lines(folder / "pyrene.csv", 4)),
        ("axis-descending", lambda folder: turn_round(folder / "pyrene.csv")),
        ("empty-record", lambda folder: keep_lines(folder / "pyrene.csv", 1)),
        ("empty-file", lambda folder: keep_lines(folder / "pyrene.csv", 0)),
        ("not-finite", lambda folder: replaced(folder / "pyrene.csv", "286,4000", "286,1e999")),
        ("scale-relative-u", lambda folder: replaced(folder / "pyrene.toml", "scale_relative_u = 0.1", "scale_relative_u = -0.1")),
        ("basis", lambda folder: call_mass(folder / "pyrene")),
        ("negative", lambda folder: replaced(folder / "pyrene.csv", "286,4000", "286,-4000")),
        ("stray-file", lambda folder: (folder / "notes.txt").write_text("x", encoding="utf-8")),
        ("stray-file", lambda folder: (folder / "lonely.csv").write_text("x", encoding="utf-8")),
        ("name", lambda folder: replaced(folder / "pyrene.toml", 'name = "pyrene"', 'name = "other"')),
        ("no-file", lambda folder: (folder / "pyrene.csv").unlink()),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", 'basis = "molar"', 'basis = "molal"')),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", "cas =", "cass =")),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", "schema =", "schema_ =")),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", "tolerance = ", "tolerance = -")),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", "scale_relative_u = 0.1", 'scale_relative_u = "0.1"')),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", "scale_relative_u = 0.1", "scale_relative_u = nan")),
        ("not-toml", lambda folder: replaced(folder / "pyrene.toml", 'basis = "molar"', "basis = molar")),
        ("record-header", lambda folder: replaced(folder / "pyrene.csv", "molar_absorptivity", "mass_absorptivity")),
        ("not-a-number", lambda folder: replaced(folder / "pyrene.csv", "286,4000", "286,****")),
        ("duplicate-wavelength", lambda folder: replaced(folder / "pyrene.csv", "287,", "286,")),
    ],
)
def test_each_kind_of_unsoundness_is_found(collection: Path, code: str, spoil: Callable[[Path], None]) -> None:
    spoil(collection)
    assert code in {finding.code for finding in check_collection(collection)}


def test_the_same_substance_from_the_same_source_twice_is_found(collection: Path) -> None:
    for suffix in ("toml", "csv"):
        shutil.copy(collection / f"pyrene.{suffix}", collection / f"pyrene-again.{suffix}")
    replaced(collection / "pyrene-again.toml", 'name = "pyrene"', 'name = "pyrene-again"')
    replaced(collection / "pyrene-again.toml", 'title = "Pyrene"', 'title = "Another title is no other substance"')
    assert {finding.code for finding in check_collection(collection)} == {"duplicate"}


def test_another_lot_is_no_duplicate(collection: Path) -> None:
    for suffix in ("toml", "csv"):
        shutil.copy(collection / f"pyrene.{suffix}", collection / f"pyrene-lot-2.{suffix}")
    replaced(collection / "pyrene-lot-2.toml", 'name = "pyrene"', 'name = "pyrene-lot-2"')
    replaced(collection / "pyrene-lot-2.toml", "[conditions]", '[conditions]\nlot = "2"')
    assert check_collection(collection) == []


def test_a_fault_names_the_file_and_the_key(collection: Path) -> None:
    replaced(collection / "pyrene.toml", "molar_mass_g_per_mol = 202.25", "molar_mass_g_per_mol = -1.0")
    with pytest.raises(UnreadableFileError, match=r"pyrene\.toml, molar_mass_g_per_mol"):
        load_collection(collection).component("pyrene")
    replaced(collection / "naphthalene.toml", "[source]\ncitation", "[source]\ncites")
    with pytest.raises(UnreadableFileError, match=r"naphthalene\.toml, source\.citation") as caught:
        load_collection(collection).component("naphthalene")
    assert [fault.path for fault in caught.value.faults] == ["naphthalene.toml, source.citation", "naphthalene.toml, source.cites"]
    turn_round(collection / "naphthalene.csv")
    replaced(collection / "naphthalene.toml", "cites", "citation")
    with pytest.raises(UnreadableFileError, match=r"naphthalene\.csv, wavelength_nm"):
        load_collection(collection).component("naphthalene")


def test_an_unknown_component_names_close_ones() -> None:
    with pytest.raises(InputError, match="did you mean 'methylene-blue'"):
        load_collection("published").component("metylene-blue")
    with pytest.raises(InputError, match="library list published"):
        load_collection("published").component("zzz")


def test_collections_are_found_by_path_and_by_variable_and_never_by_luck(
    collection: Path, monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    assert load_collection(str(collection)).name == "mine"
    with pytest.raises(InputError, match="no collection 'mine'"):
        load_collection("mine")
    monkeypatch.setenv("TINCTOR_LIBRARY", str(collection.parent))
    assert "mine" in collections()
    assert load_collection("mine").component("pyrene").basis == "molar"
    double = tmp_path / "published"
    shutil.copytree(collection, double)
    replaced(double / "collection.toml", 'name = "mine"', 'name = "published"')
    with pytest.raises(InputError, match="two collections"):
        load_collection("published")
    monkeypatch.setenv("TINCTOR_LIBRARY", str(tmp_path / "none"))
    with pytest.raises(InputError, match="not a folder"):
        collections()


def test_a_collection_without_its_file_is_refused(collection: Path) -> None:
    (collection / "collection.toml").unlink()
    with pytest.raises(InputError, match="not a collection"):
        load_collection(str(collection))


def test_the_digest_of_a_record_changes_with_any_byte(collection: Path) -> None:
    before = load_collection(str(collection)).records["pyrene"].sha256
    assert before == load_collection("published").records["pyrene"].sha256
    replaced(collection / "pyrene.csv", "286,4000", "286,4001")
    assert load_collection(str(collection)).records["pyrene"].sha256 != before


def rebuilt(*arguments: str) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "scripts/rebuild_published.py", *arguments]
    return subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)


def test_published_records_are_what_the_script_makes(reference: Path, tmp_path: Path) -> None:
    done = rebuilt("--check", "--reference", str(reference))
    assert done.returncode == 0, done.stdout + done.stderr
    # negative control: one value of one input changed by one
    for folder in ("methylene-blue-series", "haemoglobin", "pah"):
        (tmp_path / folder).mkdir()
        for path in (reference / folder).iterdir():
            shutil.copyfile(path, tmp_path / folder / path.name)
    replaced(tmp_path / "pah" / "pyrene.csv", "286,4000", "286,4001")
    done = rebuilt("--check", "--reference", str(tmp_path))
    assert (done.returncode, done.stdout) == (1, "differs: pyrene.csv\n")


def test_the_rebuild_says_when_its_inputs_are_missing(tmp_path: Path) -> None:
    done = rebuilt("--check", "--reference", str(tmp_path / "none"))
    assert done.returncode == 2
    assert "--reference" in done.stderr


@pytest.mark.parametrize(
    ("cas", "valid"), [("7732-18-5", True), ("50-32-8", True), ("50-32-9", False), ("5032-8", False), ("x", False)]
)
def test_check_digits(cas: str, valid: bool) -> None:
    """7732-18-5 is water, 50-32-8 benzo[a]pyrene (from memory)."""
    assert cas_is_valid(cas) is valid


def test_formula_masses() -> None:
    """Benzo[a]pyrene C20H12 252.32 and water 18.015 g/mol (handbook values, from memory)."""
    assert formula_mass("C20H12") == pytest.approx(252.32, abs=0.01)
    assert formula_mass("H2O") == pytest.approx(18.015, abs=0.001)
    assert formula_mass("Xx2") is None
    assert formula_mass("CuSO4.5H2O") == pytest.approx(249.68, abs=0.01)  # handbook value, from memory
    assert formula_mass("C16H18ClN3S·3H2O") == pytest.approx(373.90, abs=0.01)  # methylene blue trihydrate, from memory
    assert formula_mass("Fe(NO3)3") is None
    assert formula_mass("") is None
