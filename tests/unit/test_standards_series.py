"""Series of standards: what is refused, averaged, marked, left out; one standard, two, saturated ones. Invented numbers."""

from __future__ import annotations

import numpy as np
import pytest

from tinctor.errors import InputError
from tinctor.noise import NoiseModel
from tinctor.spectrum import Spectrum
from tinctor.standards.characterise import Characterisation, characterise
from tinctor.standards.series import Standard, series_of
from tinctor.standards.settings import StandardsSettings

W = np.linspace(450.0, 650.0, 101)
E = 40.0 * np.exp(-0.5 * ((W - 550.0) / 30.0) ** 2)
NOISE = NoiseModel(0.0005, 0.0001, 0.0)


def standard(name: str, c: float, *, factor: float = 1.0, seed: int = 0, u: float | None = None, **kinds: object) -> Standard:
    rng = np.random.default_rng([seed, round(1e6 * c)])
    A = E * c * factor + 0.0005 * rng.normal(size=W.size)
    return Standard(Spectrum(name, W, A), c, u, **kinds)  # type: ignore[arg-type]


def plain(count: int = 6, **changes: float) -> list[Standard]:
    """Standards of 4 to 20 mg/L; changes multiply the absorbance of one by name."""
    return [standard(f"s{k}", c, factor=changes.get(f"s{k}", 1.0)) for k, c in enumerate(np.linspace(0.004, 0.02, count))]


def codes(result: Characterisation) -> list[str]:
    return [n.code for n in result.notes]


def fault(make: object) -> str:
    assert callable(make)
    with pytest.raises(InputError) as caught:
        make()
    return caught.value.faults[0].code


def test_what_cannot_be_a_series_is_refused() -> None:
    a = standard("a", 0.01)
    assert fault(lambda: Standard(a.spectrum, 0.0)) == "concentration"
    assert fault(lambda: Standard(a.spectrum, -1.0)) == "concentration"
    assert fault(lambda: Standard(a.spectrum, float("nan"))) == "concentration"
    assert fault(lambda: Standard(a.spectrum, 0.01, -0.1)) == "concentration-u"
    assert fault(lambda: Standard(Spectrum("a", W, E / 100, dilution_factor=2.0), 0.01)) == "diluted"
    assert fault(lambda: series_of([])) == "no-standards"
    assert fault(lambda: series_of([a, standard("a", 0.02)])) == "duplicate-id"
    assert fault(lambda: series_of([a], [a.spectrum])) == "duplicate-id"
    assert fault(lambda: series_of([a, Standard(Spectrum("b", W + 1, E / 100), 0.02)])) == "axes-differ"
    assert fault(lambda: series_of([a], [Spectrum("blank", W[1:], E[1:] / 100)])) == "axes-differ"
    assert fault(lambda: series_of([a, standard("b", 0.01, replicate_of="c")])) == "replicate"
    assert fault(lambda: series_of([a, standard("b", 0.02, replicate_of="a")])) == "replicate"


def test_settings_that_cannot_be_are_refused_together() -> None:
    with pytest.raises(InputError) as caught:
        StandardsSettings(intercept="free", outliers="hide", significance=0.9, stock_relative_u=-1.0)  # type: ignore[arg-type]
    assert [f.path for f in caught.value.faults] == [".intercept", ".outliers", ".significance", ".stock_relative_u"]


def test_repeat_scans_are_one_preparation_and_tell_the_noise() -> None:
    scans = [standard("a", 0.01), standard("again", 0.01, seed=1, replicate_of="a"), standard("b", 0.02), standard("c", 0.015)]
    series = series_of(scans)
    assert series.ids == ("a", "c", "b")
    assert series.scans.tolist() == [2.0, 1.0, 1.0]
    np.testing.assert_allclose(series.absorbance[0], (scans[0].spectrum.absorbance + scans[1].spectrum.absorbance) / 2)
    assert series.repeat_sd == pytest.approx(0.0005, rel=0.2)
    # another preparation of the same concentration is a point of its own
    assert len(series_of([*scans, standard("a2", 0.01, seed=2)])) == 4


def test_order_of_the_standards_does_not_matter() -> None:
    forth, back = (characterise(series_of(scans)) for scans in (plain(), plain()[::-1]))
    np.testing.assert_array_equal(forth.absorptivity, back.absorptivity)


