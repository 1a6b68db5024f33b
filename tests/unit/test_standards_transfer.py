"""Shift and bandwidth of another instrument: estimated, with honest uncertainties, and put right. Invented bands."""

from __future__ import annotations

import numpy as np
import pytest

from tinctor.errors import InputError
from tinctor.noise import NoiseModel
from tinctor.operations.registry import run_document
from tinctor.standards.transfer import Transfer, corrected_absorptivity, estimate_transfer

W = np.arange(400.0, 701.0)
NOISE = NoiseModel(0.0005, 0.0001, 0.0)


def band(w: np.ndarray, width: float = 25.0) -> np.ndarray:
    return np.asarray(40 * np.exp(-0.5 * ((w - 540) / width) ** 2) + 20 * np.exp(-0.5 * ((w - 500) / width) ** 2))


def slit(values: np.ndarray, bandwidth_nm: float, step_nm: float) -> np.ndarray:
    """What a triangular slit function makes of a spectrum on an even axis."""
    count = int(bandwidth_nm / step_nm)
    reach = step_nm * np.arange(-count, count + 1)
    weight = np.maximum(1 - np.abs(reach) / bandwidth_nm, 0)
    return np.convolve(values, weight / weight.sum(), mode="same")


def test_uncertainties_cover_shift_and_broadening() -> None:
    """300 checks of 1.0 nm shift and a broadening of 2 nm^2: 95 % intervals hold them in 92 to 98 %."""
    rng = np.random.default_rng(5)
    fine = np.arange(380.0, 721.0, 0.25)
    true = slit(band(fine), np.sqrt(12.0), 0.25)
    held = []
    for _ in range(300):
        A = 0.02 * np.interp(W - 1.0, fine, true) + 0.003
        found = estimate_transfer(W, band(W), W, A + NOISE.reading_u(A) * rng.normal(size=W.size), NOISE)
        held.append(
            (abs(found.shift_nm - 1.0) < 1.96 * found.shift_u_nm, abs(found.broadening_nm2 - 2.0) < 1.96 * found.broadening_u_nm2)
        )
    share = np.mean(held, axis=0)
    assert share.min() > 0.91, share
    assert share.max() < 0.985, share


def test_bandwidths_of_a_triangular_slit() -> None:
    fine = np.arange(380.0, 721.0, 0.25)
    two, six = (slit(band(fine), b, 0.25) for b in (2.0, 6.0))
    keep = slice(80, -80, 4)
    found = estimate_transfer(fine[keep], two[keep], fine[keep], 0.02 * six[keep], NOISE, record_bandwidth_nm=2.0)
    assert found.bandwidth_nm == pytest.approx(6.0, abs=0.1)
    assert found.broadening_nm2 == pytest.approx((36 - 4) / 6, rel=0.03)
    back = estimate_transfer(fine[keep], six[keep], fine[keep], 0.02 * two[keep], NOISE, record_bandwidth_nm=6.0)
    assert back.broadening_nm2 < 0


def test_the_corrected_record_is_what_the_other_instrument_sees() -> None:
    found = estimate_transfer(W, band(W), W, 0.02 * band(W - 0.8), NOISE)
    w, e, u = corrected_absorptivity(W, band(W), np.full(W.size, 0.01), found)
    np.testing.assert_allclose(e, band(w - 0.8), atol=0.01)
    assert w[0] >= 400.8
    assert (u >= 0.0099).all()


def test_other_substances_and_axes_are_refused() -> None:
    for check in (np.zeros(W.size), 0.02 * band(W + 60)):
        with pytest.raises(InputError):
            estimate_transfer(W, band(W), W, check, NOISE)
    with pytest.raises(InputError, match="inside the record"):
        estimate_transfer(W, band(W), W + 600, 0.02 * band(W), NOISE)


def test_the_operation_says_what_it_found_and_names_the_parent() -> None:
    component = {"name": "dye", "wavelength_nm": W.tolist(), "mass_absorptivity": band(W).tolist(), "scale_relative_u": 0.01}
    noise = 0.0005 * np.random.default_rng(1).normal(size=W.size)
    check = {"id": "c", "wavelength_nm": W.tolist(), "absorbance": (0.02 * band(W - 0.5) + noise).tolist()}
    response = run_document("transfer", {"schema": "transfer/1", "component": component, "check": check})
    assert response["shift_nm"] == pytest.approx(0.5, abs=4 * response["shift_u_nm"])
    assert response["component"]["name"] == "dye-transferred"
    assert response["flags"] == []
    same = run_document(
        "transfer",
        {"schema": "transfer/1", "component": component, "check": {**check, "absorbance": (0.02 * band(W) + noise).tolist()}},
    )
    assert [f["code"] for f in same["flags"]] == ["nothing-to-correct"]
    other = {**check, "absorbance": (0.02 * band(W) + 0.3 * np.exp(-0.5 * ((W - 620) / 20) ** 2)).tolist()}
    odd = run_document("transfer", {"schema": "transfer/1", "component": component, "check": other})
    assert "not-alike" in [f["code"] for f in odd["flags"]]


def test_significance_is_two_standard_uncertainties() -> None:
    found = Transfer(0.3, 0.1, 1.0, 0.6, 0.01, 0.0001, 0.0, 0.0005, 300, None)
    assert found.shift_significant
    assert not found.broadening_significant
