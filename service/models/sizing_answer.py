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


class NumberInCase(Model):
    """A number as it is in one case."""

    number: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    value: float = Field(description="Its value there.", examples=[11.2])


class ToleranceZoneAnswer(Model):
    """A number that may be off."""

    number: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    nominal: float | None = Field(
        description="Its value as it stands; null for the number that is sized.", examples=[14]
    )
    plus: float = Field(description="How far upwards it may be off, in the unit of its differences.", examples=[2.8])
    minus: float = Field(description="How far downwards.", examples=[2.8])


class _OfLimit(Model):
    """Which limit is meant."""

    limit: int | None = Field(
        description="Number of the limit, counted from 0 in the order asked; null beside `target`, and where none is "
        "meant.",
        examples=[0],
    )
    name: str | None = Field(
        description="What the limit is called; null where it has no name, and where none is meant.",
        examples=["touch temperature"],
    )
    result: str | None = Field(description="The name of its result; null where none is meant.", examples=["probe A"])


class Edge(_OfLimit):
    """Where an interval ends."""

    kind: Literal["limit", "target", "range", "invalid"] = Field(
        description="`limit`: beyond it a limit does not hold. `target`: the result passes through the value it is to "
        "have. `range`: the end of the range that was looked at. `invalid`: beyond it there is no body, or no result.",
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
    corner: list[NumberInCase] | None = Field(
        None,
        description="Beside tolerances: the case around this value that holds the limit worst, the number itself "
        "first. Left out elsewhere.",
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
    corner: list[NumberInCase] | None = Field(
        None,
        description="Beside tolerances: the case around this value that holds the limit worst, the number itself "
        "first. Left out elsewhere.",
    )


class MissedLimit(_OfLimit):
    """A limit that does not hold for certain."""

    margin: float = Field(
        description="Its margin, in the unit of differences of its result; beside `target` the result less the value.",
        examples=[-5],
    )
    error_bound: float = Field(description="The margin is no further off than this.", examples=[4e-8])
    holds_elsewhere: bool = Field(
        description="Whether it surely holds at some other value of the number that was looked at: limits of which "
        "each does exclude each other.",
        examples=[True],
    )


class Nearest(WorstLimit):
    """Where limits are missed least."""

    missed: list[MissedLimit] = Field(
        description="All limits that do not hold for certain there, worst first; empty beside `target`."
    )


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
    nearest: Nearest | None = Field(
        description="Where limits hold nowhere: the value of the number at which the worst of them is missed least, "
        "and by how much; the one nearest to the number as it stands if it makes no difference. Where a result does "
        "not pass through its value: where it comes nearest. null otherwise."
    )
    invalid: list[Invalid] = Field(description="Parts of the range without results, and why.")
    sizes: SizesAnswer | None = Field(description="The sizes that can be had; null where none were asked about.")
    tolerances: list[ToleranceZoneAnswer] | None = Field(
        None, description="What may be off, the number itself first; left out without tolerances."
    )
    spacing: float | None = Field(
        description="Spacing of the places looked at first, in the unit of the number. Between neighbours that agree "
        "an edge was looked for only where an extreme shows on them: what is narrower than this may be missed. null "
        "where they are spread with equal ratios.",
        examples=[10.9],
    )
    spacing_ratio: float | None = Field(
        description="Ratio of each place looked at first to the one before, where they are spread with equal ratios; "
        "null elsewhere.",
        examples=[1.33],
    )
    case_count: int = Field(description="How many cases were computed.", examples=[49])
    complete: bool = Field(
        description="false where the search was stopped because `most_cases` were computed.", examples=[True]
    )


class SizingAnswer(AnalysisAnswer):
    """Where one number makes all limits hold, or a result have a value."""

    sizing: SizingOutcome = Field(description="What was found.")
