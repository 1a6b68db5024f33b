"""The contract's JSON to spectra: a list of spectrum objects, or an object that holds one under "spectra"."""

from __future__ import annotations

from typing import Any, Final

from tinctor.errors import Fault, InputError, UnreadableFileError
from tinctor.files.reading import FileReading
from tinctor.files.source import check_size
from tinctor.files.strict_json import child_path, non_finite_faults, parse
from tinctor.spectrum import Spectrum

__all__ = ["read_spectra_json", "spectra_from_json"]

NUMBERS: Final = ("path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u")
LISTS: Final = ("wavelength_nm", "absorbance", "absorbance_u")
REQUIRED: Final = ("id", "wavelength_nm", "absorbance")


def read_spectra_json(data: bytes, source_name: str) -> FileReading:
    """Return the spectra of a JSON file; as `spectra_from_json`, with the file's name before every path.

    Raises
    ------
    UnreadableFileError
        Listing every fault with file and JSON path.

    Examples
    --------
    >>> text = b'[{"id": "a", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2]}]'
    >>> read_spectra_json(text, "a.json").spectra[0].id
    'a'
    """
    check_size(data, source_name)
    try:
        document = parse(data)
        spectra = spectra_from_json(document)
    except InputError as error:
        raise UnreadableFileError([Fault(f.code, f"{source_name}, {f.path}", f.message, f.hint) for f in error.faults]) from error
    return FileReading(source_name, spectra, "json", "none", "point", notes=_turned_notes(document, spectra))


def spectra_from_json(document: Any) -> tuple[Spectrum, ...]:
    """Return the spectra of a JSON document, all faults reported together with their JSON paths.

    Parameters
    ----------
    document
        JSON text (str or bytes) or the value it stands for: `[{"id", "wavelength_nm", "absorbance", ...}]`, or
        `{"spectra": [...]}` with such a list and no other key. Keys as in the contract's Spectrum.

    Raises
    ------
    InputError
        For repeated, unknown or missing keys, values of another kind (text or true for a number), numbers that are not
        finite, ids that stand twice, and what `Spectrum` refuses.

    Examples
    --------
    >>> spectra_from_json('{"spectra": [{"id": "a", "wavelength_nm": [402, 400], "absorbance": [0.2, 0.1]}]}')[0].absorbance
    array([0.1, 0.2])
    """
    value = parse(document) if isinstance(document, str | bytes) else document
    prefix = "$.spectra" if isinstance(value, dict) else "$"
    items = value.get("spectra") if isinstance(value, dict) else value
    faults = _unknown_keys(value) if isinstance(value, dict) else []
    if not isinstance(items, list) or not items:
        found = "an empty list" if items == [] else _kind(items)
        raise InputError([*faults, Fault("no-spectra", prefix, f"expected a list of spectra, found {found}")])
    spectra: list[Spectrum] = []
    seen: dict[str, str] = {}
    for k, item in enumerate(items):
        path = child_path(prefix, k)
        found_here = _shape_faults(item, path)
        if not found_here:
            found_here = _repeated_id(item["id"], path, seen)
            try:
                spectra.append(Spectrum(**item))
            except InputError as error:
                found_here += error.at(path).faults
        faults += found_here
    if faults:
        raise InputError(faults)
    return tuple(spectra)


def _unknown_keys(document: dict[str, Any]) -> list[Fault]:
    hint = "a spectra document holds spectra only: settings beside them would be lost"
    return [
        Fault("unknown-key", child_path("$", key), 'expected the key "spectra" and no other', hint)
        for key in document
        if key != "spectra"
    ]


def _repeated_id(i: str, path: str, seen: dict[str, str]) -> list[Fault]:
    earlier = seen.setdefault(i, path)
    if earlier == path:
        return []
    return [Fault("duplicate-id", f"{path}.id", f"the id {i!r} stands at {earlier} already", "rename one of the samples")]


def _shape_faults(item: Any, path: str) -> list[Fault]:
    if not isinstance(item, dict):
        return [Fault("not-an-object", path, f"expected a spectrum object, found {_kind(item)}")]
    faults = [Fault("missing-key", f"{path}.{key}", "this key is required and is not there") for key in REQUIRED if key not in item]
    for key, value in item.items():
        place = child_path(path, key)
        if key == "id":
            faults += [] if isinstance(value, str) else [Fault("not-text", place, f"expected text, found {_kind(value)}")]
        elif key in NUMBERS:
            faults += _number_faults(value, place)
        elif key in LISTS:
            faults += _list_faults(value, place)
        else:
            known = ", ".join((*REQUIRED, *NUMBERS, "absorbance_u"))
            faults.append(Fault("unknown-key", place, "this key is not known here", f"the keys of a spectrum are {known}"))
    return faults


def _number_faults(value: Any, path: str) -> list[Fault]:
    if type(value) in (int, float):
        return non_finite_faults(value, path)
    return [Fault("not-a-number", path, f"expected a number, found {_kind(value)}")]


def _list_faults(value: Any, path: str) -> list[Fault]:
    if not isinstance(value, list):
        return [Fault("not-a-list", path, f"expected a list of numbers, found {_kind(value)}")]
    if set(map(type, value)) <= {int, float}:
        return non_finite_faults(value, path)
    return [fault for k, item in enumerate(value) for fault in _number_faults(item, child_path(path, k))]


def _turned_notes(document: Any, spectra: tuple[Spectrum, ...]) -> tuple[str, ...]:
    items = document["spectra"] if isinstance(document, dict) else document
    turned = sum(item["wavelength_nm"][0] > item["wavelength_nm"][-1] for item in items)
    return (f"the wavelengths of {turned} of {len(spectra)} spectra fall in the file; they were turned round",) if turned else ()


def _kind(value: Any) -> str:
    names = {dict: "an object", list: "a list", str: "text", bool: "true or false", type(None): "null or nothing"}
    return names.get(type(value)) or f"the number {str(value)[:40] if isinstance(value, float) else _whole(value)}"


def _whole(value: Any) -> str:
    return str(value) if isinstance(value, int) and abs(value) < 10**30 else f"of kind {type(value).__name__}"
