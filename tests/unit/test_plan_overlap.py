"""Verdicts, groups, conflicts, prices, crossings and windows on spectra whose answer is known by construction."""

from __future__ import annotations

import numpy as np
import pytest

from tinctor import (
    Component,
    Conditions,
    InputError,
    NoiseModel,
    ResolveSettings,
    clear_windows,
    crossings,
    load_collection,
    overlap,
    planned_sample,
)
from tinctor.plan.overlap import net_analyte_signal

W = np.arange(400.0, 701.0)


def dye(name: str, at: float, width: float = 25.0, height: float = 30.0, **more: object) -> Component:
    e = height * np.exp(-0.5 * ((W - at) / width) ** 2)
    return Component(name, W, e, basis="mass", **{"scale_relative_u": 0.005, **more})  # type: ignore[arg-type]


YELLOW, RED, BLUE = dye("yellow", 440.0), dye("red", 520.0), dye("blue", 610.0)
TWIN = Component("twin", W, 1.04 * RED.absorptivity, basis="mass", scale_relative_u=0.005)
GREEN = Component("green", W, 0.5 * YELLOW.absorptivity + 0.5 * BLUE.absorptivity, basis="mass", scale_relative_u=0.005)


def words(*dyes: Component, **more: object) -> dict[str, str]:
    answer = overlap(planned_sample(dyes, **more))  # type: ignore[arg-type]
    return {name: verdict.word for name, verdict in zip(answer.sample.names, answer.verdicts, strict=True)}


def test_three_dyes_far_apart_are_separable() -> None:
    answer = overlap(planned_sample([YELLOW, RED, BLUE]))
    assert {v.word for v in answer.verdicts} == {"separable"}
    assert answer.groups == ()
    assert answer.conflicts == ()
    assert answer.left_out == ()
    assert answer.relative_u.max() < 0.006


def test_two_dyes_of_one_shape_are_a_group_whose_sum_is_known() -> None:
    answer = overlap(planned_sample([YELLOW, RED, TWIN, BLUE], {"yellow": 0.01, "red": 0.01, "twin": 0.01, "blue": 0.01}))
    assert [v.word for v in answer.verdicts] == ["separable", "inseparable", "inseparable", "separable"]
    (group,) = answer.groups
    assert group.places == (1, 2)
    assert group.relative_u < 0.006
    # by hand: the mean spectrum is 1.02 times red; red alone reads 1 / 1.02, twin alone 1.04 / 1.02
    assert group.response == pytest.approx([1 / 1.02, 1.04 / 1.02], rel=1e-9)
    assert group.proportion_error == pytest.approx(0.02 / 1.02, rel=1e-6)
    assert answer.conflicts == ((1, 2),)
    assert answer.pairs[0].places == (1, 2)
    assert answer.pairs[0].cosine == pytest.approx(1.0)
    assert answer.pairs[0].selectivity == pytest.approx(0.0, abs=1e-6)
    without = {part.place: {v.word for v in part.verdicts} for part in answer.left_out}
    assert without[1] == without[2] == {"separable"}
    assert "inseparable" in without[0]
    assert "inseparable" in without[3]


def test_a_mixture_of_two_others_names_all_three_and_no_pair() -> None:
    answer = overlap(planned_sample([YELLOW, GREEN, BLUE, RED]))
    assert [v.word for v in answer.verdicts] == ["inseparable"] * 3 + ["separable"]
    assert answer.conflicts == ((0, 1, 2),)
    assert all(pair.selectivity > 0.3 for pair in answer.pairs)
    (group,) = answer.groups
    assert group.places == (0, 1, 2)
    assert group.response[1] == pytest.approx(1.0)  # green has the mean spectrum itself
    assert 0.01 < group.proportion_error < 0.2  # yellow alone is not the mean of yellow and blue
    uneven = Component("green", W, 2.0 * GREEN.absorptivity, basis="mass", scale_relative_u=0.005)
    assert overlap(planned_sample([YELLOW, uneven, BLUE])).groups[0].proportion_error > 0.2


def test_a_target_turns_the_answer_into_yes_or_no() -> None:
    def met(target: float) -> list[bool | None]:
        return [
            v.target_met for v in overlap(planned_sample([RED, BLUE], None, ResolveSettings(target_relative_u=target))).verdicts
        ]

    assert met(0.02) == [True, True]
    assert met(0.004) == [False, False]
    assert [v.target_met for v in overlap(planned_sample([RED, BLUE])).verdicts] == [None, None]
    missed = overlap(planned_sample([RED, BLUE], None, ResolveSettings(target_relative_u=0.004))).verdicts[0]
    assert missed.word == "marginal"  # the library's scale is in the way, not the overlap
    assert "library-scale" in missed.reason
    close = dye("near-red", 522.0)
    verdict = overlap(planned_sample([RED, close], None, ResolveSettings(target_relative_u=0.01))).verdicts[0]
    assert verdict.word == "inseparable"
    assert "near-red" in verdict.reason


