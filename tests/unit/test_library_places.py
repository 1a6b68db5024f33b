"""Where collections are found, what is read when, and what a collection's own file must say."""

from __future__ import annotations

import dataclasses
import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from tinctor.errors import InputError, UnreadableFileError
from tinctor.library import collection as module
from tinctor.library import collections, load_collection

ROOT = Path(__file__).resolve().parents[2]


@pytest.fixture
def place(tmp_path: Path) -> Path:
    """A folder of collections that holds one, `mine`, of two records."""
    source = load_collection("published").folder
    folder = tmp_path / "place" / "mine"
    folder.mkdir(parents=True)
    for name in ("naphthalene", "pyrene"):
        for suffix in ("toml", "csv"):
            shutil.copy(source / f"{name}.{suffix}", folder)
    write_description(folder)
    return folder.parent


def write_description(folder: Path, **values: str) -> None:
    keys = {"schema": '"collection/1"', "name": f'"{folder.name}"', "title": '"Mine"', "description": '"For a test"', **values}
    (folder / "collection.toml").write_text("".join(f"{key} = {value}\n" for key, value in keys.items()), encoding="utf-8")


def test_a_folder_is_found_by_path_and_in_the_current_folder(place: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(place)
    for name in ("mine", "./mine", Path("mine"), place / "mine"):
        collection = load_collection(name)
        assert (collection.name, collection.folder) == ("mine", (place / "mine").resolve())
    (place / "bare").mkdir()
    with pytest.raises(InputError, match=r"folder of that name here has no collection\.toml"):
        load_collection("bare")
    with pytest.raises(InputError, match="no collection ''"):
        load_collection("")


def test_a_shipped_name_in_the_current_folder_is_ambiguous(place: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(place)
    shutil.copytree(place / "mine", place / "published")
    write_description(place / "published")
    with pytest.raises(InputError, match="two collections are called 'published'"):
        load_collection("published")
    assert len(load_collection("./published").records) == 2


def test_the_same_folder_found_twice_is_one_collection(place: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    shipped = load_collection("published").folder
    monkeypatch.setenv("TINCTOR_LIBRARY", os.pathsep.join([str(place), f"{place}/../{place.name}", str(shipped.parent)]))
    monkeypatch.chdir(shipped.parent)
    assert load_collection("mine").folder == (place / "mine").resolve()
    assert load_collection("published").folder == shipped
    assert collections().count("mine") == 1


def test_the_variable_must_name_folders_of_collections(place: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("TINCTOR_LIBRARY", str(place / "mine"))
    with pytest.raises(InputError, match="name the folder above it"):
        collections()


def test_listing_and_loading_read_no_other_record(place: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (place / "mine" / "naphthalene.toml").write_text("not a record", encoding="utf-8")
    read: list[str] = []
    load = module.load_record
    monkeypatch.setattr(module, "load_record", lambda path, name: read.append(path.stem) or load(path, name))
    collection = load_collection(place / "mine")
    assert list(collection.records) == ["naphthalene", "pyrene"]
    assert "naphthalene" in collection.records
    assert "other" not in collection.records
    assert read == []
    assert collection.component("pyrene") is collection.component("pyrene")
    assert read == ["pyrene"]
    with pytest.raises(UnreadableFileError, match=r"naphthalene\.toml"):
        collection.component("naphthalene")


def test_collections_and_records_are_frozen_and_say_what_they_are() -> None:
    collection = load_collection("published")
    record = collection.records["methylene-blue"]
    assert (record.reference, record.name, record.collection) == ("published/methylene-blue", "methylene-blue", "published")
    assert record.metadata is record.file
    assert record.title == record.metadata.title
    for value, key in ((collection, "title"), (record, "sha256")):
        with pytest.raises(dataclasses.FrozenInstanceError):
            setattr(value, key, "other")
    with pytest.raises(KeyError):
        collection.records["none"]


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"title": "5"}, r"mine/collection\.toml, title"),
        ({"invented": '"no"'}, "expected true or false, found 'no'"),
        ({"invented": "0"}, "expected true or false, found 0"),
        ({"colour": '"blue"'}, "colour"),
        ({"schema": '"collection/2"'}, "collection/1"),
        ({"name": '"yours"'}, "the folder is 'mine'"),
        ({"title": "unquoted"}, "cannot be read"),
    ],
)
def test_a_description_that_is_not_to_the_format_is_refused(place: Path, values: dict[str, str], message: str) -> None:
    write_description(place / "mine", **values)
    with pytest.raises(UnreadableFileError, match=message):
        load_collection(place / "mine")


def test_the_library_is_found_beside_the_code_as_in_a_wheel(tmp_path: Path) -> None:
    """The wheel packs spectra_library into the package (pyproject.toml, force-include); the same layout is made here."""
    package = tmp_path / "site" / "tinctor"
    shutil.copytree(ROOT / "src" / "tinctor", package, ignore=shutil.ignore_patterns("__pycache__"))
    shutil.copytree(ROOT / "spectra_library", package / "spectra_library")
    program = "from tinctor.library import load_collection as l; c = l('published'); print(c.folder, c.component('pyrene').name)"
    environment = {**os.environ, "PYTHONPATH": str(tmp_path / "site"), "PYTHONDONTWRITEBYTECODE": "1"}
    environment.pop("TINCTOR_LIBRARY", None)
    command = [sys.executable, "-c", program]
    done = subprocess.run(command, cwd=tmp_path, env=environment, capture_output=True, text=True, check=False)
    assert done.stdout.split() == [str((package / "spectra_library" / "published").resolve()), "pyrene"], done.stderr
