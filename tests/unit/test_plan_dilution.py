"""Glassware and the choice of dilution and cell, by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tinctor import Component, DilutionAsked, InputError, ResolveSettings, choose_dilution, planned_sample
from tinctor.plan.dilution import on_fibre_g_per_l
from tinctor.plan.glassware import FLASK_TOLERANCE_ML, PIPETTE_TOLERANCE_ML, dilutions, volume_relative_u

W = np.arange(400.0, 701.0, 2.0)
RED, BLUE = (
    Component(name, W, 30 * np.exp(-0.5 * ((W - at) / 25.0) ** 2), basis="mass", scale_relative_u=0.005, linear_to=linear)
    for name, at, linear in (("red", 500.0, None), ("blue", 620.0, 0.05))
)


def test_factors_of_one_and_two_steps() -> None:
    assert [d.factor for d in dilutions([1.0, 10.0], [10.0, 100.0], 1)] == [1.0, 10.0, 100.0]
    two = {d.factor: d.steps for d in dilutions([1.0, 10.0], [10.0, 100.0], 2)}
    assert sorted(two) == [1.0, 10.0, 100.0, 1000.0, 10000.0]
    assert len(two[100.0]) == 1  # one step where one will do
    for factor, steps in two.items():
        assert math.prod(s.flask_ml / s.pipette_ml for s in steps) == pytest.approx(factor)


def test_nothing_is_pipetted_from_a_flask_that_is_too_small() -> None:
    (chosen,) = [d for d in dilutions([1.0, 50.0], [10.0, 100.0], 2) if d.factor == 20.0]
    assert [(s.pipette_ml, s.flask_ml) for s in chosen.steps] == [(50.0, 100.0), (1.0, 10.0)]  # not 50 mL out of a 10 mL flask


def test_uncertainty_of_a_dilution_by_hand() -> None:
    """Triangular: a / sqrt(6) for each volume; 10 mL class A pipette 0.020 mL, 100 mL flask 0.10 mL (from memory)."""
    (chosen,) = [d for d in dilutions([10.0], [100.0], 1) if d.steps]
    expected = math.hypot(0.020 / 10 / math.sqrt(6), 0.10 / 100 / math.sqrt(6))
    assert chosen.relative_u == pytest.approx(expected, rel=1e-12)
    assert volume_relative_u(15.0, PIPETTE_TOLERANCE_ML) >= volume_relative_u(20.0, PIPETTE_TOLERANCE_ML)
    assert volume_relative_u(0.1, PIPETTE_TOLERANCE_ML) > volume_relative_u(0.5, PIPETTE_TOLERANCE_ML)
    assert all(
        b > a for a, b in zip(list(FLASK_TOLERANCE_ML.values())[1:-1:2], list(FLASK_TOLERANCE_ML.values())[3::2], strict=False)
    )


def test_per_cent_on_fibre_and_liquor_ratio() -> None:
    """By hand: 2 % on 1 kg of fibre is 20 g; in 10 L that is 2 g/L."""
    assert on_fibre_g_per_l(2.0, 10.0) == 2.0
    assert on_fibre_g_per_l(0.5, 20.0) == 0.25


def test_choices_serve_and_the_best_needs_the_fewest_steps() -> None:
    answer = choose_dilution(planned_sample([RED, BLUE], {"red": 2.0, "blue": 1.5}), DilutionAsked(cells_cm=(0.2, 1.0)))
    assert answer.pair is None
    for choice in answer.choices:
        assert 0.1 <= choice.highest_absorbance <= 1.0
        # by hand: the highest reading is red's own maximum but for blue's tail
        assert choice.highest_absorbance == pytest.approx(2.0 * 30 * choice.path_length_cm / choice.dilution.factor, rel=1e-3)
        assert choice.serves.all()
    assert len(answer.choices[0].dilution.steps) == 1
    assert 0.5 <= answer.choices[0].highest_absorbance <= 0.9


def test_two_dilutions_where_no_single_one_serves() -> None:
    answer = choose_dilution(planned_sample([RED, BLUE], {"red": 20.0, "blue": 0.02}), DilutionAsked(steps=2))
    assert answer.choices == ()
    assert answer.pair is not None
    strong, weak = answer.pair
    assert strong.serves.tolist() == [True, False]
    assert weak.serves[1]
    assert weak.dilution.factor < strong.dilution.factor
    assert weak.readings_left_out > 0


def test_undiluted_is_a_choice_and_beyond_the_linear_range_is_none() -> None:
    answer = choose_dilution(planned_sample([RED, BLUE], {"red": 0.02, "blue": 0.03}))
    assert answer.choices[0].dilution.factor == 1.0
    answer = choose_dilution(planned_sample([RED, BLUE], {"red": 0.02, "blue": 0.06}), DilutionAsked(absorbance_window=(0.1, 1.9)))
    assert all(c.dilution.factor >= 1.2 for c in answer.choices)  # blue is linear to 0.05 g/L cm


def test_a_target_counts() -> None:
    planned = {"red": 2.0, "blue": 0.02}
    free = choose_dilution(planned_sample([RED, BLUE], planned))
    strict = choose_dilution(planned_sample([RED, BLUE], planned, ResolveSettings(target_relative_u=0.02)))
    assert {c.dilution.factor for c in strict.choices} < {c.dilution.factor for c in free.choices} or strict.pair is not None


@pytest.mark.parametrize(
    ("asked", "code"),
    [
        ({"cells_cm": ()}, "cell"),
        ({"cells_cm": (0.0,)}, "cell"),
        ({"absorbance_window": (1.0, 0.1)}, "absorbance-window"),
        ({"cell_relative_u": -0.1}, "cell"),
        ({"pipettes_ml": (-1.0,)}, "volume"),
        ({"flasks_ml": (float("nan"),)}, "volume"),
        ({"steps": 3}, "steps"),
        ({"pipettes_ml": (5.0,), "flasks_ml": (10.0,), "steps": 1}, "no-dilution-fits"),
    ],
)
def test_what_cannot_be_done_is_refused_with_a_way_out(asked: dict[str, object], code: str) -> None:
    with pytest.raises(InputError) as caught:
        choose_dilution(planned_sample([RED, BLUE], {"red": 2000.0, "blue": 1500.0}), DilutionAsked(**asked))  # type: ignore[arg-type]
    assert caught.value.faults[0].code == code
    if code == "no-dilution-fits":
        assert "a factor from 6e+04" in caught.value.faults[0].hint


def test_a_dilution_without_concentrations_is_refused() -> None:
    with pytest.raises(InputError, match="none is given"):
        choose_dilution(planned_sample([RED, BLUE]))


def test_one_pipette_used_twice_is_wrong_twice_in_the_same_direction() -> None:
    (twice,) = [d for d in dilutions([10.0], [100.0], 2) if len(d.steps) == 2]
    pipette, flask = 0.020 / 10 / math.sqrt(6), 0.10 / 100 / math.sqrt(6)
    assert twice.relative_u == pytest.approx(math.sqrt((2 * pipette) ** 2 + 2 * flask**2), rel=1e-12)


def test_each_of_two_serves_what_the_other_does_not() -> None:
    w = np.arange(400.0, 601.0, 5.0)
    a, b = (Component(n, w, 1e4 * np.exp(-0.5 * ((w - at) / 20.0) ** 2)) for n, at in (("a", 450.0), ("b", 520.0)))
    answer = choose_dilution(planned_sample([a, b], {"a": 1e-2, "b": 3e-6}, ResolveSettings(background=())))
    assert answer.choices == ()
    assert answer.pair is not None
    assert answer.pair[0].serves.tolist() == [True, False]
    assert answer.pair[1].serves.tolist() == [False, True]


def test_too_much_glassware_is_refused_before_it_is_combined() -> None:
    with pytest.raises(InputError, match="name fewer pipettes and flasks"):
        dilutions(np.arange(1.0, 41.0).tolist(), np.arange(50.0, 90.0).tolist(), 2)


def test_the_window_has_a_top() -> None:
    """Two dyes at one place, each below the window's top and together above it: none of the undiluted choices is in the window."""
    pair = [
        Component(n, W, 30 * np.exp(-0.5 * ((W - at) / s) ** 2), basis="mass")
        for n, at, s in (("a", 550.0, 25.0), ("b", 556.0, 45.0))
    ]
    answer = choose_dilution(planned_sample(pair, {"a": 0.025, "b": 0.025}))
    assert answer.choices
    assert all(c.highest_absorbance <= 1.0 for c in answer.choices)
    assert min(c.dilution.factor for c in answer.choices) > 1.0