@pytest.mark.parametrize("scale", [1e-6, 1e6])
def test_units_do_not_matter(scale: float) -> None:
    one = characterise(series_of([*plain(5), standard("x", 0.02, u=None, seed=4)]))
    scans = [Standard(s.spectrum, s.concentration * scale) for s in [*plain(5), standard("x", 0.02, seed=4)]]
    other = characterise(series_of(scans))
    np.testing.assert_allclose(other.absorptivity * scale, one.absorptivity, rtol=1e-11)
    assert other.tests[0].f == pytest.approx(one.tests[0].f, rel=1e-8)
    assert other.spread.series_relative_u == pytest.approx(one.spread.series_relative_u, rel=1e-8)
    assert other.linear_to == pytest.approx((one.linear_to or 0) * scale, rel=1e-12)


def test_a_plain_series_gives_its_absorptivity_and_range() -> None:
    result = characterise(series_of(plain()), StandardsSettings(stock_relative_u=0.003))
    np.testing.assert_allclose(result.absorptivity, E, atol=0.05)
    assert result.linear_to == 0.02
    assert codes(result) == ["dilution-not-stated"]
    assert result.shape.agree
    assert not result.intercept.fitted
    # nobody stated the dilution: 0.3 % a standard is taken for it
    np.testing.assert_allclose(result.points.amount_u, 0.003 * result.points.amount)
    assert 0.003 < result.spread.common_relative_u < 0.005


def test_one_standard_says_what_it_cannot_show() -> None:
    result = characterise(series_of([standard("a", 0.01)]))
    assert result.linear_to is None
    assert result.spread.series_relative_u is None
    assert result.spread.common_relative_u is None
    assert np.isnan(result.lines.slope_u).all()
    assert {"single-standard", "stock-not-stated", "dilution-not-stated"} <= set(codes(result))
    declared = characterise(series_of([standard("a", 0.01, u=0.0001)]), StandardsSettings(stock_relative_u=0.004))
    assert declared.spread.common_relative_u == pytest.approx(np.sqrt(0.004**2 + 0.01**2 + 0.0035**2), rel=0.01)


def test_two_standards_cannot_be_tested() -> None:
    result = characterise(series_of(plain(2)))
    assert "linearity-not-tested" in codes(result)
    assert result.linear_to is None


def test_a_bad_standard_is_named_and_left_out_only_by_rule_or_word() -> None:
    scans = plain(9, s4=1.06)
    marked = characterise(series_of(scans))
    assert [m.id for m in marked.marked] == ["s4"]
    assert not marked.marked[0].left_out
    assert "s4" in marked.points.ids
    assert "standard-off-the-curve" in codes(marked)
    by_rule = characterise(series_of(scans), StandardsSettings(outliers="leave-out"))
    assert [d.id for d in by_rule.dropped] == ["s4"]
    assert by_rule.marked[0].left_out
    by_word = characterise(series_of(scans), StandardsSettings(leave_out=("s4",)))
    assert [d.id for d in by_word.dropped] == ["s4"]
    np.testing.assert_allclose(by_word.absorptivity, E, atol=0.05)
    assert abs(marked.absorptivity.max() - 40) > 5 * abs(by_rule.absorptivity.max() - 40)
    with pytest.raises(InputError, match="no preparation is called 'zz'"):
        characterise(series_of(scans), StandardsSettings(leave_out=("zz",)))
    with pytest.raises(InputError, match="nothing remains"):
        characterise(series_of(scans[:1]), StandardsSettings(leave_out=("s0",)))


def test_a_bent_line_is_shortened() -> None:
    result = characterise(series_of(plain(8, s7=0.93)))
    assert result.linear_to == pytest.approx(0.02 - 0.016 / 7)
    assert [d.id for d in result.dropped] == ["s7"]
    assert "linear-range-shortened" in codes(result)
    accepted = characterise(series_of(plain(8, s7=0.93)), StandardsSettings(allowed_nonlinearity=0.1))
    assert accepted.linear_to == 0.02