def test_a_trace_beside_much_is_not_detected() -> None:
    verdicts = overlap(planned_sample([RED, BLUE], {"red": 0.03, "blue": 1e-6})).verdicts
    assert verdicts[1].word == "inseparable"
    assert "decision limit" in verdicts[1].reason
    barely = overlap(planned_sample([RED, BLUE], {"red": 0.03, "blue": 3e-5})).verdicts[1]
    assert barely.word == "marginal"
    assert "quantification limit" in barely.reason


def test_one_that_absorbs_nowhere_in_the_range() -> None:
    far = Component("far", W, np.where(W < 430.0, 10.0, 0.0), basis="mass")
    settings = ResolveSettings(wavelength_range_nm=(480.0, 700.0))
    answer = overlap(planned_sample([far, RED], {"far": 0.01, "red": 0.01}, settings))
    assert answer.verdicts[0].word == "inseparable"
    assert "absorbs nowhere" in answer.verdicts[0].reason
    assert answer.verdicts[1].word == "separable"
    with pytest.raises(InputError, match="'far' absorbs nowhere"):
        planned_sample([far, RED], None, settings)


def test_a_component_of_which_nothing_is_planned() -> None:
    answer = overlap(planned_sample([RED, BLUE], {"red": 0.0, "blue": 0.02}))
    assert answer.verdicts[0].word == "separable"
    assert np.isnan(answer.relative_u[0])
    assert answer.sample.expected.decision_limit[0, 0] > 0


def test_saturated_samples_say_so() -> None:
    answer = overlap(planned_sample([RED, BLUE], {"red": 90.0, "blue": 90.0}))
    assert all("readings are at or below absorbance 2" in v.reason and "dilute" in v.reason for v in answer.verdicts)


@pytest.mark.parametrize("term", ["offset", "slope", "scatter", "shift"])
def test_the_price_of_a_term_is_the_ratio_of_two_forecasts(term: str) -> None:
    near = dye("near", 540.0)
    without = planned_sample([RED, near], None, ResolveSettings(background=()))
    with_it = planned_sample([RED, near], None, ResolveSettings(background=(term,)))
    ratio = with_it.expected.u[0] / without.expected.u[0]
    assert overlap(without).price[term] == pytest.approx(ratio, rel=1e-9)
    assert overlap(with_it).paid[term] == pytest.approx(ratio, rel=1e-9)
    assert term not in overlap(with_it).price


def test_a_term_that_leaves_too_few_readings_has_no_price() -> None:
    at = ResolveSettings(background=(), wavelengths_nm=(440.0, 520.0))
    assert np.isinf(overlap(planned_sample([YELLOW, RED], None, at)).price["offset"]).all()


def test_crossings_of_two_gaussians_lie_midway() -> None:
    """Two bands of one width and height cross half way between their maxima, at exp(-d^2 / 8 s^2) of their height (by hand)."""
    (crossing,) = crossings(planned_sample([dye("a", 500.0), dye("b", 560.0)]))
    assert crossing.wavelength_nm == pytest.approx(530.0, abs=1e-6)
    assert crossing.absorptivity == pytest.approx(30 * np.exp(-(60.0**2) / (8 * 25.0**2)), rel=1e-3)
    assert not crossing.isosbestic


def test_an_isosbestic_point_is_where_total_absorptivity_does_not_depend_on_ph() -> None:
    library = load_collection("palewater-dyehouse")
    forms = [library.component(name) for name in ("quill-violet-acid", "quill-violet-alkaline")]
    points = [c for c in crossings(planned_sample(forms)) if c.isosbestic]
    assert points
    for point in points:
        at = [np.interp(point.wavelength_nm, f.wavelength_nm, f.absorptivity) for f in forms]
        assert at[0] == pytest.approx(at[1], rel=0.01)


def test_noise_where_both_fade_out_makes_no_crossing() -> None:
    rng = np.random.default_rng(2)
    noisy = [
        Component(n, W, d.absorptivity + 0.05 * rng.normal(size=W.size), basis="mass")
        for n, d in (("a", RED), ("b", dye("b", 540.0)))
    ]
    assert len(crossings(planned_sample(noisy))) == 1


def test_bases_are_compared_by_molar_mass_or_not_at_all() -> None:
    molar = Component("m", W, 250.0 * dye("m", 560.0).absorptivity, molar_mass_g_per_mol=250.0)
    (crossing,) = crossings(planned_sample([dye("a", 500.0), molar]))
    assert crossing.wavelength_nm == pytest.approx(530.0, abs=1e-3)
    unknown = Component("m", W, 250.0 * dye("m", 560.0).absorptivity)
    assert crossings(planned_sample([dye("a", 500.0), unknown])) == ()


