"""The answer to POST /v1/sizing."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer
from service.models.base import Model
from service.models.limits_answer import HeldWord


class RangeOfNumber(Model):
    """The number that was looked for."""

    name: str = Field(description="Its name.", examples=["thickness"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["mm"])
    low: float = Field(description="Lower end of the range that was looked at.", examples=[50])
    high: float = Field(description="Upper end of the range.", examples=[400])
    as_it_stands: float = Field(description="Its value in the request as it stands.", examples=[300])


class _OfLimit(Model):
    """Which limit is meant."""

    limit: int | None = Field(
        description="Number of the limit, counted from 0 in the order asked; null beside `target`, and where none is "
        "meant.",
        examples=[0],
    )
    result: str | None = Field(description="The name of its result; null where none is meant.", examples=["probe A"])


class Edge(_OfLimit):
    """Where an interval ends."""

    kind: Literal["limit", "range", "invalid"] = Field(
        description="`limit`: beyond it a limit does not hold. `range`: the end of the range that was looked at. "
        "`invalid`: beyond it there is no body, or no result.",
        examples=["limit"],
    )
    value: float = Field(description="Value of the number there, in its unit.", examples=[212.6])
    error_bound: float = Field(
        description="The true edge is no further off than this: on either side, at this distance or nearer, the limit "
        "is decided. Beyond an `invalid` edge: the distance to the nearest value that failed.",
        examples=[2e-7],
    )
    slope: float | None = Field(
        description="Change of the limit's result by the number there, in the result's unit (that of differences) per "
        "unit of the number; null where there is none.",
        examples=[-0.83],
    )
    slope_error_estimate: float | None = Field(
        description="Estimate of how far off the slope is; null with it.", examples=[4e-6]
    )


class Interval(Model):
    """All limits hold within it."""

    low: Edge = Field(description="Its lower end.")
    high: Edge = Field(description="Its upper end.")


class WorstLimit(_OfLimit):
    """A value of the number with the limit that holds worst there."""

    value: float = Field(description="Value of the number, in its unit.", examples=[212.6])
    margin: float | None = Field(
        description="Margin of the limit that holds worst, negative where it does not hold, in the unit of differences "
        "of its result. Beside `target`: the result less the value it is to have.",
        examples=[-1.4],
    )
    error_bound: float | None = Field(description="The margin is no further off than this.", examples=[4e-8])


class Touch(WorstLimit):
    """Where a limit is met, and the errors leave open whether it is passed.

    Several limits of different units are compared in parts of how far their margins change over the range.
    """

    low: float = Field(description="It is decided below this value of the number, or the range ends.", examples=[212.5])
    high: float = Field(description="It is decided above this value, or the range ends.", examples=[212.7])


class Invalid(Model):
    """A part of the range without results."""

    low: float = Field(description="The lowest value of the number that failed.", examples=[380.2])
    high: float = Field(description="The highest value that failed.", examples=[400])
    error_bound: float = Field(
        description="Values further away than this from the part did not fail, unless the range ends.", examples=[1e-5]
    )
    code: str = Field(description="A short word for programs.", examples=["not-physical"])
    message: str = Field(
        description="Why, in a sentence, of one of them.",
        examples=["/problem/body/size/x: The size is -2 mm; it has to be greater than zero."],
    )


class SizeAnswer(WorstLimit):
    """Whether one size of the list holds."""

    held: HeldWord | None = Field(
        description="Whether all limits hold with this size: `yes` and `no` are certain. null where the case could not "
        "be computed.",
        examples=["yes"],
    )
    code: str | None = Field(
        None, description="A short word for why the case could not be computed.", examples=["unit"]
    )
    message: str | None = Field(
        None, description="Why it could not, in a sentence.", examples=["/problem/body/size/x: The size is 0 mm."]
    )


class SizesAnswer(Model):
    """The sizes of the list."""

    each: list[SizeAnswer] = Field(description="Each size, in the order asked.")
    least: float | None = Field(
        description="The least that surely holds all limits; null if none does.", examples=[230]
    )
    greatest: float | None = Field(description="The greatest that does; null if none does.", examples=[345])


class SizingOutcome(Model):
    """Where the limits hold, or the result has its value."""

    number: RangeOfNumber = Field(description="The number that was looked for.")
    holds: Literal["everywhere", "somewhere", "nowhere", "undecided"] | None = Field(
        description="Where in the range all limits hold. `undecided`: nowhere for certain, but perhaps where one is "
        "touched. null beside `target`.",
        examples=["somewhere"],
    )
    intervals: list[Interval] = Field(
        description="Where all limits hold, in order; empty where they hold nowhere, and beside `target`."
    )
    solutions: list[Edge] = Field(
        description="Where the result passes through the value it is to have, in order; empty where it does not, and "
        "beside `limits`."
    )
    touches: list[Touch] = Field(
        description="Where a limit, or the value, is met to within the errors without being passed for certain."
    )
    nearest: WorstLimit | None = Field(
        description="Where limits hold nowhere: the value of the number at which the worst of them is missed least, "
        "and by how much. Where a result does not pass through its value: where it comes nearest. null otherwise."
    )
    invalid: list[Invalid] = Field(description="Parts of the range without results, and why.")
    sizes: SizesAnswer | None = Field(description="The sizes that can be had; null where none were asked about.")
    spacing: float = Field(
        description="Widest spacing of the places looked at first, in the unit of the number. Between neighbours that "
        "agree an edge was looked for only where they come near a limit: what is narrower than this may be missed.",
        examples=[10.9],
    )
    case_count: int = Field(description="How many cases were computed.", examples=[49])


class SizingAnswer(AnalysisAnswer):
    """Where one number makes all limits hold, or a result have a value."""

    sizing: SizingOutcome = Field(description="What was found.")
