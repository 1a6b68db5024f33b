#!/usr/bin/env python3
"""Do the intervals hold the truth as often as they say? Simulated samples with every declared error drawn anew.

    python3 scripts/simulate_coverage.py                      2, 3 and 5 components, three levels (about a minute)
    python3 scripts/simulate_coverage.py --components 2 --spectra 20000

Each sample has its own stock error (library scale), absorptivity errors, path, dilution, shift of the wavelength axis
(0.3 nm standard deviation), offset and photometric noise, all drawn from the uncertainties declared to the solver.
Spectra have several bands; one pair of components lies 20 nm apart. For each component in turn, the others at mid range:

    mid             at mid range: the 95 % interval must hold the truth in 93 to 97 %
    zero            absent: at least 94 %; and an estimate above the decision limit in about 5 %
    decision-limit  at its decision limit: at least 94 %
    detection-limit at its detection limit: an estimate below the decision limit in about 5 %
    undeclared      at mid range with nothing declared but noise: must fail

The same functions run in tests/truth/test_coverage.py with fewer samples.
"""

from __future__ import annotations

import argparse
import sys
from dataclasses import dataclass
from importlib.util import find_spec
from pathlib import Path

if __name__ == "__main__" and find_spec("tinctor") is None:
    sys.path.insert(0, str(Path(__file__).resolve().parent))
    from environment import inside

    inside()

import numpy as np

from tinctor import Component, NoiseModel, Resolution, ResolveSettings, SpectrumBatch, resolve_batch

W = np.linspace(400.0, 700.0, 301)
CENTRES = {2: (500.0, 520.0), 3: (450.0, 520.0, 540.0), 5: (430.0, 480.0, 540.0, 560.0, 640.0)}
SCALE_U, PATH_U, DILUTION, DILUTION_U, SHIFT_NM, OFFSET = 0.01, 0.002, 50.0, 0.2, 0.3, 0.003
NOISE = NoiseModel(floor=0.0005, transmittance=0.0001, wavelength_nm=SHIFT_NM)
MID = (0.4, 1.0)  # g/L in the bath; 0.008 to 0.02 in the cell
LEVELS = ("mid", "zero", "decision-limit", "detection-limit", "undeclared")


@dataclass(frozen=True)
class Outcome:
    """What became of one component at one level."""

    components: int
    component: int
    level: str
    samples: int
    coverage: float
    standard_deviation: float
    bias: float
    detected: float

    def line(self) -> str:
        return (
            f"{self.components} components, no. {self.component + 1}, {self.level:<15} coverage {100 * self.coverage:5.1f} %   "
            f"(estimate - truth)/u: mean {self.bias:+.3f}, sd {self.standard_deviation:.3f}   detected {100 * self.detected:5.1f} %"
        )


def dye(centre: float, w: np.ndarray) -> np.ndarray:
    """Absorptivity in L g-1 cm-1: main band, shoulder 38 nm below, a band in the near ultraviolet."""
    return (
        30.0 * np.exp(-0.5 * ((w - centre) / 28.0) ** 2)
        + 14.0 * np.exp(-0.5 * ((w - centre + 38.0) / 30.0) ** 2)
        + 5.0 * np.exp(-0.5 * ((w - 380.0) / 40.0) ** 2)
    )


def absorptivity_u(e: np.ndarray) -> np.ndarray:
    return np.asarray(0.02 + 0.001 * e)


def library(count: int, declared: bool) -> list[Component]:
    """Return the records; without their uncertainties when these are not declared."""
    spectra = [dye(centre, W) for centre in CENTRES[count]]
    return [
        Component(
            f"dye-{k}",
            W,
            e,
            basis="mass",
            absorptivity_u=absorptivity_u(e) if declared else None,
            scale_relative_u=SCALE_U if declared else None,
        )
        for k, e in enumerate(spectra)
    ]


def readings(bath: np.ndarray, count: int, rng: np.random.Generator) -> np.ndarray:
    """Return what the instrument reads of baths (n, components) in g/L, every error drawn anew for each sample."""
    n = len(bath)
    axis = W[None, :] + rng.normal(0, SHIFT_NM, n)[:, None]
    path = 1.0 + rng.normal(0, PATH_U, n)
    dilution = DILUTION + rng.normal(0, DILUTION_U, n)
    A = rng.normal(0, OFFSET, n)[:, None] + np.zeros(W.size)
    for k, centre in enumerate(CENTRES[count]):
        stock = 1.0 + rng.normal(0, SCALE_U, n)
        e = dye(centre, axis) + rng.normal(size=axis.shape) * absorptivity_u(dye(centre, W))
        A += (bath[:, k] * stock * path / dilution)[:, None] * e
    noise_u = NOISE.reading_u(A)
    return np.asarray(A + noise_u * rng.normal(size=A.shape))


def resolved(A: np.ndarray, count: int, declared: bool) -> Resolution:
    """Return the solver's answer, everything declared or nothing but noise."""
    batch = SpectrumBatch(
        [str(k) for k in range(len(A))],
        W,
        A,
        path_length_u_cm=PATH_U if declared else 0.0,
        dilution_factor=DILUTION,
        dilution_factor_u=DILUTION_U if declared else 0.0,
    )
    noise = NOISE if declared else NoiseModel(NOISE.floor, NOISE.transmittance, 0.0)
    return resolve_batch(batch, library(count, declared), ResolveSettings(noise=noise))


def outcome(count: int, component: int, level: str, samples: int, seed: int) -> Outcome:
    """Simulate one component at one level and count."""
    rng = np.random.default_rng([seed, count, component, LEVELS.index(level)])
    bath = rng.uniform(*MID, (samples, count))
    if level == "zero":
        bath[:, component] = 0.0
    elif level.endswith("limit"):
        bath[:, component] = 0.0
        ideal = bath @ np.stack([dye(centre, W) for centre in CENTRES[count]]) / DILUTION
        limits = resolved(ideal, count, True)
        bath[:, component] = (limits.decision_limit if level == "decision-limit" else limits.detection_limit)[:, component]
    result = resolved(readings(bath, count, rng), count, declared=level != "undeclared")
    truth, estimate = bath[:, component], result.unconstrained[:, component]
    inside = (result.low[:, component] <= truth) & (truth <= result.high[:, component])
    z = (estimate - truth) / result.u[:, component]
    detected = estimate > result.decision_limit[:, component]
    return Outcome(count, component, level, samples, float(inside.mean()), float(z.std()), float(z.mean()), float(detected.mean()))


def required(result: Outcome) -> bool:
    """Whether an outcome meets the requirement of its level."""
    if result.level == "mid":
        return 0.93 <= result.coverage <= 0.97
    return result.coverage < 0.8 if result.level == "undeclared" else result.coverage >= 0.94


def main() -> int:
    """Print every outcome; exit code 1 when one misses its requirement."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--components", type=int, choices=sorted(CENTRES), help="one number of components only")
    parser.add_argument("--spectra", type=int, default=10_000, help="samples per component and level (default 10000)")
    parser.add_argument("--seed", type=int, default=1, help="of the random numbers")
    options = parser.parse_args()
    missed = 0
    for count in [options.components] if options.components else sorted(CENTRES):
        for level in LEVELS:
            for component in range(count):
                result = outcome(count, component, level, options.spectra, options.seed)
                missed += not required(result)
                print(result.line() + ("" if required(result) else "   MISSES ITS REQUIREMENT"), flush=True)
    return 1 if missed else 0


if __name__ == "__main__":
    raise SystemExit(main())
