"""A dilution error is shared by all wavelengths: it must be in the scale, not averaged away over wavelengths when resolving."""

from __future__ import annotations

import numpy as np

from tinctor.component import Component
from tinctor.noise import NoiseModel
from tinctor.resolve.engine import resolve
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import Spectrum, SpectrumBatch
from tinctor.standards.characterise import characterise
from tinctor.standards.series import Standard, series_of
from tinctor.standards.settings import StandardsSettings

W = np.linspace(450.0, 650.0, 101)
E = 40.0 * np.exp(-0.5 * ((W - 550.0) / 30.0) ** 2)
NOISE = NoiseModel(0.0005, 0.0001, 0.0)


def test_records_made_here_resolve_samples_as_well_as_they_say() -> None:
    """200 series with stock and dilution errors, each used on its own sample: about 95 % of the intervals hold the truth."""
    rng = np.random.default_rng(12)
    held = []
    for _ in range(200):
        stock = 1 + 0.004 * rng.normal()
        scans = []
        for k, c in enumerate((0.004, 0.008, 0.012, 0.016, 0.02)):
            A = E * c * stock * (1 + 0.005 * rng.normal())
            scans.append(Standard(Spectrum(f"s{k}", W, A + NOISE.reading_u(A) * rng.normal(size=W.size)), c, 0.005 * c))
        made = characterise(
            series_of(scans), StandardsSettings(intercept="zero", noise=NOISE, model_error_absorbance=0.0, stock_relative_u=0.004)
        )
        component = Component(
            "dye",
            W,
            made.absorptivity,
            basis="mass",
            absorptivity_u=made.spread.absorptivity_u,
            scale_relative_u=made.spread.common_relative_u,
        )
        A = E * 0.015
        sample = SpectrumBatch(["x"], W, (A + NOISE.reading_u(A) * rng.normal(size=W.size))[None])
        result = resolve(sample, [component], ResolveSettings(noise=NOISE, background=()))
        held.append(result.low[0, 0] <= 0.015 <= result.high[0, 0])
    assert 0.91 < np.mean(held) <= 0.99
