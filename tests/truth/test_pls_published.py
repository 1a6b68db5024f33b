"""PLS against printed results and against R at full precision.

Gasoline: 60 near-infrared spectra and octane numbers (Kalivas 1997), results printed in the vignette of R's package pls (Mevik and
Wehrens), and R 4.2.2 with pls 2.8.1 at full precision. Three absorbers: measured spectra of two drugs in a herbal extract, results
of the maker of the reference data. Limits: recomputed by the same from Jackson and Mudholkar (1979) and Haaland and Thomas (1988).
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from reference_data import example, table

from tinctor import run_document
from tinctor.pls.calibrate import fit_model
from tinctor.pls.limits import f_quantile, q_limit, t2_limit_new, t2_limit_training
from tinctor.pls.preprocess import Step
from tinctor.pls.train import train
from tinctor.pls.validate import CrossValidation, cross_validate, folds_of, haaland_thomas, one_standard_error


@dataclass(frozen=True)
class Gasoline:
    folder: Path
    wavelength_nm: np.ndarray
    X: np.ndarray
    y: np.ndarray

    def published(self, name: str, column: str) -> list[str]:
        header, rows = table(self.folder / name)
        return [row[header.index(column)] for row in rows]

    def numbers(self, name: str) -> np.ndarray:
        """Rows of numbers without their first column."""
        return np.array([row[1:] for row in table(self.folder / name)[1]], dtype=float)


@pytest.fixture(scope="module")
def gasoline(reference: Path) -> Gasoline:
    folder = reference / "pls-gasoline"
    header, rows = table(folder / "gasoline.csv")
    data = np.array([row[1:] for row in rows], dtype=float)
    return Gasoline(folder, np.array(header[2:], dtype=float), data[:, 1:], data[:, :1])


@pytest.fixture(scope="module")
def left_out(gasoline: Gasoline) -> CrossValidation:
    groups = np.arange(50)
    folds = folds_of(groups, gasoline.y[:50, 0], None, 0)
    return cross_validate(gasoline.X[:50], gasoline.wavelength_nm, gasoline.y[:50], [], 10, folds, groups)


def test_coefficients_are_those_of_r(gasoline: Gasoline) -> None:
    expected = gasoline.numbers("r_coefficients.csv")
    model = train(gasoline.X[:50], gasoline.y[:50], 10)
    for h in range(1, 11):
        intercept = float(model.predict(np.zeros((1, 401)), h)[0, 0])
        assert intercept == pytest.approx(expected[0, h - 1], rel=1e-10)
        size = np.abs(expected[1:, h - 1]).max()
        assert np.abs(model.coefficients(h)[:, 0] - expected[1:, h - 1]).max() < 1e-8 * size


def test_predictions_are_those_of_r_and_of_the_vignette(gasoline: Gasoline, reference: Path) -> None:
    predicted = train(gasoline.X[:50], gasoline.y[:50], 10).predict_all(gasoline.X[50:])[1:, :, 0].T
    expected = gasoline.numbers("r_test_predictions.csv")[:, 1:]
    assert np.abs(predicted - expected).max() < 1e-8
    printed = example(reference, "pls_gasoline_octane")["printed"]["pred_2comp"]
    assert [f"{value:.2f}" for value in predicted[:, 1]] == printed


def test_root_mean_square_errors_to_every_printed_digit(gasoline: Gasoline, left_out: CrossValidation) -> None:
    path = train(gasoline.X[:50], gasoline.y[:50], 10).predict_all(gasoline.X[50:])
    rmsep = np.sqrt(((path - gasoline.y[50:]) ** 2).mean(axis=1))[:, 0]
    printed = [float(text) for text in gasoline.published("published_vignette.csv", "rmsep_test")]
    assert [round(value, 4) for value in rmsep.tolist()] == printed
    printed = [float(text) for text in gasoline.published("published_vignette.csv", "loo_cv")]
    assert [float(f"{value:.4g}") for value in left_out.rmsecv[:, 0]] == printed
    full = gasoline.numbers("r_rmsep.csv")
    assert left_out.rmsecv[:, 0] == pytest.approx(full[:, 1], rel=1e-9)
    assert rmsep == pytest.approx(full[:, 3], rel=1e-9)


def test_exchanged_references_do_not_give_these_results(gasoline: Gasoline) -> None:
    """Negative control."""
    model = train(gasoline.X[:50], gasoline.y[:50][::-1].copy(), 2)
    errors = model.predict(gasoline.X[50:], 2) - gasoline.y[50:]
    assert np.sqrt((errors**2).mean()) > 1.0  # 0.2445 with the right ones


def test_number_of_components_by_published_rules(left_out: CrossValidation, reference: Path) -> None:
    expected = example(reference, "pls_gasoline_octane")["recomputed"]["haaland_thomas"]
    assert int(np.argmin(left_out.press[1:, 0])) + 1 == expected["h_min_press"]
    assert left_out.press[1:, 0] / left_out.press[1:, 0].min() == pytest.approx(expected["F_ratio"], rel=1e-8)
    assert f_quantile(0.75, 50, 50) == pytest.approx(expected["F_crit_alpha025_df50"], rel=1e-9)
    assert haaland_thomas(left_out, 0, lambda n: f_quantile(0.75, n, n)) == expected["selected"]
    assert one_standard_error(left_out, 0) <= expected["h_min_press"]


def test_limits_of_t2_and_q(reference: Path) -> None:
    expected = example(reference, "multivariate_figures_of_merit")["recomputed"]
    assert t2_limit_training(0.95, 24, 2) == pytest.approx(expected["T2_n24_A2_95"], rel=1e-9)
    assert t2_limit_new(0.95, 24, 2) == pytest.approx(expected["T2_new_n24_A2_95"], rel=1e-9)
    for level, value in expected["q_limit_eigs_0p5_0p3_0p2_0p1"].items():
        assert q_limit(int(level) / 100, np.array([0.5, 0.3, 0.2, 0.1])) == pytest.approx(value, rel=1e-9)


def test_q_limit_holds_for_spectra_left_out(gasoline: Gasoline) -> None:
    """Where h0 is negative, as here, the limit written with sqrt(h0^2) would be a tenth of this and refuse nearly everything."""
    model = fit_model(gasoline.X[:50], gasoline.wavelength_nm, gasoline.y[:50], ["octane"], "1", [], 3)
    inside = []
    for k in range(50):
        rest = np.arange(50) != k
        other = fit_model(gasoline.X[:50][rest], gasoline.wavelength_nm, gasoline.y[:50][rest], ["octane"], "1", [], 3)
        inside.append(float(other.predict(gasoline.X[k : k + 1]).q_residual[0]) < model.limits.q)
    assert 0.90 <= np.mean(inside) <= 1.0


def test_three_absorbers_of_a_herbal_extract(reference: Path) -> None:
    """From 240 nm, four components, jointly: test RMSEP herb 1.4, piroxicam 0.11, paracetamol 0.17 (maker of the data)."""
    folder = reference / "paracetamol-piroxicam"
    header, rows = table(folder / "spectra.csv")
    _, references = table(folder / "concentrations.csv")
    w = np.array([name.removeprefix("A_") for name in header[1:]], dtype=float)
    A, Y = (np.array([row[k:] for row in part], dtype=float) for part, k in ((rows, 1), (references, 2)))
    test = np.array([row[1] == "test" for row in references])
    assert test.sum() == 5
    steps = [Step("range", 240.0, 500.0)]
    model = fit_model(A[~test], w, Y[~test], ["herb", "piroxicam", "paracetamol"], "mg/L", steps, 4)
    rmsep = np.sqrt(((model.predict(A[test]).value - Y[test]) ** 2).mean(axis=0))
    assert [round(value, digits) for value, digits in zip(rmsep, (1, 2, 2), strict=True)] == [1.4, 0.11, 0.17]
    swapped = fit_model(A[~test], w, Y[~test][:, ::-1].copy(), ["a", "b", "c"], "mg/L", steps, 4)
    assert np.sqrt(((swapped.predict(A[test]).value - Y[test]) ** 2).mean(axis=0))[0] > 3, "negative control: columns exchanged"


def test_the_operation_gives_the_printed_table(gasoline: Gasoline) -> None:
    def samples(rows: range) -> dict[str, list[dict[str, object]]]:
        w = gasoline.wavelength_nm.tolist()
        return {
            "spectra": [{"id": str(k), "wavelength_nm": w, "absorbance": gasoline.X[k].tolist()} for k in rows],
            "references": [{"id": str(k), "values": {"octane": float(gasoline.y[k, 0])}} for k in rows],
        }

    twice = [k for k in range(50) if (gasoline.y[:50, 0] == gasoline.y[k, 0]).sum() > 1]
    answer = run_document(
        "calibrate",
        {
            "schema": "calibrate/1",
            "unit": "octane number",
            "max_components": 10,
            "selection": "f-test",
            **samples(range(50)),
            "groups": {str(k): f"sample {k}" for k in twice},  # the same octane number, and different samples
            "test": samples(range(50, 60)),
        },
    )
    analyte = answer["analytes"][0]
    assert analyte["chosen_components"] == 3
    printed = [float(text) for text in gasoline.published("published_vignette.csv", "rmsep_test")]
    assert [round(row["rmsep"], 4) for row in analyte["table"][1:]] == printed[1:]
    printed = [float(text) for text in gasoline.published("published_vignette.csv", "loo_cv")]
    assert [float(f"{row['rmsecv']:.4g}") for row in analyte["table"]] == printed
    predict = {"schema": "predict/1", "model": answer["model"], "spectra": samples(range(50, 60))["spectra"]}
    values = [result["analytes"][0] for result in run_document("predict", predict)["results"]]
    expected = gasoline.numbers("r_test_predictions.csv")[:, 3]
    shown = [(v["value"], e) for v, e in zip(values, expected, strict=True) if v["value"] is not None]
    assert shown
    assert all(value == pytest.approx(e, abs=1e-8) for value, e in shown)
    assert all(result["status"] != "accepted" for result in values)  # their residuals are beyond what the training set left
