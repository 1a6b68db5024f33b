"""Published worked examples with as many wavelengths as components. Each file of the reference data names its source."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from reference_data import Spectra, example, library, resolved, solved

from tinctor.component import Component
from tinctor.resolve.nonnegative import nonnegative_least_squares
from tinctor.spectrum import Spectrum, SpectrumBatch


def test_chromium_and_cobalt(reference: Path) -> None:
    """Harvey, Analytical Chemistry 2.0, practice exercise 10.6; printed answer from memory: 8.86e-3 and 3.60e-2 mol/L."""
    e = example(reference, "harvey_cr_co_two_wavelength")
    found = solved(e["inputs"]["epsilon_M1cm1"], e["inputs"]["absorbance"], e["inputs"]["wavelengths_nm"], ["Cr", "Co"])
    assert found == pytest.approx([e["recomputed"]["conc_M"][metal] for metal in ("Cr", "Co")], rel=1e-9)
    assert found == pytest.approx([8.86e-3, 3.60e-2], rel=2e-3)


def test_iron_and_copper(reference: Path) -> None:
    """Harvey, Analytical Chemistry 2.0, example 10.6 (DiTusa and Schilt 1985), from memory; its 1.80e-5 is 1.793e-5."""
    e = example(reference, "harvey_fe_cu_hexacyanoruthenate")
    found = solved(e["inputs"]["epsilon_M1cm1"], e["inputs"]["absorbance"], e["inputs"]["wavelengths_nm"], ["Fe", "Cu"])
    assert found == pytest.approx([e["recomputed"]["conc_M"][metal] for metal in ("Fe", "Cu")], rel=1e-9)
    assert found == pytest.approx([1.80e-5, 1.26e-4], rel=5e-3)


@pytest.mark.parametrize(("part", "metals"), [("a", ["Cu"]), ("b", ["Co", "Cu"]), ("c", ["Co", "Cu", "Ni"])])
def test_edta_complexes(reference: Path, part: str, metals: list[str]) -> None:
    """Harvey, Analytical Chemistry, chapter 10 end-of-chapter problem; the answers posted on the web for (b) and (c) are wrong."""
    e = example(reference, "harvey_edta_co_cu_ni")
    order = {"Co": 0, "Cu": 1, "Ni": 2}
    rows = {"A_462p9": 0, "A_732": 1, "A_378p7": 2}
    readings = e["inputs"]["parts"][part]
    places = [rows[key] for key in readings]
    epsilon = np.array(e["inputs"]["epsilon_M1cm1"])[np.ix_(places, [order[m] for m in metals])]
    wavelengths = [e["inputs"]["wavelengths_nm"][k] for k in places]
    found = solved(epsilon.tolist(), list(readings.values()), wavelengths, metals)
    assert found == pytest.approx([e["recomputed"][part][metal] for metal in metals], rel=1e-9)
    assert epsilon @ found == pytest.approx(list(readings.values()), rel=1e-12)
    posted = e["printed"]["web_page_posted"][part]
    if part != "a":  # negative control: the wrong answers do not give the absorbances back
        assert np.abs(epsilon @ [float(posted[m]) for m in metals] - list(readings.values())).max() > 0.01


def test_copper_and_zinc_with_a_reagent_blank(reference: Path) -> None:
    """Harvey, Solutions Manual for Analytical Chemistry 2.1, p. 172: 0.51 ppm Cu, 0.26 ppm Zn."""
    e = example(reference, "harvey_blanco_cu_zn_par")["inputs"]
    w = np.array(e["wavelengths_nm"], dtype=float)
    blank = np.array(e["A_PAR_blank"])
    dyes = [Component(metal, w, np.array(e[f"A_std_{metal}"]) - blank, basis="mass") for metal in ("Cu", "Zn")]  # per mg/L, 1 cm
    mixed = SpectrumBatch(["mix"], w, [e["A_mix"]]).minus_blank(Spectrum("blank", w, blank))
    found = resolved(Spectra(["mix"], w, mixed.absorbance), dyes).unconstrained[0]
    assert found == pytest.approx([0.5134533167, 0.2561806679], rel=1e-9)
    assert found.round(2).tolist() == [0.51, 0.26]
    without = resolved(Spectra(["mix"], w, np.array([e["A_mix"]])), dyes).unconstrained[0]
    assert without.round(2).tolist() != [0.51, 0.26]


def test_dichromate_and_permanganate(reference: Path) -> None:
    """Christian, Analytical Chemistry, as quoted on open pages; absorptivities from the pure solutions given."""
    e = example(reference, "dichromate_permanganate_440_545")
    s = e["inputs"]["standards"]
    K = [
        [s["A_Cr_440"] / s["K2Cr2O7_M"], s["A_Mn_440"] / s["KMnO4_M"]],
        [s["A_Cr_545"] / s["K2Cr2O7_M"], s["A_Mn_545"] / s["KMnO4_M"]],
    ]
    found = solved(K, [e["inputs"]["A_mix"]["440"], e["inputs"]["A_mix"]["545"]], [440, 545], ["Cr2O7", "MnO4"])
    assert found == pytest.approx([e["recomputed"]["Cr2O7_M"], e["recomputed"]["MnO4_M"]], rel=1e-9)
    assert found == pytest.approx([1.0e-3, 2.95e-4], rel=1e-2)


def coefficients(K: np.ndarray, wavelengths: list[float]) -> np.ndarray:
    """Concentration per unit absorbance at each wavelength: what the published equations print, (components, wavelengths)."""
    unit = np.eye(len(wavelengths))
    return np.column_stack([solved(K.tolist(), row.tolist(), wavelengths, [f"c{k}" for k in range(K.shape[1])]) for row in unit])


def test_chlorophyll_equations(reference: Path) -> None:
    """Porra, Thompson and Kriedemann 1989 (nmol/mL) and Arnon 1949 with Mackinney's absorptivities, through secondary copies."""
    e = example(reference, "chlorophyll_equations")
    p = e["inputs"]["porra"]["eps_per_mM_cm"]
    porra = coefficients(np.array([[p["a_663p6"], p["b_663p6"]], [p["a_646p6"], p["b_646p6"]]]), [663.6, 646.6]) * 1000
    assert porra == pytest.approx(np.array(e["recomputed"]["porra_inverse_nmol_per_mL"]), rel=1e-8)
    assert porra.round(2).tolist() == [[13.71, -2.85], [-5.42, 22.39]]
    m = e["inputs"]["arnon"]["mackinney_L_per_g_cm"]
    arnon = coefficients(np.array([[m["a_663"], m["b_663"]], [m["a_645"], m["b_645"]]]), [663, 645]) * 1000
    assert arnon == pytest.approx(np.array(e["recomputed"]["arnon_inverse_of_mackinney_mg_per_L"]), rel=1e-8)
    # 2.69 is printed for 2.59: see the notes of the file; the other three agree to their last digit
    assert arnon.round(2)[[0, 1, 1], [0, 0, 1]] == pytest.approx([12.72, -4.67, 22.88])
    assert abs(arnon[0, 1]) == pytest.approx(2.69, abs=0.11)


