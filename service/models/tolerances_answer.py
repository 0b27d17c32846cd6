"""The answer to POST /v1/tolerances."""

from __future__ import annotations

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer
from service.models.base import Model
from service.models.limits_answer import HeldWord
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


class PlaceNumber(Model):
    """A number in one case."""

    name: str = Field(description="Its name.", examples=["film"])
    value: float = Field(description="Its value there, in its unit.", examples=[1020])


class WorstAnswer(Model):
    """The worst of a result among all cases that were computed within the zones."""

    value: float | None = Field(description="The result there; null where no case has one.", examples=[57.1])
    error_bound: float | None = Field(
        description="The worst of these cases is no further off than this; null where no finite bound is known.",
        examples=[4e-8],
    )
    numbers: list[PlaceNumber] = Field(
        description="All numbers of that case, in the order asked; a corner of the zones, or a place inside where the "
        "result turns back."
    )


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
        description="By how much it lowers the result to first order, not negative.", examples=[2.1]
    )
    high: float | None = Field(
        description="By how much it raises the result to first order, not negative.", examples=[2.1]
    )
    at_low_end: float | None = Field(
        description="The result as computed with this number at the lower end of its zone and all others as they "
        "stand; null where it could not be computed.",
        examples=[56.4],
    )
    at_high_end: float | None = Field(
        description="The result as computed with this number at the upper end of its zone and all others as they "
        "stand.",
        examples=[52.3],
    )
    bend: float | None = Field(
        description="By how much the result, computed at the ends of the zone of this number alone and half-way there, "
        "departs from first order at the most.",
        examples=[0.2],
    )
    square_share: float | None = Field(
        description="Its part of the square of the root sum square; all add up to 1, and one may be negative where "
        "numbers are correlated. Null where the root sum square is no larger than what the derivatives may be off: "
        "then it is noise.",
        examples=[0.62],
    )
    variance_share: float | None = Field(
        description="Its part of the variance of the result to first order, from its distribution: its covariance with "
        "the result over the variance. Null like `square_share`.",
        examples=[0.62],
    )


