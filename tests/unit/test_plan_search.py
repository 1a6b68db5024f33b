"""Choice of wavelengths: the search against brute force, the bound against every set, the exchange against the known optimum."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest

from tinctor import Component, InputError, NoiseModel, ResolveSettings, WavelengthsAsked, choose_wavelengths, planned_sample
from tinctor.plan import search
from tinctor.plan.relaxation import Mixture, Oracle, relax
from tinctor.plan.search import best_set
from tinctor.plan.selection import CRITERIA, Criterion, Problem, criterion_value, objectives
from tinctor.resolve.design import orthonormal_factors


def problem(
    rng: np.random.Generator, n: int, p: int, criterion: Criterion, *, offset: bool, spacing_nm: float, error_nm: float
) -> Problem:
    """A small random problem: bands of random place, width and height, weights of the resolver's kind."""
    w = np.linspace(400.0, 700.0, n) if rng.integers(2) else np.sort(rng.uniform(400.0, 700.0, n))
    E = np.column_stack([np.exp(-0.5 * ((w - rng.uniform(400, 700)) / rng.uniform(15, 60)) ** 2) + 0.02 for _ in range(p)])
    X = np.column_stack([E, np.ones(n)]) if offset else E
    A = E @ rng.uniform(0.2, 1.0, p)
    slope = np.gradient(A, w)
    sigma = np.sqrt(NoiseModel().reading_variance(A) + (0.05 * slope) ** 2)
    Q, Rinv, _ = orthonormal_factors(X / sigma[:, None])
    shifted = np.column_stack([error_nm * slope, -error_nm * slope]) / sigma[:, None] if error_nm else None
    return Problem(w, Q, Rinv[:p] / rng.uniform(0.2, 1.0, (p, 1)), criterion, spacing_nm, shifted)


def every_set(P: Problem, k: int) -> np.ndarray:
    """All allowed sets, by the definition of spacing and not by the code under test."""
    sets = np.array(list(combinations(range(P.n), k)))
    gaps = np.diff(P.wavelength_nm[sets], axis=1).min(axis=1, initial=np.inf)
    return sets[gaps >= P.spacing_nm - 1e-9]


#: Sizes of the sets asked for so far, for the start that a test puts in place of the exchange.
KS: list[int] = []


