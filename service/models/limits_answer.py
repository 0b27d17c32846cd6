"""The answer to POST /v1/limits."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer
from service.models.base import Model

HeldWord = Literal["yes", "no", "undecided"]


class LimitAnswer(Model):
    """Whether one limit holds."""

    name: str | None = Field(None, description="What the limit is called.", examples=["touch temperature"])
    result: str = Field(description="The name of the result.", examples=["probe A"])
    at_most: float | None = Field(None, description="The limit above, in the result's unit.", examples=[60])
    at_least: float | None = Field(None, description="The limit below, in the result's unit.", examples=[5])
    held: HeldWord = Field(
        description="Whether it holds. `yes` and `no` are certain: the margin is larger than the error bound, so that "
        "no error of the result turns it over. `undecided` where it is not.",
        examples=["yes"],
    )
    margin: float = Field(
        description="By how much it holds, on the nearer side; negative where it does not. In the unit of differences "
        "of the result.",
        examples=[5.8],
    )
    error_bound: float | None = Field(
        description="The margin is no further off than this; null where no finite bound is known.", examples=[4e-8]
    )


class LimitsAnswer(AnalysisAnswer):
    """Whether limits hold."""

    limits: list[LimitAnswer] = Field(description="Each limit, in the order asked.")
    all_held: HeldWord = Field(
        description="`no` if one limit surely does not hold, `yes` if all surely do, `undecided` otherwise.",
        examples=["yes"],
    )
