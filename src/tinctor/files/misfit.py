"""Why cells do not hold in a layout: kept cheap while other readings are still open, told in full when none holds."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from enum import IntEnum
from itertools import islice
from typing import Final

from tinctor.errors import Fault, UnreadableFileError

__all__ = ["Diagnosis", "Misfit", "Stage", "diagnosed", "nearest"]

#: Beyond this many faults of one reading the rest is only counted.
MOST_FAULTS: Final = 1000


class Stage(IntEnum):
    """How far a reading got before something did not fit."""

    SHAPE = 0  # the first row cannot be one of this layout
    TABLE = 1  # the text cannot be taken apart with this delimiter
    RAGGED = 2  # the rows differ in length
    CELLS = 3  # a cell is not a number
    POINTS = 4  # too few wavelengths or spectra
    AXIS = 5  # not the axis of a spectrum
    IDS = 6  # an id is missing or stands twice
    VALUES = 7  # a spectrum with these values cannot be


@dataclass(frozen=True, slots=True)
class Diagnosis:
    """What does not fit, and in how many places."""

    faults: list[Fault]
    wrong: int


class Misfit(Exception):  # noqa: N818 - not an error of the file: another reading may hold
    """A reading that does not hold.

    Parameters
    ----------
    stage
        How far it got.
    diagnose
        Finds what is wrong; called only when no reading holds, since it may have to look at every cell.
    """

    def __init__(self, stage: Stage, diagnose: Callable[[], Diagnosis]) -> None:
        super().__init__(stage)
        self.stage = stage
        self.diagnose = diagnose

    @classmethod
    def of(cls, stage: Stage, *faults: Fault) -> Misfit:
        """Return the misfit whose faults are known already."""
        return cls(stage, lambda: Diagnosis(list(faults), len(faults)))


def diagnosed(faults: Iterable[Fault]) -> Diagnosis:
    """Return the first `MOST_FAULTS` faults, and one that counts the rest."""
    found = iter(faults)
    first = list(islice(found, MOST_FAULTS))
    rest = sum(1 for _ in found)
    if rest:
        first.append(Fault(first[-1].code, first[-1].path, f"{rest} more places after this one are wrong as well"))
    return Diagnosis(first, len(first) - bool(rest) + rest)


def nearest(misfits: list[Misfit]) -> UnreadableFileError:
    """Return the faults of the reading that most nearly holds: it got furthest, and then has the fewest faults."""
    furthest = max(misfit.stage for misfit in misfits)
    diagnoses = [misfit.diagnose() for misfit in misfits if misfit.stage == furthest]
    faults = min(diagnoses, key=lambda diagnosis: diagnosis.wrong).faults
    if furthest is Stage.SHAPE:
        fault = faults[0]
        holds = (
            "A file holds two columns (wavelength, absorbance), one spectrum a column under a row of ids, "
            "or one a row beside a row of wavelengths"
        )
        faults = [Fault(fault.code, fault.path, f"{fault.message}. {holds}", fault.hint)]
    return UnreadableFileError(faults)
