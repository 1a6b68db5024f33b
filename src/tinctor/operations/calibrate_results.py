"""Parts of a calibrate/1 response."""

from __future__ import annotations

from typing import Final

import numpy as np
from pydantic import Field

from tinctor.arrays import FloatArray
from tinctor.operations.calibrate_in import Training
from tinctor.operations.plan_in import finite
from tinctor.operations.shared import ResponseModel
from tinctor.pls.limits import t_quantile
from tinctor.pls.model import Model
from tinctor.pls.preprocess import apply_steps
from tinctor.pls.validate import CrossValidation

__all__ = ["AnalyteOut", "LimitsOut", "OutlierOut", "SampleOut", "analyte_out", "limits_out", "samples_out"]

#: Chance that any training sample is called off the model when none is (Bonferroni over the samples).
OFF_LEVEL: Final = 0.05


class RowOut(ResponseModel):
    """Errors for one number of components; 0 is the mean of the references."""

    components: int
    rmsec: float | None = Field(description="of the training set, over its degrees of freedom")
    rmsecv: float = Field(description="of spectra left out, over their number")
    rmsecv_u: float | None = Field(description="standard error of rmsecv, over preparations")
    rmsep: float | None = Field(description="of the test set; null without one")
    bias: float = Field(description="mean error of spectra left out")
    sep: float | None = Field(description="standard deviation of their errors about the bias")
    r2: float = Field(description="1 - squared errors left out over squared deviations from the mean")


class FiguresOfMerit(ResponseModel):
    """From the net analyte signal (IUPAC report of Olivieri et al. 2006)."""

    sensitivity: float = Field(description="1 / length of the regression vector, after the steps")
    selectivity: float | None = Field(description="net analyte signal of the mean training spectrum over its length")
    detection_limit: list[float] = Field(
        description="interval (Allegrini and Olivieri 2014): 3.3 u at the smallest and the largest leverage that a sample without "
        "the analyte can have"
    )


class AnalyteOut(ResponseModel):
    """One analyte."""

    name: str
    unit: str
    chosen_components: int
    table: list[RowOut]
    rmsecv_by_level: list[dict[str, float]] = Field(
        description="reference and rmsecv of each preparation's level, chosen components"
    )
    figures_of_merit: FiguresOfMerit


class SampleOut(ResponseModel):
    """One training sample under one model."""

    id: str
    analytes: list[str]
    scores: list[float]
    leverage: float
    t2: float
    q_residual: float


class LimitsOut(ResponseModel):
    """Limits of one model."""

    analytes: list[str]
    coverage: float
    t2: float | None
    t2_new: float | None
    q: float | None
    leverage: float = Field(description="largest of the training samples")
    reference: list[list[float]] = Field(description="lowest and highest reference of each analyte")


class OutlierOut(ResponseModel):
    """A training sample that needs a look."""

    id: str
    analytes: list[str]
    reasons: list[str]


def analyte_out(
    j: int, k: int, training: Training, test: Training | None, cv: CrossValidation, models: list[Model], chosen: int
) -> AnalyteOut:
    """Return the table and the figures of merit of analyte j, which is column k of its model."""
    y, errors = training.Y[:, j], cv.errors[:, :, k]
    mean, u = cv.mean_square_and_u()
    total = float(((y - y.mean()) ** 2).sum())
    paths = [None, *models]
    rows = [
        RowOut(
            components=h,
            rmsec=None if model is None else float(np.sqrt(model.mse[k])),
            rmsecv=float(np.sqrt((errors[h] ** 2).mean())),
            rmsecv_u=finite(u[h, k] / (2 * np.sqrt(mean[h, k]))) if mean[h, k] > 0 else None,
            rmsep=_rmsep(model, test, j, k),
            bias=float(errors[h].mean()),
            sep=float(errors[h].std(ddof=1)),
            r2=1.0 - float((errors[h] ** 2).sum()) / total,
        )
        for h, model in enumerate(paths)
    ]
    return AnalyteOut(
        name=training.names[j],
        unit=models[0].unit,
        chosen_components=chosen,
        table=rows,
        rmsecv_by_level=[
            {"reference": float(level), "rmsecv": float(np.sqrt((errors[chosen][y == level] ** 2).mean()))}
            for level in np.unique(y)
        ],
        figures_of_merit=_figures(models[chosen - 1], training, j, k),
    )


