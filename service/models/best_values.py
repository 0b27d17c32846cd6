"""The question which values of a few numbers are best."""

from __future__ import annotations

from typing import Annotated, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Quantity
from service.models.evaluate import Name
from service.models.limits import AnalysisQuestion, Limits
from service.models.numbers import NumberReference, Pointer

MOST_VARIED = 20
MOST_OF_GOAL = 100
MOST_STARTS = 32
MOST_CASES, USUAL_CASES = 200_000, 1000
MOST_APART, MOST_RECTANGLES = 20, 100


class VariedNumber(NumberReference):
    """A number whose best value is looked for, and its range."""

    low: Quantity = Field(description="Least value it may have, in the unit of the number.", examples=[5])
    high: Quantity = Field(description="Greatest value it may have.", examples=[40, "4 cm"])


_Names = Annotated[list[Name], Field(min_length=1, max_length=MOST_OF_GOAL)]


class Goal(Model):
    """What is best."""

    minimise: _Names | None = Field(
        None,
        description="Names of results of one unit whose largest is to be as low as can be.",
        examples=[["pad A", "pad B"]],
    )
    maximise: _Names | None = Field(
        None,
        description="Names of results of one unit whose least is to be as high as can be.",
        examples=[["flow"]],
    )

    @model_validator(mode="after")
    def _one_way(self) -> Self:
        if (self.minimise is None) == (self.maximise is None):
            raise PydanticCustomError("one_of", "Give `minimise` or `maximise`, one of them.")
        return self


class Apart(Model):
    """Rectangles that have to keep apart, whatever the numbers are."""

    rectangles: list[Pointer] = Field(
        min_length=2,
        max_length=MOST_RECTANGLES,
        description="Pointers to patches of one face, or to sources: whatever has a from and to along the same axes. "
        "Each two of them keep apart along one of these axes.",
        examples=[["/problem/faces/z_high/inflow/patches/0", "/problem/faces/z_high/inflow/patches/1"]],
    )
    gap: Quantity = Field(0, description="How far apart they have to be at least; a length.", examples=[0.5, "200 um"])


class BestValuesQuestion(AnalysisQuestion):
    """Which values of a few numbers are best."""

    numbers: list[VariedNumber] = Field(
        min_length=1,
        max_length=MOST_VARIED,
        description="The numbers that may be chosen.",
        examples=[[{"name": "film", "at": "/problem/faces/x_high/coefficient", "low": 100, "high": 2000}]],
    )
    goal: Goal = Field(description="What is best.", examples=[{"minimise": ["pad A", "pad B"]}])
    limits: Limits = Field(
        default_factory=list,
        description="Limits that have to hold.",
        examples=[[{"result": "probe A", "at_most": 60}]],
    )
    apart: list[Apart] = Field(
        default_factory=list,
        max_length=MOST_APART,
        description="Rectangles that have to keep apart. That is watched without computing cases.",
        examples=[
            [
                {
                    "rectangles": ["/problem/faces/z_high/inflow/patches/0", "/problem/faces/z_high/inflow/patches/1"],
                    "gap": 0.5,
                }
            ]
        ],
    )
    starts: int = Field(
        3,
        ge=1,
        le=MOST_STARTS,
        description="How many local searches are begun from the best of the places looked at first, beside one from "
        "the numbers as they stand.",
        examples=[5],
    )
    most_cases: int = Field(
        USUAL_CASES,
        ge=1,
        le=MOST_CASES,
        description="No more cases than this are computed; the best of them is the answer.",
        examples=[2000],
    )
    seed: int = Field(
        0,
        ge=0,
        le=2**32 - 1,
        description="Decides the places looked at first: the same seed gives the same.",
        examples=[7],
    )
