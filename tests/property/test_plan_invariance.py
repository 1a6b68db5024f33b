"""Before measuring: nothing depends on units, on the order of the components, or on how a spectrum is scaled."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinctor import Component, ResolveSettings, WavelengthsAsked, choose_wavelengths, overlap, planned_sample

W = np.arange(400.0, 601.0, 4.0)
CENTRES = st.lists(st.floats(420.0, 580.0), min_size=2, max_size=4).filter(
    lambda c: len(c) < 2 or min(abs(a - b) for k, a in enumerate(c) for b in c[:k]) > 12
)
BACKGROUNDS = st.lists(st.sampled_from(["offset", "slope", "scatter", "shift"]), unique=True, max_size=2)


def dyes(centres: list[float], scale: list[float]) -> tuple[list[Component], dict[str, float]]:
    """Components with absorptivities times `scale`, and concentrations divided by it: the same absorbances."""
    made = [
        Component(
            f"d{k}",
            W,
            s * (30 * np.exp(-0.5 * ((W - at) / 22.0) ** 2) + 0.5),
            absorptivity_u=s * 0.01 + 0 * W,
            scale_relative_u=0.01,
        )
        for k, (at, s) in enumerate(zip(centres, scale, strict=True))
    ]
    return made, {f"d{k}": 0.01 * (k + 1) / s for k, s in enumerate(scale)}


@settings(max_examples=40, deadline=None)
@given(CENTRES, BACKGROUNDS, st.lists(st.floats(1e-6, 1e6), min_size=4, max_size=4))
def test_scaling_changes_nothing_that_is_relative(centres: list[float], background: list[str], scale: list[float]) -> None:
    chosen = ResolveSettings(background=tuple(background))
    one = overlap(planned_sample(*dyes(centres, [1.0] * len(centres)), chosen))
    other = overlap(planned_sample(*dyes(centres, scale[: len(centres)]), chosen))
    for name in ("selectivity", "similarity", "relative_u", "condition_number"):
        assert getattr(other, name) == pytest.approx(getattr(one, name), rel=1e-6), name
    assert other.sample.expected.relative_per_nm == pytest.approx(one.sample.expected.relative_per_nm, rel=1e-6, abs=1e-12)
    assert [v.word for v in other.verdicts] == [v.word for v in one.verdicts]
    for term, price in one.price.items():
        assert other.price[term] == pytest.approx(price, rel=1e-5)
    factor = np.array(scale[: len(centres)])
    assert other.sample.expected.decision_limit[0] * factor == pytest.approx(one.sample.expected.decision_limit[0], rel=1e-6)


@settings(max_examples=30, deadline=None)
@given(CENTRES, st.randoms(use_true_random=False))
def test_the_order_of_components_changes_nothing(centres: list[float], random: object) -> None:
    order = list(range(len(centres)))
    random.shuffle(order)  # type: ignore[attr-defined]
    components, planned = dyes(centres, [1.0] * len(centres))
    one = overlap(planned_sample(components, planned))
    other = overlap(planned_sample([components[k] for k in order], planned))
    assert other.relative_u == pytest.approx(one.relative_u[order], rel=1e-9)
    assert other.selectivity == pytest.approx(one.selectivity[order], rel=1e-9)
    assert [v.word for v in other.verdicts] == [one.verdicts[k].word for k in order]


@settings(max_examples=12, deadline=None)
@given(
    CENTRES, st.lists(st.floats(1e-6, 1e6), min_size=4, max_size=4), st.sampled_from(["worst-relative-u", "determinant", "trace"])
)
def test_wavelengths_do_not_depend_on_units(centres: list[float], scale: list[float], criterion: str) -> None:
    asked = WavelengthsAsked(criterion=criterion)  # type: ignore[arg-type]
    one = choose_wavelengths(planned_sample(*dyes(centres, [1.0] * len(centres))), asked).choice
    other = choose_wavelengths(planned_sample(*dyes(centres, scale[: len(centres)])), asked).choice
    assert other.criterion == pytest.approx(one.criterion, rel=1e-6)
    if one.exact and other.exact:
        assert other.efficiency == pytest.approx(one.efficiency, rel=1e-6)
