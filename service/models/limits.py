"""Limits on results, and the question whether they hold."""

from __future__ import annotations

from typing import Annotated, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Quantity
from service.models.evaluate import Name, Question
from service.models.results import Results

MOST_LIMITS = 200


class Limit(Model):
    """What a result must not pass, on one side or both."""

    name: Name | None = Field(None, description="What to call the limit in the answer.", examples=["touch temperature"])
    result: Name = Field(description="The name of the result.", examples=["probe A"])
    at_most: Quantity | None = Field(
        None, description="The result has to be at most this, in its own unit.", examples=[60, "333 K"]
    )
    at_least: Quantity | None = Field(
        None, description="The result has to be at least this, in its own unit.", examples=[5]
    )

    @model_validator(mode="after")
    def _a_side(self) -> Self:
        if self.at_most is None and self.at_least is None:
            raise PydanticCustomError("nothing", "Give `at_most`, `at_least` or both.")
        return self


Limits = Annotated[list[Limit], Field(max_length=MOST_LIMITS)]


class AnalysisQuestion(Question):
    """A problem and what is read off it."""

    results: Results


class LimitsQuestion(AnalysisQuestion):
    """Whether limits hold."""

    limits: Limits = Field(
        default_factory=list,
        description="What the results must not pass; without any the results alone are told.",
        examples=[[{"result": "probe A", "at_most": 60}]],
    )