def test_clear_windows() -> None:
    windows = clear_windows(planned_sample([YELLOW, BLUE], {"yellow": 0.02, "blue": 0.02}))
    by_place = {w.place: w for w in windows}
    assert set(by_place) == {0, 1, None}
    assert by_place[0].best_nm == 440.0
    assert by_place[1].best_nm == 610.0
    assert by_place[0].others_share <= 0.02
    # a hundred times more yellow: its flank covers what was clear for blue, from the left
    more = {w.place: w for w in clear_windows(planned_sample([YELLOW, BLUE], {"yellow": 2.0, "blue": 0.02}))}
    assert more[1].low_nm > by_place[1].low_nm + 5
    assert by_place[None].high_nm == 700.0 or by_place[None].low_nm < by_place[None].high_nm


@pytest.mark.parametrize(
    ("dyes", "planned", "more", "code"),
    [
        ([RED], None, {}, "one-component"),
        ([], None, {}, "one-component"),
        ([RED, RED], None, {}, "duplicate-component"),
        ([RED, BLUE], {"red": 0.1}, {}, "missing-concentration"),
        ([RED, BLUE], {"red": 0.1, "blue": 0.1, "pink": 0.1}, {}, "unknown-name"),
        ([RED, BLUE], {"red": -0.1, "blue": 0.1}, {}, "concentration"),
        ([RED, BLUE], {"red": float("inf"), "blue": 0.1}, {}, "concentration"),
        ([RED, BLUE], {"red": 0.0, "blue": 0.0}, {}, "concentration"),
        ([RED, BLUE], None, {"path_length_cm": 0.0}, "path-length-cm"),
        ([RED, BLUE], None, {"dilution_factor": 0.5}, "dilution-factor"),
        ([RED, BLUE], None, {"dilution_factor_u": -1.0}, "dilution-factor-u"),
        ([RED, BLUE], None, {"step_nm": 0.0}, "step"),
        ([RED, BLUE], None, {"step_nm": 1e-4}, "step"),
        ([RED, BLUE], None, {"settings": ResolveSettings(wavelength_range_nm=(750.0, 800.0))}, "no-common-range"),
        ([RED, BLUE], None, {"settings": ResolveSettings(wavelengths_nm=(450.0, 800.0, 500.0))}, "range-not-covered"),
        ([RED, BLUE], None, {"settings": ResolveSettings(wavelengths_nm=(450.0, 500.0))}, "too-few-wavelengths"),
    ],
)
def test_what_cannot_be_planned_is_refused(dyes: list[Component], planned: object, more: dict[str, object], code: str) -> None:
    with pytest.raises(InputError) as caught:
        planned_sample(dyes, planned, **more)  # type: ignore[arg-type]
    assert caught.value.faults[0].code == code


def test_readings_are_those_of_the_coarsest_record_or_evenly_spaced() -> None:
    coarse = Component("coarse", W[::4], RED.absorptivity[::4], basis="mass")
    assert np.diff(planned_sample([coarse, BLUE]).wavelength_nm).tolist() == [4.0] * 75
    assert planned_sample([coarse, BLUE], step_nm=2.5).wavelength_nm.tolist() == np.arange(400.0, 700.1, 2.5).tolist()
    cut = planned_sample([coarse, BLUE], None, ResolveSettings(wavelength_range_nm=(380.0, 500.0)))
    assert cut.wavelength_nm[[0, -1]].tolist() == [400.0, 500.0]
    assert "nothing is extrapolated" in cut.notes[0]


def test_reading_more_finely_than_noise_is_correlated_brings_nothing() -> None:
    fine, coarse = (
        planned_sample([RED, BLUE], step_nm=step, noise_correlation_nm=10.0).expected.budget[0, :, 0] for step in (1.0, 10.0)
    )
    assert fine == pytest.approx(coarse, rel=0.05)
    independent = planned_sample([RED, BLUE], step_nm=1.0).expected.budget[0, :, 0]
    assert fine == pytest.approx(np.sqrt(10.0) * independent, rel=1e-9)


def test_conditions_do_not_change_the_numbers() -> None:
    other = Component("blue", W, BLUE.absorptivity, basis="mass", scale_relative_u=0.005, conditions=Conditions(ph=9.0))
    assert words(RED, other) == words(RED, BLUE)


def test_one_that_the_background_imitates_is_a_conflict_by_itself() -> None:
    flat = Component("flat", W, np.full(W.size, 10.0), basis="mass")
    answer = overlap(planned_sample([RED, flat]))
    assert [v.word for v in answer.verdicts] == ["separable", "inseparable"]
    assert answer.conflicts == ((1,),)
    assert "'offset'" in answer.verdicts[1].reason
    assert answer.groups == ()


