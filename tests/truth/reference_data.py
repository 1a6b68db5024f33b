"""Readers for the outside reference data, and settings that make tinctor do what the outside program did."""

from __future__ import annotations

import csv
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from tinctor.component import Component
from tinctor.noise import NoiseModel
from tinctor.resolve.engine import resolve
from tinctor.resolve.resolution import Resolution
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import SpectrumBatch

#: Equal weights for all readings: what a plain least-squares program does.
UNIFORM = NoiseModel(floor=0.001, transmittance=0.0, wavelength_nm=0.0)
METALS = ("Cu", "Co", "Cr", "Ni")


@dataclass(frozen=True)
class Spectra:
    ids: list[str]
    wavelength_nm: np.ndarray
    absorbance: np.ndarray

    def rows(self, chosen: list[int]) -> Spectra:
        return Spectra([self.ids[k] for k in chosen], self.wavelength_nm, self.absorbance[chosen])

    def columns(self, chosen: np.ndarray | slice) -> Spectra:
        return Spectra(self.ids, self.wavelength_nm[chosen], self.absorbance[:, chosen])


def table(path: Path) -> tuple[list[str], list[list[str]]]:
    with path.open(encoding="utf-8", newline="") as file:
        header, *rows = list(csv.reader(file))
    return header, rows


def spectra(path: Path) -> Spectra:
    header, rows = table(path)
    return Spectra([row[0] for row in rows], np.array(header[1:], dtype=float), np.array([row[1:] for row in rows], dtype=float))


def example(reference: Path, name: str) -> dict[str, Any]:
    result: dict[str, Any] = json.loads((reference / "worked_examples" / f"{name}.json").read_text(encoding="utf-8"))
    return result


def library(wavelength_nm: np.ndarray, K: np.ndarray, names: tuple[str, ...]) -> list[Component]:
    """Components from absorptivities (wavelengths, components)."""
    return [Component(name, wavelength_nm, K[:, j]) for j, name in enumerate(names)]


def resolved(measured: Spectra, components: list[Component], **settings: Any) -> Resolution:
    batch = SpectrumBatch(measured.ids, measured.wavelength_nm, measured.absorbance)
    return resolve(batch, components, ResolveSettings(**{"background": (), "noise": UNIFORM, "absorbance_limit": 9.0, **settings}))


def solved(epsilon: list[list[float]], absorbance: list[float], wavelengths: list[float], names: list[str]) -> np.ndarray:
    """Concentrations of one sample from a square system (wavelengths, components), in any order of wavelengths."""
    order = np.argsort(wavelengths)
    w = np.array(wavelengths, dtype=float)[order]
    K = np.array(epsilon, dtype=float)[order]
    return resolved(Spectra(["a"], w, np.array([absorbance], dtype=float)[:, order]), library(w, K, tuple(names))).unconstrained[0]
