"""The contract's JSON to spectra: a list of spectrum objects, or an object that holds one under "spectra"."""

from __future__ import annotations

from typing import Any, Final

from tinctor.errors import Fault, InputError, UnreadableFileError
from tinctor.files.reading import FileReading
from tinctor.files.strict_json import non_finite_faults, parse
from tinctor.spectrum import Spectrum

__all__ = ["read_spectra_json"]

NUMBERS: Final = ("path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u")
LISTS: Final = ("wavelength_nm", "absorbance", "absorbance_u")
REQUIRED: Final = ("id", "wavelength_nm", "absorbance")


def read_spectra_json(data: bytes, source: str) -> FileReading:
    """Return the spectra of a JSON text, all faults reported together with their JSON paths.

    Parameters
    ----------
    data
        UTF-8 JSON: `[{"id", "wavelength_nm", "absorbance", ...}]`, or an object with such a list under "spectra" (a
        resolve/1 request will do; its other keys are left to the operation).
    source
        The file's name, for messages.

    Examples
    --------
    >>> text = b'[{"id": "a", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2]}]'
    >>> read_spectra_json(text, "a.json").spectra[0].id
    'a'
    """
    document = parse(data)
    items = document.get("spectra") if isinstance(document, dict) else document
    prefix = "$.spectra" if isinstance(document, dict) else "$"
    if not isinstance(items, list) or not items:
        raise UnreadableFileError.single("no-spectra", source, f"expected a list of spectra at {prefix}, found {_kind(items)}")
    faults: list[Fault] = []
    spectra: list[Spectrum] = []
    for k, item in enumerate(items):
        path = f"{prefix}[{k}]"
        found = _shape_faults(item, path)
        if not found:
            try:
                spectra.append(Spectrum(**item))
            except InputError as error:
                found = list(error.at(path).faults)
        faults += found
    if faults:
        raise UnreadableFileError(faults)
    return FileReading(source, tuple(spectra), "json", "none", "point")


def _shape_faults(item: Any, path: str) -> list[Fault]:
    if not isinstance(item, dict):
        return [Fault("not-an-object", path, f"expected a spectrum object, found {_kind(item)}")]
    faults = [Fault("missing-key", f"{path}.{key}", "this key is required and is not there") for key in REQUIRED if key not in item]
    for key, value in item.items():
        place = f"{path}.{key}"
        if key == "id":
            faults += [] if isinstance(value, str) else [Fault("not-text", place, f"expected text, found {_kind(value)}")]
        elif key in NUMBERS:
            faults += [] if _is_number(value) else [Fault("not-a-number", place, f"expected a number, found {_kind(value)}")]
        elif key in LISTS:
            faults += _list_faults(value, place)
        else:
            faults.append(
                Fault("unknown-key", place, "this key is not known here", "unknown keys are refused so that none is lost")
            )
    return faults


def _list_faults(value: Any, path: str) -> list[Fault]:
    if not isinstance(value, list):
        return [Fault("not-a-list", path, f"expected a list of numbers, found {_kind(value)}")]
    wrong = [k for k, item in enumerate(value) if not _is_number(item)]
    faults = [Fault("not-a-number", f"{path}[{k}]", f"expected a number, found {_kind(value[k])}") for k in wrong]
    return faults + [Fault(f.code, path + f.path[1:], f.message, f.hint) for f in non_finite_faults(value)]


def _is_number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _kind(value: Any) -> str:
    names = {dict: "an object", list: "a list", str: "text", bool: "true or false", type(None): "null or nothing"}
    return names.get(type(value), repr(value))
