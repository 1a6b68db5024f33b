"""Eighty measured spectra of Cu, Co, Cr and Ni nitrates.

Source: D. T. Harvey, DePauw University, Pittcon 2018, repository dtharvey/PCA_CA_MLR (allSpec.csv and slides 12, 13, 40
to 46); R results (lm.fit, nnls) computed from the same file by the maker of the reference data.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from reference_data import METALS, Spectra, library, resolved, spectra, table

from tinctor.noise import NoiseModel
from tinctor.resolve.resolution import Resolution, Status

#: The small teaching spectrometer: residuals of a fit are 4 to 5 mAU and structured (README of the data).
TEACHING_SPECTROMETER = NoiseModel(floor=0.004, transmittance=0.001, wavelength_nm=0.5)


@dataclass(frozen=True)
class Metals:
    measured: Spectra
    published: np.ndarray
    corrected: np.ndarray
    wrong: list[int]

    @property
    def standards(self) -> list[int]:
        return list(range(20))

    @property
    def mixtures(self) -> list[int]:
        return list(range(20, 80))

    def absorptivities(self, standards: list[int], metals: list[int], columns: np.ndarray | slice = slice(None)) -> np.ndarray:
        """Absorptivities by least squares from the standards, (wavelengths, metals)."""
        C = self.published[np.ix_(standards, metals)]
        return np.linalg.lstsq(C, self.measured.absorbance[standards][:, columns], rcond=None)[0].T


@pytest.fixture(scope="module")
def metals(reference: Path) -> Metals:
    folder = reference / "metals-cucocrni"
    measured = spectra(folder / "spectra.csv")
    _, published = table(folder / "concentrations_as_published.csv")
    _, corrected = table(folder / "concentrations_corrected.csv")
    assert [row[0] for row in published] == measured.ids == [row[0] for row in corrected]
    wrong = [k for k, row in enumerate(corrected) if row[-1]]
    return Metals(
        measured,
        np.array([row[3:7] for row in published], dtype=float),
        np.array([row[3:7] for row in corrected], dtype=float),
        wrong,
    )


def r_results(reference: Path, name: str) -> tuple[list[str], list[str], np.ndarray]:
    header, rows = table(reference / "metals-cucocrni" / name)
    return header, [row[0] for row in rows], np.array([row[1:] for row in rows], dtype=float)


def all_four(metals: Metals, **settings: object) -> Resolution:
    w = metals.measured.wavelength_nm
    K = metals.absorptivities(metals.standards, [0, 1, 2, 3])
    return resolved(metals.measured.rows(metals.mixtures), library(w, K, METALS), **settings)


def rmse(result: Resolution, truth: np.ndarray, rows: list[int]) -> np.ndarray:
    chosen = [k - 20 for k in rows]
    error: np.ndarray = np.sqrt(((result.unconstrained[chosen] - truth[rows]) ** 2).mean(axis=0))
    return error


def sound(metals: Metals) -> list[int]:
    return [k for k in metals.mixtures if k not in metals.wrong]


def test_printed_worked_example_to_the_last_printed_digit(metals: Metals, reference: Path) -> None:
    """Slides 40 to 43: standards 1 to 15, samples 21 to 25 and 38 to 53, every 40th wavelength."""
    columns = np.arange(0, 635, 40)
    standards, samples, three = list(range(15)), [*range(20, 25), *range(37, 53)], [0, 1, 2]
    K = metals.absorptivities(standards, three, columns)
    w = metals.measured.wavelength_nm[columns]
    result = resolved(metals.measured.columns(columns).rows(samples), library(w, K, METALS[:3]))
    predicted = np.round(result.unconstrained, 5)
    error = metals.published[np.ix_(samples, three)] - predicted  # on the slide: actual minus predicted, predictions rounded first
    found: dict[tuple[str, str], float] = {}
    for j, metal in enumerate(METALS[:3]):
        found |= {("eb_L_per_mol", f"{metal} at {w[k]:g} nm"): round(K[k, j], 7) for k in range(16)}
        found |= {("predicted_mol_L", f"{metal} in {metals.measured.ids[samples[k]]}"): predicted[k, j] for k in range(21)}
        found["mean_of_actual_minus_predicted", metal] = round(error[:, j].mean(), 6)
        found["sd_of_error", metal] = round(error[:, j].std(ddof=1), 6)
        found["largest_abs_error", metal] = round(np.abs(error[:, j]).max(), 5)
    _, printed = table(reference / "metals-cucocrni" / "published_results.csv")
    compared = [(quantity, what, float(value)) for quantity, what, value in printed if (quantity, what) in found]
    assert len(compared) == 24 + 18 + 9
    for quantity, what, value in compared:
        assert found[quantity, what] == pytest.approx(value, abs=1e-12), (quantity, what)


def test_two_wavelength_example(metals: Metals) -> None:
    """Slides 12 and 13, small print: the printed 2 x 2 system solves to 0.01858748 and 0.04953220 mol/L."""
    measured = Spectra(["cuni_mix"], np.array([394.2, 809.1]), np.array([[0.2415476, 0.2789825]]))
    K = np.array([[0.01747073, 4.8700205], [12.77888326, 0.8369356]])
    result = resolved(measured, library(measured.wavelength_nm, K, ("Cu", "Ni")))
    assert result.unconstrained[0] == pytest.approx([0.01858748, 0.04953220], abs=1e-8)


@pytest.mark.parametrize(("name", "background"), [("r_cls_mixtures.csv", ()), ("r_cls_offset_mixtures.csv", ("offset",))])
def test_unconstrained_estimates_agree_with_r(metals: Metals, reference: Path, name: str, background: tuple[str, ...]) -> None:
    header, ids, values = r_results(reference, name)
    result = all_four(metals, background=background)
    assert list(result.ids) == ids
    assert result.unconstrained == pytest.approx(values[:, :4], rel=1e-9, abs=1e-12)
    if background:
        assert result.background_value[:, 0] == pytest.approx(values[:, 4], rel=1e-9, abs=1e-12)
    assert result.residual_rms == pytest.approx(values[:, header.index("residual_rms") - 1], rel=1e-9)
    # R's standard error is sigma sqrt((K'K)^-1): ours without the inflation for correlated residuals
    naive = result.budget[:, :, 0] * np.sqrt(result.effective_points / result.points)[:, None]
    se = values[:, [header.index(f"se_{metal}") - 1 for metal in METALS]]
    sigma = values[:, header.index("sigma") - 1]
    larger = sigma > 0.001  # where the residual exceeds the declared noise, as in R
    assert naive[larger] == pytest.approx(se[larger], rel=1e-9)


def test_non_negative_estimates_agree_with_r(metals: Metals, reference: Path) -> None:
    _, ids, values = r_results(reference, "r_nnls_mixtures.csv")
    result = all_four(metals)
    assert list(result.ids) == ids
    assert result.concentration == pytest.approx(values[:, :4], rel=1e-9, abs=1e-12)
    assert (result.concentration == 0).sum() == (values[:, :4] == 0).sum() == 37


def test_accuracy_on_the_sound_mixtures_is_that_of_least_squares(metals: Metals) -> None:
    """README of the data: RMSE 0.00125, 0.00129, 0.00057, 0.00192 mol/L on the 48 mixtures whose labels are not in doubt."""
    rows = sound(metals)
    assert len(rows) == 48
    assert (rmse(all_four(metals), metals.published, rows).round(5) <= [0.00125, 0.00129, 0.00057, 0.00192]).all()


def test_the_wrong_labels_show_up(metals: Metals) -> None:
    """Twelve labels are wrong in the source: only they differ from the result by more than three typical errors in any metal."""
    result = all_four(metals)
    typical = rmse(result, metals.published, sound(metals))
    worst = np.abs((result.unconstrained - metals.published[metals.mixtures]) / typical).max(axis=1)
    found = [k + 20 for k in np.flatnonzero(worst > 3.0)]
    assert len(metals.wrong) == 12
    assert found == metals.wrong


@pytest.mark.parametrize("left_out", range(4))
def test_a_missing_metal_is_noticed_in_every_mixture_that_holds_it(metals: Metals, left_out: int) -> None:
    kept = [j for j in range(4) if j != left_out]
    w = metals.measured.wavelength_nm
    K = metals.absorptivities(metals.standards, [0, 1, 2, 3])
    names = tuple(METALS[j] for j in kept)
    batch = metals.measured.rows(metals.mixtures)
    result = resolved(batch, library(w, K[:, kept], names), background=("offset",), noise=TEACHING_SPECTROMETER)
    affected = metals.corrected[metals.mixtures][:, left_out] > 0
    status = result.spectrum_status()
    assert affected.sum() >= 30
    assert (status[affected] != Status.ACCEPTED).all()


def test_swapped_components_and_a_wrong_library_fail(metals: Metals) -> None:
    """Negative control: the comparison above must be able to fail."""
    rows = sound(metals)
    w = metals.measured.wavelength_nm
    K = metals.absorptivities(metals.standards, [0, 1, 2, 3])
    batch = metals.measured.rows(metals.mixtures)
    swapped = resolved(batch, library(w, K[:, [1, 0, 2, 3]], METALS))
    assert (rmse(swapped, metals.published, rows)[:2] > 0.01).all()
    moved = resolved(batch, library(w, np.roll(K, 30, axis=0), METALS))
    assert (rmse(moved, metals.published, rows) > 2 * np.array([0.00125, 0.00129, 0.00057, 0.00192])).all()


def test_condition_number_and_selectivity(metals: Metals, reference: Path) -> None:
    """README of the data: condition number 8.4 of the four raw spectra; selectivities recomputed there from Lorber's definition."""
    from reference_data import example

    merit = example(reference, "harvey_metal_mixtures_allspec")["recomputed"]["figures_of_merit_635wl_4comp"]
    result = all_four(metals)
    assert result.selectivity[0] == pytest.approx(merit["selectivity"], rel=1e-8)
    K = metals.absorptivities(metals.standards, [0, 1, 2, 3])
    assert np.linalg.cond(K) == pytest.approx(merit["cond2"], rel=1e-8)
    assert 1 < result.condition_number[0] < merit["cond2"]  # unit-norm columns are better conditioned than the raw ones
