"""Straight lines, tests of linearity, inverse prediction and limits against certified and printed results."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from reference_data import example

from tinctor.standards.distributions import f_tail
from tinctor.standards.inverse import calibration_line, inverse_prediction, standard_addition
from tinctor.standards.limits import blank_limits, calibration_limits, ich_limits, known_sigma_limits
from tinctor.standards.line import fit_lines, linear_model
from tinctor.standards.linearity import linearity_test, quadratic_term

#: Digits that must agree with the certified values (coefficients, their standard deviations, residual standard deviation).
#: NIST certifies 15; double precision allows about 16 less the logarithm of the condition of the problem.
DIGITS = {
    "Norris": (13, 13, 13),
    "NoInt1": (14, 14, 14),
    "Longley": (11, 12, 12),
    "Wampler1": (9, 9, 9),
    "Wampler2": (12, 13, 13),
    "Wampler3": (9, 13, 14),
    "Filip": (7, 8, 8),
}


def agreeing_digits(values: np.ndarray, certified: list[str]) -> float:
    exact = np.array([float(c) for c in certified])
    scale = np.where(exact != 0, np.abs(exact), 1.0)
    return float(-np.log10(np.maximum(np.abs(values - exact) / scale, 1e-16).max()))


def nist(reference: Path, name: str) -> tuple[np.ndarray, np.ndarray, dict[str, Any]]:
    chosen = example(reference, "nist_strd_linear")["sets"][name]
    with (reference / "worked_examples" / chosen["data_file"]).open(encoding="utf-8", newline="") as file:
        header, *rows = list(csv.reader(file))
    data = np.array(rows, dtype=float)
    x = data[:, [k for k, h in enumerate(header) if h != "y"]]
    if name != "NoInt1":
        x = np.column_stack([np.ones(len(x)), x]) if x.shape[1] > 1 else x ** np.arange(chosen["n_par"])
    return x, data[:, header.index("y")], chosen["recomputed_exact_rational"]


@pytest.mark.parametrize("name", DIGITS)
def test_certified_regressions(reference: Path, name: str) -> None:
    """NIST Statistical Reference Datasets, linear least squares; certified values confirmed in rational arithmetic."""
    X, y, exact = nist(reference, name)
    model = linear_model(X, y)
    reached = (
        agreeing_digits(model.coefficients, exact["coefficients"]),
        agreeing_digits(model.u, exact["coefficient_sd"]),
        # Wampler1 and 2 are exact polynomials: their certified scatter is 0
        agreeing_digits(np.array([model.residual_sd]), [exact["residual_sd"]]),
    )
    assert all(r >= wanted for r, wanted in zip(reached, DIGITS[name], strict=True)), reached


@pytest.mark.parametrize(("name", "through_zero"), [("Norris", False), ("NoInt1", True)])
def test_certified_straight_lines_column_by_column(reference: Path, name: str, through_zero: bool) -> None:
    X, y, exact = nist(reference, name)
    columns = np.column_stack([y, 2 * y])
    line = fit_lines(X[:, -1], columns, through_zero=through_zero)
    assert agreeing_digits(line.slope[:1], exact["coefficients"][-1:]) > 12
    assert agreeing_digits(line.slope_u[:1], exact["coefficient_sd"][-1:]) > 12
    assert agreeing_digits(line.residual_sd[:1], [exact["residual_sd"]]) > 12
    if not through_zero:
        assert agreeing_digits(line.intercept[:1], exact["coefficients"][:1]) > 12
        assert agreeing_digits(line.intercept_u[:1], exact["coefficient_sd"][:1]) > 12
    np.testing.assert_allclose(line.slope[1], 2 * line.slope[0], rtol=1e-14)


def test_the_wrong_model_fails(reference: Path) -> None:
    """Negative control: Norris through zero is another line."""
    X, y, exact = nist(reference, "Norris")
    line = fit_lines(X[:, -1], y[:, None], through_zero=True)
    assert agreeing_digits(line.slope, exact["coefficients"][-1:]) < 4


def test_cadmium_calibration(reference: Path) -> None:
    """EURACHEM/CITAC guide CG4 (2012), example A5: line, concentration and its uncertainty."""
    data = example(reference, "eurachem_a5_cadmium")
    x, y = np.array(data["inputs"]["conc_mg_per_L"]), np.array(data["inputs"]["absorbance"])
    line, wanted = calibration_line(x, y), data["recomputed"]["line"]
    for key, value in (
        ("slope", line.slope), ("intercept", line.intercept), ("residual_sd", line.residual_sd),
        ("se_slope", line.slope_u), ("se_intercept", line.intercept_u), ("Sxx", line.x_squares),
    ):  # fmt: skip
        assert value == pytest.approx(wanted[key], rel=1e-9), key
    found = inverse_prediction(line, float(np.mean(data["inputs"]["sample_absorbances"])), replicates=2)
    assert found.x == pytest.approx(data["recomputed"]["c0"], rel=1e-9)
    assert found.u == pytest.approx(data["recomputed"]["u_c0_at_exact"], rel=1e-8)
    assert (round(found.x, 2), round(found.u, 3)) == (0.26, 0.018)  # as printed
    assert found.exact is not None
    assert found.exact[0] < found.x < found.exact[1]
    # Fieller's interval contains the approximate one on the side away from the mean of the standards
    assert found.x - found.exact[0] > found.x - found.approximate[0]


def test_din_32645_limits(reference: Path) -> None:
    """DIN 32645 example (carbon in water), and the other definitions on the same line."""
    data = example(reference, "din_32645_limits")
    wanted, inputs = data["recomputed"], data["inputs"]
    line = calibration_line(np.array(inputs["conc"]), np.array(inputs["signal"]))
    limits = calibration_limits(line, alpha=0.01, k=3.0)
    assert limits.decision == pytest.approx(wanted["decision_limit"], rel=1e-9)
    assert limits.detection == pytest.approx(wanted["detection_limit_2xk"], rel=1e-9)
    # 0.2121 is also quoted: it puts k times the decision limit under the root instead of solving the equation
    assert limits.quantification == pytest.approx(wanted["loq_iterated"], rel=1e-8)
    blank = blank_limits(line, np.array(inputs["blanks"]), alpha=0.01)
    assert blank is not None
    assert blank.decision == pytest.approx(wanted["blank_method"], rel=1e-8)
    ich = ich_limits(line)
    assert [ich[0].detection, ich[0].quantification] == pytest.approx([wanted["ich_3p3_sy"], wanted["ich_10_sy"]], rel=1e-9)
    assert [ich[1].detection, ich[1].quantification] == pytest.approx(
        [wanted["ich_3p3_s_intercept"], wanted["ich_10_s_intercept"]], rel=1e-9
    )
    inverse = inverse_prediction(line, 3500.0, coverage=0.99)
    assert inverse.x == pytest.approx(wanted["inverse_3500"]["x"], rel=1e-9)
    assert inverse.approximate[1] - inverse.x == pytest.approx(wanted["inverse_3500"]["ci99"], rel=1e-9)
    assert "DIN 32645" in limits.definition


def test_limits_for_a_known_standard_deviation(reference: Path) -> None:
    """Currie, Pure Appl. Chem. 67 (1995) 1699: 1.645 and 3.29 standard deviations at 5 %, 10 for quantification (from memory)."""
    wanted = example(reference, "lod_loq_definitions")["recomputed"]
    limits = known_sigma_limits(1.0)
    assert limits.decision == pytest.approx(wanted["LC_known_sigma"], rel=1e-9)
    assert limits.detection == pytest.approx(wanted["LD_known_sigma"], rel=1e-9)
    assert limits.quantification == 10.0


def test_nitrite_sets(reference: Path) -> None:
    """Mandel's test as in ISO 8466-1 (data from memory) and Neitzel 2003: both pass at 99 %, the second fails at 95 %."""
    data = example(reference, "mandel_linearity_nitrite")
    x, inputs, wanted = np.array(data["inputs"]["conc"]), data["inputs"], data["recomputed"]
    for key, signal, value in (
        ("iso", "iso_8466_1_absorbance", wanted["iso"]["test_value"]),
        ("neitzel", "neitzel_signal", wanted["neitzel"]["mandel"]),
    ):
        y = np.array(inputs[signal])
        f, between, within = quadratic_term(x, y, np.ones(x.size), through_zero=False)
        assert f == pytest.approx(value, rel=1e-8), key
        assert (between, within) == (1, 7)
        assert linearity_test(x, y, np.ones(x.size), through_zero=False, significance=0.01).passed
        line = calibration_line(x, y)
        assert line.slope == pytest.approx(wanted[key]["line"]["slope"], rel=1e-9)
        assert line.residual_sd == pytest.approx(wanted[key]["line"]["residual_sd"], rel=1e-9)
    assert not linearity_test(x, y, np.ones(x.size), through_zero=False, significance=0.05).passed
    assert float(f_tail(wanted["iso"]["F_99_1_7"], 1, 7)) == pytest.approx(0.01, rel=1e-6)
    for key, value in wanted["neitzel"]["limits"].items():
        alpha, k = (float(part.split("=")[1]) for part in key.split(","))
        assert calibration_limits(line, alpha, k).quantification == pytest.approx(value, rel=1e-8), key