def test_an_offset_is_found_and_a_blank_takes_it_off() -> None:
    shifted = [Standard(Spectrum(s.id, W, s.spectrum.absorbance + 0.03), s.concentration) for s in plain()]
    tested = characterise(series_of(shifted))
    assert tested.intercept.fitted
    assert "intercept" in codes(tested)
    np.testing.assert_allclose(tested.lines.intercept, 0.03, atol=0.002)
    forced = characterise(series_of(shifted), StandardsSettings(intercept="zero"))
    assert forced.absorptivity.max() > 1.02 * E.max()  # negative control
    blank = Spectrum("blank", W, np.full(W.size, 0.03))
    blanked = characterise(series_of(shifted, [blank]), StandardsSettings(intercept="zero"))
    np.testing.assert_allclose(blanked.absorptivity, E, atol=0.06)
    fitted = characterise(series_of(shifted, [blank]), StandardsSettings(intercept="fitted"))
    np.testing.assert_allclose(fitted.lines.intercept, 0.03, atol=0.002)
    assert fitted.points.ids[0] == "blank 1"


def test_saturated_readings_are_not_used_and_saturated_standards_are_left_out() -> None:
    scans = [*plain(5), standard("strong", 0.055), standard("far", 0.2)]
    result = characterise(series_of(scans))
    assert "far" in [d.id for d in result.dropped]
    assert "saturated" in codes(result)
    row = result.points.ids.index("strong")
    assert 0 < (~result.points.used[row]).sum() < W.size / 2
    np.testing.assert_allclose(result.absorptivity, E, atol=0.06)
    with pytest.raises(InputError, match="every reading of every standard"):
        characterise(series_of([Standard(Spectrum("x", W, E * 0 + 3), 0.01)]))


def test_scatter_beyond_what_is_declared_enlarges_the_uncertainty() -> None:
    factors = {f"s{k}": 1 + 0.02 * (-1) ** k for k in range(8)}
    scans = [Standard(s.spectrum, s.concentration, 0.001 * s.concentration) for s in plain(8, **factors)]
    result = characterise(series_of(scans), StandardsSettings(stock_relative_u=0.001, significance=0.01))
    assert result.spread.series_basis == "declared, enlarged"
    assert "scatter-exceeds-declared" in codes(result)
    sound = [Standard(s.spectrum, s.concentration, 0.001 * s.concentration) for s in plain(8)]
    assert characterise(series_of(sound)).spread.series_basis == "declared"


def test_a_change_of_shape_is_placed_in_wavelength_and_concentration() -> None:
    extra = 0.03 * np.exp(-0.5 * ((W - 500.0) / 12.0) ** 2)
    scans = plain(6)
    scans[-1] = Standard(Spectrum("s5", W, scans[-1].spectrum.absorbance + extra), scans[-1].concentration)
    result = characterise(series_of(scans))
    assert not result.shape.agree
    worst = max(result.shape.departures, key=lambda d: abs(d.absorbance))
    assert worst.id == "s5"
    assert abs(worst.wavelength_nm - 500) < 6
    assert result.linear_to == pytest.approx(0.02 - 0.016 / 5)


def test_path_lengths_count() -> None:
    scans = [
        Standard(Spectrum(f"s{k}", W, E * c * b, path_length_cm=b), c)
        for k, (c, b) in enumerate([(0.01, 1), (0.1, 0.1), (0.05, 0.5), (0.02, 1)])
    ]
    np.testing.assert_allclose(characterise(series_of(scans)).absorptivity, E, rtol=1e-9)


def test_one_wavelength_is_enough() -> None:
    scans = [Standard(Spectrum(f"s{k}", [550.0], [0.1 * k + 0.001 * (-1) ** k]), 0.01 * k) for k in range(1, 6)]
    assert characterise(series_of(scans)).absorptivity == pytest.approx([10.0], rel=0.01)


def test_path_counts_in_the_uncertainty_of_the_amount() -> None:
    scan = Spectrum("a", W, E * 0.005, path_length_cm=0.5)
    assert series_of([Standard(scan, 0.01, 0.0002)]).amount_u.tolist() == [0.0001]