def samples_out(models: list[Model], training: Training) -> tuple[list[SampleOut], list[OutlierOut]]:
    """Return every training sample under every model, and those that need a look with the reasons."""
    samples, outliers = [], []
    for model in models:
        found = model.predict(training.X)
        scores = (apply_steps(training.X, model.steps) - model.mean_x) @ model.rotations
        studentised = _studentised(found.value - _columns(training, model), found.leverage, model.components)
        limit = t_quantile(1 - OFF_LEVEL / (2 * len(training.ids)), max(len(training.ids) - model.components - 2, 1))
        for i, sample in enumerate(training.ids):
            samples.append(
                SampleOut(
                    id=sample,
                    analytes=list(model.names),
                    scores=scores[i].tolist(),
                    leverage=float(found.leverage[i]),
                    t2=float(found.t2[i]),
                    q_residual=float(found.q_residual[i]),
                )
            )
            reasons = _reasons(model, float(found.t2[i]), float(found.q_residual[i]), studentised[i], limit)
            if reasons:
                outliers.append(OutlierOut(id=sample, analytes=list(model.names), reasons=reasons))
    return samples, outliers


def limits_out(model: Model) -> LimitsOut:
    """Return the limits of a model."""
    limits = model.limits
    return LimitsOut(
        analytes=list(model.names),
        coverage=limits.coverage,
        t2=finite(limits.t2),
        t2_new=finite(limits.t2_new),
        q=finite(limits.q),
        leverage=limits.leverage,
        reference=limits.reference.tolist(),
    )


def _rmsep(model: Model | None, test: Training | None, j: int, k: int) -> float | None:
    if model is None or test is None:
        return None
    return float(np.sqrt(((model.predict(test.X).value[:, k] - test.Y[:, j]) ** 2).mean()))


def _columns(training: Training, model: Model) -> FloatArray:
    return training.Y[:, [training.names.index(name) for name in model.names]]


def _studentised(errors: FloatArray, leverage: FloatArray, components: int) -> FloatArray:
    """Errors of the training set over the standard deviation that the other samples leave, (n, q): externally studentised."""
    rest = np.maximum(1.0 - leverage, 1e-6)[:, None]
    degrees = max(len(errors) - components - 2, 1)
    others = np.maximum((errors**2).sum(axis=0) - errors**2 / rest, 0.0) / degrees
    return np.asarray(np.divide(errors, np.sqrt(others * rest), out=np.zeros_like(errors), where=others > 0))


def _reasons(model: Model, t2: float, q_residual: float, studentised: FloatArray, limit: float) -> list[str]:
    reasons = []
    if t2 > model.limits.t2:
        reasons.append(f"T2 {t2:.3g} above {model.limits.t2:.3g}: it is far from the other mixtures, and pulls the model")
    if q_residual > model.limits.q:
        reasons.append(f"Q {q_residual:.3g} above {model.limits.q:.3g}: its spectrum holds what the components do not")
    off = [f"{name} {value:+.1f}" for name, value in zip(model.names, studentised, strict=True) if abs(value) > limit]
    if off:
        reasons.append(f"reference off the model: {', '.join(off)} standard deviations (limit {limit:.1f})")
    return reasons


def _figures(model: Model, training: Training, j: int, k: int) -> FiguresOfMerit:
    b, y = model.coefficients[:, k], training.Y[:, j]
    Z = apply_steps(training.X, model.steps)
    mean, size = Z.mean(axis=0), float(np.sqrt((Z**2).sum(axis=1).mean()))
    length = float(np.sqrt(mean @ mean))
    centred = length < 1e-6 * size  # after mean-centring there is no mean spectrum left
    signal = abs(float(mean @ b)) / float(np.sqrt(b @ b))
    return FiguresOfMerit(
        sensitivity=1.0 / float(np.sqrt(b @ b)),
        selectivity=None if centred else min(signal / length, 1.0),
        detection_limit=[
            float(3.3 * np.sqrt((1 + h) * model.mse[k])) for h in _leverage_at_zero(model.predict(training.X).leverage, y)
        ],
    )


def _leverage_at_zero(leverage: FloatArray, y: FloatArray) -> tuple[float, float]:
    """Smallest and largest leverage of samples like the training ones without the analyte (Allegrini and Olivieri, Anal. Chem. 86
    (2014) 7858; formulas from memory)."""
    centred = y - y.mean()
    smallest = float(y.mean() ** 2 / (centred**2).sum())
    moved = leverage + smallest * (1.0 - np.divide(centred, y.mean(), out=np.ones_like(centred), where=y.mean() != 0) ** 2)
    return smallest, max(float(moved.max()), smallest)
