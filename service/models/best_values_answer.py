"""The answer to POST /v1/best-values."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer, ResultAnswer
from service.models.base import Model
from service.models.limits_answer import HeldWord, LimitAnswer


class BestNumber(Model):
    """The best value of one number."""

    name: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    value: float = Field(description="The best value that was found.", examples=[1240])
    as_it_stands: float = Field(description="Its value in the request as it stands.", examples=[850])
    at_end: Literal["low", "high"] | None = Field(
        description="Whether it is at an end of its range, so that a wider range would do better; null if not.",
        examples=["high"],
    )


class GoalReached(Model):
    """What was to be best."""

    unit: str = Field(description="Its unit.", examples=["degC"])
    value: float = Field(
        description="The largest (beside `maximise` the least) of the results of the goal, with the best values.",
        examples=[71.3],
    )
    error_bound: float = Field(
        description="It is no further off than this with these values of the numbers.", examples=[4e-8]
    )
    search_error_estimate: float | None = Field(
        description="Estimate of how much better it could be nearby, from where the searches stopped, how far apart "
        "those are that came to the same, and how far inside of limits they are kept. null where nothing is known of "
        "it: limits are missed, no search converged there, or results have kinks there. Nothing is said of what lies "
        "elsewhere.",
        examples=[3e-6],
    )
    leading: list[str] = Field(
        description="Names of the results of the goal that are the largest (least) together.",
        examples=[["pad A", "pad B"]],
    )
    as_it_stands: float | None = Field(
        description="The same with the numbers as they stand; null where these lie outside their ranges or the case "
        "fails.",
        examples=[84.6],
    )
    as_it_stands_error_bound: float | None = Field(
        description="It is no further off than this; null with it.", examples=[4e-8]
    )
    improvement: float | None = Field(
        description="By how much the best values do better, in the unit of differences; null with it, and where the "
        "best values do not hold the limits. It may be negative where limits do not hold as it stands.",
        examples=[13.3],
    )


class BestLimit(LimitAnswer):
    """Whether a limit holds with the best values."""

    binds: bool = Field(description="Whether it holds only just: without it better values can be had.", examples=[True])
    holds_elsewhere: bool = Field(
        description="Whether it surely holds in some case that was computed.", examples=[True]
    )


class Clearance(Model):
    """How far apart rectangles are."""

    least_distance: float = Field(description="The least distance of two of them; unit `length`.", examples=[2.2])
    gap: float = Field(description="How far apart they have to be; unit `length`.", examples=[1.5])
    beyond_gap: float = Field(
        description="How much farther apart than that they are; unit `length`, not negative.", examples=[0.7]
    )
    between: list[int] = Field(description="Which two, by their places in the list.", examples=[[0, 2]])


class BestCase(Model):
    """The best case that was computed."""

    numbers: list[BestNumber] = Field(description="The numbers, in the order asked.")
    results: list[ResultAnswer] = Field(description="All results with these numbers.")
    goal: GoalReached = Field(description="What was to be best.")
    all_held: HeldWord = Field(
        description="Whether all limits hold with these values. `no`: no values were found with which they do; these "
        "are the ones that miss them least.",
        examples=["yes"],
    )
    limits: list[BestLimit] = Field(description="Each limit, in the order asked.")
    apart: list[Clearance] = Field(description="The distances of each list of rectangles, in the order asked.")


class LocalSearch(Model):
    """A local search."""

    first: list[float] = Field(description="The numbers it began with.", examples=[[850]])
    first_goal: float = Field(description="The goal there.", examples=[84.6])
    last: list[float] = Field(description="The numbers it ended with.", examples=[[1240]])
    last_goal: float = Field(description="The goal there; limits may be missed by it.", examples=[71.3])
    ended: Literal["converged", "no step", "steps used up", "cases used up"] = Field(
        description="Why: no step promised to do better; none that did was kept by the results, as at a kink or beside "
        "cases that fail; or it was stopped.",
        examples=["converged"],
    )
    same_goal: bool = Field(description="Whether it came to the goal of the best case, nearly.", examples=[True])
    same_numbers: bool = Field(
        description="Whether it also came to the same numbers, to a hundredth of their ranges.", examples=[True]
    )


class FailureSeen(Model):
    """A reason for which cases failed."""

    code: str = Field(description="A short word for programs.", examples=["not-physical"])
    message: str = Field(
        description="The first sentence that was said.",
        examples=["/problem/body/size/x: The size is -2 mm; it has to be greater than zero."],
    )


class BestValuesOutcome(Model):
    """What the searches came to."""

    best: BestCase | None = Field(description="The best case that was computed; null if there is none.")
    reason: str | None = Field(
        description="Why there is none, where there is none.",
        examples=["No place was found at which all rectangles are as far apart as they have to be."],
    )
    searches: list[LocalSearch] = Field(description="The local searches, best first.")
    same_goal_count: int = Field(description="How many of them came to the goal of the best case.", examples=[4])
    case_count: int = Field(description="How many cases were computed.", examples=[164])
    failed_count: int = Field(description="How many of them failed.", examples=[0])
    failures: list[FailureSeen] = Field(description="Reasons for which cases failed, each once.")
    complete: bool = Field(
        description="false where searches were stopped because `most_cases` were computed.", examples=[True]
    )


class BestValuesAnswer(AnalysisAnswer):
    """Which values of a few numbers are best."""

    best_values: BestValuesOutcome = Field(description="What the searches came to.")
