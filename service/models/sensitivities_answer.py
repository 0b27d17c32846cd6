"""The answer to POST /v1/sensitivities."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer
from service.models.base import Model

SideWord = Literal["both", "below", "above"]


class WhyNot(Model):
    """Why something could not be computed."""

    code: str = Field(description="A short word for programs.", examples=["no-steady-state"])
    message: str = Field(
        description="Why, in a sentence.",
        examples=["/problem/body/size/x: The size is -2 mm; it has to be greater than zero."],
    )


class VariedNumberAnswer(Model):
    """A number as it was varied."""

    name: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    nominal: float = Field(description="Its value in the request as it stands.", examples=[850])
    varied: SideWord = Field(
        description="Whether it was varied to both sides or, because cases fail on the other, to one side only.",
        examples=["both"],
    )
    reason: WhyNot | None = Field(None, description="Why it could not be varied at all; left out if it could.")


class DerivativeAnswer(Model):
    """The derivative of one result by one number, null where the number could not be varied or the result has none."""

    result: str = Field(description="The name of the result.", examples=["probe A"])
    number: str = Field(description="The name of the number.", examples=["film"])
    unit: str = Field(
        description="Unit of differences of the result over that of the number.", examples=["K/(W/(m^2 K))"]
    )
    derivative: float | None = Field(
        description="Change of the result over change of the number; at a kink the mean of both sides.",
        examples=[-0.0123],
    )
    error_estimate: float | None = Field(
        description="How far off the derivative may be: the error bounds of the values it was computed from, carried "
        "through, which holds for certain, and an estimate of what their number leaves out, which steps of a "
        "thousandth and a millionth of the varied interval do not contradict. At a kink it reaches to "
        "the derivatives on both sides. Null where a value has no finite bound.",
        examples=[3e-9],
    )
    smooth: bool = Field(
        description="False where the result has a kink at the nominal number, as the highest potential has where two "
        "places compete, or where no derivative was found to converge.",
        examples=[True],
    )
    affine: bool = Field(
        description="True where the result was not seen to bend: it changes in proportion to the number, as far as its "
        "error bounds tell.",
        examples=[False],
    )
    below: float | None = Field(
        description="The derivative towards smaller numbers; the same as `derivative` but for a kink.",
        examples=[-0.0123],
    )
    above: float | None = Field(
        description="The derivative towards larger numbers; the same as `derivative` but for a kink.",
        examples=[-0.0123],
    )
    second_derivative: float | None = Field(
        description="How the derivative changes with the number, per unit of the number; null at a kink. Over a change "
        "d of the number the result bends by half of it times d squared.",
        examples=[2.1e-5],
    )
    second_error_estimate: float | None = Field(
        description="How far off the second derivative may be; null where a value has no finite bound.",
        examples=[4e-9],
    )
    per_cent: float | None = Field(
        description="By how much the result changes for one per cent more of the number, to first order, in the unit "
        "of its differences; null for a number that is zero or counts from no zero of its own, such as one in degC.",
        examples=[-0.105],
    )
    relative: float | None = Field(
        description="Per cent by which the result changes for one per cent more of the number, d ln result over "
        "d ln number; null where either is zero or counts from no zero of its own.",
        examples=[-0.42],
    )
    rank: int | None = Field(
        description="1 for the number of which one per cent changes this result most, 2 for the next, and so on; null "
        "where `per_cent` is, and where the derivative may be zero as far as its error tells.",
        examples=[1],
    )


class SensitivitiesAnswer(AnalysisAnswer):
    """How each result changes with each number."""

    numbers: list[VariedNumberAnswer] = Field(description="The numbers, in the order asked.")
    derivatives: list[DerivativeAnswer] = Field(
        description="Every result by every number: the numbers of the first result, of the second, and so on."
    )
    case_count: int = Field(description="How many cases were computed.", examples=[25])
