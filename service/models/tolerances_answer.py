"""The answer to POST /v1/tolerances."""

from __future__ import annotations

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer
from service.models.base import Model
from service.models.sensitivities_answer import WhyNot


class TolerancedNumberAnswer(Model):
    """A number, its tolerance zone and its spread."""

    name: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    nominal: float = Field(description="Its value in the request as it stands.", examples=[850])
    plus: float = Field(description="Tolerance upwards, in the unit of its differences.", examples=[170])
    minus: float = Field(description="Tolerance downwards, in the unit of its differences.", examples=[170])
    mean: float = Field(description="Mean of its distribution.", examples=[850])
    standard_deviation: float = Field(description="Standard deviation of its distribution.", examples=[56.7])
    reason: WhyNot | None = Field(
        None, description="Why the results could not be differentiated by it; left out if they could."
    )


class CornerAnswer(Model):
    """A result at one corner of the tolerance zones, computed."""

    value: float | None = Field(description="The result there; null where it could not be computed.", examples=[57.1])
    error_bound: float | None = Field(
        description="It is no further off than this; null where no finite bound is known.", examples=[4e-8]
    )
    numbers: list[float] = Field(description="The numbers there, in their order.", examples=[[1020, 39.8]])
    reason: WhyNot | None = Field(None, description="Why it could not be computed; left out if it could.")


class ContributionAnswer(Model):
    """What one number adds to a stack-up."""

    number: str = Field(description="The name of the number.", examples=["film"])
    unit: str = Field(description="Unit of the derivative.", examples=["K/(W/(m^2 K))"])
    derivative: float | None = Field(
        description="Change of the result over change of the number; null where it is not known.", examples=[-0.0123]
    )
    error_estimate: float | None = Field(
        description="How far off the derivative may be, as POST /v1/sensitivities tells it.", examples=[3e-9]
    )
    smooth: bool = Field(description="False where the result has a kink at the nominal number.", examples=[True])
    low: float | None = Field(
        description="By how much it lowers the result in the worst case, not negative.", examples=[2.1]
    )
    high: float | None = Field(
        description="By how much it raises the result in the worst case, not negative.", examples=[2.1]
    )
    square_share: float | None = Field(
        description="Its part of the square of the root sum square; all add up to 1, and one may be negative where "
        "numbers are correlated.",
        examples=[0.62],
    )
    variance_share: float | None = Field(
        description="Its part of the variance of the result to first order, from its distribution: its covariance with "
        "the result over the variance.",
        examples=[0.62],
    )


class StackUpAnswer(Model):
    """What the tolerances add up to in one result, to first order, and the result at the worst corners."""

    result: str = Field(description="The name of the result.", examples=["probe A"])
    unit: str = Field(description="Its unit.", examples=["degC"])
    nominal: float = Field(description="The result as the request stands.", examples=[54.2])
    worst_low: float | None = Field(description="Lowest in the worst case, to first order.", examples=[49.9])
    worst_high: float | None = Field(description="Highest in the worst case, to first order.", examples=[58.5])
    middle: float | None = Field(
        description="The result with all numbers in the middles of their zones, to first order.", examples=[54.2]
    )
    root_sum_square: float | None = Field(
        description="To either side of the middle: half zones added as standard deviations are, correlations heeded.",
        examples=[2.6],
    )
    standard_deviation: float | None = Field(
        description="Of the result to first order, from the distributions of the numbers.", examples=[0.87]
    )
    error_estimate: float | None = Field(
        description="How far off the worst cases and the root sum square may be because the derivatives and the "
        "nominal result are; what bends beyond first order shows at the corners.",
        examples=[5e-7],
    )
    low_corner: CornerAnswer = Field(description="The result where it is lowest to first order.")
    high_corner: CornerAnswer = Field(description="The result where it is highest to first order.")
    contributions: list[ContributionAnswer] = Field(
        description="What each number adds, those that add most to the root sum square first."
    )


class EstimateAnswer(Model):
    """A value with its interval."""

    value: float | None = Field(description="The estimate; null where no case has results.", examples=[0.973])
    low: float | None = Field(
        description="Lower end of the interval; null where the samples do not tell.", examples=[0.961]
    )
    high: float | None = Field(
        description="Upper end of the interval; null where the samples do not tell.", examples=[0.982]
    )


class ProbabilityAnswer(EstimateAnswer):
    """How often limits hold. The interval never comes to certainty; undecided and failed cases widen it both ways."""

    undecided_cases: int = Field(
        description="Cases whose margin is within the error bound: they count as not held towards the lower end and as "
        "held towards the upper.",
        examples=[0],
    )


