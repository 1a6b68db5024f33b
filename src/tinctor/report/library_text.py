"""Collections and records for a person at a terminal, and as documents and CSV."""

from __future__ import annotations

from typing import Any

from tinctor.library import Collection, Record
from tinctor.library.add import component_csv

__all__ = ["collection_lines", "record_csv", "record_document", "record_lines"]


def collection_lines(collection: Collection) -> list[str]:
    """Return one line for the collection and one for each record."""
    invented = " (invented data)" if collection.invented else ""
    lines = [f"{collection.name}: {collection.title}{invented}, {len(collection.records)} records"]
    for name in collection.records:
        record = collection.records[name]
        c = record.component
        lines.append(
            f"  {name:<24} {c.wavelength_nm[0]:>5.0f} to {c.wavelength_nm[-1]:<5.0f} nm  {c.basis:<5}  {record.file.title}"
        )
    return lines


def record_lines(record: Record) -> list[str]:
    """Return what is known about a record, in words."""
    file, c = record.file, record.component
    unit = "L mol-1 cm-1" if c.basis == "molar" else "L g-1 cm-1"
    top = int(c.absorptivity.argmax())
    known = file.conditions.model_dump(exclude_none=True)
    lines = [
        f"{record.reference}: {file.title}",
        *([f"  caution          {file.caution}"] if file.caution else []),
        *([f"  formula          {file.formula}"] if file.formula else []),
        *([f"  CAS              {file.cas}"] if file.cas else []),
        *([f"  molar mass       {file.molar_mass_g_per_mol:g} g/mol"] if file.molar_mass_g_per_mol else []),
        *([f"  analyte          {file.analyte}"] if file.analyte else []),
        f"  absorptivity     {c.basis}, {unit}; highest {c.absorptivity[top]:.4g} at {c.wavelength_nm[top]:g} nm",
        f"  wavelengths      {c.wavelength_nm.size} from {c.wavelength_nm[0]:g} to {c.wavelength_nm[-1]:g} nm",
        f"  scale            {100 * file.scale_relative_u:g} % standard uncertainty. {file.scale_relative_u_reason}",
        f"  conditions       {'; '.join(f'{key} {value}' for key, value in known.items()) or 'not stated'}",
    ]
    lines += [f"  {key:<16} {value}" for key, value in (("parent", file.parent), ("operator", file.operator)) if value]
    if file.linear_range:
        lines.append(f"  linear range     to {file.linear_range.linear_to:g} (concentration x path). {file.linear_range.reason}")
    lines += [
        f"  source           {file.source.citation}",
        f"  link, licence    {file.source.link}; {file.source.licence}",
        f"  obtained         {file.source.obtained}",
        f"  changed          {file.source.changed}",
        f"  check points     {len(file.check_points)}",
        f"  SHA-256          {record.sha256}",
    ]
    return lines


def record_document(record: Record) -> dict[str, Any]:
    """Return a record as a document: its file's keys, and the spectrum as an inline component has it."""
    c = record.component
    spectrum: dict[str, Any] = {"wavelength_nm": c.wavelength_nm.tolist(), f"{c.basis}_absorptivity": c.absorptivity.tolist()}
    if c.absorptivity_u is not None:
        spectrum["absorptivity_u"] = c.absorptivity_u.tolist()
    return {
        **record.file.model_dump(by_alias=True, exclude_none=True),
        "record": record.reference,
        "sha256": record.sha256,
        **spectrum,
    }


def record_csv(record: Record) -> str:
    """Return the record's spectrum as it stands in its CSV file."""
    return component_csv(record.component)
