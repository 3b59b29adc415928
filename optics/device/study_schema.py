"""Shape of the study tables of a case file: sweep, optimize and tolerance."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from optics.device.schema_parts import Part

Linked = dict[str, str]
_LINKED = "paths that follow other paths"


class AxisModel(Part):
    """Values of one number: `start`, `stop` and `step`, or `values`."""

    start: float | None = Field(default=None, description="first value")
    stop: float | None = Field(default=None, description="last value")
    step: Annotated[float, Field(gt=0)] | None = Field(default=None, description="step")
    values: Annotated[list[float], Field(min_length=1)] | None = Field(
        default=None, description="values one by one"
    )


class SweepModel(Part):
    """Outcomes over a grid."""

    outcomes: Annotated[list[str], Field(min_length=1)] | None = Field(
        default=None, description="names of outcomes"
    )
    axes: dict[str, AxisModel] = Field(min_length=1, description="values by path of the number")
    linked: Linked = Field(default={}, description=_LINKED)


class BoundsModel(Part):
    """Both bounds of a variable."""

    min: float = Field(description="smallest value")
    max: float = Field(description="largest value")


class LimitModel(Part):
    """One or both limits of an outcome."""

    min: float | None = Field(default=None, description="smallest value")
    max: float | None = Field(default=None, description="largest value")


class ObjectiveModel(Part):
    """One of `maximize` and `minimize`."""

    maximize: str | None = Field(default=None, description="name of an outcome")
    minimize: str | None = Field(default=None, description="name of an outcome")


class OptimizeModel(ObjectiveModel):
    """Best values under bounds and constraints."""

    objectives: Annotated[list[ObjectiveModel], Field(min_length=2)] | None = Field(
        default=None, description="two or more objectives for a Pareto front"
    )
    variables: dict[str, BoundsModel] = Field(
        min_length=1, description="bounds by path of the number"
    )
    constraints: dict[str, LimitModel] = Field(default={}, description="limits by outcome")
    linked: Linked = Field(default={}, description=_LINKED)


class SpreadModel(Part):
    """One of `relative_sd`, `sd` and `half_width` (uniform)."""

    relative_sd: Annotated[float, Field(gt=0)] | None = Field(
        default=None, description="standard deviation over the nominal value"
    )
    sd: Annotated[float, Field(gt=0)] | None = Field(default=None, description="standard deviation")
    half_width: Annotated[float, Field(gt=0)] | None = Field(
        default=None, description="half width of a uniform distribution"
    )


class GroupModel(Part):
    """Numbers that vary together."""

    paths: list[str] = Field(min_length=2, description="two or more paths of numbers")
    correlation: float = Field(ge=-1, le=1, description="correlation, -1 to 1")


class ToleranceModel(Part):
    """Process spread and limits."""

    samples: int = Field(default=1000, ge=1, description="number of samples")
    seed: int = Field(default=0, ge=0, description="seed of the random numbers")
    outcomes: Annotated[list[str], Field(min_length=1)] | None = Field(
        default=None, description="names of outcomes beside those with limits"
    )
    groups: list[GroupModel] = Field(default=[], description="correlated numbers")
    spread: dict[str, SpreadModel] = Field(min_length=1, description="spread by path of the number")
    limits: dict[str, LimitModel] = Field(default={}, description="limits by outcome")
    linked: Linked = Field(default={}, description=_LINKED)
