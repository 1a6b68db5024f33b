"""A new record in a collection of the user's: written whole, read back, checked, and never over one that is there."""

from __future__ import annotations

import json
import os
import re
from pathlib import Path
from typing import Any

from tinctor.arrays import FloatArray
from tinctor.component import Component
from tinctor.errors import Fault, InputError
from tinctor.library.check import CheckFinding, check_collection
from tinctor.library.collection import COLLECTION_FILE
from tinctor.library.record import NAME, Record, load_record

__all__ = ["add_record", "component_csv", "create_collection", "record_toml"]

#: A record's own maximum, written down so that a damaged file is noticed.
GUARD_TOLERANCE = 1e-6


def create_collection(folder: Path, title: str, description: str = "") -> None:
    """Make a folder a collection; one that is there is left as it is.

    Raises
    ------
    InputError
        When the folder's name cannot be a collection's, or the folder cannot be made.
    """
    if (folder / COLLECTION_FILE).exists():
        return
    if not re.fullmatch(NAME, folder.resolve().name):
        raise InputError.single(
            "collection-name", str(folder), f"expected a folder name of a-z, 0-9 and hyphens, found {folder.resolve().name!r}"
        )
    lines = {"schema": "collection/1", "name": folder.resolve().name, "title": title, "description": description or title}
    try:
        folder.mkdir(parents=True, exist_ok=True)
        _write_new(folder / COLLECTION_FILE, "".join(f"{key} = {_toml(value)}\n" for key, value in lines.items()))
    except OSError as error:
        raise InputError.single("cannot-write", str(folder), f"the folder cannot be made: {error.strerror}") from error


def add_record(folder: Path, document: dict[str, Any], component: Component) -> Record:
    """Write a record and return it as it reads back.

    Parameters
    ----------
    folder
        Of a collection.
    document
        The keys of the record's TOML file (schema record/1). A check point at the maximum is added where there is none.
    component
        The spectrum.

    Raises
    ------
    InputError
        When there is such a record, the collection is none, or the record does not pass `tinctor library check`: nothing is
        left behind then.
    """
    name = str(document.get("name", ""))
    toml, csv = _places(folder, name)
    if not document.get("check_points"):
        document = {**document, "check_points": [_guard(component)]}
    written: list[Path] = []
    try:
        for path, text in ((csv, component_csv(component)), (toml, record_toml(document))):
            _write_new(path, text)
            written.append(path)
        record = load_record(toml, folder.resolve().name)
        findings = [f for f in check_collection(folder) if f.record == name]
        if findings:
            raise InputError([_fault(f) for f in findings])
    except BaseException as error:
        for path in written:
            path.unlink(missing_ok=True)
        if isinstance(error, OSError):
            raise InputError.single("cannot-write", str(folder), f"the record cannot be written: {error.strerror}") from error
        raise
    return record


def _places(folder: Path, name: str) -> tuple[Path, Path]:
    """Paths of the two files of a record that is not there yet."""
    if not (folder / COLLECTION_FILE).is_file():
        raise InputError.single(
            "no-collection", str(folder), f"the folder has no {COLLECTION_FILE}", "give --new-collection TITLE to make it one"
        )
    if not re.fullmatch(NAME, name):
        raise InputError.single("record-name", ".name", f"expected a name of a-z, 0-9 and hyphens, found {name!r}")
    toml, csv = folder / f"{name}.toml", folder / f"{name}.csv"
    for path in (toml, csv):
        if path.exists():
            raise InputError.single(
                "record-exists", str(path), f"there is a record {name!r} already, and records are never changed", "give a new name"
            )
    return toml, csv


def record_toml(document: dict[str, Any]) -> str:
    """Return the TOML text of a record.

    Examples
    --------
    >>> print(record_toml({"name": "a", "conditions": {"ph": 7.0}, "check_points": [{"value": 2.0}]}), end="")
    name = "a"
    <BLANKLINE>
    [conditions]
    ph = 7.0
    <BLANKLINE>
    [[check_points]]
    value = 2.0
    """
    lines = [
        f"{key} = {_toml(value)}" for key, value in document.items() if not isinstance(value, dict | list) and value is not None
    ]
    for key, value in document.items():
        tables = [("[{}]", value)] if isinstance(value, dict) else [("[[{}]]", v) for v in value] if isinstance(value, list) else []
        for form, table in tables:
            lines += ["", form.format(key), *(f"{k} = {_toml(v)}" for k, v in table.items() if v is not None)]
    return "\n".join(lines) + "\n"


def _guard(component: Component) -> dict[str, Any]:
    k = int(component.absorptivity.argmax())
    value = float(component.absorptivity[k])
    return {
        "wavelength_nm": float(component.wavelength_nm[k]),
        "value": value,
        "tolerance": value * GUARD_TOLERANCE,
        "source": "this record's own maximum: guards against copying errors",
    }


def component_csv(component: Component) -> str:
    """Return a component's spectrum as it stands in a record's CSV file, every number with all its digits."""
    columns: list[FloatArray] = [component.wavelength_nm, component.absorptivity]
    if component.absorptivity_u is not None:
        columns.append(component.absorptivity_u)
    header = ["wavelength_nm", f"{component.basis}_absorptivity", "absorptivity_u"][: len(columns)]
    rows = [",".join(repr(float(value)) for value in row) for row in zip(*columns, strict=True)]
    return "\n".join([",".join(header), *rows]) + "\n"


def _toml(value: object) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")  # a JSON string is a TOML basic string
    assert isinstance(value, int | float)
    return repr(value)


def _write_new(path: Path, text: str) -> None:
    """Write a file that must not be there yet, and have it on disk before it counts."""
    with path.open("x", encoding="utf-8", newline="") as file:
        file.write(text)
        file.flush()
        os.fsync(file.fileno())


def _fault(finding: CheckFinding) -> Fault:
    return Fault(finding.code, finding.record, f"the record would not pass the check of its collection: {finding.message}")
