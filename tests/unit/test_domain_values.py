"""Spectra, batches, components, noise, axes: valid when they exist, and immutable."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from scipy.interpolate import PchipInterpolator

from tinctor.axis import ascending, covered, derivative, resample
from tinctor.component import Component, Conditions
from tinctor.errors import FAULTS_SHOWN, Fault, InputError
from tinctor.noise import NoiseModel
from tinctor.spectrum import Spectrum, SpectrumBatch
from tinctor.units import CONCENTRATION_UNITS, conversion_factor

W = [400.0, 410.0, 420.0]


def faults_of(make: object) -> list[Fault]:
    with pytest.raises(InputError) as caught:
        make()  # type: ignore[operator]
    return list(caught.value.faults)


def test_a_descending_axis_is_turned_round_with_everything_on_it() -> None:
    spectrum = Spectrum("a", W[::-1], [3.0, 2.0, 1.0], absorbance_u=[0.3, 0.2, 0.1])
    assert spectrum.wavelength_nm.tolist() == W
    assert spectrum.absorbance.tolist() == [1.0, 2.0, 3.0]
    assert spectrum.absorbance_u is not None
    assert spectrum.absorbance_u.tolist() == [0.1, 0.2, 0.3]
    component = Component("c", W[::-1], [3.0, 2.0, 1.0], absorptivity_u=[0.3, 0.2, 0.1])
    assert component.absorptivity.tolist() == [1.0, 2.0, 3.0]


def test_values_are_copied_read_only_and_frozen() -> None:
    own = np.array([1.0, 2.0, 3.0])
    spectrum = Spectrum("a", W, own)
    own[0] = 9.0
    assert spectrum.absorbance[0] == 1.0
    with pytest.raises(ValueError, match="read-only"):
        spectrum.absorbance[0] = 5.0
    with pytest.raises(dataclasses.FrozenInstanceError):
        spectrum.id = "b"  # type: ignore[misc]
    with pytest.raises(dataclasses.FrozenInstanceError):
        NoiseModel().floor = 1.0  # type: ignore[misc]


def test_a_read_only_array_is_kept_without_a_copy() -> None:
    A = np.zeros((2, 3))
    A.setflags(write=False)
    assert SpectrumBatch(["a", "b"], W, A).absorbance is A


@pytest.mark.parametrize(
    ("wavelength_nm", "code", "words"),
    [
        ([], "empty-axis", "at least one"),
        ([400, 410, 410], "duplicate-wavelength", "wavelength_nm[2] repeats 410"),
        ([400, 420, 410], "axis-not-monotonic", "found 410 nm after 420 nm at index 2"),
        ([420, 400, 410], "axis-not-monotonic", "must fall throughout"),
        ([400, np.nan, 420], "not-finite", "wavelength_nm[1]"),
        ([400, np.inf, 420], "not-finite", "infinite"),
        ([0.4, 0.41, 0.42], "axis-not-nm", "found 0.4 to 0.42"),
        ([25000, 24000], "axis-not-nm", "wavenumbers"),
    ],
)
def test_axes_that_cannot_be_are_refused_with_index_and_value(wavelength_nm: list[float], code: str, words: str) -> None:
    (fault,) = faults_of(lambda: ascending(wavelength_nm))
    assert fault.code == code
    assert words in str(fault)


def test_every_fault_of_a_spectrum_is_reported_with_its_place() -> None:
    faults = faults_of(lambda: Spectrum(" ", W, [0.1, 50.0, 0.2], path_length_cm=0, dilution_factor=0.5, dilution_factor_u=-1))
    assert {fault.path for fault in faults} == {
        ".id",
        ".absorbance[1]",
        ".path_length_cm",
        ".dilution_factor",
        ".dilution_factor_u",
    }
    assert all(str(value) in " ".join(map(str, faults)) for value in (50, 0.5, -1))


def test_per_cent_transmittance_is_recognised() -> None:
    (fault,) = faults_of(lambda: Spectrum("a", W, [12.0, 55.0, 99.0]))
    assert "per cent transmittance" in fault.message
    assert "log10" in fault.hint


def test_readings_that_are_not_finite_are_named() -> None:
    faults = faults_of(lambda: Spectrum("a", W, [0.1, np.nan, np.inf]))
    assert [fault.path for fault in faults] == [".absorbance[1]", ".absorbance[2]"]
    (too_large,) = faults_of(lambda: Spectrum("a", W, [10**400, 0.1, 0.2]))
    assert (too_large.code, too_large.path) == ("not-finite", ".absorbance")


def test_batches_share_an_axis_and_have_ids_of_their_own() -> None:
    one, other = Spectrum("a", W, [1, 2, 3]), Spectrum("b", [400, 410, 421], [1, 2, 3])
    (fault,) = faults_of(lambda: SpectrumBatch.of([one, other]))
    assert fault.code == "axes-differ"
    assert "'a'" in fault.message
    assert "'b'" in fault.message
    (twice,) = faults_of(lambda: SpectrumBatch.of([one, one]))
    assert twice.code == "duplicate-id"
    assert faults_of(lambda: SpectrumBatch.of([]))[0].code == "no-spectra"
    (mixed,) = faults_of(lambda: SpectrumBatch.of([one, Spectrum("c", W, [1, 2, 3], absorbance_u=[1, 1, 1])]))
    assert mixed.code == "mixed-u"


def test_a_batch_gives_back_its_spectra() -> None:
    spectra = [
        Spectrum("a", W, [1, 2, 3], path_length_cm=0.5),
        Spectrum("b", W, [2, 3, 4], dilution_factor=10, dilution_factor_u=0.1),
    ]
    for before, after in zip(spectra, SpectrumBatch.of(spectra), strict=True):
        assert (before.id, before.path_length_cm, before.dilution_factor_u) == (
            after.id,
            after.path_length_cm,
            after.dilution_factor_u,
        )
        assert np.array_equal(before.absorbance, after.absorbance)


def test_a_blank_is_subtracted_on_its_own_axis_only() -> None:
    batch = SpectrumBatch.of([Spectrum("a", W, [1, 2, 3])])
    assert batch.minus_blank(Spectrum("blank", W, [0.1, 0.1, 0.2])).absorbance[0].tolist() == pytest.approx([0.9, 1.9, 2.8])
    assert faults_of(lambda: batch.minus_blank(Spectrum("blank", [400, 411, 420], [0, 0, 0])))[0].code == "axes-differ"


def test_components_refuse_what_cannot_be() -> None:
    faults = faults_of(lambda: Component("", W, [0, 0, 0], scale_relative_u=-0.1, molar_mass_g_per_mol=0, linear_to=np.nan))
    assert {fault.code for fault in faults} == {
        "empty-name",
        "no-absorption",
        "scale-relative-u",
        "molar-mass-g-per-mol",
        "linear-to",
    }
    (fault,) = faults_of(lambda: Component("c", W, [1, 2]))
    assert "3" in fault.message
    assert "2" in fault.message


def test_noise_model_follows_its_formula_and_refuses_the_impossible() -> None:
    noise = NoiseModel(floor=0.001, transmittance=0.0002)
    expected = np.sqrt(0.001**2 + (0.0002 * 10**1.5 / np.log(10)) ** 2)
    assert noise.reading_u(1.5) == pytest.approx(expected, rel=1e-14)
    assert faults_of(lambda: NoiseModel(floor=-1, wavelength_nm=np.nan))[1].path == ".wavelength_nm"
    assert faults_of(lambda: NoiseModel(floor=0, transmittance=0))


def test_conditions_are_compared_only_where_both_are_known() -> None:
    water = Conditions(solvent="Water", ph=7.0, temperature_c=20, bandwidth_nm=2)
    assert water.differences(Conditions(solvent="water", ph=7.3, temperature_c=23, bandwidth_nm=1)) == []
    assert len(water.differences(Conditions("ethanol", 4.0, 60.0, 8.0))) == 4
    assert water.differences(Conditions()) == []


@pytest.mark.parametrize("unit", sorted(CONCENTRATION_UNITS))
def test_units_convert_both_ways(unit: str) -> None:
    basis, factor = CONCENTRATION_UNITS[unit]
    assert conversion_factor(basis, unit) == factor
    other = "mass" if basis == "molar" else "molar"
    there = conversion_factor(other, unit, 250.0)
    assert there == pytest.approx(factor / 250.0 if basis == "molar" else factor * 250.0)
    assert faults_of(lambda: conversion_factor(other, unit))[0].code == "molar-mass-needed"


def test_resampling_agrees_with_an_independent_library() -> None:
    # scipy.interpolate.PchipInterpolator: the same method (Fritsch and Butland 1984), written by others
    rng = np.random.default_rng(3)
    for _ in range(200):
        x = np.cumsum(rng.uniform(0.3, 3.0, rng.integers(3, 40))) + 300
        y = rng.normal(size=x.size)
        onto = np.sort(rng.uniform(x[0], x[-1], 50))
        assert np.allclose(resample(x, y, onto), PchipInterpolator(x, y)(onto), rtol=0, atol=1e-12)
        assert np.array_equal(resample(x, y, x), y)


def test_nothing_is_extrapolated() -> None:
    x = np.array([400.0, 410.0, 420.0])
    for outside in (399.9, 420.1):
        (fault,) = faults_of(lambda outside=outside: resample(x, x, np.array([405.0, outside])))
        assert fault.code == "extrapolation"
        assert f"{outside:g} nm" in fault.message
    assert covered(np.array([399.9, 400.0, 420.0, 420.1]), x).tolist() == [False, True, True, False]


def test_the_derivative_of_a_parabola_is_exact_on_an_uneven_axis() -> None:
    x = np.array([400.0, 401.0, 403.0, 404.5, 408.0])
    assert derivative(x, x**2) == pytest.approx(2 * x, rel=1e-12)


def test_errors_list_at_most_fifty_faults_and_count_the_rest() -> None:
    error = InputError([Fault("x", f"[{k}]", "m") for k in range(FAULTS_SHOWN + 7)])
    assert len(error.shown) == FAULTS_SHOWN
    assert error.more == 7
    assert str(error).endswith("... and 7 more")
    assert error.at("$.spectra[2]").faults[0].path == "$.spectra[2][0]"