def test_trichromatic_equations(reference: Path) -> None:
    """Jeffrey and Humphrey 1975: the absorptivities implied by the printed matrix resolve to that matrix."""
    e = example(reference, "chlorophyll_equations")
    implied = np.array(e["recomputed"]["implied_absorptivities_trichromatic_L_per_g_cm"])
    printed = np.array(e["inputs"]["jeffrey_humphrey_trichromatic"]["matrix"])
    assert coefficients(implied, [664, 647, 630]) * 1000 == pytest.approx(printed, rel=1e-6)


def test_protein_beside_nucleic_acid(reference: Path) -> None:
    """Warburg and Christian's 1.55 A280 - 0.76 A260 mg/mL: 0.7065 at A280 0.75, A260 0.60 (example recomputed in the file)."""
    e = example(reference, "protein_nucleic_acid_260_280")
    # a pair of absorptivities whose inverse has the published protein row; the nucleic acid row is arbitrary
    equation = np.array([[1.55, -0.76], [-0.3, 0.5]])  # rows: protein, nucleic acid; columns: A280, A260
    K = np.linalg.inv(equation)
    found = solved(K.tolist(), [0.75, 0.60], [280, 260], ["protein", "nucleic acid"])
    assert found[0] == pytest.approx(e["recomputed"]["example"]["protein_mg_per_mL"], rel=1e-12)


def test_non_negative_least_squares_reference(reference: Path) -> None:
    """First documentation example of a general non-negative least-squares function (Lawson and Hanson's algorithm)."""
    e = example(reference, "nnls_small_reference")
    C, d = np.array(e["inputs"]["C"]), np.array([e["inputs"]["d"]])
    fit = nonnegative_least_squares(C, d)
    assert fit.coefficients[0] == pytest.approx(e["recomputed"]["nnls"], abs=1e-10)
    assert fit.residual_norm[0] == pytest.approx(e["recomputed"]["norm_nnls"], rel=1e-9)
    free = nonnegative_least_squares(C, d, free=np.array([True, True]))
    assert free.coefficients[0] == pytest.approx(e["recomputed"]["unconstrained"], rel=1e-9)
    assert fit.coefficients[0].round(4).tolist() == [float(v) for v in e["printed"]["nnls"]]


@pytest.mark.parametrize(
    ("merit", "source", "epsilon"),
    [
        ("edta_co_cu_ni_462p9_732_378p7", "harvey_edta_co_cu_ni", "epsilon_M1cm1"),
        ("fe_cu_ru", "harvey_fe_cu_hexacyanoruthenate", "epsilon_M1cm1"),
        ("cr_co_400_505", "harvey_cr_co_two_wavelength", "epsilon_M1cm1"),
    ],
)
def test_selectivity_and_expected_uncertainty(reference: Path, merit: str, source: str, epsilon: str) -> None:
    """Lorber 1986: selectivity is net analyte signal over whole signal; u = s_A / sensitivity (recomputed numbers)."""
    e = example(reference, source)["inputs"]
    expected = example(reference, "multivariate_figures_of_merit")["recomputed"][merit]
    order = np.argsort(e["wavelengths_nm"])
    w, K = np.array(e["wavelengths_nm"], dtype=float)[order], np.array(e[epsilon])[order]
    measured = Spectra(["a"], w, np.array([[0.3] * len(w)]))
    result = resolved(measured, library(w, K, tuple(e["components"])))  # uniform noise of 0.001
    assert result.selectivity[0] == pytest.approx(expected["SEL"], rel=1e-8)
    assert result.budget[0, :, 0] == pytest.approx(expected["u_conc_for_sA_0p001"], rel=1e-8)