def test_nothing_is_asked_of_a_component_of_which_nothing_is_planned() -> None:
    settings = ResolveSettings(target_relative_u=0.05)
    answer = overlap(planned_sample([RED, TWIN, BLUE], {"red": 0.01, "twin": 0.0, "blue": 0.01}, settings))
    assert [v.target_met for v in answer.verdicts] == [False, None, True]


def test_a_copy_makes_the_condition_number_infinite() -> None:
    assert np.isinf(overlap(planned_sample([RED, TWIN])).condition_number)
    assert overlap(planned_sample([RED, BLUE])).condition_number < 5


def test_the_sum_of_a_group_at_few_wavelengths_has_the_flanks_of_its_records() -> None:
    """The sum's share of a wavelength error comes from the records, not from differences of readings 30 nm apart."""
    at = ResolveSettings(background=(), wavelengths_nm=(490.0, 520.0, 550.0, 610.0))
    (group,) = overlap(planned_sample([RED, TWIN, BLUE], {"red": 0.01, "twin": 0.01, "blue": 0.01}, at)).groups
    alone = planned_sample([RED, BLUE], {"red": 0.0202, "blue": 0.01}, at)
    expected = np.sqrt(float(alone.expected.u[0, 0] / 0.0202) ** 2 - 0.005**2 + 2 * 0.0025**2)
    assert group.relative_u == pytest.approx(expected, rel=0.02)


def test_an_uncertain_record_is_not_blamed_on_overlap() -> None:
    rough = [dye("a", 450.0, scale_relative_u=0.15), dye("b", 560.0, scale_relative_u=0.15)]
    answer = overlap(planned_sample([*rough, BLUE]))
    assert {v.word for v in answer.verdicts} == {"separable"}
    assert "mostly library-scale" in answer.verdicts[0].reason
    assert np.isfinite(answer.sample.expected.quantification_limit).all()


def test_sensitivity_is_per_unit_of_the_original_sample() -> None:
    """Ten times more concentrated in the bath, half the path, diluted fifty times: a hundred times less absorbance for a unit."""
    plain = overlap(planned_sample([RED, BLUE], {"red": 0.01, "blue": 0.01}))
    bath = overlap(planned_sample([RED, BLUE], {"red": 1.0, "blue": 1.0}, path_length_cm=0.5, dilution_factor=50.0))
    assert bath.sensitivity == pytest.approx(plain.sensitivity / 100.0, rel=1e-12)
    assert bath.selectivity == pytest.approx(plain.selectivity, rel=1e-12)


def test_a_pair_has_the_smaller_of_its_selectivities_with_the_background() -> None:
    wide = dye("wide", 550.0, width=90.0)
    (pair,) = overlap(planned_sample([RED, wide])).pairs
    both = net_analyte_signal(np.column_stack([RED.absorptivity, wide.absorptivity, np.ones(W.size)]))[1][:2]
    assert both[0] > 1.3 * both[1]
    assert pair.selectivity == pytest.approx(both.min(), rel=1e-9)


def test_a_sum_is_resolved_with_the_planned_proportions() -> None:
    (group,) = overlap(planned_sample([YELLOW, RED, TWIN], {"yellow": 0.01, "red": 0.03, "twin": 0.01})).groups
    assert group.response == pytest.approx([1 / 1.01, 1.04 / 1.01], rel=1e-9)  # three of red to one of twin, by hand


def test_what_the_resolver_would_flag_is_marginal_however_precise() -> None:
    close = dye("close", 520.6)
    noise = NoiseModel(1e-6, 1e-7, 0.0)
    answer = overlap(planned_sample([RED, close], {"red": 0.02, "close": 0.02}, ResolveSettings(background=(), noise=noise)))
    selectivity = float(answer.sample.expected.selectivity[0, 0])
    assert 1 / 100 < selectivity < 1 / 30
    assert answer.relative_u.max() < 0.02
    assert [v.word for v in answer.verdicts] == ["marginal", "marginal"]
    assert "take all but" in answer.verdicts[0].reason


def test_too_strong_a_sample_makes_no_group_of_what_is_merely_near() -> None:
    near = dye("near", 524.0)
    weak = overlap(planned_sample([RED, near]))
    assert {v.word for v in weak.verdicts} == {"separable"}
    narrow = ResolveSettings(wavelength_range_nm=(490.0, 560.0))
    strong = overlap(planned_sample([RED, near], {"red": 500.0, "near": 500.0}, narrow))
    assert {v.word for v in strong.verdicts} == {"inseparable"}
    assert strong.groups == ()
