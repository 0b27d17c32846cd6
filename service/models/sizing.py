"""The question where one number makes limits hold, or a result have a value."""

from __future__ import annotations

from typing import Literal, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Quantity
from service.models.evaluate import Name
from service.models.limits import AnalysisQuestion, Limits
from service.models.numbers import NumberReference

FEWEST_PLACES, MOST_PLACES, USUAL_PLACES = 5, 1025, 33
MOST_SIZES = 200


class SizedNumber(NumberReference):
    """The number that is looked for, and its range."""

    low: Quantity = Field(
        description="Lower end of the range that is looked at, in the unit of the number.", examples=[5]
    )
    high: Quantity = Field(description="Upper end of the range.", examples=[200, "20 cm"])
    spread: Literal["even", "logarithmic"] = Field(
        "even",
        description="How the first places are spread over the range: evenly, or with equal ratios, for a range over "
        "decades; that needs ends above zero.",
        examples=["logarithmic"],
    )
    count: int = Field(
        USUAL_PLACES,
        ge=FEWEST_PLACES,
        le=MOST_PLACES,
        description="How many places are looked at first, both ends included. What is narrower than their spacing and "
        "does not show on them can be missed.",
        examples=[65],
    )


class Target(Model):
    """The value a result is to have."""

    result: Name = Field(description="The name of the result.", examples=["probe A"])
    equals: Quantity = Field(description="The value it is to have, in its own unit.", examples=[60, "333 K"])


class SizingQuestion(AnalysisQuestion):
    """Where one number makes all limits hold, or a result have a value."""

    number: SizedNumber = Field(
        description="The number that is looked for.",
        examples=[{"name": "thickness", "at": "/problem/body/size/z", "low": 50, "high": 400}],
    )
    limits: Limits | None = Field(
        None,
        description="Limits that all have to hold. Give these or `target`.",
        examples=[[{"result": "probe A", "at_most": 60}]],
    )
    target: Target | None = Field(
        None,
        description="A value that a result is to have. Give this or `limits`.",
        examples=[{"result": "probe A", "equals": 60}],
    )
    sizes: list[Quantity] = Field(
        default_factory=list,
        max_length=MOST_SIZES,
        description="Values of the number that can be had, such as sizes in stock: of each it is told whether all "
        "limits hold. Beside `limits` only.",
        examples=[[100, 114, 150, "230 mm"]],
    )

    @model_validator(mode="after")
    def _one_aim(self) -> Self:
        if bool(self.limits) == (self.target is not None):
            raise PydanticCustomError("one_of", "Give `limits` or `target`, one of them.")
        if self.target is not None and self.sizes:
            raise PydanticCustomError("sizes", "`sizes` are held against limits; give `limits` in place of `target`.")
        return self
