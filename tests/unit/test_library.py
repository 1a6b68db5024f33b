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
        ("scale-u-reason", lambda folder: replaced(folder / "pyrene.toml", 'reason = "Read off', 'reason = "?"  # "')),
        ("link", lambda folder: replaced(folder / "pyrene.toml", "https://", "somewhere ")),
        ("check-point", lambda folder: replaced(folder / "pyrene.toml", "value = 54082.0", "value = 60000.0")),
        (
            "check-point",
            lambda folder: replaced(
                folder / "pyrene.toml", "[[check_points]]\nwavelength_nm = 3", "[[check_points]]\nwavelength_nm = 9"
            ),
        ),
        ("negative", lambda folder: replaced(folder / "pyrene.csv", "286,4000", "286,-4000")),
        ("stray-file", lambda folder: (folder / "notes.txt").write_text("x", encoding="utf-8")),
        ("stray-file", lambda folder: (folder / "lonely.csv").write_text("x", encoding="utf-8")),
        ("name", lambda folder: replaced(folder / "pyrene.toml", 'name = "pyrene"', 'name = "other"')),
        ("no-file", lambda folder: (folder / "pyrene.csv").unlink()),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", 'basis = "molar"', 'basis = "molal"')),
        ("record-key", lambda folder: replaced(folder / "pyrene.toml", "cas =", "cass =")),
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
    assert {finding.code for finding in check_collection(collection)} == {"duplicate"}


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


def test_a_collection_without_its_file_or_with_another_name_is_refused(collection: Path) -> None:
    replaced(collection / "collection.toml", 'name = "mine"', 'name = "yours"')
    with pytest.raises(UnreadableFileError, match="'mine'"):
        load_collection(str(collection))
    (collection / "collection.toml").unlink()
    with pytest.raises(InputError, match="not a collection"):
        load_collection(str(collection))


def test_the_digest_of_a_record_changes_with_any_byte(collection: Path) -> None:
    before = load_collection(str(collection)).records["pyrene"].sha256
    assert before == load_collection("published").records["pyrene"].sha256
    replaced(collection / "pyrene.csv", "286,4000", "286,4001")
    assert load_collection(str(collection)).records["pyrene"].sha256 != before


def test_published_records_are_what_the_script_makes(reference: Path) -> None:
    command = [sys.executable, "scripts/rebuild_published.py", "--check", "--reference", str(reference)]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr


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
    assert formula_mass("CuSO4.5H2O") is None