def test_the_cell_s_own_uncertainty_counts() -> None:
    sample = planned_sample([RED, BLUE], {"red": 0.02, "blue": 0.02})
    plain, rough = (choose_dilution(sample, DilutionAsked(cell_relative_u=u)).choices[0].relative_u for u in (0.0, 0.03))
    assert rough == pytest.approx(np.hypot(plain, 0.03), rel=1e-6)


def test_glassware_is_not_blamed_for_a_target() -> None:
    sample = planned_sample([RED, BLUE], {"red": 2.0, "blue": 1.5}, ResolveSettings(target_relative_u=0.001))
    with pytest.raises(InputError, match=r"misses the target of 0\.1 %") as caught:
        choose_dilution(sample)
    assert caught.value.faults[0].path == ".target_relative_u"
    assert "library record" in caught.value.faults[0].hint


def test_a_rough_record_is_diluted_like_any_other() -> None:
    """A scale of 10 % is mended by no dilution, and is no reason to refuse one."""
    rough = [Component(c.name, W, c.absorptivity, basis="mass", scale_relative_u=0.1) for c in (RED, BLUE)]
    assert choose_dilution(planned_sample(rough, {"red": 2.0, "blue": 1.5})).choices


def test_a_slip_of_the_unit_is_named() -> None:
    with pytest.raises(InputError, match="no solution absorbs like that"):
        planned_sample([RED, BLUE], {"red": 1e300, "blue": 0.1})
