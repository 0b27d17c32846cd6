"""The question how each result changes with each number."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from service.models.base import Quantity
from service.models.limits import AnalysisQuestion
from service.models.numbers import MOST_NUMBERS, NumberReference


class VariedNumber(NumberReference):
    """A number that is varied about its nominal value."""

    step: Quantity | None = Field(
        None,
        description="By how much the number is varied at first, in the unit of its differences, greater than zero. If "
        "left out a 64th of the number; where that is zero, a 64th of the shortest side of the body for a length, of "
        "the span of the data for a potential, of the largest number it is added to for a shift, and 1 for others. It "
        "is changed as the results need it, so that it rarely has to be given.",
        examples=[0.5, "20 um"],
    )


VariedNumbers = Annotated[list[VariedNumber], Field(min_length=1, max_length=MOST_NUMBERS)]


class SensitivitiesQuestion(AnalysisQuestion):
    """How each result changes with each number."""

    numbers: VariedNumbers = Field(
        description="The numbers by which results are differentiated.",
        examples=[[{"name": "film", "at": "/problem/faces/x_high/coefficient"}]],
    )
