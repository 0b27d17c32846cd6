"""What the answers of all decisions carry."""

from __future__ import annotations

from pydantic import Field

from service.models.answers import Answer
from service.models.base import Model


class ResultAnswer(Model):
    """A result of the request as it stands."""

    name: str = Field(description="Its name.", examples=["probe A"])
    unit: str = Field(description="Its unit.", examples=["degC"])
    value: float = Field(description="Its value.", examples=[54.2])
    error_bound: float | None = Field(
        description="The value is no further off than this, in the unit of its differences; null where no finite bound "
        "is known.",
        examples=[4e-8],
    )
    at: list[float | None] | None = Field(
        None,
        description="Of a highest or lowest potential: where it was found, along x, y and z; unit `length`. null where "
        "it lies infinitely far.",
        examples=[[20, 30, 0]],
    )


class AnalysisAnswer(Answer):
    """What follows from the problem for a decision."""

    results: list[ResultAnswer] = Field(description="The results of the request as it stands, in the order asked.")


class FailureAnswer(Model):
    """A case that could not be computed."""

    case: int = Field(description="Number of the case, counted from 0.", examples=[17])
    code: str = Field(description="A short word for programs.", examples=["no-steady-state"])
    message: str = Field(
        description="Why, in a sentence.",
        examples=["/problem/body/size/x: The size is -2 mm; it has to be greater than zero."],
    )
