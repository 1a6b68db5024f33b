"""Collections of records: folders, found by name, loaded record by record when asked."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from tinctor.arrays import quoted
from tinctor.component import Component
from tinctor.errors import InputError, UnreadableFileError
from tinctor.library.record import Record, load_record

__all__ = ["COLLECTION_FILE", "Collection", "collections", "load_collection"]

#: Each collection's own description.
COLLECTION_FILE: Final = "collection.toml"
#: Its keys that hold text, all of them needed.
COLLECTION_TEXTS: Final = ("schema", "name", "title", "description")
#: Folders of collections of the user's own, in the manner of PATH.
LIBRARY_VARIABLE: Final = "TINCTOR_LIBRARY"


class _Records(Mapping[str, Record]):
    """Records by name; each is read from disk when it is first asked for."""

    def __init__(self, folder: Path, collection: str) -> None:
        self._folder, self._collection = folder, collection
        self._names = sorted(path.stem for path in folder.glob("*.toml") if path.name != COLLECTION_FILE)
        self._loaded: dict[str, Record] = {}

    def __getitem__(self, name: str) -> Record:
        if name not in self._names:
            raise KeyError(name)
        if name not in self._loaded:
            self._loaded[name] = load_record(self._folder / f"{name}.toml", self._collection)
        return self._loaded[name]

    def __contains__(self, name: object) -> bool:
        return name in self._names  # without reading the record

    def __iter__(self) -> Iterator[str]:
        return iter(self._names)

    def __len__(self) -> int:
        return len(self._names)


@dataclass(frozen=True, slots=True, eq=False, init=False)
class Collection:
    """A folder of records.

    Parameters
    ----------
    folder
        Where it is; it holds a collection.toml.

    Attributes
    ----------
    name, title, description
        From its collection.toml; the name is the folder's.
    invented
        Whether the data are made up, for a demonstration.
    folder
        Where it is.
    records
        Mapping of record name to `Record`, in order of name; a record is read when it is first asked for.

    Raises
    ------
    UnreadableFileError
        When collection.toml is missing or is not what the format says.
    """

    name: str
    title: str
    description: str
    invented: bool
    folder: Path
    records: Mapping[str, Record]

    def __init__(self, folder: Path) -> None:
        document = _collection_file(folder)
        for key, value in (
            ("name", folder.name),
            ("title", document["title"]),
            ("description", document["description"]),
            ("invented", document.get("invented", False)),
            ("folder", folder),
            ("records", _Records(folder, folder.name)),
        ):
            object.__setattr__(self, key, value)

    def component(self, name: str) -> Component:
        """Return a component by name.

        Raises
        ------
        InputError
            When there is none of that name, with names that are close.
        """
        if name not in self.records:
            import difflib  # loaded to word an error

            close = difflib.get_close_matches(name.lower(), list(self.records), n=3, cutoff=0.5)
            did_you_mean = f"did you mean {quoted(close)}?" if close else f"`tinctor library list {self.name}` lists what there is"
            raise InputError.single("unknown-component", "", f"collection {self.name!r} has no component {name!r}", did_you_mean)
        return self.records[name].component


def collections() -> list[str]:
    """Return the names of the collections found, in order.

    Examples
    --------
    >>> "published" in collections()
    True
    """
    return sorted({folder.name for folder in _folders()})


def load_collection(name: str | Path) -> Collection:
    """Return a collection by name, or by the path of its folder.

    Parameters
    ----------
    name
        A path, or text with a separator in it, is the folder. A bare name is looked for in the current folder, in the
        folders that the environment variable TINCTOR_LIBRARY lists, and in the library shipped.

    Raises
    ------
    InputError
        When there is none, or two of the same name: which one is meant is never settled by an order of places.

    Examples
    --------
    >>> load_collection("published").component("methylene-blue").basis
    'molar'
    """
    text = str(name)
    if isinstance(name, Path) or os.sep in text or "/" in text or text.startswith("."):
        folder = Path(text)
        if not (folder / COLLECTION_FILE).is_file():
            raise InputError.single("unknown-collection", ".library", f"{text} is not a collection: it has no {COLLECTION_FILE}")
        return Collection(folder.resolve())
    here = [Path(text).resolve()] if text and (Path(text) / COLLECTION_FILE).is_file() else []
    found = list(dict.fromkeys([*here, *(folder for folder in _folders() if folder.name == text)]))
    if not found:
        raise _unknown_collection(text)
    if len(found) > 1:
        places = " and ".join(str(folder) for folder in found)
        raise InputError.single(
            "two-collections", ".library", f"two collections are called {text!r}: {places}", "rename one, or give a path"
        )
    return Collection(found[0])


def _unknown_collection(text: str) -> InputError:
    names = collections()
    there_are = f"there are {quoted(names)}; or give the path of a folder" if names else "there are none; give the path of a folder"
    what = f"there is no collection {text!r}"
    if text and Path(text).is_dir():
        what += f": the folder of that name here has no {COLLECTION_FILE}"
    return InputError.single("unknown-collection", ".library", what, there_are)


def _folders() -> Iterator[Path]:
    for place in _places():
        yield from sorted(folder for folder in place.iterdir() if (folder / COLLECTION_FILE).is_file())


def _places() -> list[Path]:
    """Folders of collections: the user's, then the shipped one (in the wheel beside the code, in a checkout at its top)."""
    own = [Path(entry) for entry in os.environ.get(LIBRARY_VARIABLE, "").split(os.pathsep) if entry]
    for place in own:
        if not place.is_dir():
            raise InputError.single(
                "no-folder", LIBRARY_VARIABLE, f"{place} is not a folder", f"mend the variable {LIBRARY_VARIABLE}"
            )
        if (place / COLLECTION_FILE).is_file():
            raise InputError.single(
                "collection-as-place",
                LIBRARY_VARIABLE,
                f"expected folders that hold collections, found the collection {place} itself",
                f"name the folder above it: {place.resolve().parent}",
            )
    package = Path(__file__).resolve().parents[1]
    shipped = [place for place in (package / "spectra_library", package.parents[1] / "spectra_library") if place.is_dir()][:1]
    # the same folder named twice is one place, not two collections of a name
    return list(dict.fromkeys(place.resolve() for place in own + shipped))


def _collection_file(folder: Path) -> dict[str, object]:
    source = f"{folder.name}/{COLLECTION_FILE}"
    try:
        document = tomllib.loads((folder / COLLECTION_FILE).read_text(encoding="utf-8"))
    except (OSError, tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise UnreadableFileError.single("not-toml", source, f"the file cannot be read: {error}") from error
    if document.get("schema") != "collection/1" or not {*COLLECTION_TEXTS} <= set(document) <= {*COLLECTION_TEXTS, "invented"}:
        raise UnreadableFileError.single(
            "collection-keys",
            source,
            f'expected schema = "collection/1", name, title, description and perhaps invented; found {", ".join(document)}',
        )
    for key, value in document.items():
        if type(value) is not (bool if key == "invented" else str):
            expected = "true or false" if key == "invented" else "text"
            raise UnreadableFileError.single("collection-keys", f"{source}, {key}", f"expected {expected}, found {value!r}")
    if document["name"] != folder.name:
        raise UnreadableFileError.single(
            "collection-name", source, f"the folder is {folder.name!r} and the name {document['name']!r}"
        )
    return document
