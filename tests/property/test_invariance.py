"""Results do not depend on units, on the order of components, or on the batch: to 1e-12 relative."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinctor.component import Component
from tinctor.resolve.engine import resolve
from tinctor.resolve.resolution import Resolution
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import SpectrumBatch

W = np.arange(400.0, 701.0, 2.0)
CENTRES = (440.0, 500.0, 530.0, 620.0)
NUMBERS = ("unconstrained", "concentration", "u", "low", "high", "decision_limit", "budget")


def dyes(scale: float = 1.0) -> list[Component]:
    return [
        Component(
            f"c{k}",
            W,
            scale * 30 * np.exp(-0.5 * ((W - c) / 32) ** 2),
            basis="mass",
            absorptivity_u=scale * (0.02 + 0 * W),
            scale_relative_u=0.01,
            linear_to=0.05 / scale,
        )
        for k, c in enumerate(CENTRES)
    ]


def measured(n: int, seed: int = 1) -> SpectrumBatch:
    """Mixtures, some with missing components, some saturated, in different cells."""
    rng = np.random.default_rng(seed)
    c = rng.uniform(0.0, 0.03, (n, 4)) * (rng.uniform(size=(n, 4)) < 0.7)
    c[::17] *= 4.0
    A = c @ np.column_stack([dye.absorptivity for dye in dyes()]).T + 0.002 + 0.0006 * rng.standard_normal((n, W.size))
    return SpectrumBatch(
        [str(k) for k in range(n)],
        W,
        A,
        path_length_cm=rng.choice([0.2, 1.0], n),
        path_length_u_cm=0.001,
        dilution_factor=rng.choice([1.0, 50.0], n),
        dilution_factor_u=0.004,
    )


def assert_same(
    one: Resolution, other: Resolution, factor: float = 1.0, rows: slice = slice(None), order: list[int] | None = None
) -> None:
    columns = order if order is not None else list(range(4))
    size = np.abs(one.unconstrained[rows]).max(axis=1, keepdims=True) + one.u[rows].max(axis=1, keepdims=True)
    for name in NUMBERS:
        expected, found = getattr(one, name)[rows], getattr(other, name)[:, columns] * factor
        scale = size[..., None] if expected.ndim == 3 else size
        assert np.abs((expected - found) / scale).max() < 1e-12, name
    assert np.array_equal(one.status[rows], other.status[:, columns])


@given(st.sampled_from([1e-6, 1e-3, 7.0, 1e6]))
@settings(max_examples=4, deadline=None)
def test_units_of_the_library(scale: float) -> None:
    batch = measured(200)
    assert_same(resolve(batch, dyes()), resolve(batch, dyes(scale)), factor=scale)


@given(st.permutations(range(4)))
@settings(max_examples=12, deadline=None)
def test_order_of_the_components(order: list[int]) -> None:
    batch = measured(120)
    terms = ResolveSettings(background=("offset", "scatter"))
    library = dyes()
    there = resolve(batch, [library[k] for k in order], terms)
    back = [order.index(k) for k in range(4)]
    assert_same(resolve(batch, library, terms), there, order=back)


@pytest.mark.parametrize(("start", "stop"), [(0, 1), (100, 107), (17, 18), (300, 600), (0, 9000), (8190, 8200)])
def test_size_of_the_batch(start: int, stop: int) -> None:
    whole = measured(9000)
    rows = slice(start, stop)
    part = SpectrumBatch(
        whole.ids[rows],
        W,
        whole.absorbance[rows],
        path_length_cm=whole.path_length_cm[rows],
        path_length_u_cm=0.001,
        dilution_factor=whole.dilution_factor[rows],
        dilution_factor_u=0.004,
    )
    everything = resolve(whole, dyes())
    assert_same(everything, resolve(part, dyes()), rows=rows)
    assert everything.saturated is not None


def test_units_of_concentration_differ_by_their_factor_alone() -> None:
    from tinctor.operations.registry import run_document

    spectrum = {"id": "a", "wavelength_nm": W.tolist(), "absorbance": measured(1).absorbance[0].tolist()}
    absorptivity = dyes()[0].absorptivity.tolist()
    component = {"name": "c", "wavelength_nm": W.tolist(), "mass_absorptivity": absorptivity, "molar_mass_g_per_mol": 500.0}

    def concentration(unit: str) -> float:
        request = {"schema": "resolve/1", "components": [component], "spectra": [spectrum], "concentration_unit": unit}
        return float(run_document("resolve", request)["results"][0]["components"][0]["unconstrained"])

    base = concentration("g/L")
    for unit, factor in (("mg/L", 1e3), ("ug/L", 1e6), ("mol/L", 1 / 500), ("mmol/L", 2.0), ("umol/L", 2e3)):
        assert concentration(unit) == pytest.approx(base * factor, rel=1e-12)
