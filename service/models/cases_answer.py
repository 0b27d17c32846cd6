"""The answer to POST /v1/cases."""

from __future__ import annotations

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer, FailureAnswer
from service.models.base import Model
from service.models.limits_answer import HeldWord


class NumberColumn(Model):
    """The values of a number, one a case."""

    name: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    values: list[float] = Field(description="Its value in each case.", examples=[[850, 900]])


class ResultColumn(Model):
    """The values of a result, one a case."""

    name: str = Field(description="Its name.", examples=["probe A"])
    unit: str = Field(description="Its unit.", examples=["degC"])
    values: list[float | None] = Field(
        description="Its value in each case; null where the case could not be computed.", examples=[[54.2, 53.9]]
    )
    error_bounds: list[float | None] = Field(
        description="The value is no further off than this; null where there is none or no finite bound.",
        examples=[[4e-8, 4e-8]],
    )


class LimitColumn(Model):
    """How a limit is held, case by case."""

    name: str | None = Field(None, description="What the limit is called.", examples=["touch temperature"])
    result: str = Field(description="The name of the result.", examples=["probe A"])
    at_most: float | None = Field(None, description="The limit above, in the result's unit.", examples=[60])
    at_least: float | None = Field(None, description="The limit below, in the result's unit.", examples=[5])
    unit_of_margins: str = Field(description="Unit of differences of the result.", examples=["K"])
    margins: list[float | None] = Field(
        description="By how much it holds in each case, negative where it does not; null where there is no result.",
        examples=[[5.8, 6.1]],
    )
    error_bounds: list[float | None] = Field(
        description="The margin is no further off than this; null where there is none or no finite bound.",
        examples=[[4e-8, 4e-8]],
    )
    held: list[HeldWord | None] = Field(
        description="Whether it holds for certain in each case; null where there is no result.",
        examples=[["yes", "yes"]],
    )


class CasesAnswer(AnalysisAnswer):
    """The results of every case, as columns."""

    case_count: int = Field(description="How many cases there are.", examples=[2])
    numbers: list[NumberColumn] = Field(description="The numbers, one column each.")
    columns: list[ResultColumn] = Field(description="The results, one column each.")
    limits: list[LimitColumn] = Field(description="The limits, one column each.")
    failures: list[FailureAnswer] = Field(description="The cases that could not be computed, and why.")
