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
    four, eight = (slit(band(fine), b, 0.25) for b in (4.0, 8.0))
    keep = slice(80, -80, 4)
    found = estimate_transfer(fine[keep], four[keep], fine[keep], 0.02 * eight[keep], NOISE, record_bandwidth_nm=4.0)
    assert found.bandwidth_nm == pytest.approx(8.0, abs=0.1)
    assert found.broadening_nm2 == pytest.approx((64 - 16) / 6, rel=0.03)
    back = estimate_transfer(fine[keep], eight[keep], fine[keep], 0.02 * four[keep], NOISE, record_bandwidth_nm=8.0)
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


def test_a_noisy_record_is_not_taken_for_a_broad_instrument() -> None:
    """Noise of the record goes against its own second difference: without correction 0.05 % of noise looks like 1.5 nm^2."""
    rng, found = np.random.default_rng(3), []
    for _ in range(60):
        record = band(W) + 0.02 * rng.normal(size=W.size)
        A = 0.02 * band(W)
        found.append(estimate_transfer(W, record, W, A + NOISE.reading_u(A) * rng.normal(size=W.size), NOISE))
    assert abs(np.mean([f.broadening_nm2 for f in found])) < 0.3
    assert np.mean([f.broadening_significant for f in found]) < 0.1


def test_a_coarse_record_gives_the_shift_too() -> None:
    coarse = np.arange(400.0, 701.0, 5.0)
    found = estimate_transfer(coarse, band(coarse, 15.0), coarse, 0.02 * band(coarse - 1.3, 15.0), NOISE)
    assert found.shift_nm == pytest.approx(1.3, abs=0.01)


def test_more_scatter_than_noise_widens_the_uncertainty() -> None:
    rng = np.random.default_rng(4)
    quiet = estimate_transfer(W, band(W), W, 0.02 * band(W) + 0.0005 * rng.normal(size=W.size), NOISE)
    loud = estimate_transfer(W, band(W), W, 0.02 * band(W) + 0.01 * rng.normal(size=W.size), NOISE)
    assert loud.shift_u_nm > 8 * quiet.shift_u_nm


@pytest.mark.parametrize("record", [np.full(W.size, 5.0), 0.1 * W, 0.0001 * W**2])
def test_records_without_a_band_are_refused(record: np.ndarray) -> None:
    with pytest.raises(InputError):
        estimate_transfer(W, record, W, 0.02 * record, NOISE)


def test_saturated_readings_of_the_check_are_not_used() -> None:
    component = {"name": "dye", "wavelength_nm": W.tolist(), "mass_absorptivity": band(W).tolist(), "scale_relative_u": 0.01}
    A = np.minimum(0.06 * band(W - 0.5), 2.2)
    check = {"id": "c", "wavelength_nm": W.tolist(), "absorbance": A.tolist()}
    response = run_document("transfer", {"schema": "transfer/1", "component": component, "check": check})
    assert response["shift_nm"] == pytest.approx(0.5, abs=0.02)
    assert "saturated" in [f["code"] for f in response["flags"]]
