"""The result of one spectrum as it stands in a resolve/1 response."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from tinctor.operations.shared import BudgetPart, FlagOut, ResponseModel

__all__ = ["AnalyteResult", "BackgroundResult", "ComponentResult", "FitResult", "InterferentResult", "SpectrumResult", "StatusWord"]

StatusWord = Literal["accepted", "flagged", "refused"]


class ComponentResult(ResponseModel):
    """One component: null numbers where it is refused."""

    name: str
    status: StatusWord
    unit: str
    concentration: float | None = Field(description="non-negative estimate in the original sample")
    unconstrained: float | None = Field(description="estimate without the sign constraint; u and covariance belong to it")
    u: float | None = Field(description="combined standard uncertainty (k = 1)")
    interval: list[float] | None = Field(description="coverage interval at `coverage`, for a quantity that cannot be negative")
    decision_limit: float | None = Field(description="an estimate above it shows that the component is there (5 % false alarms)")
    detection_limit: float | None = Field(description="a content that is missed in 5 % of cases at most")
    budget: list[BudgetPart]
    percent_per_nm: float | None = Field(description="change per nm shift of the axis; null below the decision limit")
    unseen_bias: float | None = Field(
        description="largest bias that an absorber outside the model could cause without being noticed"
    )
    not_declared: list[str] = Field([], description="sources of uncertainty that no one has stated, and that are not in `u`")


class AnalyteResult(ResponseModel):
    """The total of the components of one analyte."""

    name: str
    components: list[str]
    status: StatusWord
    unit: str
    concentration: float | None
    unconstrained: float | None
    u: float | None
    interval: list[float] | None


class BackgroundResult(ResponseModel):
    """One background term: absorbance for offset, slope (half the rise over the range) and scatter (at the short end);
    nm for shift."""

    term: str
    value: float | None
    u: float | None


class InterferentResult(ResponseModel):
    """The least visible of the hypothetical bands, and how high it could be without being noticed."""

    wavelength_nm: float
    width_nm: float = Field(description="full width at half maximum")
    absorbance: float


class FitResult(ResponseModel):
    """How well the model describes the spectrum."""

    points: int
    residual_rms: float
    chi_square: float
    degrees_of_freedom: int
    durbin_watson: float | None
    condition_number: float | None
    effective_points: float
    chi_square_limit: float | None = Field(description="chi-square above which the model is questioned, model error allowed for")
    residual_structure: float = Field(description="root mean square of the smooth part of the residual, in absorbance")
    residual_structure_limit: float | None
    optimality: float = Field(description="largest violation of the optimality conditions, relative: at rounding level")
    smallest_visible_interferent: InterferentResult | None


class SpectrumResult(ResponseModel):
    """Results of one spectrum."""

    id: str
    status: StatusWord
    components: list[ComponentResult]
    analytes: list[AnalyteResult]
    covariance: list[list[float | None]] = Field(description="of the unconstrained estimates, unit squared, in component order")
    background: list[BackgroundResult]
    fit: FitResult
    flags: list[FlagOut]