@pytest.mark.parametrize("block", range(10))
def test_branch_and_bound_is_brute_force(block: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """500 random problems, all criteria, with and without spacing and wavelength error; nodes are small: it must branch."""
    monkeypatch.setattr(search, "FEW_SETS", 12)
    monkeypatch.setattr(search, "ALL_SETS", 0)
    monkeypatch.setattr(search, "BIASED_SHARE", 1)
    alone = bool(block % 2)
    if alone:  # a poor start and no sets met on the way: the tree by itself, so that exchange cannot hide what it loses
        monkeypatch.setattr(search, "_exchanged", lambda problem, chosen: every_set(problem, KS[-1])[-1])
        monkeypatch.setattr(search, "relax", lambda *rest: relax(*rest)[:0])
    rng = np.random.default_rng(100 + block)
    exact, branched, spaced_out = 0, 0, 0
    for trial in range(50):
        n, p, offset = int(rng.integers(6, 13)), int(rng.integers(1, 4)), bool(rng.integers(2))
        k = int(rng.integers(p + offset, min(n - 1, p + offset + 3) + 1))
        KS.append(k)
        error_nm = 0.2 if trial % 4 == 0 and not alone else 0.0
        P = problem(
            rng, n, p, CRITERIA[trial % 3], offset=offset, spacing_nm=float(rng.choice([0.0, 25.0, 40.0])), error_nm=error_nm
        )
        found, sets = best_set(P, k, nodes=3000), every_set(P, k)
        if len(sets) == 0:
            assert found is None
            spaced_out += 1
            continue
        assert found is not None
        best = criterion_value(P, float(objectives(P, sets).min()))
        assert criterion_value(P, found.objective) == pytest.approx(best, rel=1e-9)
        assert criterion_value(P, found.bound) <= best * (1 + 1e-9)
        exact, branched = exact + found.exact, branched + (found.nodes > 1)
    assert exact + spaced_out == 50
    assert branched > 5


@pytest.mark.parametrize("criterion", CRITERIA)
def test_no_set_lies_below_the_bound(criterion: Criterion) -> None:
    rng = np.random.default_rng(7)
    for _ in range(20):
        P = problem(rng, 14, 3, criterion, offset=True, spacing_nm=float(rng.choice([0.0, 25.0])), error_nm=0.0)
        oracle, mask = Oracle(P, 5), np.ones((5, 14), dtype=bool)
        mixture = Mixture(np.zeros((0, 5), dtype=np.intp), np.zeros(0), np.full(3, 1 / 3))
        relax(P, oracle, mask, mixture, np.inf)
        assert mixture.bound <= objectives(P, every_set(P, 5)).min() + 1e-9


def test_the_best_sum_under_spacing_is_found() -> None:
    """The dynamic programme against all sets, with a mask that differs from pick to pick."""
    rng = np.random.default_rng(3)
    for _ in range(30):
        P = problem(rng, 12, 2, "trace", offset=False, spacing_nm=float(rng.choice([0.0, 30.0, 55.0])), error_nm=0.0)
        gains, mask = rng.uniform(0, 1, 12), rng.random((4, 12)) < 0.8
        sets = every_set(P, 4)
        sets = sets[mask[np.arange(4), sets].all(axis=1)]
        oracle = Oracle(P, 4)
        chosen, total = oracle.best(gains, mask)
        if len(sets) == 0:
            assert total == -np.inf
            continue
        sums = gains[sets].sum(axis=1)
        assert total == pytest.approx(sums.max())
        assert chosen.tolist() == sets[sums.argmax()].tolist()
        through = oracle.through(gains, mask)
        for t, i in ((0, 0), (1, 4), (3, 11)):
            here = sums[sets[:, t] == i]
            assert through[t, i] == (pytest.approx(here.max()) if here.size else -np.inf)


@pytest.mark.parametrize("criterion", CRITERIA)
def test_exchange_comes_within_one_per_cent(criterion: Criterion) -> None:
    """Exchange alone (no node of the tree) on problems whose optimum is known from brute force."""
    rng = np.random.default_rng(11)
    for _ in range(30):
        p, offset = int(rng.integers(2, 4)), bool(rng.integers(2))
        P = problem(
            rng, int(rng.integers(16, 26)), p, criterion, offset=offset, spacing_nm=float(rng.choice([0.0, 20.0])), error_nm=0.0
        )
        k = p + offset
        sets = every_set(P, k)
        found = best_set(P, k, nodes=0)
        assert found is not None
        best = criterion_value(P, float(objectives(P, sets).min()))
        assert criterion_value(P, found.objective) <= 1.01 * best
        worst_tenth = np.quantile(objectives(P, sets), 0.9)
        assert found.objective < worst_tenth, "negative control: a set at random would not do"


def test_the_same_request_has_the_same_answer() -> None:
    P = problem(np.random.default_rng(5), 60, 3, "worst-relative-u", offset=True, spacing_nm=8.0, error_nm=0.3)
    first, second = best_set(P, 6), best_set(P, 6)
    assert first is not None
    assert second is not None
    assert first.chosen.tolist() == second.chosen.tolist()
    assert (first.objective, first.bound, first.nodes) == (second.objective, second.bound, second.nodes)


W = np.arange(400.0, 701.0, 2.0)
DYES = [
    Component(name, W, 30 * np.exp(-0.5 * ((W - at) / 25.0) ** 2), basis="mass", scale_relative_u=0.005)
    for name, at in (("yellow", 440.0), ("red", 520.0), ("blue", 610.0))
]
PLANNED = {"yellow": 0.015, "red": 0.02, "blue": 0.018}


def test_spacing_window_and_candidates_are_kept() -> None:
    sample = planned_sample(DYES, PLANNED)
    asked = WavelengthsAsked(count=5, minimum_spacing_nm=12.0, absorbance_window=(0.05, 0.5))
    choice = choose_wavelengths(sample, asked).choice
    assert np.diff(choice.wavelength_nm).min() >= 12.0
    assert choice.sample.absorbance.min() >= 0.05
    assert choice.sample.absorbance.max() <= 0.5
    leds = (450.0, 470.0, 505.0, 525.0, 590.0, 625.0, 660.0)
    assert set(choose_wavelengths(sample, WavelengthsAsked(count=4, candidates_nm=leds)).choice.wavelength_nm) < set(leds)


def test_more_wavelengths_never_raise_the_criterion_and_all_of_them_are_the_measure() -> None:
    found = choose_wavelengths(planned_sample(DYES, PLANNED), WavelengthsAsked(count=5))
    assert [row.wavelength_nm.size for row in found.table] == list(range(4, 11))
    values = [row.criterion for row in found.table]
    assert values == sorted(values, reverse=True)
    assert [row.efficiency for row in found.table] == pytest.approx([found.everything.criterion / v for v in values])
    assert all(0 < row.efficiency < 1 for row in found.table)
    assert found.choice in found.table


def test_expected_u_is_that_of_the_full_budget() -> None:
    """Scale is in what is reported and not in the criterion."""
    choice = choose_wavelengths(planned_sample(DYES, PLANNED), WavelengthsAsked(count=4)).choice
    relative = choice.sample.expected.u[0] / choice.sample.concentration
    assert relative.min() >= 0.005
    assert choice.criterion < 0.005


def test_a_wavelength_error_moves_the_choice_off_the_flanks() -> None:
    sample = planned_sample(DYES, PLANNED, ResolveSettings(background=()))
    plain = choose_wavelengths(
        sample, WavelengthsAsked(count=3, candidates_nm=[426, 440, 454, 506, 520, 534, 596, 610, 624])
    ).choice
    asked = WavelengthsAsked(count=3, candidates_nm=[426, 440, 454, 506, 520, 534, 596, 610, 624], wavelength_error_nm=2.0)
    robust = choose_wavelengths(sample, asked).choice
    assert robust.exact
    assert robust.criterion >= plain.criterion
    assert robust.wavelength_nm.tolist() == [440.0, 520.0, 610.0]
    slope = np.abs(robust.sample.design.slope @ sample.in_cell)
    assert slope.max() < 0.006  # absorbance per nm: at the maxima; on the flanks it is above 0.008


def test_criteria_differ_and_each_is_best_by_its_own() -> None:
    sample = planned_sample(DYES, {**PLANNED, "red": 0.001})
    found = {c: choose_wavelengths(sample, WavelengthsAsked(count=5, criterion=c)).choice for c in CRITERIA}
    for criterion in CRITERIA:
        chosen = [
            choose_wavelengths(sample, WavelengthsAsked(count=5, criterion=criterion, candidates_nm=f.wavelength_nm))
            for f in found.values()
        ]
        assert min(c.choice.criterion for c in chosen) == pytest.approx(found[criterion].criterion, rel=1e-6)
    assert len({tuple(f.wavelength_nm) for f in found.values()}) > 1


@pytest.mark.parametrize(
    ("asked", "code", "words"),
    [
        ({"count": 3}, "count-too-small", "need at least 4 wavelengths, found 3"),
        ({"count": 200}, "count-too-large", "151 candidates"),
        ({"count": 5, "minimum_spacing_nm": 100.0}, "spacing-too-wide", "4 would"),
        ({"count": 5, "candidates_nm": [450, 500]}, "no-candidates", "4 wavelengths are needed"),
        ({"wavelength_error_nm": 500.0}, "wavelength-error-nm", "at most 20 nm"),
        ({"count": 5, "candidates_nm": [350, 450, 500, 550, 600]}, "range-not-covered", "found 350 nm"),
        ({"absorbance_window": (3.0, 4.0)}, "no-candidates", "only 0 of 151"),
        ({"absorbance_window": (1.0, 0.5)}, "absorbance-window", "expected [low, high]"),
        ({"criterion": "best"}, "criterion", "worst-relative-u"),
        ({"minimum_spacing_nm": -1.0}, "minimum-spacing-nm", "at least 0"),
        ({"wavelength_error_nm": float("nan")}, "wavelength-error-nm", "finite"),
    ],
)
def test_what_cannot_be_chosen_is_refused_with_a_way_out(asked: dict[str, object], code: str, words: str) -> None:
    with pytest.raises(InputError) as caught:
        choose_wavelengths(planned_sample(DYES, PLANNED), WavelengthsAsked(**asked))  # type: ignore[arg-type]
    assert caught.value.faults[0].code == code
    assert words in caught.value.faults[0].message


def test_no_wavelength_above_noise_is_refused() -> None:
    with pytest.raises(InputError, match="below the noise of a reading") as caught:
        choose_wavelengths(planned_sample(DYES, {**PLANNED, "red": 1e-6}))
    assert "'red'" in caught.value.faults[0].message
    with pytest.raises(InputError, match="below the noise of a reading"):
        planned_sample(DYES, dict.fromkeys(PLANNED, 1e-6))


def test_components_that_are_alike_cannot_be_chosen_for() -> None:
    twin = Component("twin", W, DYES[0].absorptivity * 2, basis="mass")
    with pytest.raises(InputError, match="cannot be told from the other"):
        choose_wavelengths(planned_sample([*DYES, twin]))


def test_a_component_of_which_nothing_is_planned_needs_the_determinant() -> None:
    sample = planned_sample(DYES, {**PLANNED, "red": 0.0})
    with pytest.raises(InputError, match="nothing is planned of 'red'"):
        choose_wavelengths(sample)
    assert choose_wavelengths(sample, WavelengthsAsked(criterion="determinant")).choice.exact


def test_objectives_by_definition() -> None:
    P = problem(np.random.default_rng(9), 12, 3, "trace", offset=True, spacing_nm=0.0, error_nm=0.5)
    chosen = np.array([0, 3, 5, 8, 11])
    Z, r = P.Z[chosen], P.shifted
    assert r is not None
    C = P.T @ np.linalg.inv(Z.T @ Z) @ P.T.T
    bias = P.T @ np.linalg.inv(Z.T @ Z) @ Z.T @ r[chosen]
    plain = replace(P, shifted=None)
    assert objectives(plain, chosen[None])[0] == pytest.approx(np.trace(C) / 3)
    assert objectives(replace(plain, criterion="determinant"), chosen[None])[0] == pytest.approx(np.log(np.linalg.det(C)))
    assert objectives(replace(plain, criterion="worst-relative-u"), chosen[None])[0] == pytest.approx(np.diag(C).max())
    square = np.diag(C)[:, None] + bias**2
    assert objectives(P, chosen[None])[0] == pytest.approx(square.mean(axis=0).max())
    assert objectives(replace(P, criterion="worst-relative-u"), chosen[None])[0] == pytest.approx(square.max())
    joint = max(np.log(np.linalg.det(C + np.outer(b, b))) for b in bias.T)
    assert objectives(replace(P, criterion="determinant"), chosen[None])[0] == pytest.approx(joint)


def test_a_slope_without_an_offset_is_refused() -> None:
    with pytest.raises(InputError, match="a slope without an offset"):
        choose_wavelengths(planned_sample(DYES, PLANNED, ResolveSettings(background=("slope",))))


def test_what_the_resolver_would_refuse_is_not_chosen_for() -> None:
    nearly = Component("nearly", W, DYES[0].absorptivity + 1e-5 * DYES[1].absorptivity, basis="mass")
    with pytest.raises(InputError, match="with all 151 candidates together"):
        choose_wavelengths(planned_sample([*DYES, nearly], {**PLANNED, "nearly": 0.01}))


def test_the_bias_of_a_wavelength_error_is_reported_and_happens() -> None:
    """At the chosen wavelengths with the axis off: the relative error of plain weighted least squares, component by component."""
    sample = planned_sample(DYES, PLANNED, ResolveSettings(background=(), noise=NoiseModel(0.0005, 0.0001, 0.0)))
    asked = WavelengthsAsked(count=3, candidates_nm=[430.0, 450.0, 505.0, 530.0, 600.0, 625.0], wavelength_error_nm=1.0)
    choice = choose_wavelengths(sample, asked).choice
    assert choice.criterion**2 == pytest.approx(
        ((choice.sample.expected.budget[0, :, 0] / choice.sample.concentration) ** 2 + choice.relative_bias**2).max(), rel=0.02
    )
    errors = []
    for shift in (-1.0, 1.0):
        moved = sum(PLANNED[d.name] * np.interp(choice.wavelength_nm + shift, W, d.absorptivity) for d in DYES)
        found = np.linalg.solve(choice.sample.design.X, moved)
        errors.append(np.abs(found / choice.sample.concentration - 1))
    assert choice.relative_bias == pytest.approx(np.max(errors, axis=0), rel=0.05)
    assert not choose_wavelengths(sample, WavelengthsAsked(count=3)).choice.relative_bias.any()


@pytest.mark.parametrize("criterion", CRITERIA)
@pytest.mark.parametrize("error_nm", [0.0, 0.3])
def test_values_of_exchanges_are_those_of_the_sets(criterion: Criterion, error_nm: float) -> None:
    """The rank-one update against each set judged by itself; k above the unknowns and equal to them."""
    rng = np.random.default_rng(6)
    for k in (4, 6):
        P = problem(rng, 20, 3, criterion, offset=True, spacing_nm=20.0, error_nm=error_nm)
        chosen = np.array([0, 4, 9, 14, 17, 19][:k])
        values = search._exchange_values(P, chosen)
        for t in range(k):
            for i in range(20):
                swapped = np.array([*np.delete(chosen, t), i])
                apart = np.abs(P.wavelength_nm[i] - P.wavelength_nm[np.delete(chosen, t)]).min()
                if apart < 20.0 - 1e-9:
                    assert values[t, i] == np.inf
                else:
                    assert values[t, i] == pytest.approx(objectives(P, swapped[None])[0], rel=1e-5, abs=1e-9)


def test_weights_of_the_criterion_hold_flanks_and_the_library_s_shape() -> None:
    """The criterion of one set, from the documented variance of a reading worked out here."""
    e_u = 0.3
    dyes = [Component(d.name, W, d.absorptivity, basis="mass", absorptivity_u=e_u + 0 * W) for d in DYES]
    noise = NoiseModel(0.0005, 0.0001, 0.3)
    at = [430.0, 450.0, 500.0, 530.0, 600.0, 630.0]
    sample = planned_sample(dyes, PLANNED, ResolveSettings(background=("offset",), noise=noise))
    choice = choose_wavelengths(sample, WavelengthsAsked(count=6, candidates_nm=at, criterion="trace")).choice
    c = np.array(list(PLANNED.values()))
    places = np.searchsorted(W, at)
    E = np.column_stack([d.absorptivity for d in dyes])
    slope = (np.gradient(E, W, axis=0) @ c)[places]
    A = E[places] @ c
    v = 0.0005**2 + (0.0001 * 10**A / np.log(10)) ** 2 + (0.3 * slope) ** 2 + e_u**2 * (c @ c)
    X = np.column_stack([E[places], np.ones(6)])
    C = np.linalg.inv(X.T @ (X / v[:, None]))[:3, :3] / np.outer(c, c)
    assert choice.criterion == pytest.approx(np.sqrt(np.trace(C) / 3), rel=1e-3)
