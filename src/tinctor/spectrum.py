"""Measured spectra: one, and a batch that shares a wavelength axis."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from tinctor.arrays import FloatArray, finite_array, non_negative, quoted, read_only
from tinctor.axis import SAME_WAVELENGTH_NM, ascending, wavelength_axis
from tinctor.errors import Fault, InputError

__all__ = ["ABSORBANCE_LIMIT", "Spectrum", "SpectrumBatch"]

#: No spectrophotometer reads beyond; larger values are per cent transmittance or counts taken for absorbance.
ABSORBANCE_LIMIT: Final = 10.0


@dataclass(frozen=True, slots=True, eq=False, init=False)
class Spectrum:
    """One measured absorbance spectrum with its cell and dilution.

    Parameters
    ----------
    id
        The sample's name; text, not empty.
    wavelength_nm : array (n_wavelengths,)
        Strictly monotonic, in nm; a descending axis is turned round together with the readings.
    absorbance : array (n_wavelengths,)
        Decadic absorbance, finite.
    path_length_cm, path_length_u_cm
        Path length of the cell and its standard uncertainty, in cm.
    dilution_factor, dilution_factor_u
        Final volume over taken volume (at least 1) and its standard uncertainty.
    absorbance_u : array (n_wavelengths,), optional
        Standard uncertainty of each reading, which then replaces the noise model's floor and transmittance parts.

    Raises
    ------
    InputError
        Listing every fault with its place.

    Examples
    --------
    >>> Spectrum("vat-3", [402.0, 400.0], [0.220, 0.213]).absorbance
    array([0.213, 0.22 ])
    """

    id: str
    wavelength_nm: FloatArray
    absorbance: FloatArray
    path_length_cm: float
    path_length_u_cm: float
    dilution_factor: float
    dilution_factor_u: float
    absorbance_u: FloatArray | None

    def __init__(
        self,
        id: str,
        wavelength_nm: ArrayLike,
        absorbance: ArrayLike,
        *,
        path_length_cm: float = 1.0,
        path_length_u_cm: float = 0.0,
        dilution_factor: float = 1.0,
        dilution_factor_u: float = 0.0,
        absorbance_u: ArrayLike | None = None,
    ) -> None:
        axis, turned = ascending(wavelength_nm)
        rows = {
            "absorbance": _one_row(absorbance, "absorbance", turned),
            "absorbance_u": None if absorbance_u is None else _one_row(absorbance_u, "absorbance_u", turned),
        }
        cell = {
            "path_length_cm": [path_length_cm],
            "path_length_u_cm": [path_length_u_cm],
            "dilution_factor": [dilution_factor],
            "dilution_factor_u": [dilution_factor_u],
        }
        try:
            batch = SpectrumBatch((id,), axis, **rows, **cell)  # type: ignore[arg-type]
        except InputError as error:
            raise InputError([replace(fault, path=_of_one(fault.path)) for fault in error.faults]) from error
        for name, value in (
            ("id", id),
            ("wavelength_nm", batch.wavelength_nm),
            ("absorbance", batch.absorbance[0]),
            ("path_length_cm", float(batch.path_length_cm[0])),
            ("path_length_u_cm", float(batch.path_length_u_cm[0])),
            ("dilution_factor", float(batch.dilution_factor[0])),
            ("dilution_factor_u", float(batch.dilution_factor_u[0])),
            ("absorbance_u", None if batch.absorbance_u is None else batch.absorbance_u[0]),
        ):
            object.__setattr__(self, name, value)


@dataclass(frozen=True, slots=True, eq=False, init=False)
class SpectrumBatch:
    """n spectra on one ascending wavelength axis: samples first, wavelengths last.

    Parameters
    ----------
    ids
        One unique, non-empty text per spectrum.
    wavelength_nm : array (n_wavelengths,)
        Ascending, in nm.
    absorbance : array (n_spectra, n_wavelengths)
        Decadic absorbance, finite. Kept without a copy when it is read-only float64 already.
    path_length_cm, path_length_u_cm, dilution_factor, dilution_factor_u : array (n_spectra,)
        As for `Spectrum`; one number serves all.
    absorbance_u : array (n_spectra, n_wavelengths), optional
        Standard uncertainty of each reading.

    Raises
    ------
    InputError
        Listing every fault with its place.

    Examples
    --------
    >>> SpectrumBatch(("a", "b"), [400.0, 402.0], [[0.1, 0.2], [0.3, 0.4]]).absorbance.shape
    (2, 2)
    """

    ids: tuple[str, ...]
    wavelength_nm: FloatArray
    absorbance: FloatArray
    path_length_cm: FloatArray
    path_length_u_cm: FloatArray
    dilution_factor: FloatArray
    dilution_factor_u: FloatArray
    absorbance_u: FloatArray | None

    def __init__(
        self,
        ids: Sequence[str],
        wavelength_nm: ArrayLike,
        absorbance: ArrayLike,
        *,
        path_length_cm: ArrayLike = 1.0,
        path_length_u_cm: ArrayLike = 0.0,
        dilution_factor: ArrayLike = 1.0,
        dilution_factor_u: ArrayLike = 0.0,
        absorbance_u: ArrayLike | None = None,
    ) -> None:
        n = len(ids)
        axis = wavelength_axis(wavelength_nm)
        readings = finite_array(absorbance, "absorbance", ndim=2)
        faults = _id_faults(ids) + _shape_faults("absorbance", readings, (n, axis.size)) + _not_absorbance(readings)
        per_spectrum = {
            "path_length_cm": path_length_cm,
            "path_length_u_cm": path_length_u_cm,
            "dilution_factor": dilution_factor,
            "dilution_factor_u": dilution_factor_u,
        }
        scalars = {name: _per_spectrum(value, name, n, faults) for name, value in per_spectrum.items()}
        faults += _cell_faults(scalars)
        reading_u = None
        if absorbance_u is not None:
            reading_u = non_negative(absorbance_u, "absorbance_u", ndim=2)
            faults += _shape_faults("absorbance_u", reading_u, (n, axis.size))
            if reading_u.size and reading_u.min() == 0:
                faults.append(Fault("zero-u", ".absorbance_u", "absorbance_u must be above 0 everywhere, found 0"))
        if faults:
            raise InputError(faults)
        for name, value in (
            ("ids", tuple(ids)),
            ("wavelength_nm", axis),
            ("absorbance", readings),
            *scalars.items(),
            ("absorbance_u", reading_u),
        ):
            object.__setattr__(self, name, value)

    def __len__(self) -> int:
        return len(self.ids)

    def __getitem__(self, k: int) -> Spectrum:
        """Return spectrum number `k`."""
        return Spectrum(
            self.ids[k],
            self.wavelength_nm,
            self.absorbance[k],
            path_length_cm=float(self.path_length_cm[k]),
            path_length_u_cm=float(self.path_length_u_cm[k]),
            dilution_factor=float(self.dilution_factor[k]),
            dilution_factor_u=float(self.dilution_factor_u[k]),
            absorbance_u=None if self.absorbance_u is None else self.absorbance_u[k],
        )

    def __iter__(self) -> Iterator[Spectrum]:
        return (self[k] for k in range(len(self)))

    @classmethod
    def of(cls, spectra: Sequence[Spectrum]) -> SpectrumBatch:
        """Return a batch of spectra that share an axis.

        Raises
        ------
        InputError
            For no spectra, or for two whose axes differ, naming the first that does and where.
        """
        if not spectra:
            raise InputError.single("no-spectra", "", "expected at least one spectrum, found none")
        first = spectra[0]
        for k, spectrum in enumerate(spectra):
            _check_same_axis(first, spectrum, k)
        with_u = [s.absorbance_u is not None for s in spectra]
        if any(with_u) and not all(with_u):
            k = with_u.index(False)
            raise InputError.single("mixed-u", f"[{k}]", f"absorbance_u is given for some spectra and not for {spectra[k].id!r}")
        return cls(
            [s.id for s in spectra],
            first.wavelength_nm,
            np.stack([s.absorbance for s in spectra]),
            path_length_cm=[s.path_length_cm for s in spectra],
            path_length_u_cm=[s.path_length_u_cm for s in spectra],
            dilution_factor=[s.dilution_factor for s in spectra],
            dilution_factor_u=[s.dilution_factor_u for s in spectra],
            absorbance_u=np.stack([s.absorbance_u for s in spectra if s.absorbance_u is not None]) if all(with_u) else None,
        )

    def minus_blank(self, blank: Spectrum) -> SpectrumBatch:
        """Return the batch with a blank's absorbance taken from every spectrum.

        The blank must have been measured on the same axis and in the same cell (path length); its own noise is
        not added to `absorbance_u`.
        """
        _check_same_axis(self[0], blank, "blank")
        return replace_absorbance(self, self.absorbance - blank.absorbance)


def replace_absorbance(batch: SpectrumBatch, absorbance: ArrayLike) -> SpectrumBatch:
    """Return the batch with other readings on the same axis."""
    return replace(batch, absorbance=read_only(absorbance))


def same_axis(one_nm: FloatArray, other_nm: FloatArray) -> bool:
    """Return whether two axes agree point for point."""
    return one_nm is other_nm or (one_nm.size == other_nm.size and bool(np.all(np.abs(one_nm - other_nm) <= SAME_WAVELENGTH_NM)))


def _of_one(path: str) -> str:
    """A path into a batch of one as a path into the spectrum: `.absorbance[0][17]` is its `.absorbance[17]`."""
    return re.sub(r"^\.(\w+)\[0\]", r".\1", path).replace(".ids", ".id")


def _one_row(values: ArrayLike, name: str, turned: bool) -> FloatArray:
    row = finite_array(values, name, ndim=1)
    return (row[::-1] if turned else row)[np.newaxis]


def _id_faults(ids: Sequence[str]) -> list[Fault]:
    faults = [
        Fault("empty-id", f".ids[{k}]", f"each spectrum needs an id, found {i!r}") for k, i in enumerate(ids) if not i.strip()
    ]
    if len(set(ids)) != len(ids):
        seen: set[str] = set()
        twice = sorted({i for i in ids if i in seen or seen.add(i)})  # type: ignore[func-returns-value]
        faults.append(
            Fault("duplicate-id", ".ids", f"ids must differ, found more than once: {quoted(twice)}", "rename the samples")
        )
    return faults


def _shape_faults(name: str, array: FloatArray, expected: tuple[int, int]) -> list[Fault]:
    if array.shape == expected:
        return []
    if expected[0] == 1 and array.shape[0] == 1:
        return [
            Fault("wrong-length", f".{name}", f"{name} must have one value per wavelength ({expected[1]}), found {array.shape[1]}")
        ]
    return [Fault("wrong-shape", f".{name}", f"{name} must be spectra by wavelengths {expected}, found {array.shape}")]


def _not_absorbance(readings: FloatArray) -> list[Fault]:
    if not readings.size or (readings.max() <= ABSORBANCE_LIMIT and readings.min() >= -ABSORBANCE_LIMIT):
        return []
    row, column = (int(k) for k in np.argwhere(np.abs(readings) > ABSORBANCE_LIMIT)[0])
    value = float(readings[row, column])
    looks = " The values look like per cent transmittance." if readings.min() >= 0 and readings.max() <= 150 else ""
    return [
        Fault(
            "not-absorbance",
            f".absorbance[{row}][{column}]",
            f"expected absorbance between -{ABSORBANCE_LIMIT:g} and {ABSORBANCE_LIMIT:g}, found {value:g}.{looks}",
            "convert to absorbance first: A = 2 - log10(%T)",
        )
    ]


def _per_spectrum(value: ArrayLike, name: str, n: int, faults: list[Fault]) -> FloatArray:
    array = np.asarray(value, dtype=np.float64)
    if array.ndim == 0:
        array = np.full(n, array)
    if array.shape != (n,):
        faults.append(
            Fault("wrong-length", f".{name}", f"{name} must be one number or one per spectrum ({n}), found {array.shape}")
        )
        return read_only(np.ones(n))
    return finite_array(array, name, ndim=1)


def _cell_faults(scalars: dict[str, FloatArray]) -> list[Fault]:
    path, dilution = scalars["path_length_cm"], scalars["dilution_factor"]
    rules = (
        ("path_length_cm", path <= 0, "must be above 0 cm", "the distance light travels in the cell, 1 for a 10 mm cell"),
        ("path_length_u_cm", scalars["path_length_u_cm"] < 0, "must not be negative", ""),
        ("dilution_factor", dilution < 1, "must be at least 1", "final volume over taken volume: 50 for 1 mL made up to 50 mL"),
        ("dilution_factor_u", scalars["dilution_factor_u"] < 0, "must not be negative", ""),
    )
    return [
        Fault(name.removesuffix("_cm").replace("_", "-"), f".{name}[{k}]", f"{name} {rule}, found {scalars[name][k]:g}", hint)
        for name, wrong, rule, hint in rules
        for k in np.flatnonzero(wrong)
    ]


def _check_same_axis(first: Spectrum, other: Spectrum, place: int | str) -> None:
    if same_axis(first.wavelength_nm, other.wavelength_nm):
        return
    a, b = first.wavelength_nm, other.wavelength_nm
    raise InputError.single(
        "axes-differ",
        f"[{place}]",
        f"spectra in one batch must share their wavelengths: {first.id!r} has {a.size} from {a[0]:g} to {a[-1]:g} nm, "
        f"{other.id!r} has {b.size} from {b[0]:g} to {b[-1]:g} nm",
        "resolve them as separate batches",
    )
