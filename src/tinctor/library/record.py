"""A library record: one substance, one source, one set of conditions, in a TOML file beside a CSV of absorptivities."""

from __future__ import annotations

import hashlib
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from tinctor.arrays import FloatArray
from tinctor.axis import wavelength_axis
from tinctor.component import Component, Conditions
from tinctor.errors import Fault, InputError, UnreadableFileError
from tinctor.files.numbers import first_wrong, numbers
from tinctor.files.table import cells_of, decoded
from tinctor.units import Basis

__all__ = ["CheckPoint", "Record", "RecordFile", "load_record"]

NAME = r"^[a-z0-9]+(-[a-z0-9]+)*$"


class _Part(BaseModel):
    model_config = ConfigDict(strict=True, extra="forbid", allow_inf_nan=False, frozen=True, defer_build=True)


class ConditionsPart(_Part):
    """Conditions of the measurement; what is not known is left out."""

    solvent: str | None = None
    ph: float | None = None
    temperature_c: float | None = None
    bandwidth_nm: float | None = None
    lot: str | None = None
    note: str | None = None


class LinearRangePart(_Part):
    """Highest concentration times path at which Beer's law was shown to hold, and how."""

    linear_to: float
    reason: str


class SourcePart(_Part):
    """Where the numbers come from."""

    citation: str = Field(min_length=10)
    link: str
    licence: str
    obtained: str
    changed: str


class CheckPoint(_Part):
    """A value that the record must show, from a named source."""

    wavelength_nm: float
    value: float
    tolerance: float = Field(gt=0)
    source: str
    from_memory: bool = False


class RecordFile(_Part):
    """The TOML file of a record (schema record/1)."""

    schema_: Literal["record/1"] = Field(alias="schema")
    name: str = Field(pattern=NAME)
    title: str = Field(min_length=1)
    basis: Basis
    scale_relative_u: float
    scale_relative_u_reason: str
    formula: str | None = None
    cas: str | None = None
    molar_mass_g_per_mol: float | None = None
    analyte: str | None = None
    caution: str = ""
    invented: bool = False
    parent: str | None = None
    operator: str | None = None
    conditions: ConditionsPart = ConditionsPart()
    linear_range: LinearRangePart | None = None
    source: SourcePart
    check_points: list[CheckPoint] = Field(min_length=1)


@dataclass(frozen=True, slots=True, eq=False)
class Record:
    """A loaded record.

    Attributes
    ----------
    collection
        Name of the collection.
    file
        The TOML file's content.
    component
        What the solver uses.
    sha256
        Digest of the TOML and CSV bytes: names exactly what a result rests on.
    """

    collection: str
    file: RecordFile
    component: Component
    sha256: str

    @property
    def name(self) -> str:
        """The record's name, also that of its files."""
        return self.file.name

    @property
    def title(self) -> str:
        """What it is, in words."""
        return self.file.title

    @property
    def metadata(self) -> RecordFile:
        """The same as `file`: everything known about the substance but its spectrum."""
        return self.file

    @property
    def reference(self) -> str:
        """Collection and name: "published/methylene-blue"."""
        return f"{self.collection}/{self.file.name}"


def load_record(toml_path: Path, collection: str) -> Record:
    """Return the record of a TOML file and the CSV beside it.

    Raises
    ------
    UnreadableFileError
        For a file that is missing, or a key or value that the format does not allow, with the place.
    """
    csv_path = toml_path.with_suffix(".csv")
    toml_bytes, csv_bytes = _bytes(toml_path), _bytes(csv_path)
    file = _record_file(toml_bytes, toml_path.name)
    axis, absorptivity, spread = _read_csv(csv_bytes, csv_path.name, file.basis)
    try:
        component = _component(file, axis, absorptivity, spread)
    except InputError as error:
        raise UnreadableFileError([_placed(fault, toml_path.name, csv_path.name) for fault in error.faults]) from error
    digest = hashlib.sha256(toml_bytes + b"\0" + csv_bytes).hexdigest()
    return Record(collection, file, component, digest)


def _placed(fault: Fault, toml_name: str, csv_name: str) -> Fault:
    """Name the file that a fault of the component lies in: the spectrum is in the CSV, the rest in the TOML."""
    of_spectrum = fault.path.startswith((".wavelength_nm", ".absorptivity"))
    return Fault(fault.code, f"{csv_name if of_spectrum else toml_name}, {fault.path.removeprefix('.')}", fault.message, fault.hint)


def _bytes(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as error:
        raise UnreadableFileError.single("no-file", path.name, f"a record needs the file {path.name}: {error.strerror}") from error


def _record_file(data: bytes, source: str) -> RecordFile:
    try:
        document: dict[str, Any] = tomllib.loads(data.decode("utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise UnreadableFileError.single("not-toml", source, f"the file is not TOML in UTF-8: {error}") from error
    try:
        return RecordFile.model_validate(document)
    except ValidationError as error:
        faults = [
            Fault("record-key", f"{source}, {'.'.join(map(str, e['loc']))}", e["msg"]) for e in error.errors(include_url=False)
        ]
        raise UnreadableFileError(faults) from error


def _read_csv(data: bytes, source: str, basis: Basis) -> tuple[FloatArray, FloatArray, FloatArray | None]:
    cells = cells_of(decoded(data, source), ",", source)
    header = ["wavelength_nm", f"{basis}_absorptivity"]
    if cells.rows[0] not in (header, [*header, "absorptivity_u"]):
        found = ",".join(cells.rows[0])
        raise UnreadableFileError.single(
            "record-header", f"{source}, line 1", f"expected {','.join(header)} and perhaps absorptivity_u, found {found}"
        )
    if len(cells.rows) == 1:
        raise UnreadableFileError.single("empty-record", source, "expected one line for each wavelength, found only the header")
    for row, line in zip(cells.rows[1:], cells.lines[1:], strict=True):
        wrong = first_wrong(row, "point")
        if len(row) != len(cells.rows[0]) or wrong is not None:
            raise UnreadableFileError.single(
                "not-a-number", f"{source}, line {line}", f"expected {len(cells.rows[0])} numbers, found {row}"
            )
    values = np.stack([numbers(row, "point") for row in cells.rows[1:]], axis=1)
    return values[0], values[1], values[2] if len(values) > 2 else None


def _component(file: RecordFile, axis: FloatArray, absorptivity: FloatArray, spread: FloatArray | None) -> Component:
    c = file.conditions
    return Component(
        file.name,
        wavelength_axis(axis),  # a component turns a descending axis round; a record's file must ascend as it stands
        absorptivity,
        basis=file.basis,
        absorptivity_u=spread,
        scale_relative_u=file.scale_relative_u,
        molar_mass_g_per_mol=file.molar_mass_g_per_mol,
        linear_to=file.linear_range.linear_to if file.linear_range else None,
        analyte=file.analyte,
        conditions=Conditions(c.solvent, c.ph, c.temperature_c, c.bandwidth_nm),
        caution=file.caution,
    )