class StackUpAnswer(Model):
    """What the tolerances come to in one result: as computed, which is the safe one, and to first order.

    `lowest` and `highest` are the worst of everything that was computed within the zones: each number at its ends and
    half-way there, all corners (of more than five numbers a design of them), the places where the results turn back,
    and the samples that lie in the zones. To first order is how stack-ups are done in the trade: slopes times
    tolerances. It is unsafe where the result bends.
    """

    result: str = Field(description="The name of the result.", examples=["probe A"])
    unit: str = Field(description="Its unit.", examples=["degC"])
    nominal: float = Field(description="The result as the request stands.", examples=[54.2])
    lowest: WorstAnswer = Field(description="The lowest that was computed within the zones.")
    highest: WorstAnswer = Field(description="The highest that was computed within the zones.")
    first_order_low: float | None = Field(
        description="Lowest to first order: what each number takes off by its slope, added up. Go by `lowest`.",
        examples=[49.9],
    )
    first_order_high: float | None = Field(
        description="Highest to first order: what each number adds by its slope, added up. Go by `highest`.",
        examples=[58.5],
    )
    middle: float | None = Field(
        description="The result with all numbers in the middles of their zones, to first order.", examples=[54.2]
    )
    root_sum_square: float | None = Field(
        description="To either side of the middle, to first order: half zones added as standard deviations are, "
        "correlations heeded.",
        examples=[2.6],
    )
    standard_deviation: float | None = Field(
        description="Of the result to first order, from the distributions of the numbers.", examples=[0.87]
    )
    error_estimate: float | None = Field(
        description="How far off what is told to first order may be because the derivatives and the nominal result "
        "are; how far off because the result bends is `bend`.",
        examples=[5e-7],
    )
    bend: float | None = Field(
        description="By how much the result departs from first order within the zones: that of each number alone, "
        "added up. An estimate.",
        examples=[0.3],
    )
    contributions: list[ContributionAnswer] = Field(
        description="What each number adds; first those that by themselves change the result most, as computed."
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
    held: HeldWord = Field(
        description="Whether it holds in the worst case that was computed. `no` is certain: a case within the zones "
        "does not hold it. `yes`: every computed case surely holds it. `undecided` where the margin is within the "
        "error bound, or a case within the zones has no result.",
        examples=["yes"],
    )
    margin: float | None = Field(
        description="By how much it holds in the worst case that was computed, negative where it does not.",
        examples=[1.4],
    )
    error_bound: float | None = Field(
        description="That margin is no further off than this; null where no finite bound is known.", examples=[4e-8]
    )
    root_sum_square_held: HeldWord = Field(
        description="Whether it holds for the middle and the root sum square to either side, which is to first order; "
        "`undecided` where the margin is within `error_estimate`.",
        examples=["yes"],
    )
    root_sum_square_margin: float | None = Field(
        description="By how much it holds for the middle and the root sum square to either side.", examples=[3.2]
    )
    first_order_margin: float | None = Field(
        description="By how much it holds where tolerances are added up to first order, as is done in the trade. "
        "Unsafe where the result bends; go by `margin`.",
        examples=[1.5],
    )
    error_estimate: float | None = Field(
        description="How far off the two margins of first order may be, because the derivatives and the nominal result "
        "are and because the result bends.",
        examples=[0.3],
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
    mean: EstimateAnswer = Field(
        description="Mean of the cases with results. Where others have none nothing is known of that of all, and the "
        "interval has no ends."
    )
    standard_deviation: EstimateAnswer = Field(
        description="Standard deviation of the cases with results. Where others have none the interval, which is of "
        "all, is from 0 without an upper end."
    )
    lowest: float | None = Field(description="The lowest seen.", examples=[51.7])
    highest: float | None = Field(description="The highest seen.", examples=[57.2])
    error_bound: float | None = Field(
        description="No sampled value is further off than this; all intervals are wider by it. Null where no finite "
        "bound is known.",
        examples=[4e-8],
    )
    quantiles: list[QuantileAnswer] = Field(
        description="The quantiles asked for, of the cases with results. Others may lie below all of these or "
        "above, and widen the intervals."
    )


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
        examples=["Approximate, from how 8 independent replicates differ."],
    )
    results: list[SpreadAnswer] = Field(description="Each result, in the order asked.")
    all_limits: ProbabilityAnswer | None = Field(
        None, description="How often all limits hold together; left out where there are none."
    )
    failures: list[CountedFailure] = Field(description="Cases that could not be computed, by kind.")


class IndexAnswer(Model):
    """The Sobol indices of one number."""

    number: str = Field(description="The name of the number.", examples=["film"])
    first: EstimateAnswer = Field(
        description="Part of the variance that goes if this number alone were known; null where the result does not "
        "vary beyond its error bounds."
    )
    total: EstimateAnswer = Field(
        description="Part of the variance that stays if all other numbers were known; null like `first`."
    )


class ResultIndices(Model):
    """The Sobol indices of one result."""

    result: str = Field(description="The name of the result.", examples=["probe A"])
    numbers: list[IndexAnswer] = Field(description="Each number, in the order asked.")


class VarianceIndicesAnswer(Model):
    """Sobol indices, with approximate intervals, from how the independent designs of the base sample differ."""

    case_count: int = Field(description="How many cases were computed for them.", examples=[1280])
    left_out: int = Field(
        description="Rows of the base sample that were left out, since a case of theirs failed; if there are any, the "
        "intervals have no ends.",
        examples=[0],
    )
    results: list[ResultIndices] = Field(description="Each result, in the order asked.")


class TolerancesAnswer(AnalysisAnswer):
    """What tolerances of numbers do to results."""

    numbers: list[TolerancedNumberAnswer] = Field(description="The numbers, in the order asked.")
    stack_ups: list[StackUpAnswer] = Field(description="Each result, in the order asked.")
    limits: list[ToleranceLimitAnswer] = Field(description="Each limit, in the order asked.")
    all_held: HeldWord | None = Field(
        None,
        description="`no` if one limit surely does not hold in the worst case that was computed, `yes` if all surely "
        "do, `undecided` otherwise; left out where there are no limits.",
        examples=["yes"],
    )
    failures: list[CountedFailure] = Field(
        description="Cases within the zones that could not be computed, by kind; while there are any, no limit is said "
        "to hold."
    )
    propagation: PropagationAnswer | None = Field(
        None, description="The spread over samples; left out where none were asked for."
    )
    variance_indices: VarianceIndicesAnswer | None = Field(
        None, description="Sobol indices; left out where they were not asked for."
    )
    case_count: int = Field(description="How many cases were computed in all.", examples=[1061])
