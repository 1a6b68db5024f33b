"""A series of standards: scans of one preparation averaged, preparations on one axis, saturated readings marked."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from tinctor.arrays import FloatArray, quoted
from tinctor.axis import SAME_WAVELENGTH_NM
from tinctor.errors import Fault, InputError
from tinctor.spectrum import Spectrum

__all__ = ["Series", "Standard", "points_of", "same_axis", "series_of"]


#: No solution holds less or more, in mol/L or g/L: beyond lies a wrong unit or a slip of the keyboard.
LOWEST, HIGHEST = 1e-15, 1e5


@dataclass(frozen=True, slots=True)
class Standard:
    """One scan of one standard.

    Parameters
    ----------
    spectrum
        Measured absorbance and path length.
    concentration
        In the cell, in mol/L or g/L, above 0; as weighed, before any correction for the stock.
    concentration_u
        Its standard uncertainty of dilution alone, independent of the other standards; `None` where nobody stated it.
    replicate_of
        Id of the standard of which this is another scan: the same solution, measured again.

    Examples
    --------
    >>> Standard(Spectrum("s1", [500.0, 510.0], [0.2, 0.3]), 0.004).amount
    0.004
    """

    spectrum: Spectrum
    concentration: float
    concentration_u: float | None = None
    replicate_of: str | None = None

    def __post_init__(self) -> None:
        c, u = self.concentration, self.concentration_u
        faults = []
        if not (math.isfinite(c) and LOWEST <= c <= HIGHEST):
            message = f"expected a number above 0 (and from {LOWEST:g} to {HIGHEST:g} mol/L or g/L), found {c!r}"
            faults.append(Fault("concentration", ".concentration", message, "a blank goes with the blanks"))
        if u is not None and not (math.isfinite(u) and u >= 0):
            faults.append(Fault("concentration-u", ".concentration_u", f"expected a number of at least 0, found {u!r}"))
        if self.spectrum.dilution_factor != 1:
            faults.append(
                Fault("diluted", ".dilution_factor", "the concentration of a standard is that in the cell: give no dilution factor")
            )
        if faults:
            raise InputError(faults)

    @property
    def id(self) -> str:
        """Its name."""
        return self.spectrum.id

    @property
    def amount(self) -> float:
        """Concentration times path, mol L-1 cm or g L-1 cm."""
        return self.concentration * self.spectrum.path_length_cm


@dataclass(frozen=True, slots=True, eq=False)
class Series:
    """n preparations on m wavelengths, in order of amount; blanks (amount 0) apart.

    Attributes
    ----------
    ids
        Of the preparations: that of the first scan.
    amount, amount_u : arrays (n,)
        Concentration times path and its standard uncertainty of dilution.
    declared
        Whether every preparation has a stated uncertainty.
    wavelength_nm : array (m,)
    absorbance : array (n, m)
        Mean of the scans of a preparation, the blank not taken off.
    used : bool array (n, m)
        Readings within the absorbance limit.
    scans : array (n,)
    blanks : array (k, m)
    repeat_sd : float or None
        Standard deviation between scans of one preparation, over all wavelengths; None without repeat scans.
    """

    ids: tuple[str, ...]
    amount: FloatArray
    amount_u: FloatArray
    declared: bool
    wavelength_nm: FloatArray
    absorbance: FloatArray
    used: np.ndarray
    scans: FloatArray
    blanks: FloatArray
    repeat_sd: float | None

    def __len__(self) -> int:
        return len(self.ids)

    def take(self, rows: np.ndarray) -> Series:
        """Return some of the preparations, rows as indices (k,)."""
        return replace(
            self,
            ids=tuple(self.ids[k] for k in rows),
            amount=self.amount[rows],
            amount_u=self.amount_u[rows],
            absorbance=self.absorbance[rows],
            used=self.used[rows],
            scans=self.scans[rows],
        )

    def on(self, keep: np.ndarray) -> Series:
        """Return the series at some of the wavelengths, keep as bools (m,)."""
        return replace(
            self,
            wavelength_nm=self.wavelength_nm[keep],
            absorbance=self.absorbance[:, keep],
            used=self.used[:, keep],
            blanks=self.blanks[:, keep],
        )

    @property
    def levels(self) -> int:
        """How many different amounts there are."""
        return np.unique(self.amount).size


def series_of(standards: Sequence[Standard], blanks: Sequence[Spectrum] = (), absorbance_limit: float = 2.0) -> Series:
    """Return the series of standards and blanks.

    Parameters
    ----------
    absorbance_limit
        Readings above are not used: neither stray light nor noise is under control there.

    Raises
    ------
    InputError
        For ids that stand twice, different wavelength axes, or a repeat scan that contradicts its standard.

    Examples
    --------
    >>> scans = [Standard(Spectrum(i, [500.0, 510.0], [a, 2 * a]), c) for i, a, c in [("s1", 0.1, 0.01), ("s2", 0.3, 0.03)]]
    >>> series_of(scans).amount
    array([0.01, 0.03])
    """
    _check(standards, blanks)
    first = {s.id: [s] for s in standards if s.replicate_of is None}
    for s in standards:
        if s.replicate_of is not None:
            first[s.replicate_of].append(s)
    groups = sorted(first.values(), key=lambda group: (group[0].amount, group[0].id))
    axis = standards[0].spectrum.wavelength_nm
    readings = [np.stack([s.spectrum.absorbance for s in group]) for group in groups]
    used = [(scan <= absorbance_limit).all(axis=0) for scan in readings]
    spread = [((scan - scan.mean(axis=0)) ** 2).sum(axis=0)[ok].mean() for scan, ok in zip(readings, used, strict=True) if ok.any()]
    degrees = sum(len(group) - 1 for group, ok in zip(groups, used, strict=True) if ok.any())
    return Series(
        ids=tuple(group[0].id for group in groups),
        amount=np.array([group[0].amount for group in groups]),
        amount_u=np.array([(group[0].concentration_u or 0.0) * group[0].spectrum.path_length_cm for group in groups]),
        declared=all(group[0].concentration_u is not None for group in groups),
        wavelength_nm=axis,
        absorbance=np.stack([scan.mean(axis=0) for scan in readings]),
        used=np.stack(used),
        scans=np.array([float(len(group)) for group in groups]),
        blanks=np.stack([b.absorbance for b in blanks]) if blanks else np.zeros((0, axis.size)),
        repeat_sd=math.sqrt(sum(spread) / degrees) if degrees else None,
    )


def same_axis(spectra: Sequence[tuple[str, Spectrum]]) -> list[Fault]:
    """Return a fault for each spectrum (with its path) whose wavelengths are not those of the first."""
    axis = spectra[0][1].wavelength_nm
    faults = []
    for path, s in spectra[1:]:
        if s.wavelength_nm.shape == axis.shape and np.abs(s.wavelength_nm - axis).max() <= SAME_WAVELENGTH_NM:
            continue
        faults.append(
            Fault(
                "axes-differ",
                f"{path}.wavelength_nm",
                f"{s.id!r} has {s.wavelength_nm.size} wavelengths from {s.wavelength_nm[0]:g} to {s.wavelength_nm[-1]:g} nm, "
                f"{spectra[0][1].id!r} has {axis.size} from {axis[0]:g} to {axis[-1]:g} nm",
                "measure standards and blanks at the same wavelengths, on one instrument",
            )
        )
    return faults


def _check(standards: Sequence[Standard], blanks: Sequence[Spectrum]) -> None:
    if not standards:
        raise InputError.single("no-standards", ".standards", "expected at least one standard, found none")
    placed = [(f".standards[{k}]", s.spectrum) for k, s in enumerate(standards)]
    placed += [(f".blank[{k}]", b) for k, b in enumerate(blanks)]
    faults = same_axis(placed)
    seen: dict[str, str] = {}
    for path, spectrum in placed:
        if spectrum.id in seen:
            faults.append(Fault("duplicate-id", f"{path}.id", f"the id {spectrum.id!r} stands at {seen[spectrum.id]} already"))
        seen.setdefault(spectrum.id, path)
    firsts = {s.id: s for s in standards if s.replicate_of is None}
    for k, s in enumerate(standards):
        if s.replicate_of is not None:
            faults += [replace(f, path=f".standards[{k}].replicate_of") for f in _repeat_faults(s, firsts)]
    if faults:
        raise InputError(faults)


def _repeat_faults(s: Standard, firsts: dict[str, Standard]) -> list[Fault]:
    of = firsts.get(s.replicate_of or "")
    if of is None:
        message = f"{s.id!r} is said to repeat {s.replicate_of!r}, which is no standard of its own"
        return [Fault("replicate", "", message, f"one of {quoted(list(firsts))}")]
    if (s.concentration, s.spectrum.path_length_cm) != (of.concentration, of.spectrum.path_length_cm):
        message = (
            f"{s.id!r} repeats the scan of {of.id!r}, and has {s.concentration:g} in {s.spectrum.path_length_cm:g} cm "
            f"where that has {of.concentration:g} in {of.spectrum.path_length_cm:g} cm"
        )
        return [Fault("replicate", "", message, "another preparation is a standard of its own, without replicate_of")]
    if s.concentration_u not in (None, of.concentration_u):
        return [Fault("replicate", "", f"{s.id!r} and {of.id!r} are one solution and state different concentration_u")]
    return []


def points_of(series: Series, *, through_zero: bool) -> Series:
    """Return the points of a line: blank taken off (through zero), or blanks as preparations of amount 0 (with intercept).

    Examples
    --------
    >>> scan = Standard(Spectrum("s1", [500.0, 510.0], [0.25, 0.5]), 0.01)
    >>> points_of(series_of([scan], [Spectrum("b", [500.0, 510.0], [0.05, 0.0])]), through_zero=True).absorbance
    array([[0.2, 0.5]])
    """
    k = len(series.blanks)
    if k == 0:
        return series
    if through_zero:
        return replace(series, absorbance=series.absorbance - series.blanks.mean(axis=0))
    return replace(
        series,
        ids=(*(f"blank {j + 1}" for j in range(k)), *series.ids),
        amount=np.concatenate([np.zeros(k), series.amount]),
        amount_u=np.concatenate([np.zeros(k), series.amount_u]),
        absorbance=np.concatenate([series.blanks, series.absorbance]),
        used=np.concatenate([np.ones(series.blanks.shape, dtype=bool), series.used]),
        scans=np.concatenate([np.ones(k), series.scans]),
        blanks=series.blanks[:0],
    )