class ToleranceLimitAnswer(Model):
    """How a limit fares under the tolerances."""

    name: str | None = Field(None, description="What the limit is called.", examples=["touch temperature"])
    result: str = Field(description="The name of the result.", examples=["probe A"])
    at_most: float | None = Field(None, description="The limit above, in the result's unit.", examples=[60])
    at_least: float | None = Field(None, description="The limit below, in the result's unit.", examples=[5])
    worst_case_margin: float | None = Field(
        description="By how much it holds in the worst case to first order, negative where it does not.", examples=[1.5]
    )
    root_sum_square_margin: float | None = Field(
        description="By how much it holds for the middle and the root sum square to either side.", examples=[3.2]
    )
    error_estimate: float | None = Field(
        description="How far off these two margins may be because the derivatives and the nominal result are.",
        examples=[5e-7],
    )
    corner_margin: float | None = Field(
        description="By how much it holds at the worst corners as computed; null where one has no result.",
        examples=[1.4],
    )
    corner_error_bound: float | None = Field(
        description="The corner margin is no further off than this; null where no finite bound is known.",
        examples=[4e-8],
    )
    probability: ProbabilityAnswer | None = Field(
        None, description="How often it holds, from the samples; left out without samples."
    )


class QuantileAnswer(EstimateAnswer):
    """A quantile of a result."""

    probability: float = Field(description="What part of all lies below it.", examples=[0.975])


class SpreadAnswer(Model):
    """The spread of one result over the samples."""

    result: str = Field(description="The name of the result.", examples=["probe A"])
    unit: str = Field(description="Its unit.", examples=["degC"])
    mean: EstimateAnswer = Field(description="Mean of the cases with results.")
    standard_deviation: EstimateAnswer = Field(description="Standard deviation of the cases with results.")
    lowest: float | None = Field(description="The lowest seen.", examples=[51.7])
    highest: float | None = Field(description="The highest seen.", examples=[57.2])
    error_bound: float | None = Field(
        description="No sampled value is further off than this; all intervals are wider by it. Null where no finite "
        "bound is known.",
        examples=[4e-8],
    )
    quantiles: list[QuantileAnswer] = Field(description="The quantiles asked for.")


class CountedFailure(Model):
    """A kind of failure."""

    code: str = Field(description="A short word for programs.", examples=["not-physical"])
    count: int = Field(description="How many cases failed in this way.", examples=[3])
    message: str = Field(
        description="Why one of them did, in a sentence.",
        examples=["/problem/body/size/x: The size is -2 mm; it has to be greater than zero."],
    )


class PropagationAnswer(Model):
    """The spread of the results over samples of the numbers."""

    case_count: int = Field(description="How many cases were sampled.", examples=[1024])
    confidence: float = Field(description="How often the intervals hold the true value.", examples=[0.95])
    intervals: str = Field(
        description="How the intervals were had.",
        examples=["Student's intervals of the values of 8 independent replicates."],
    )
    results: list[SpreadAnswer] = Field(description="Each result, in the order asked.")
    all_limits: ProbabilityAnswer | None = Field(
        None, description="How often all limits hold together; left out where there are none."
    )
    failures: list[CountedFailure] = Field(description="Cases that could not be computed, by kind.")


class IndexAnswer(Model):
    """The Sobol indices of one number."""

    number: str = Field(description="The name of the number.", examples=["film"])
    first: EstimateAnswer = Field(description="Part of the variance that goes if this number alone were known.")
    total: EstimateAnswer = Field(description="Part of the variance that stays if all other numbers were known.")


class ResultIndices(Model):
    """The Sobol indices of one result."""

    result: str = Field(description="The name of the result.", examples=["probe A"])
    numbers: list[IndexAnswer] = Field(description="Each number, in the order asked.")


class VarianceIndicesAnswer(Model):
    """Sobol indices, with intervals that are estimates, by resampling the base sample."""

    case_count: int = Field(description="How many cases were computed for them.", examples=[1280])
    left_out: int = Field(
        description="Rows of the base sample that were left out, since a case of theirs failed.", examples=[0]
    )
    results: list[ResultIndices] = Field(description="Each result, in the order asked.")


class TolerancesAnswer(AnalysisAnswer):
    """What tolerances of numbers do to results."""

    numbers: list[TolerancedNumberAnswer] = Field(description="The numbers, in the order asked.")
    stack_ups: list[StackUpAnswer] = Field(description="Each result, in the order asked.")
    limits: list[ToleranceLimitAnswer] = Field(description="Each limit, in the order asked.")
    propagation: PropagationAnswer | None = Field(
        None, description="The spread over samples; left out where none were asked for."
    )
    variance_indices: VarianceIndicesAnswer | None = Field(
        None, description="Sobol indices; left out where they were not asked for."
    )
    case_count: int = Field(description="How many cases were computed in all.", examples=[1061])
