"""Spectra, references and groups of a calibrate request, checked and put in order."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
from pydantic import Field

from tinctor.arrays import FloatArray, quoted
from tinctor.errors import Fault, InputError
from tinctor.operations.shared import Number, RequestModel, SpectrumIn, gather
from tinctor.pls.preprocess import Step
from tinctor.spectrum import SpectrumBatch

if TYPE_CHECKING:
    from tinctor.operations.calibrate import CalibrateRequest

__all__ = ["ReferenceIn", "StepIn", "TestIn", "Training", "training_of"]


class ReferenceIn(RequestModel):
    """What one sample holds."""

    id: str
    values: dict[str, Number] = Field(min_length=1, description="by analyte, in `unit`")


class StepIn(RequestModel):
    """One step of preprocessing."""

    step: Literal["range", "offset", "snv", "savitzky-golay", "mean-centre", "autoscale"]
    low_nm: Number | None = None
    high_nm: Number | None = None
    window: int | None = Field(None, description="of savitzky-golay: an odd number of readings")
    polynomial: int = 2
    derivative: int = 0

    def to_step(self) -> Step:
        """Return the domain value."""
        return Step(self.step, self.low_nm, self.high_nm, self.window, self.polynomial, self.derivative)


class TestIn(RequestModel):
    """Spectra and references that take no part in training."""

    __test__ = False  # not a test, whatever its name looks like to a test runner

    spectra: list[SpectrumIn] = Field(min_length=1, max_length=10_000)
    references: list[ReferenceIn] = Field(min_length=1, max_length=10_000)


@dataclass(frozen=True, slots=True, eq=False)
class Training:
    """Samples in rows: spectra as they would read in 1 cm and undiluted, references, and which belong to one preparation."""

    ids: tuple[str, ...]
    names: tuple[str, ...]
    wavelength_nm: FloatArray
    X: FloatArray
    Y: FloatArray
    groups: np.ndarray
    steps: tuple[Step, ...]


def training_of(request: CalibrateRequest) -> tuple[Training, Training | None]:
    """Return the training samples, and those of the test set where there is one.

    Raises
    ------
    InputError
        Listing every fault with its JSON path.
    """
    steps = gather([(f"$.preprocess[{k}]", step.to_step) for k, step in enumerate(request.preprocess)])
    names = tuple(request.references[0].values)
    training = _samples("$", request.spectra, request.references, names, tuple(steps))
    faults = [
        Fault("unknown-analyte", f"$.reference_u.{name}", f"{name!r} is not among the analytes {quoted(names)}")
        for name in request.reference_u
        if name not in names
    ]
    faults += [
        Fault("negative", f"$.reference_u.{name}", f"must not be negative, found {u:g}")
        for name, u in request.reference_u.items()
        if u < 0
    ]
    faults += [
        Fault("unknown-id", f"$.groups.{i}", f"a group is given for {i!r}, which is not among the spectra")
        for i in request.groups
        if i not in training.ids
    ]
    if faults:
        raise InputError(faults)
    training = _grouped(training, request.groups)
    if request.test is None:
        return training, None
    test = _samples("$.test", request.test.spectra, request.test.references, names, tuple(steps))
    both = sorted(set(training.ids) & set(test.ids))
    if both:
        raise InputError.single(
            "leaked", "$.test.spectra", f"{quoted(both)} is in training and in the test set", "keep the test set out"
        )
    if test.wavelength_nm.shape != training.wavelength_nm.shape or (test.wavelength_nm != training.wavelength_nm).any():
        raise InputError.single("axis", "$.test.spectra", "the test spectra must have the axis of the training spectra")
    return training, test


def _samples(
    path: str, spectra: list[SpectrumIn], references: list[ReferenceIn], names: tuple[str, ...], steps: tuple[Step, ...]
) -> Training:
    batch_of = gather([(f"{path}.spectra[{k}]", s.to_spectrum) for k, s in enumerate(spectra)])
    ids = [s.id for s in batch_of]
    by_id = {r.id: r for r in references}
    faults = [Fault("duplicate-id", f"{path}.spectra[{k}].id", f"{i!r} stands twice") for k, i in enumerate(ids) if i in ids[:k]]
    listed = [r.id for r in references]
    faults += [
        Fault("duplicate-id", f"{path}.references[{k}].id", f"{i!r} stands twice") for k, i in enumerate(listed) if i in listed[:k]
    ]
    without = [i for i in ids if i not in by_id]
    if without:
        faults.append(Fault("missing-reference", f"{path}.references", f"no reference is given for {quoted(without)}"))
    extra = [i for i in listed if i not in ids]
    if extra:
        faults.append(
            Fault(
                "missing-spectrum", f"{path}.references", f"references are given for {quoted(extra)}, of which there is no spectrum"
            )
        )
    faults += [
        Fault(
            "analytes-differ",
            f"{path}.references[{k}].values",
            f"expected values of {quoted(names)} for each sample, found {quoted(list(r.values))}",
            "give 0 for an analyte that is not there",
        )
        for k, r in enumerate(references)
        if set(r.values) != set(names)
    ]
    if faults:
        raise InputError(faults)
    (batch,) = gather([(f"{path}.spectra", lambda: SpectrumBatch.of(batch_of))])
    # references are of the original sample: what the cell and the dilution did to the absorbance is undone
    X = batch.absorbance * (batch.dilution_factor / batch.path_length_cm)[:, None]
    Y = np.array([[by_id[i].values[name] for name in names] for i in ids])
    return Training(tuple(ids), names, batch.wavelength_nm, X, Y, np.arange(len(ids)), steps)


def _grouped(training: Training, groups: dict[str, str]) -> Training:
    """Number the preparations; the same references without a group are refused, for they look like replicates."""
    labels = [groups.get(i, f"\0{i}") for i in training.ids]
    order = {label: k for k, label in enumerate(dict.fromkeys(labels))}
    numbers = np.array([order[label] for label in labels])
    seen: dict[bytes, int] = {}
    faults = []
    for k, row in enumerate(training.Y):
        first = seen.setdefault(row.tobytes(), k)
        if first != k and not (training.ids[k] in groups and training.ids[first] in groups):
            faults.append(
                Fault(
                    "groups-needed",
                    "$.groups",
                    f"{training.ids[first]!r} and {training.ids[k]!r} have the same references: replicates of one preparation "
                    "must stay together in validation",
                    "name the preparation of each: the same for replicates, different ones for separate preparations",
                )
            )
    if faults:
        raise InputError(faults)
    return Training(training.ids, training.names, training.wavelength_nm, training.X, training.Y, numbers, training.steps)
