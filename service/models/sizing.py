"""The question where one number makes limits hold, or a result have a value."""

from __future__ import annotations

from typing import Literal, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Number, Quantity
from service.models.evaluate import Name
from service.models.limits import AnalysisQuestion, Limits
from service.models.numbers import NumberReference

FEWEST_PLACES, MOST_PLACES, USUAL_PLACES = 5, 1025, 33
MOST_SIZES = 200
MOST_CASES = 200_000

# Each more doubles the cases at every place.
MOST_TOLERANCES = 5


class ToleranceOfNumber(NumberReference):
    """A number that may be off, and by how much."""

    plus_minus: Quantity | None = Field(
        None, description="Tolerance to either side, in the unit of differences of the number.", examples=[0.2]
    )
    plus: Quantity | None = Field(None, description="Tolerance upwards, not negative.", examples=["300 um"])
    minus: Quantity | None = Field(None, description="Tolerance downwards, not negative.", examples=["100 um"])
    relative: Number | None = Field(
        None, description="Tolerance to either side in parts of the number; 0.05 for 5 %.", examples=[0.05]
    )

    @model_validator(mode="after")
    def _one_zone(self) -> Self:
        ways = (self.plus_minus, self.relative, self.plus if self.plus is not None else self.minus)
        if sum(way is not None for way in ways) != 1:
            raise PydanticCustomError(
                "one_of", "Give the tolerance by `plus_minus`, `plus` and `minus`, or `relative`, one of them."
            )
        return self


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
    plus_minus: Quantity | None = Field(
        None,
        description="How far off the number itself may turn out, to either side, in the unit of its differences: "
        "limits have to hold that far off as well.",
        examples=[2],
    )
    plus: Quantity | None = Field(
        None, description="In place of `plus_minus`: how far off upwards, not negative.", examples=[3]
    )
    minus: Quantity | None = Field(
        None, description="In place of `plus_minus`: how far off downwards, not negative.", examples=["1 mm"]
    )

    @model_validator(mode="after")
    def _one_zone(self) -> Self:
        if self.plus_minus is not None and (self.plus is not None or self.minus is not None):
            raise PydanticCustomError("one_of", "Give `plus_minus`, or `plus` and `minus`.")
        return self

    @property
    def is_off(self) -> bool:
        """Whether it has a tolerance of its own."""
        return any(way is not None for way in (self.plus_minus, self.plus, self.minus))


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
    tolerances: list[ToleranceOfNumber] = Field(
        default_factory=list,
        max_length=MOST_TOLERANCES,
        description="Other numbers that may be off: limits have to hold with the nominal numbers, at every corner of "
        "the tolerance zone and at the ends of each tolerance alone. These are computed, nothing between them. At most "
        f"{MOST_TOLERANCES} tolerances, with that of the number itself; with n of them each place takes up to "
        "1 + 2 n + 2^n cases. Beside `limits` only.",
        examples=[[{"name": "film", "at": "/problem/faces/z_high/coefficient", "relative": 0.2}]],
    )
    most_cases: int | None = Field(
        None,
        ge=1,
        le=MOST_CASES,
        description="No more cases than this are computed; edges are then told as far as they are known. At least "
        "those of `count` and `sizes`. If left out 160 places more than these, each with its tolerances.",
        examples=[500],
    )

    @model_validator(mode="after")
    def _one_aim(self) -> Self:
        if bool(self.limits) == (self.target is not None):
            raise PydanticCustomError("one_of", "Give `limits` or `target`, one of them.")
        if self.target is not None and self.sizes:
            raise PydanticCustomError("sizes", "`sizes` are held against limits; give `limits` in place of `target`.")
        if self.target is not None and (self.tolerances or self.number.is_off):
            raise PydanticCustomError(
                "tolerances",
                "Limits can hold all over a tolerance zone, a value cannot: give `limits`, or no tolerances.",
            )
        return self
