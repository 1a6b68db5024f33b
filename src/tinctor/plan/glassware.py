"""Dilutions that can be made with the pipettes and flasks there are, and how well each is known.

Tolerances are those of class A glass, ISO 648:2008 (single-volume pipettes) and ISO 1042:1998 (one-mark flasks), written down from
memory: check them against your own glassware. A tolerance a is taken as a triangular distribution, u = a / sqrt(6) (EURACHEM/CITAC
QUAM 2012, common practice there for glassware); filling and temperature are not in it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product
from math import sqrt
from typing import Final

from tinctor.errors import Fault, InputError

__all__ = ["FLASKS_ML", "PIPETTES_ML", "Dilution", "Step", "dilutions", "volume_relative_u"]

#: Class A tolerances in mL by nominal volume in mL; from memory.
PIPETTE_TOLERANCE_ML: Final = {
    0.5: 0.005, 1.0: 0.008, 2.0: 0.010, 5.0: 0.015, 10.0: 0.020, 20.0: 0.030, 25.0: 0.030, 50.0: 0.050, 100.0: 0.080,
}  # fmt: skip
FLASK_TOLERANCE_ML: Final = {
    5.0: 0.025, 10.0: 0.025, 20.0: 0.040, 25.0: 0.040, 50.0: 0.060, 100.0: 0.100, 200.0: 0.150, 250.0: 0.150, 500.0: 0.250,
    1000.0: 0.400, 2000.0: 0.600,
}  # fmt: skip

#: What most benches have (common practice), used where the user names none.
PIPETTES_ML: Final = (1.0, 2.0, 5.0, 10.0, 20.0, 25.0, 50.0)
FLASKS_ML: Final = (10.0, 25.0, 50.0, 100.0, 250.0, 500.0, 1000.0)

#: Factors this close, relative, are the same.
SAME_FACTOR: Final = 1e-9
#: A dilution known this well adds nothing to what else is uncertain (by judgement): less volume is better than less uncertainty.
NEGLIGIBLE_RELATIVE_U: Final = 0.002
#: More ways than this are not a bench.
MOST_CHAINS: Final = 250_000
#: Volumes of glassware from one millilitre in a thousand to the largest flask made.
VOLUME_LIMITS_ML: Final = (0.001, 20_000.0)


@dataclass(frozen=True, slots=True)
class Step:
    """A pipetted volume made up to the mark of a flask."""

    pipette_ml: float
    flask_ml: float


@dataclass(frozen=True, slots=True)
class Dilution:
    """One way to reach a factor; no steps for the undiluted sample."""

    factor: float
    relative_u: float
    steps: tuple[Step, ...]

    @property
    def flask_total_ml(self) -> float:
        """Solvent and sample needed in all, in mL."""
        return sum(step.flask_ml for step in self.steps)


def volume_relative_u(volume_ml: float, tolerances: dict[float, float]) -> float:
    """Return the relative standard uncertainty of a volume; for one that the standard does not list, that of the next smaller one
    listed, which is larger (of the smallest listed for what is smaller still).

    Examples
    --------
    >>> round(volume_relative_u(10.0, PIPETTE_TOLERANCE_ML), 6), round(volume_relative_u(15.0, PIPETTE_TOLERANCE_ML), 6)
    (0.000816, 0.000816)
    """
    listed = max((v for v in tolerances if v <= volume_ml * (1 + SAME_FACTOR)), default=min(tolerances))
    return tolerances[listed] / min(listed, volume_ml) / sqrt(6.0)


def dilutions(pipettes_ml: Sequence[float], flasks_ml: Sequence[float], most_steps: int) -> list[Dilution]:
    """Return the dilutions that can be made, the undiluted sample first, by factor; for each factor the way with the fewest steps,
    then the smallest uncertainty (all below 0.2 % are alike), then the least volume.

    Raises
    ------
    InputError
        For a volume that is none, or a number of steps other than 1 or 2.

    Examples
    --------
    >>> [(d.factor, len(d.steps)) for d in dilutions([1.0, 10.0], [10.0, 100.0], 1)]
    [(1.0, 0), (10.0, 1), (100.0, 1)]
    """
    _check(pipettes_ml, flasks_ml, most_steps)
    single = [Step(float(p), float(f)) for p, f in product(sorted(set(pipettes_ml)), sorted(set(flasks_ml))) if p < f]
    if len(single) ** most_steps > MOST_CHAINS:
        raise InputError.single(
            "too-much-glassware",
            ".flasks_ml",
            f"{len(single)} single steps in {most_steps} steps give more than {MOST_CHAINS} dilutions",
            "name fewer pipettes and flasks, or ask for one step",
        )
    chains: list[tuple[Step, ...]] = [(), *((step,) for step in single)]
    if most_steps == 2:
        # a second pipette that would empty the first flask cannot be filled from it
        chains += [(a, b) for a, b in product(single, single) if b.pipette_ml < a.flask_ml]
    ways = sorted((_dilution(chain) for chain in chains), key=_merit)
    kept: list[Dilution] = []
    for way in ways:
        if not kept or way.factor > kept[-1].factor * (1 + SAME_FACTOR):
            kept.append(way)
    return kept


def _dilution(steps: tuple[Step, ...]) -> Dilution:
    factor, square = 1.0, 0.0
    for step in steps:
        factor *= step.flask_ml / step.pipette_ml
        square += volume_relative_u(step.flask_ml, FLASK_TOLERANCE_ML) ** 2
    for volume in {step.pipette_ml for step in steps}:
        # one pipette used twice is wrong in the same direction twice; two flasks of one size are two flasks
        uses = sum(step.pipette_ml == volume for step in steps)
        square += (uses * volume_relative_u(volume, PIPETTE_TOLERANCE_ML)) ** 2
    return Dilution(factor, sqrt(square), steps)


def _merit(d: Dilution) -> tuple[float, int, float, float, tuple[float, ...]]:
    # the factor rounded, so that 1/3 and 10/30 made in different ways are one
    volumes = tuple(v for step in d.steps for v in (step.pipette_ml, step.flask_ml))
    return float(f"{d.factor:.9e}"), len(d.steps), max(round(d.relative_u, 9), NEGLIGIBLE_RELATIVE_U), d.flask_total_ml, volumes


def _check(pipettes_ml: Sequence[float], flasks_ml: Sequence[float], most_steps: int) -> None:
    low, high = VOLUME_LIMITS_ML
    faults = [
        Fault("volume", f".{name}[{k}]", f"expected a volume from {low:g} to {high:g} mL, found {volume!r}")
        for name, volumes in (("pipettes_ml", pipettes_ml), ("flasks_ml", flasks_ml))
        for k, volume in enumerate(volumes)
        if not low <= volume <= high
    ]
    if most_steps not in (1, 2):
        faults.append(Fault("steps", ".steps", f"a dilution is made in 1 or 2 steps, found {most_steps!r}"))
    if faults:
        raise InputError(faults)
