#!/usr/bin/env python3
"""How often is an unmodelled absorber called, rightly and wrongly? False alarm rate and power by simulation.

    python3 scripts/simulate_flags.py                 (about a minute)
    python3 scripts/simulate_flags.py --spectra 5000

Three dyes at mid range, measured with the declared noise. First without anything else (false alarms), then with a smooth
model error as large as the allowance (0.3 % of the absorbance and 1 mAU, drawn anew for each sample), then with a hidden
Gaussian band at eleven positions. For each hidden band: how often it is noticed, the largest bias that it causes (of the
three dyes, in % of the concentration), and what the answer itself states: the smallest visible absorber (of bands 60 nm
wide), the largest unseen bias.

The same functions run in tests/truth/test_flag_rates.py with fewer samples.
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
CENTRES = (445.0, 525.0, 615.0)
NOISE = NoiseModel(floor=0.0005, transmittance=0.0001, wavelength_nm=0.05)
POSITIONS = np.linspace(400.0, 700.0, 11)


@dataclass(frozen=True)
class Rates:
    """What became of samples with one kind of trouble."""

    trouble: str
    noticed: float
    warned: float
    bias_percent: float
    stated_bias_percent: float
    smallest_visible: float

    def line(self) -> str:
        return (
            f"{self.trouble:<42} noticed {100 * self.noticed:5.1f} %, as a warning {100 * self.warned:5.1f} %; "
            f"bias {self.bias_percent:5.2f} %, stated unseen {self.stated_bias_percent:5.2f} %; "
            f"stated smallest visible {1000 * self.smallest_visible:4.1f} mAU"
        )


def dye(centre: float) -> np.ndarray:
    """Absorptivity in L g-1 cm-1: a main band and a shoulder."""
    return np.asarray(30.0 * np.exp(-0.5 * ((W - centre) / 28.0) ** 2) + 14.0 * np.exp(-0.5 * ((W - centre + 38.0) / 30.0) ** 2))


DYES = [Component(f"dye-{k}", W, dye(centre), basis="mass", scale_relative_u=0.01) for k, centre in enumerate(CENTRES)]
K = np.stack([d.absorptivity for d in DYES])


def mixtures(samples: int, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """Return concentrations in the cell (n, 3) and their absorbance (n, m)."""
    c = rng.uniform(0.008, 0.02, (samples, 3))
    return c, c @ K


def smooth_error(A: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Return a smooth random error with the standard deviation of the allowance: correlated over 25 nm."""
    kernel = np.exp(-0.5 * ((W[:, None] - W[None, :]) / 25.0) ** 2)
    root = np.linalg.cholesky(kernel + 1e-6 * np.eye(W.size))
    size = np.sqrt(0.001**2 + (0.003 * A) ** 2)
    return np.asarray(size * (rng.normal(size=A.shape) @ root.T))


def band(centre: float, width: float, height: float) -> np.ndarray:
    return np.asarray(height * np.exp(-4 * np.log(2) * ((W - centre) / width) ** 2))


def resolved(A: np.ndarray, rng: np.random.Generator) -> Resolution:
    """Return the answer for samples measured with the declared noise, shift and an offset."""
    shifted = A + rng.normal(0, NOISE.wavelength_nm, len(A))[:, None] * np.gradient(A, W, axis=1)
    noisy = shifted + rng.normal(0, 0.002, len(A))[:, None] + NOISE.reading_u(shifted) * rng.normal(size=A.shape)
    batch = SpectrumBatch([str(k) for k in range(len(A))], W, noisy)
    return resolve_batch(batch, DYES, ResolveSettings(noise=NOISE))


def rates(trouble: str, result: Resolution, c: np.ndarray) -> Rates:
    """Count the flag, and compare bias caused with bias stated."""
    grades = result.severity.get("unmodelled-absorber")
    worst = np.zeros(len(c)) if grades is None else grades.max(axis=1)
    bias = np.abs((result.unconstrained - c).mean(axis=0) / c.mean(axis=0)).max()
    assert result.interferent is not None
    stated = (result.visible_residual[:, None] * result.interferent.bias_per_residual / c).mean(axis=0).max()
    visible = float((result.interferent.height_per_residual * result.visible_residual).mean())
    return Rates(trouble, float((worst > 0).mean()), float((worst > 1).mean()), 100 * float(bias), 100 * float(stated), visible)


def clean(samples: int, seed: int) -> tuple[Rates, Resolution]:
    """Samples with nothing wrong."""
    rng = np.random.default_rng([seed, 0])
    c, A = mixtures(samples, rng)
    result = resolved(A, rng)
    return rates("nothing", result, c), result


def with_model_error(samples: int, seed: int) -> Rates:
    """Samples with a model error the size of the allowance."""
    rng = np.random.default_rng([seed, 1])
    c, A = mixtures(samples, rng)
    return rates("smooth model error, size of the allowance", resolved(A + smooth_error(A, rng), rng), c)


def with_band(samples: int, seed: int, width: float, height: float, position: float) -> Rates:
    """Samples with a hidden band."""
    rng = np.random.default_rng([seed, 2, int(width), int(1e6 * height), int(position)])
    c, A = mixtures(samples, rng)
    return rates(
        f"band at {position:.0f} nm, {width:.0f} nm wide, {1000 * height:.0f} mAU",
        resolved(A + band(position, width, height), rng),
        c,
    )


def main() -> int:
    """Print false alarms, then power over positions for widths and heights."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--spectra", type=int, default=2000, help="samples of each kind (default 2000)")
    parser.add_argument("--seed", type=int, default=1, help="of the random numbers")
    options = parser.parse_args()
    first, result = clean(10 * options.spectra, options.seed)
    print(first.line())
    for code in ("collinear", "offset-large", "scatter-large", "negative-estimate", "saturated"):
        grades = result.severity.get(code)  # type: ignore[call-overload]
        print(f"  nothing, and yet {code}: {0.0 if grades is None else 100 * float((grades > 1).mean()):.2f} % as a warning")
    print(with_model_error(10 * options.spectra, options.seed).line(), flush=True)
    for width in (30.0, 60.0, 90.0):
        for height in (0.005, 0.01, 0.02, 0.04):
            found = [with_band(options.spectra // 10, options.seed, width, height, position) for position in POSITIONS]
            noticed, bias = np.array([f.noticed for f in found]), np.array([f.bias_percent for f in found])
            unseen = bias[noticed < 0.5]
            print(
                f"band {width:.0f} nm wide, {1000 * height:3.0f} mAU, 11 positions: noticed {100 * noticed.mean():5.1f} % "
                f"({100 * noticed.min():.0f} to {100 * noticed.max():.0f}); largest bias {bias.max():5.2f} %, "
                f"largest where it is mostly missed {unseen.max() if unseen.size else 0:5.2f} %; "
                f"stated unseen {found[0].stated_bias_percent:.2f} %, "
                f"stated smallest visible {1000 * found[0].smallest_visible:.0f} mAU",
                flush=True,
            )
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