def test_enlarged_scatter_is_that_of_the_standards_and_wider_for_few() -> None:
    """Declared 0.1 %, scattering by 2 %: Birge's ratio is near 20, and Student's factor for 7 degrees of freedom 1.21."""
    factors = {f"s{k}": 1 + 0.02 * (-1) ** (k // 2) for k in range(8)}
    scans = [Standard(s.spectrum, s.concentration, 0.001 * s.concentration) for s in plain(8, **factors)]
    settings = StandardsSettings(intercept="zero", model_error_absorbance=0.0, significance=0.0001)
    wide = characterise(series_of(scans), settings).spread.series_relative_u
    sound = [Standard(s.spectrum, s.concentration, 0.001 * s.concentration) for s in plain(8)]
    assert wide is not None
    assert wide > 15 * (characterise(series_of(sound), settings).spread.series_relative_u or 0)
    scores = characterise(series_of(scans), settings).scores
    line, slope = scores.line, float(scores.line.slope[0])
    ratio = np.sqrt((line.residual[:, 0] ** 2 / scores.variance).sum() / 7)
    declared = np.sqrt((line.share[:, 0] ** 2 * scores.variance).sum()) / slope
    assert wide == pytest.approx(declared * ratio * 2.364624 / 1.959964, rel=1e-5)


def test_few_standards_of_unstated_dilution_are_paid_for_with_students_factor() -> None:
    scans = plain(3, s0=1.03, s1=0.98, s2=1.01)
    result = characterise(series_of(scans), StandardsSettings(intercept="zero"))
    classical = float(result.scores.line.slope_u[0]) / float(result.scores.line.slope[0])
    assert result.spread.series_relative_u == pytest.approx(classical * 4.30265 / 1.959964, rel=1e-4)


def test_spectra_noisier_or_smoother_than_declared_enlarge_each_wavelength() -> None:
    rng = np.random.default_rng(1)
    quiet = characterise(series_of(plain(6))).spread.absorptivity_u
    loud, wavy = [], []
    for s in plain(6):
        noise = 0.003 * rng.normal(size=W.size)
        smooth = np.convolve(0.009 * rng.normal(size=W.size + 8), np.ones(9) / 9, mode="valid")
        loud.append(Standard(Spectrum(s.id, W, s.spectrum.absorbance + noise), s.concentration))
        wavy.append(Standard(Spectrum(s.id, W, s.spectrum.absorbance + smooth), s.concentration))
    settings = StandardsSettings(model_error_absorbance=0.01)
    noisy = characterise(series_of(loud), settings).spread.absorptivity_u
    alike = characterise(series_of(wavy), settings).spread.absorptivity_u
    assert np.median(noisy) > 3 * np.median(quiet)
    # errors of the same size that neighbours share count for more
    assert np.median(alike) > 1.5 * np.median(noisy)


def test_a_small_change_of_shape_is_within_model_error() -> None:
    """Some four times 0.3 % of 0.8 absorbance is 10 mAU: a change of 8 mAU at the maximum is let pass, and seen without that."""
    scans = plain(6)
    extra = 0.008 * np.exp(-0.5 * ((W - 550.0) / 8.0) ** 2)
    scans[-1] = Standard(Spectrum("s5", W, scans[-1].spectrum.absorbance + extra), scans[-1].concentration)
    assert characterise(series_of(scans)).shape.agree
    strict = StandardsSettings(model_error_relative=0.0)
    assert not characterise(series_of(scans), strict).shape.agree


def test_an_intercept_made_by_a_bend_goes_with_it() -> None:
    """Over all eight standards the bend makes an intercept (t = 2.0, 6 degrees of freedom); over those left there is none."""
    scans = plain(8, s4=0.985, s5=0.96, s6=0.93, s7=0.89)
    result = characterise(series_of(scans), StandardsSettings(significance=0.1))
    assert result.linear_to is not None
    assert result.linear_to < 0.018
    assert not result.intercept.fitted
    assert (result.lines.intercept == 0).all()


def test_masked_readings_beside_an_intercept_leave_exact_lines_exact() -> None:
    scans = [Standard(Spectrum(f"s{k}", W, 0.05 + c * E), c) for k, c in enumerate((0.004, 0.01, 0.02, 0.03, 0.055))]
    result = characterise(series_of(scans), StandardsSettings(intercept="fitted"))
    assert (~result.points.used).any()
    assert result.shape.agree
    assert result.linear_to == 0.055
    np.testing.assert_allclose(result.absorptivity, E, atol=1e-9)


def test_levels_that_nearly_agree_are_one() -> None:
    scans = [standard(f"s{k}", 0.01 * (1 + 1e-7 * k), seed=k) for k in range(4)]
    for intercept in ("zero", "tested"):
        result = characterise(series_of(scans), StandardsSettings(intercept=intercept))  # type: ignore[arg-type]
        assert result.linear_to is None


@pytest.mark.parametrize("concentration", [1e-150, 1e-16, 1e6, 1e150])
def test_concentrations_that_no_solution_has_are_refused(concentration: float) -> None:
    assert fault(lambda: Standard(Spectrum("a", W, E / 100), concentration)) == "concentration"