def test_linewidth_calibration(reference: Path) -> None:
    """NIST/SEMATECH e-Handbook 2.3.6.7, data file; four readings of each of ten levels: lack of fit against replicates."""
    data = example(reference, "nist_handbook_linewidth_calibration")
    x, y = np.array(data["inputs"]["x"]), np.array(data["inputs"]["y"])
    line, wanted = calibration_line(x, y), data["recomputed"]
    assert (line.slope, line.intercept, line.residual_sd) == pytest.approx(
        (wanted["slope"], wanted["intercept"], wanted["residual_sd"]), rel=1e-9
    )
    assert (line.slope_u, line.intercept_u) == pytest.approx((wanted["se_slope"], wanted["se_intercept"]), rel=1e-9)
    test = linearity_test(x, y, np.ones(x.size), through_zero=False, significance=0.05)
    assert (test.method, test.degrees_of_freedom) == ("lack-of-fit", (8, 30))
    # the same by scipy's own sums: pure error is the pooled variance of the levels
    pure = sum(((y[x == level] - y[x == level].mean()) ** 2).sum() for level in np.unique(x))
    total = line.residual_sd**2 * 38
    assert test.f == pytest.approx(((total - pure) / 8) / (pure / 30), rel=1e-9)


def test_an_unbounded_interval_is_said_to_be_none() -> None:
    """Fieller 1954: where the slope is not significant, no bounded set of x explains the signal."""
    line = calibration_line(np.array([1.0, 2.0, 3.0, 4.0]), np.array([0.10, 0.14, 0.09, 0.13]))
    assert inverse_prediction(line, 0.11).exact is None


