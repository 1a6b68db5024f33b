"""Photometric theory, clipped readings, and facts of the trade."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from reference_data import Spectra, example, library, resolved, spectra, table

from tinctor.component import Component
from tinctor.noise import NoiseModel
from tinctor.resolve.engine import resolve
from tinctor.resolve.resolution import Severity, Status
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import SpectrumBatch

TRANSMITTANCE_ONLY = NoiseModel(floor=0.0, transmittance=0.003, wavelength_nm=0.0)
W = np.arange(400.0, 701.0, 2.0)
DYE = Component("dye", W, 30.0 * np.exp(-0.5 * ((W - 520) / 35) ** 2), basis="mass", scale_relative_u=0.01, linear_to=0.05)


def test_the_relative_error_is_least_at_0_434() -> None:
    """Twyman and Lothian 1933: minimum at A = 0.4343 for a constant error of transmittance, e times that error."""
    A = np.linspace(0.05, 2.0, 200_001)
    relative = TRANSMITTANCE_ONLY.reading_u(A) / A
    assert A[relative.argmin()] == pytest.approx(0.4342944819, abs=2e-5)
    assert relative.min() == pytest.approx(np.e * 0.003, rel=1e-9)


def test_table_of_relative_errors(reference: Path) -> None:
    """Relative concentration error for 0.003 in T (after Skoog, from memory; recomputed in the file)."""
    e = example(reference, "photometric_theory")["recomputed"]["relative_error_pct_sigmaT_0p003"]
    for T, per_cent in e.items():
        A = -np.log10(float(T))
        assert 100 * TRANSMITTANCE_ONLY.reading_u(A) / A == pytest.approx(per_cent, rel=1e-8)


def stray(A: np.ndarray, s: float) -> np.ndarray:
    """Apparent absorbance with a stray fraction s of the incident light."""
    return np.asarray(-np.log10((10.0**-A + s) / (1 + s)))


def test_stray_light_table_and_what_it_does_to_a_result(reference: Path) -> None:
    """Apparent absorbance, formula and table in the file; 0.1 % stray light lowers A = 1 by 0.4 % and A = 2 by 2.1 %."""
    tabulated = example(reference, "photometric_theory")["recomputed"]["stray_light_apparent_A"]
    for s, row in tabulated.items():
        for A, apparent in row.items():
            assert stray(np.array(float(A)), float(s.removeprefix("s="))) == pytest.approx(apparent, rel=1e-9)

    def bias(peak: float, limit: float) -> float:
        c = peak / 30.0
        A = stray(c * DYE.absorptivity, 0.001)
        settings = ResolveSettings(background=(), absorbance_limit=limit)
        plain = Component("dye", W, DYE.absorptivity, basis="mass", scale_relative_u=0.01)
        return float(resolve(SpectrumBatch(["a"], W, A[None]), [plain], settings).unconstrained[0, 0] / c - 1)

    at_the_maximum = stray(np.array([1.0, 2.0]), 0.001) / [1.0, 2.0] - 1
    assert (100 * at_the_maximum).round(1).tolist() == [-0.4, -2.0]  # 2.05 %: the notes round it to 2.1
    assert bias(3.0, 9.0) < 2 * bias(3.0, 1.0) < 0  # readings above the limit no longer contribute
    assert abs(bias(3.0, 1.0)) < 0.005


def test_clipped_readings_are_masked_and_said_to_be(reference: Path) -> None:
    """Paracetamol and piroxicam in a herbal extract (Kambira et al. 2020): clipped near 4 AU below 213 nm."""
    folder = reference / "paracetamol-piroxicam"
    measured = spectra(folder / "spectra.csv")
    _, rows = table(folder / "concentrations.csv")
    C = np.array([row[2:5] for row in rows], dtype=float)
    train = [k for k, row in enumerate(rows) if row[1] == "train"]
    test = [k for k, row in enumerate(rows) if row[1] == "test"]
    K = np.linalg.lstsq(C[train], measured.absorbance[train], rcond=None)[0].T
    names = ("herb", "piroxicam", "paracetamol")
    result = resolved(measured, library(measured.wavelength_nm, np.maximum(K, 0), names), absorbance_limit=2.0)
    assert result.saturated is not None
    assert np.array_equal(result.saturated, measured.absorbance > 2.0)
    with_drugs = [k for k, row in enumerate(rows) if row[0] != "k22"]  # k22 is the extract alone
    assert result.saturated[with_drugs][:, measured.wavelength_nm < 206].all()
    assert (result.severity["saturated"].max(axis=1) >= Severity.INFO).all()
    assert np.array_equal(result.points, (measured.absorbance <= 2.0).sum(axis=1))
    # README of the data: plain least squares from 260 nm, test RMSEP 1.9, 0.12, 0.19
    from_260 = measured.wavelength_nm >= 260
    part = resolved(measured.columns(from_260), library(measured.wavelength_nm[from_260], K[from_260], names))
    rmsep = np.sqrt(((part.unconstrained[test] - C[test]) ** 2).mean(axis=0))
    assert [f"{value:.2g}" for value in rmsep] == ["1.9", "0.12", "0.19"]


# Facts of the trade: common practice, no source.


def one(A: np.ndarray, *, path_cm: float = 1.0, background: tuple[str, ...] = ("offset",)) -> tuple[float, Severity, Status]:
    result = resolve(SpectrumBatch(["a"], W, A[None], path_length_cm=path_cm), [DYE], ResolveSettings(background=background))
    offset = result.severity.get("offset-large")
    grade = Severity.NONE if offset is None else Severity(int(np.max(offset)))
    return float(result.unconstrained[0, 0]), grade, Status(int(result.spectrum_status()[0]))


def test_doubling_the_path_doubles_the_absorbance_and_leaves_the_concentration() -> None:
    A = 0.02 * DYE.absorptivity
    assert one(2 * A, path_cm=2.0)[0] == pytest.approx(one(A)[0], rel=1e-12)
    assert one(2 * A)[0] == pytest.approx(2 * one(A)[0], rel=1e-3)  # negative control: the path left at 1 cm


def test_a_smudged_cell_reads_high_without_an_offset_term() -> None:
    smudged = 0.02 * DYE.absorptivity + 0.05
    plain, grade, status = one(smudged, background=())
    assert plain > 0.021
    assert (grade, status) == (Severity.WARNING, Status.FLAGGED)
    corrected, grade, status = one(smudged)
    assert corrected == pytest.approx(0.02, rel=1e-9)
    assert (grade, status) == (Severity.WARNING, Status.FLAGGED)


def test_a_blank_reads_zero() -> None:
    rng = np.random.default_rng(4)
    blanks = SpectrumBatch([str(k) for k in range(400)], W, 0.0005 * rng.standard_normal((400, W.size)))
    result = resolve(blanks, [DYE])
    assert np.abs(result.unconstrained.mean() / result.u.mean()) < 0.2
    detected = (result.unconstrained > result.decision_limit).mean()
    assert 0.02 < detected < 0.09  # 5 % by definition of the decision limit


def test_absorptivity_does_not_depend_on_the_concentration() -> None:
    strengths = np.array([0.001, 0.01, 0.02, 0.04])
    batch = SpectrumBatch([str(c) for c in strengths], W, strengths[:, None] * DYE.absorptivity)
    assert resolve(batch, [DYE]).unconstrained[:, 0] / strengths == pytest.approx(1.0, rel=1e-9)


def test_a_figure_far_outside_the_standards_is_not_trusted() -> None:
    assert one(0.051 * DYE.absorptivity)[2] is Status.FLAGGED
    assert one(0.11 * DYE.absorptivity)[2] is Status.REFUSED


def test_the_wrong_dye_is_not_taken_for_the_right_one(reference: Path) -> None:
    """Negative control: a spectrum of another dye must not be accepted."""
    other = 0.02 * 30 * np.exp(-0.5 * ((W - 560) / 35) ** 2)
    assert one(other)[2] is not Status.ACCEPTED
    measured = Spectra(["a"], W, (0.02 * DYE.absorptivity)[None])
    assert resolved(measured, [DYE], background=("offset",)).spectrum_status().tolist() == [Status.ACCEPTED]
