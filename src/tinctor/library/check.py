"""The check of a collection: units, grids, duplicates, registry numbers, citations, check points, formulae."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np

from tinctor.axis import covered, resample
from tinctor.errors import InputError
from tinctor.library.collection import COLLECTION_FILE, Collection
from tinctor.library.record import Record

__all__ = ["CheckFinding", "cas_is_valid", "check_collection", "formula_mass"]

#: IUPAC abridged standard atomic weights 2021 (Prohaska et al., Pure Appl. Chem. 94 (2022) 573), from memory.
ATOMIC_WEIGHTS: Final = {
    "H": 1.008, "Li": 6.94, "B": 10.81, "C": 12.011, "N": 14.007, "O": 15.999, "F": 18.998, "Na": 22.990, "Mg": 24.305,
    "Al": 26.982, "Si": 28.085, "P": 30.974, "S": 32.06, "Cl": 35.45, "K": 39.098, "Ca": 40.078, "Ti": 47.867, "V": 50.942,
    "Cr": 51.996, "Mn": 54.938, "Fe": 55.845, "Co": 58.933, "Ni": 58.693, "Cu": 63.546, "Zn": 65.38, "Br": 79.904,
    "Ag": 107.87, "Sn": 118.71, "I": 126.90, "Ba": 137.33,
}  # fmt: skip

#: No dye comes near (L g-1 cm-1): the strongest have some 300 to 800, so that more is a molar value under the wrong heading.
HIGHEST_MASS_ABSORPTIVITY: Final = 2000.0


@dataclass(frozen=True, slots=True)
class CheckFinding:
    """One thing wrong with a record or a collection."""

    record: str
    code: str
    message: str


def check_collection(folder: str | Path) -> list[CheckFinding]:
    """Return everything found wrong with a collection; nothing found is an empty list.

    Examples
    --------
    >>> from tinctor.library import load_collection
    >>> check_collection(load_collection("published").folder)
    []
    """
    collection = Collection(Path(folder).resolve())
    findings = list(_stray_files(collection))
    loaded: list[Record] = []
    for name in collection.records:
        try:
            record = collection.records[name]
        except InputError as error:
            findings += [CheckFinding(name, fault.code, str(fault)) for fault in error.faults]
            continue
        loaded.append(record)
        findings += [CheckFinding(name, code, message) for check in CHECKS for code, message in check(record)]
    return findings + list(_duplicates(loaded))


def cas_is_valid(cas: str) -> bool:
    """Return whether a CAS registry number's check digit agrees with the others.

    Examples
    --------
    >>> cas_is_valid("61-73-4"), cas_is_valid("61-73-5")
    (True, False)
    """
    if not re.fullmatch(r"\d{2,7}-\d{2}-\d", cas):
        return False
    digits = cas.replace("-", "")
    return sum(k * int(d) for k, d in enumerate(reversed(digits[:-1]), start=1)) % 10 == int(digits[-1])


def formula_mass(formula: str) -> float | None:
    """Return the molar mass in g/mol of a formula without brackets or charges, or `None` when it is not one.

    A point sets off water of crystallisation and the like: C16H18ClN3S.3H2O.

    Examples
    --------
    >>> round(formula_mass("C16H18ClN3S"), 2), round(formula_mass("C16H18ClN3S.3H2O"), 2)
    (319.85, 373.9)
    """
    total = 0.0
    for part in re.split("[.·]", formula):
        found = re.fullmatch(r"(\d*)((?:[A-Z][a-z]?\d*)+)", part)
        atoms = re.findall(r"([A-Z][a-z]?)(\d*)", found[2]) if found else []
        if found is None or any(symbol not in ATOMIC_WEIGHTS for symbol, _ in atoms):
            return None
        total += int(found[1] or 1) * sum(ATOMIC_WEIGHTS[symbol] * int(count or 1) for symbol, count in atoms)
    return total


def _names_and_numbers(record: Record) -> Iterator[tuple[str, str]]:
    file = record.file
    if file.cas and not cas_is_valid(file.cas):
        yield "cas", f"the check digit of CAS {file.cas} does not agree"
    if file.formula:
        mass = formula_mass(file.formula)
        if mass is None:
            yield "formula", f"{file.formula!r} cannot be read: symbols and counts without brackets or charges, as C16H18ClN3S.3H2O"
        elif file.molar_mass_g_per_mol and abs(mass - file.molar_mass_g_per_mol) > 0.002 * mass:
            yield "molar-mass", f"{file.formula} weighs {mass:.2f} g/mol, the record says {file.molar_mass_g_per_mol:g}"


def _uncertainty(record: Record) -> Iterator[tuple[str, str]]:
    if record.file.scale_relative_u <= 0:
        yield "scale-u", "scale_relative_u must be above 0: no weighing is exact"
    if len(record.file.scale_relative_u_reason) < 20:
        yield "scale-u-reason", "scale_relative_u needs a reason"


def _source(record: Record) -> Iterator[tuple[str, str]]:
    source = record.file.source
    for key in ("licence", "obtained", "changed"):
        if not getattr(source, key).strip():
            yield "source", f"source.{key} is empty"
    if not re.match(r"https?://|doi:|scripts/|not known: ", source.link):
        yield (
            "link",
            f"expected a web address, a DOI (doi:...) a script of this project, or 'not known: ...', found {source.link!r}",
        )


def _check_points(record: Record) -> Iterator[tuple[str, str]]:
    component = record.component
    for point in record.file.check_points:
        at = np.array([point.wavelength_nm])
        if not covered(at, component.wavelength_nm)[0]:
            yield "check-point", f"check point at {point.wavelength_nm:g} nm lies outside the record"
            continue
        value = float(resample(component.wavelength_nm, component.absorptivity, at)[0])
        if abs(value - point.value) > point.tolerance:
            expected = f"{point.value:g} ± {point.tolerance:g}"
            yield "check-point", f"{value:.5g} at {point.wavelength_nm:g} nm, expected {expected} ({point.source})"


def _spectrum(record: Record) -> Iterator[tuple[str, str]]:
    component = record.component
    lowest, highest = float(component.absorptivity.min()), float(component.absorptivity.max())
    if lowest < -0.02 * highest:
        yield "negative", f"absorptivity {lowest:.4g} is further below zero than noise"
    if component.wavelength_nm.size < 5:
        yield "grid", f"only {component.wavelength_nm.size} wavelengths"
    if component.basis == "mass" and highest > HIGHEST_MASS_ABSORPTIVITY:
        yield "basis", f"no substance absorbs {highest:.4g} L g-1 cm-1: are the values molar?"


CHECKS: Final[tuple[Callable[[Record], Iterator[tuple[str, str]]], ...]] = (
    _names_and_numbers,
    _uncertainty,
    _source,
    _check_points,
    _spectrum,
)


def _stray_files(collection: Collection) -> Iterator[CheckFinding]:
    """Every file must belong to a record; every record needs both files and its own name."""
    names = set(collection.records)
    for path in sorted(collection.folder.iterdir()):
        if path.name in (COLLECTION_FILE, "README.md"):
            continue
        if path.is_dir() or path.suffix not in (".toml", ".csv") or path.stem not in names:
            yield CheckFinding(path.stem, "stray-file", f"{path.name} belongs to no record")
    for name in collection.records:
        try:
            own = collection.records[name].name
        except InputError:
            continue
        if own != name:
            yield CheckFinding(name, "name", f"the file is {name!r} and the record calls itself {own!r}")


def _duplicates(records: list[Record]) -> Iterator[CheckFinding]:
    seen: dict[tuple[object, ...], str] = {}
    for record in records:
        file = record.file
        if file.cas is None:
            continue
        key = (file.cas, file.conditions, file.source.citation)
        if key in seen:
            yield CheckFinding(record.name, "duplicate", f"same substance, conditions and source as {seen[key]!r}")
        seen.setdefault(key, record.name)