def test_fieller_is_the_set_of_x_that_the_line_does_not_reject() -> None:
    """The definition itself, scanned: |signal - line(x)| <= t sd of the difference."""
    x, y = np.array([1.0, 2.0, 3.0, 4.0, 5.0]), np.array([0.12, 0.19, 0.33, 0.38, 0.52])
    line = calibration_line(x, y)
    found = inverse_prediction(line, 0.30, replicates=2, coverage=0.95)
    at = np.linspace(0.0, 6.0, 600_001)
    sd = line.residual_sd * np.sqrt(1 / 2 + 1 / 5 + (at - 3.0) ** 2 / 10.0)
    inside = at[np.abs(0.30 - line.intercept - line.slope * at) <= 3.182446305 * sd]
    assert found.exact is not None
    assert found.exact == pytest.approx((inside[0], inside[-1]), abs=2e-5)


def test_standard_addition_is_the_line_at_zero_signal() -> None:
    """Exact data: 0.03 + 0.1 x meets zero at -0.3. The uncertainty is that of the textbook formula without a reading's share."""
    x = np.array([0.0, 0.2, 0.4, 0.6])
    assert standard_addition(calibration_line(x, 0.03 + 0.1 * x)).x == pytest.approx(0.3, rel=1e-12)
    line = calibration_line(x, np.array([0.031, 0.049, 0.071, 0.090]))
    found = standard_addition(line)
    mean = line.intercept + line.slope * 0.3
    expected = line.residual_sd / line.slope * np.sqrt(1 / 4 + mean**2 / (line.slope**2 * 0.2))
    assert found.u == pytest.approx(expected, rel=1e-9)
    assert found.exact is not None
    assert found.exact[0] < found.x < found.exact[1]
