"""PLS: steps inside the folds, what cannot be learned, replicates together, models as documents."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.signal import savgol_coeffs, savgol_filter

from tinctor import InputError
from tinctor.pls.calibrate import fit_model
from tinctor.pls.document import checksum, model_document, models_of
from tinctor.pls.model import Model
from tinctor.pls.preprocess import STEPS, Step, apply_steps, fit_steps, savitzky_golay_weights
from tinctor.pls.train import train
from tinctor.pls.validate import cross_validate, folds_of

W = np.arange(400.0, 601.0, 2.0)


def mixtures(n: int, seed: int = 1, noise: float = 0.001) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    bands = np.stack([np.exp(-0.5 * ((W - at) / 25.0) ** 2) for at in (460.0, 500.0, 545.0)])
    Y = rng.uniform(0.1, 1.0, (n, 3))
    return Y @ bands + noise * rng.normal(size=(n, W.size)), Y


@pytest.mark.parametrize(("window", "polynomial", "derivative"), [(5, 2, 0), (9, 2, 1), (11, 3, 2), (7, 4, 1), (15, 2, 2)])
def test_savitzky_golay_is_scipy_s(window: int, polynomial: int, derivative: int) -> None:
    expected = savgol_coeffs(window, polynomial, deriv=derivative, delta=2.0, use="dot")
    found = savitzky_golay_weights(window, polynomial, derivative, 2.0)
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-14)
    X, _ = mixtures(4)
    fitted, Z = fit_steps(X, W, [Step("savitzky-golay", window=window, polynomial=polynomial, derivative=derivative)])
    half = window // 2
    assert pytest.approx(savgol_filter(X, window, polynomial, deriv=derivative, delta=2.0)[:, half:-half], abs=1e-12) == Z
    assert fitted[0].wavelength_nm.tolist() == W[half:-half].tolist()


def test_a_derivative_is_per_nm() -> None:
    _, Z = fit_steps(np.stack([0.003 * W, 0.001 * W]), W, [Step("savitzky-golay", window=7, derivative=1)])
    assert Z[0] == pytest.approx(np.full(Z.shape[1], 0.003), rel=1e-9)


def test_steps_by_their_definition() -> None:
    X, _ = mixtures(6)
    _, cut = fit_steps(X, W, [Step("range", 450.0, 500.0)])
    assert cut.tolist() == X[:, (W >= 450) & (W <= 500)].tolist()
    _, less = fit_steps(X, W, [Step("offset", 580.0, 600.0)])
    assert less == pytest.approx(X - X[:, W >= 580].mean(axis=1, keepdims=True))
    _, snv = fit_steps(X, W, [Step("snv")])
    assert snv.mean(axis=1) == pytest.approx(0.0, abs=1e-12)
    assert snv.std(axis=1, ddof=1) == pytest.approx(1.0)
    fitted, centred = fit_steps(X, W, [Step("mean-centre"), Step("autoscale")])
    assert centred.mean(axis=0) == pytest.approx(0.0, abs=1e-12)
    assert centred.std(axis=0, ddof=1) == pytest.approx(1.0)
    other, _ = mixtures(3, seed=9)
    assert apply_steps(other, fitted) == pytest.approx((other - X.mean(axis=0)) / X.std(axis=0, ddof=1))


def test_the_caller_s_arrays_are_not_changed() -> None:
    X, Y = mixtures(12)
    before = X.copy(), Y.copy()
    steps = [Step("offset", 580.0, 600.0), Step("snv"), Step("savitzky-golay", window=5), Step("mean-centre"), Step("autoscale")]
    model = fit_model(X, W, Y, ["a", "b", "c"], "g/L", steps, 3)
    model.predict(X)
    assert (before[0] == X).all()
    assert (before[1] == Y).all()


@pytest.mark.parametrize(
    ("step", "words"),
    [
        ({"step": "smooth"}, "expected one of range"),
        ({"step": "range", "low_nm": 500.0, "high_nm": 450.0}, "low below high"),
        ({"step": "savitzky-golay"}, "needs a window"),
        ({"step": "savitzky-golay", "window": 6}, "odd number"),
        ({"step": "savitzky-golay", "window": 5, "polynomial": 5}, "below the window"),
        ({"step": "savitzky-golay", "window": 5, "derivative": 3}, "order of the derivative"),
    ],
)
def test_a_step_that_makes_no_sense_is_refused(step: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError, match=words):
        Step(**step)


def test_a_step_that_cannot_be_done_names_its_place() -> None:
    X, _ = mixtures(4)
    uneven = np.sort(np.random.default_rng(1).uniform(400, 600, W.size))
    for axis, data, step, words in (
        (uneven, X, Step("savitzky-golay", window=5), "even axis"),
        (W, X, Step("savitzky-golay", window=201), "longer than the spectra"),
        (W, X, Step("range", 700.0, 800.0), "no reading lies"),
        (W, np.ones_like(X), Step("snv"), "flat spectrum"),
        (W, np.column_stack([X[:, :-1], np.ones(4)]), Step("autoscale"), "600 nm"),
    ):
        with pytest.raises(InputError, match=words) as caught:
            fit_steps(data, axis, [Step("mean-centre")] * 0 + [step])
        assert caught.value.faults[0].path.startswith(".preprocess[0]")


def test_what_cannot_be_learned_is_refused() -> None:
    X, Y = mixtures(6)
    for data, references, components, code in (
        (X, Y, 6, "too-many-components"),
        (X, Y, 0, "too-many-components"),
        (X, np.ones((6, 1)), 1, "constant-reference"),
        (np.ones_like(X), Y, 1, "constant-spectra"),
        (np.repeat(X[:2], 3, axis=0), Y, 3, "rank"),
    ):
        with pytest.raises(InputError) as caught:
            train(data, references, components)
        assert caught.value.faults[0].code == code


@pytest.mark.parametrize("unit", [1e-9, 1.0, 1e9])
@pytest.mark.parametrize("absorbance", [1e-3, 1.0, 1e3])
def test_units_change_nothing(unit: float, absorbance: float) -> None:
    X, Y = mixtures(20)
    new, _ = mixtures(5, seed=3)
    one = fit_model(X, W, Y[:, :1], ["a"], "g/L", [], 6).predict(new)
    other = fit_model(absorbance * X, W, unit * Y[:, :1], ["a"], "g/L", [], 6).predict(absorbance * new)
    assert other.value / unit == pytest.approx(one.value, rel=1e-8)
    assert other.u / unit == pytest.approx(one.u, rel=1e-8)
    assert other.t2 == pytest.approx(one.t2, rel=1e-7)
    assert other.outside_space.tolist() == one.outside_space.tolist()


def test_replicates_are_never_on_both_sides() -> None:
    groups = np.repeat(np.arange(8), 3)
    reference = np.repeat(np.linspace(0, 1, 8), 3)
    for folds in (None, 2, 4, 8):
        for inside, outside in folds_of(groups, reference, folds, 5):
            assert not set(groups[inside]) & set(groups[outside])
    assert sorted(np.concatenate([test for _, test in folds_of(groups, reference, 4, 5)]).tolist()) == list(range(24))
    for folds in (1, 9):
        with pytest.raises(InputError, match="8 preparations allow from 2 to 8 folds"):
            folds_of(groups, reference, folds, 5)


def test_folds_are_spread_over_the_range_and_seeded() -> None:
    """Sorted references in folds of neighbours would be extrapolated: every fold has to reach from low to high."""
    reference = np.linspace(0, 1, 20)
    folds = folds_of(np.arange(20), reference, 4, 7)
    for _, test in folds:
        assert reference[test].min() < 0.25
        assert reference[test].max() > 0.75
    again = folds_of(np.arange(20), reference, 4, 7)
    assert all((a[1] == b[1]).all() for a, b in zip(folds, again, strict=True))
    assert any((a[1] != b[1]).any() for a, b in zip(folds, folds_of(np.arange(20), reference, 4, 8), strict=True))


def test_split_replicates_would_look_better_than_the_truth() -> None:
    """Each preparation has an error of its own in the reference: left in through a replicate, it is fitted and not seen."""
    rng = np.random.default_rng(2)
    X, Y = mixtures(14, noise=0.002)
    y = Y[:, :1] + 0.05 * rng.normal(size=(14, 1))
    scans, values = np.repeat(X, 3, axis=0) + 0.0005 * rng.normal(size=(42, W.size)), np.repeat(y, 3, axis=0)
    groups = np.repeat(np.arange(14), 3)
    honest, split = (
        cross_validate(scans, W, values, [], 9, folds_of(g, values[:, 0], 7, 1), g).rmsecv[9, 0] for g in (groups, np.arange(42))
    )
    assert split < 0.8 * honest


def test_references_of_noise_are_not_learned() -> None:
    """Q2 of pure noise, every step inside the folds: not above 0 beyond chance."""
    rng = np.random.default_rng(4)
    q2 = []
    for _ in range(20):
        X, y = rng.normal(size=(24, W.size)), rng.normal(size=(24, 1))
        cv = cross_validate(X, W, y, [Step("autoscale")], 2, folds_of(np.arange(24), y[:, 0], 6, 1), np.arange(24))
        q2.append(1 - cv.press[1, 0] / cv.press[0, 0])
    assert np.mean(q2) < 0.1


def test_intervals_of_new_mixtures_hold_the_truth() -> None:
    """A short simulation: references with an error that is stated, spectra with noise."""
    covered = []
    for seed in range(40):
        X, Y = mixtures(25, seed=100 + seed, noise=0.004)
        reference = Y[:, :1] + 0.01 * np.random.default_rng(seed).normal(size=(25, 1))
        model = fit_model(X, W, reference, ["a"], "g/L", [], 3, reference_u=np.array([0.01]))
        new, truth = mixtures(40, seed=500 + seed, noise=0.004)
        found = model.predict(new)
        covered.append(((found.low <= truth[:, :1]) & (truth[:, :1] <= found.high)).mean())
    assert 0.92 < np.mean(covered) < 0.99


def test_what_the_model_was_not_taught_is_outside() -> None:
    X, Y = mixtures(25)
    model = fit_model(X, W, Y[:, :1], ["a"], "g/L", [], 3)
    new, _ = mixtures(200, seed=8)
    assert model.predict(new).outside_space.mean() < 0.15
    stranger = new + 0.05 * np.exp(-0.5 * ((W - 580.0) / 8.0) ** 2)
    assert model.predict(stranger).outside_space.all()
    strong = model.predict(3.0 * X[:1])
    assert strong.outside_space.all()
    assert strong.outside_range.all()


def test_spectra_on_another_axis_are_resampled_inside_the_range_only() -> None:
    X, Y = mixtures(20, noise=0.0)
    model = fit_model(X, W, Y[:, :1], ["a"], "g/L", [], 3)
    fine = np.arange(395.0, 606.0, 1.0)
    bands = np.stack([np.exp(-0.5 * ((fine - at) / 25.0) ** 2) for at in (460.0, 500.0, 545.0)])
    assert model.predict(model.on_axis(Y[:3] @ bands, fine)).value == pytest.approx(Y[:3, :1], abs=1e-3)
    with pytest.raises(InputError, match="nothing is extrapolated"):
        model.on_axis((Y[:3] @ bands)[:, 20:], fine[20:])


def trained() -> tuple[Model, np.ndarray]:
    X, Y = mixtures(20)
    steps = [Step("range", 420.0, 590.0), Step("savitzky-golay", window=7, derivative=1), Step("mean-centre")]
    return fit_model(X, W, Y[:, :2], ["a", "b"], "g/L", steps, 4), X


def test_a_model_is_a_plain_document_that_reads_back_to_the_bit() -> None:
    model, X = trained()
    document = json.loads(json.dumps(model_document([model], {"software": "tinctor"})))
    (again,) = models_of(document)
    before, after = model.predict(X), again.predict(X)
    for name in ("value", "u", "low", "high", "leverage", "t2", "q_residual"):
        assert (getattr(before, name) == getattr(after, name)).all(), name
    assert again.names == ("a", "b")
    assert again.unit == "g/L"
    assert {step.step.step for step in again.steps} <= set(STEPS)


@pytest.mark.parametrize(
    ("change", "code"),
    [
        (lambda d: d["models"][0]["coefficients"][0].__setitem__(0, 1.0), "damaged-model"),
        (lambda d: d.__setitem__("schema", "pls-model/9"), "not-a-model"),
        (lambda d: d.__setitem__("unit", "mg/L"), "damaged-model"),
        (lambda d: d.pop("checksum"), "damaged-model"),
        (lambda d: d["models"][0].__setitem__("mse", [float("nan"), 1.0]), "damaged-model"),
    ],
)
def test_a_damaged_or_foreign_model_is_refused(change: Any, code: str) -> None:
    model, _ = trained()
    document = json.loads(json.dumps(model_document([model])))
    change(document)
    with pytest.raises(InputError) as caught:
        models_of(document)
    assert caught.value.faults[0].code == code


def test_parts_that_do_not_fit_are_refused_even_with_a_right_checksum() -> None:
    model, _ = trained()
    for part, value in (("loadings", [[1.0]]), ("intercept", [[1.0]]), ("names", ["a"]), ("components", 9)):
        document = json.loads(json.dumps(model_document([model])))
        document["models"][0][part] = value
        document["checksum"] = checksum(document)
        with pytest.raises(InputError):
            models_of(document)
    document = json.loads(json.dumps(model_document([model])))
    del document["models"][0]["mean_x"]
    document["checksum"] = checksum(document)
    with pytest.raises(InputError, match="missing or of the wrong kind"):
        models_of(document)
    for foreign in (None, [], "model", {"schema": 1}):
        with pytest.raises(InputError, match="expected a model"):
            models_of(foreign)


def test_prediction_loads_neither_scikit_learn_nor_scipy(tmp_path: Any) -> None:
    model, X = trained()
    (tmp_path / "model.json").write_text(json.dumps(model_document([model])), encoding="utf-8")
    np.save(tmp_path / "x.npy", X)
    code = (
        "import sys, json, numpy as np\nfrom tinctor.pls.document import models_of\n"
        "m, = models_of(json.load(open(sys.argv[1])))\nprint(m.predict(np.load(sys.argv[2])).value[0, 0])\n"
        "assert not {'sklearn', 'scipy'} & set(sys.modules)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "model.json"), str(tmp_path / "x.npy")],
        capture_output=True,
        text=True,
        check=True,
    )
    assert float(done.stdout) == model.predict(X).value[0, 0]


def test_a_model_made_earlier_predicts_the_same_for_ever() -> None:
    """The file was made once with version 1 of the format and is never made anew."""
    golden = json.loads((Path(__file__).resolve().parents[1] / "data" / "pls-model-1.json").read_text(encoding="utf-8"))
    (model,) = models_of(golden["model"])
    found = model.predict(np.array(golden["spectra"]))
    for name in ("value", "u", "t2", "q_residual"):
        assert getattr(found, name) == pytest.approx(np.array(golden[name]), rel=1e-12), name
