"""Each flag is raised by what it stands for, graded by what it could do, and not otherwise."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tinctor.component import Component, Conditions
from tinctor.resolve.engine import resolve
from tinctor.resolve.resolution import FlagCode, Resolution, Severity, Status
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import SpectrumBatch

W = np.arange(400.0, 701.0, 2.0)
RNG_SEED = 7


def band(centre: float, width: float, height: float) -> np.ndarray:
    return height * np.exp(-4 * np.log(2) * ((W - centre) / width) ** 2)


YELLOW = Component("yellow", W, band(440, 80, 30.0), basis="mass", scale_relative_u=0.01, linear_to=0.05)
RED = Component("red", W, band(520, 70, 28.0), basis="mass", scale_relative_u=0.01, linear_to=0.05)
BLUE = Component("blue", W, band(620, 70, 35.0), basis="mass", scale_relative_u=0.01, linear_to=0.05)
TRIO = [YELLOW, RED, BLUE]


def mixture(*grams_per_litre: float, extra: np.ndarray | float = 0.0) -> np.ndarray:
    rng = np.random.default_rng(RNG_SEED)
    A = sum(c * dye.absorptivity for c, dye in zip(grams_per_litre, TRIO, strict=True)) + extra
    return np.asarray(A + 0.0004 * rng.standard_normal(W.size))


def resolved(A: np.ndarray, components: list[Component] | None = None, **settings: Any) -> Resolution:
    batch = SpectrumBatch([str(k) for k in range(len(np.atleast_2d(A)))], W, np.atleast_2d(A))
    return resolve(batch, components or TRIO, ResolveSettings(**settings))


def grade(result: Resolution, code: FlagCode, component: int = 0) -> Severity:
    grades = result.severity.get(code)
    if grades is None:
        return Severity.NONE
    return Severity(int(grades[0] if grades.ndim == 1 else grades[0, component]))


def test_a_sound_sample_raises_nothing() -> None:
    result = resolved(mixture(0.02, 0.015, 0.018))
    assert result.severity == {}
    assert result.spectrum_status().tolist() == [Status.ACCEPTED]
    assert np.abs(result.unconstrained / [0.02, 0.015, 0.018] - 1).max() < 0.005


def test_saturated_readings_are_left_out_and_said_to_be() -> None:
    A = mixture(0.02, 0.015, 0.08)
    A[A > 2.2] = 2.2  # a detector's ceiling
    result = resolved(A, [YELLOW, RED, Component("blue", W, BLUE.absorptivity, basis="mass", scale_relative_u=0.01)])
    assert grade(result, "saturated", 2) is Severity.WARNING
    assert grade(result, "saturated", 0) is Severity.INFO
    assert result.unconstrained[0, 2] == pytest.approx(0.08, rel=0.01)
    ignored = resolved(A, absorbance_limit=9.0)
    assert ignored.unconstrained[0, 2] < 0.0785  # the ceiling would have biased it
    assert grade(result, "saturated", 2) != grade(resolved(mixture(0.02, 0.015, 0.02)), "saturated", 2)


def test_a_dirty_cell_is_seen_and_taken_out_with_the_offset_term_and_seen_without_it() -> None:
    A = mixture(0.02, 0.015, 0.018, extra=0.04)
    with_term = resolved(A)
    assert grade(with_term, "offset-large") is Severity.WARNING
    assert with_term.unconstrained[0] == pytest.approx([0.02, 0.015, 0.018], rel=0.005)
    narrow = [Component(c.name, W, np.where(W > 680, 0, c.absorptivity), basis="mass", scale_relative_u=0.01) for c in TRIO]
    clear = np.where(W > 680, 0.04, A)
    without = resolved(clear, narrow, background=())
    assert grade(without, "offset-large") is Severity.WARNING
    assert (without.unconstrained[0] > [0.0201, 0.0151, 0.0181]).all()
    assert grade(resolved(mixture(0.02, 0.015, 0.018, extra=0.004)), "offset-large") is Severity.NONE


def test_turbidity_is_seen_with_the_scatter_term() -> None:
    A = mixture(0.02, 0.015, 0.018, extra=0.3 * (W / 400) ** -4)
    result = resolved(A, background=("offset", "scatter"))
    assert grade(result, "scatter-large") is Severity.WARNING
    assert result.unconstrained[0] == pytest.approx([0.02, 0.015, 0.018], rel=0.02)
    assert grade(resolved(mixture(0.02, 0.015, 0.018), background=("offset", "scatter")), "scatter-large") is Severity.NONE


def test_a_wrong_blank_gives_a_negative_estimate_that_is_flagged() -> None:
    A = mixture(0.02, 0.0, 0.018) - band(520, 70, 0.02)
    result = resolved(A)
    assert grade(result, "negative-estimate", 1) is Severity.WARNING
    assert result.unconstrained[0, 1] < 0
    assert result.concentration[0, 1] == 0
    assert grade(result, "negative-estimate", 0) is Severity.NONE


def test_a_missing_component_is_called_an_unmodelled_absorber() -> None:
    result = resolved(mixture(0.02, 0.015, 0.018), [YELLOW, BLUE])
    assert grade(result, "unmodelled-absorber", 0) is Severity.WARNING
    assert result.spectrum_status().tolist() == [Status.FLAGGED]
    assert resolved(mixture(0.02, 0.0, 0.018), [YELLOW, BLUE]).severity == {}


def test_model_error_within_the_allowance_is_not_flagged_and_beyond_is() -> None:
    wave = np.cos((W - 400) / 15)
    assert grade(resolved(mixture(0.02, 0.015, 0.018, extra=0.0012 * wave)), "unmodelled-absorber") is Severity.NONE
    assert grade(resolved(mixture(0.02, 0.015, 0.018, extra=0.012 * wave)), "unmodelled-absorber") is Severity.WARNING


def test_a_collinear_pair_is_refused_and_the_third_component_stands() -> None:
    twin = Component("twin", W, 1.7 * RED.absorptivity, basis="mass", scale_relative_u=0.01)
    result = resolved(mixture(0.02, 0.015, 0.018), [YELLOW, RED, twin, BLUE])
    assert result.status.tolist() == [[Status.ACCEPTED, Status.REFUSED, Status.REFUSED, Status.ACCEPTED]]
    assert grade(result, "collinear", 1) is Severity.REFUSAL
    assert grade(result, "below-decision-limit", 1) is Severity.NONE  # nothing is said about a figure that is not given
    without = resolved(mixture(0.02, 0.015, 0.018))
    assert result.unconstrained[0, [0, 3]] == pytest.approx(without.unconstrained[0, [0, 2]], rel=1e-9)


def test_components_that_are_hard_to_tell_apart_are_flagged() -> None:
    near = Component("near", W, band(521.0, 70, 28.0), basis="mass", scale_relative_u=0.01)
    result = resolved(mixture(0.02, 0.015, 0.018), [YELLOW, RED, near, BLUE])
    assert grade(result, "collinear", 1) is Severity.WARNING
    assert grade(result, "collinear", 0) is Severity.NONE


def test_beyond_the_linear_range_is_flagged_and_far_beyond_refused() -> None:
    assert grade(resolved(mixture(0.049, 0.01, 0.01)), "beyond-linear-range") is Severity.NONE
    assert grade(resolved(mixture(0.055, 0.01, 0.01)), "beyond-linear-range") is Severity.WARNING
    far = resolved(mixture(0.11, 0.01, 0.01), absorbance_limit=5.0)
    assert far.status.tolist() == [[Status.REFUSED, Status.ACCEPTED, Status.ACCEPTED]]


def test_readings_outside_a_record_are_not_used_and_said_to_be() -> None:
    short = Component("yellow", W[W <= 600], YELLOW.absorptivity[W <= 600], basis="mass", scale_relative_u=0.01)
    result = resolved(mixture(0.02, 0.0, 0.0), [short])
    assert grade(result, "range-not-covered") is Severity.INFO
    assert result.points[0] == (W <= 600).sum()
    asked = resolved(mixture(0.02, 0.0, 0.0), [short], wavelength_range_nm=(420.0, 650.0))
    assert grade(asked, "range-not-covered") is Severity.WARNING
    nowhere = Component("far", [800.0, 810.0], [1.0, 1.0], basis="mass")
    refused = resolved(mixture(0.02, 0.0, 0.0), [nowhere])
    assert refused.spectrum_status().tolist() == [Status.REFUSED]
    assert "800 to 810" in refused.notes["range-not-covered"]


def test_a_component_that_absorbs_nowhere_in_the_range_is_refused_alone() -> None:
    result = resolved(mixture(0.02, 0.015, 0.0), [YELLOW, Component("ir", W, np.where(W > 650, 5.0, 0.0), basis="mass")])
    narrow = resolved(
        mixture(0.02, 0.0, 0.0),
        [YELLOW, Component("ir", W, np.where(W > 650, 5.0, 0.0), basis="mass")],
        wavelength_range_nm=(400.0, 600.0),
    )
    assert result.status[0, 1] != Status.REFUSED
    assert narrow.status.tolist() == [[Status.ACCEPTED, Status.REFUSED]]
    assert grade(narrow, "range-not-covered", 1) is Severity.REFUSAL


def test_records_under_different_conditions_are_flagged_but_not_the_forms_of_one_analyte() -> None:
    def at(ph: float, analyte: str | None) -> list[Component]:
        return [
            Component(
                c.name,
                W,
                c.absorptivity,
                basis="mass",
                scale_relative_u=0.01,
                analyte=analyte,
                conditions=Conditions("water", value),
            )
            for c, value in ((YELLOW, 7.0), (BLUE, ph))
        ]

    assert grade(resolved(mixture(0.02, 0, 0.018), at(4.0, None)), "conditions-differ") is Severity.WARNING
    assert grade(resolved(mixture(0.02, 0, 0.018), at(7.2, None)), "conditions-differ") is Severity.NONE
    assert grade(resolved(mixture(0.02, 0, 0.018), at(4.0, "indicator")), "conditions-differ") is Severity.NONE


def test_an_absent_component_is_below_its_decision_limit() -> None:
    result = resolved(mixture(0.02, 0.0, 0.018))
    assert grade(result, "below-decision-limit", 1) is Severity.INFO
    assert grade(result, "below-decision-limit", 0) is Severity.NONE
    assert result.spectrum_status().tolist() == [Status.ACCEPTED]
    assert result.low[0, 1] == 0 < result.high[0, 1] < result.detection_limit[0, 1] * 2


def test_a_target_that_is_not_met_is_flagged() -> None:
    assert grade(resolved(mixture(0.02, 0.015, 0.018), target_relative_u=0.001), "target-not-met") is Severity.WARNING
    assert grade(resolved(mixture(0.02, 0.015, 0.018), target_relative_u=0.05), "target-not-met") is Severity.NONE


def test_more_unknowns_than_readings_are_refused_and_as_many_are_worked_out() -> None:
    A = mixture(0.02, 0.015, 0.018)
    refused = resolved(A, wavelengths_nm=(440.0, 520.0, 620.0))  # three components and an offset
    assert grade(refused, "too-few-points") is Severity.REFUSAL
    equal = resolved(A, wavelengths_nm=(440.0, 520.0, 620.0), background=())
    assert equal.unconstrained[0] == pytest.approx([0.02, 0.015, 0.018], rel=0.01)
    assert grade(equal, "too-few-points") is Severity.INFO


def test_an_axis_coarser_than_the_bands_is_noticed() -> None:
    coarse = resolved(mixture(0.02, 0.015, 0.018), wavelengths_nm=tuple(W[::20].tolist()))
    assert grade(coarse, "too-few-points", 0) is Severity.INFO
    assert grade(resolved(mixture(0.02, 0.015, 0.018), wavelengths_nm=tuple(W[::5].tolist())), "too-few-points", 0) is Severity.NONE


def test_a_fitted_shift_finds_the_shift() -> None:
    moved = [c * np.interp(W - 1.0, W, dye.absorptivity) for c, dye in zip((0.02, 0.015, 0.018), TRIO, strict=True)]
    A = sum(moved) + 0.0002 * np.random.default_rng(1).standard_normal(W.size)
    with_shift = resolved(np.asarray(A), background=("offset", "shift"))
    assert with_shift.background == ("offset", "shift")
    assert with_shift.background_value[0, 1] == pytest.approx(-1.0, abs=0.05)
    without = resolved(np.asarray(A))
    truth = np.array([0.02, 0.015, 0.018])
    assert np.abs(with_shift.unconstrained[0] / truth - 1).max() < np.abs(without.unconstrained[0] / truth - 1).max() / 3
    assert with_shift.relative_per_nm[0] == pytest.approx([0, 0, 0], abs=1e-6)


def test_a_blank_with_every_background_term_is_not_a_crash() -> None:
    rng = np.random.default_rng(2)
    result = resolved(0.0004 * rng.standard_normal((3, W.size)), background=("offset", "slope", "scatter", "shift"))
    assert np.isfinite(result.u).all()
    assert (result.spectrum_status() != Status.REFUSED).all()


def test_everything_saturated_is_refused() -> None:
    result = resolved(np.full(W.size, 3.5))
    assert result.spectrum_status().tolist() == [Status.REFUSED]


def test_the_stated_change_per_nm_is_what_a_shift_does() -> None:
    A = np.asarray(0.02 * YELLOW.absorptivity + 0.015 * RED.absorptivity + 0.018 * BLUE.absorptivity)
    slope = np.gradient(A, W)
    still, moved = resolved(A), resolved(A + 0.01 * slope)
    change = (moved.unconstrained[0] / still.unconstrained[0] - 1) / 0.01
    assert still.relative_per_nm[0] == pytest.approx(change, rel=0.02, abs=5e-5)
    assert np.abs(still.relative_per_nm[0]).max() > 1e-3


def test_correlated_and_large_residuals_raise_the_uncertainty() -> None:
    rng = np.random.default_rng(3)
    A = np.asarray(0.02 * YELLOW.absorptivity + 0.015 * RED.absorptivity + 0.018 * BLUE.absorptivity)
    white = 0.0005 * rng.standard_normal(W.size)
    smooth = np.convolve(rng.standard_normal(W.size + 20), np.ones(21), mode="valid")
    smooth *= 0.0005 / smooth.std()
    as_declared, correlated, larger = resolved(A + white), resolved(A + smooth), resolved(A + 4 * white)
    assert correlated.effective_points[0] < 0.4 * correlated.points[0]
    assert as_declared.effective_points[0] > 0.7 * as_declared.points[0]
    assert correlated.budget[0, 0, 0] > 1.4 * as_declared.budget[0, 0, 0]
    assert larger.budget[0, 0, 0] > 2.0 * as_declared.budget[0, 0, 0]


def test_uncertainties_of_path_and_dilution_are_common_to_the_components() -> None:
    A = mixture(0.02, 0.015, 0.018)
    batch = SpectrumBatch(["a"], W, A[None], path_length_cm=0.5, path_length_u_cm=0.01, dilution_factor=10, dilution_factor_u=0.1)
    result = resolve(batch, TRIO)
    c = result.unconstrained[0]
    assert c == pytest.approx(np.array([0.02, 0.015, 0.018]) * 20, rel=0.01)
    assert result.budget[0, :, 3] == pytest.approx(0.02 * c, rel=1e-9)
    assert result.budget[0, :, 4] == pytest.approx(0.01 * c, rel=1e-9)
    plain = resolve(SpectrumBatch(["a"], W, A[None], path_length_cm=0.5, dilution_factor=10), TRIO)
    common = result.covariance[0] - plain.covariance[0]
    assert common == pytest.approx(np.outer(c, c) * (0.02**2 + 0.01**2), rel=1e-6)


def test_stated_reading_uncertainties_replace_the_noise_model() -> None:
    A = mixture(0.02, 0.015, 0.018)
    one = resolve(SpectrumBatch(["a"], W, A[None], absorbance_u=np.full((1, W.size), 0.004)), TRIO)
    two = resolve(SpectrumBatch(["a"], W, A[None], absorbance_u=np.full((1, W.size), 0.002)), TRIO)
    assert one.budget[0, :, 0] == pytest.approx(2 * two.budget[0, :, 0], rel=0.05)
    ignored = A.copy()
    ignored[:40] += 0.3
    u = np.full((1, W.size), 0.0005)
    u[0, :40] = 10.0
    assert resolve(SpectrumBatch(["a"], W, ignored[None], absorbance_u=u), TRIO).unconstrained[0, 2] == pytest.approx(
        0.018, rel=0.02
    )


def test_the_decision_limit_leaves_out_what_the_component_itself_brings() -> None:
    """It asks what would be seen were the component absent: its own share of a shift of the axis is then not there."""
    from tinctor.noise import NoiseModel

    cut = Component("cut", W, band(405, 80, 30.0), basis="mass", scale_relative_u=0.01)  # at the end of the axis: a shift shows
    A = 0.02 * cut.absorptivity + 0.0004 * np.random.default_rng(1).standard_normal(W.size)
    result = resolved(A, [cut], noise=NoiseModel(wavelength_nm=0.5))
    noise_u, wavelength_u = result.budget[0, 0, 0], result.budget[0, 0, 5]
    assert wavelength_u > 1.5 * noise_u  # counted in, it would nearly double the limit
    assert result.decision_limit[0, 0] == pytest.approx(1.6449 * noise_u, rel=0.02)


def test_each_test_for_an_unmodelled_absorber_speaks_alone() -> None:
    """Smooth and below the declared noise: structure alone. Large and rough: chi-square alone."""
    from tinctor.noise import NoiseModel

    rough = NoiseModel(floor=0.02)
    rng = np.random.default_rng(5)
    A = np.asarray(0.02 * YELLOW.absorptivity + 0.018 * BLUE.absorptivity)
    smooth = resolved(A + 0.012 * np.cos((W - 400) / 18), [YELLOW, BLUE], noise=rough)
    assert smooth.chi_square[0] < smooth.chi_square_limit[0]
    assert smooth.structure[0] > smooth.structure_limit[0]
    assert grade(smooth, "unmodelled-absorber") is not Severity.NONE
    jagged = resolved(A + 0.02 * rng.standard_normal(W.size), [YELLOW, BLUE])
    assert jagged.chi_square[0] > jagged.chi_square_limit[0]
    assert jagged.structure[0] < jagged.structure_limit[0]
    assert grade(jagged, "unmodelled-absorber") is not Severity.NONE


def test_a_finer_axis_brings_no_more_knowledge_of_the_library() -> None:
    """Errors of a record tabulated every 4 nm are shared by the readings between: reading every 1 nm does not average them out."""
    coarse, fine = np.arange(400.0, 701.0, 4.0), np.arange(400.0, 701.0, 1.0)

    def shape_u(axis: np.ndarray) -> float:
        e = 30 * np.exp(-0.5 * ((coarse - 520) / 40) ** 2)
        dye = Component("dye", coarse, e, basis="mass", absorptivity_u=np.full(coarse.size, 0.3), scale_relative_u=0.01)
        A = 0.02 * 30 * np.exp(-0.5 * ((axis - 520) / 40) ** 2)
        return float(resolve(SpectrumBatch(["a"], axis, A[None]), [dye]).budget[0, 0, 2])

    assert shape_u(fine) == pytest.approx(shape_u(coarse), rel=0.15)
