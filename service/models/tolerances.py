"""The question what tolerances of numbers do to results."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Number, Quantity
from service.models.evaluate import Name
from service.models.limits import AnalysisQuestion, Limits
from service.models.numbers import MOST_NUMBERS
from service.models.sensitivities import VariedNumber

# Bounds of the document itself; the service's settings bound the number of cases further.
MOST_SAMPLES = 1_000_000
MOST_REPLICATES = 64
MOST_QUANTILES = 50
MOST_TABULATED = 1000
LEAST_SIGMAS, MOST_SIGMAS = 0.1, 20.0

LARGEST_SEED = 2**32 - 1

_Sigmas = Annotated[Number, Field(ge=LEAST_SIGMAS, le=MOST_SIGMAS)]
_SIGMAS_IN_WORDS = "How many standard deviations half of the tolerance zone is, where only one of the two is given."
_DEVIATION_IN_WORDS = "Standard deviation, in the unit of differences of the number, greater than zero."


class Normal(Model):
    """The normal distribution about the middle of the tolerance zone."""

    shape: Literal["normal"] = Field(description="Which distribution this is.")
    standard_deviation: Quantity | None = Field(None, description=_DEVIATION_IN_WORDS, examples=[20])
    sigmas: _Sigmas = Field(3.0, description=_SIGMAS_IN_WORDS, examples=[3])


class TruncatedNormal(Model):
    """The normal distribution about the middle of the tolerance zone, of which only what lies in the zone is left."""

    shape: Literal["truncated_normal"] = Field(description="Which distribution this is.")
    standard_deviation: Quantity | None = Field(
        None, description=f"{_DEVIATION_IN_WORDS} That before it was cut.", examples=[20]
    )
    sigmas: _Sigmas = Field(3.0, description=_SIGMAS_IN_WORDS, examples=[2])


class Uniform(Model):
    """All values of the tolerance zone alike."""

    shape: Literal["uniform"] = Field(description="Which distribution this is.")


class Triangular(Model):
    """Over the tolerance zone, most often at the nominal value."""

    shape: Literal["triangular"] = Field(description="Which distribution this is.")


class Lognormal(Model):
    """A number greater than zero whose logarithm is normal; its mean is the nominal value."""

    shape: Literal["lognormal"] = Field(description="Which distribution this is.")
    standard_deviation: Quantity | None = Field(None, description=_DEVIATION_IN_WORDS, examples=[20])
    sigmas: _Sigmas = Field(3.0, description=_SIGMAS_IN_WORDS, examples=[3])


class Quantiles(Model):
    """A distribution by its quantiles, evenly spread from each to the next."""

    shape: Literal["quantiles"] = Field(description="Which distribution this is.")
    values: list[Quantity] = Field(
        min_length=2,
        max_length=MOST_TABULATED,
        description="Values of the number, rising, from the lowest to the highest there are.",
        examples=[[780, 840, 860, 950]],
    )
    probabilities: list[Number] = Field(
        min_length=2,
        max_length=MOST_TABULATED,
        description="What part of all lies below each value, rising from 0 to 1.",
        examples=[[0, 0.25, 0.75, 1]],
    )

    @model_validator(mode="after")
    def _rising(self) -> Self:
        if len(self.values) != len(self.probabilities):
            raise PydanticCustomError("as_many", "Give as many probabilities as values.")
        steps = zip(self.probabilities, self.probabilities[1:], strict=False)
        if (self.probabilities[0], self.probabilities[-1]) != (0, 1) or any(low >= high for low, high in steps):
            raise PydanticCustomError("rising", "The probabilities have to rise from 0 to 1.")
        return self


Distribution = Annotated[
    Normal | TruncatedNormal | Uniform | Triangular | Lognormal | Quantiles,
    Field(discriminator="shape"),
]


class TolerancedNumber(VariedNumber):
    """A number with its tolerance zone, and how it is spread there.

    The zone is given by `plus_minus`, by `plus` and `minus` (one left out is zero) or by `relative`. Without any it is
    what the distribution tells: so many standard deviations to either side, or from the first quantile to the last.
    """

    plus_minus: Quantity | None = Field(
        None, description="Tolerance to either side, in the unit of differences of the number.", examples=[0.2]
    )
    plus: Quantity | None = Field(None, description="Tolerance upwards, not negative.", examples=["300 um"])
    minus: Quantity | None = Field(None, description="Tolerance downwards, not negative.", examples=["100 um"])
    relative: Number | None = Field(
        None, description="Tolerance to either side in parts of the number; 0.05 for 5 %.", examples=[0.05]
    )
    distribution: Distribution | None = Field(
        None,
        description="How the number is spread; if left out, normally about the middle of the zone, half of which is "
        "three standard deviations.",
        examples=[{"shape": "uniform"}],
    )

    @model_validator(mode="after")
    def _one_zone(self) -> Self:
        ways = (self.plus_minus, self.relative, self.plus if self.plus is not None else self.minus)
        given = sum(way is not None for way in ways)
        if given > 1:
            raise PydanticCustomError(
                "one_of", "Give the tolerance by `plus_minus`, `plus` and `minus`, or `relative`."
            )
        has_deviation = getattr(self.distribution, "standard_deviation", None) is not None
        if not given and not has_deviation and not isinstance(self.distribution, Quantiles):
            raise PydanticCustomError(
                "no_tolerance",
                "Give the tolerance by `plus_minus`, `plus` and `minus`, `relative`, or a distribution with its "
                "standard deviation or quantiles.",
            )
        return self


class Correlation(Model):
    """Two numbers that go together."""

    numbers: list[Name] = Field(min_length=2, max_length=2, description="Their names.", examples=[["width", "depth"]])
    coefficient: Annotated[Number, Field(ge=-1, le=1)] = Field(
        description="Their correlation, from -1 to 1; of what they are as normal scores where they are not normal.",
        examples=[0.8],
    )


_SEED_IN_WORDS = "Decides the samples: the same seed gives the same ones."


class RandomSamples(Model):
    """Samples by even chance."""

    method: Literal["random"] = Field(description="How samples are drawn.")
    count: int = Field(ge=10, le=MOST_SAMPLES, description="How many cases, at least 10.", examples=[1000])
    seed: int = Field(0, ge=0, le=LARGEST_SEED, description=_SEED_IN_WORDS, examples=[7])


class _Replicated(Model):
    """Samples that fill the space evenly, drawn several times over, so that their spread tells how sure they are."""

    replicates: int = Field(
        8, ge=2, le=MOST_REPLICATES, description="How many times they are drawn anew, from 2.", examples=[8]
    )
    seed: int = Field(0, ge=0, le=LARGEST_SEED, description=_SEED_IN_WORDS, examples=[7])


class SobolSamples(_Replicated):
    """Samples from scrambled Sobol sequences: the most even, and the surest for as many cases."""

    method: Literal["sobol"] = Field(description="How samples are drawn.")
    count: int = Field(
        ge=8, le=MOST_SAMPLES, description="How many cases of each replicate, a power of two from 8.", examples=[128]
    )

    @model_validator(mode="after")
    def _power_of_two(self) -> Self:
        if self.count & (self.count - 1):
            raise PydanticCustomError("power_of_two", "`count` of Sobol samples has to be a power of two.")
        return self


class LatinHypercubeSamples(_Replicated):
    """Samples of which each equal part of every number has one."""

    method: Literal["latin_hypercube"] = Field(description="How samples are drawn.")
    count: int = Field(ge=8, le=MOST_SAMPLES, description="How many cases of each replicate, from 8.", examples=[100])


Samples = Annotated[RandomSamples | SobolSamples | LatinHypercubeSamples, Field(discriminator="method")]


class VarianceIndices(Model):
    """Sobol indices: what part of the variance each number is behind, alone and with others."""

    count: int = Field(
        ge=16,
        le=MOST_SAMPLES,
        description="Cases of the base sample, a power of two from 16; all in all count times two more than there are "
        "numbers are computed.",
        examples=[256],
    )
    seed: int = Field(0, ge=0, le=LARGEST_SEED, description=_SEED_IN_WORDS, examples=[7])

    @model_validator(mode="after")
    def _power_of_two(self) -> Self:
        if self.count & (self.count - 1):
            raise PydanticCustomError("power_of_two", "`count` has to be a power of two.")
        return self


_Part = Annotated[Number, Field(gt=0, lt=1)]


class TolerancesQuestion(AnalysisQuestion):
    """What tolerances of numbers do to results."""

    numbers: list[TolerancedNumber] = Field(
        min_length=1,
        max_length=MOST_NUMBERS,
        description="The numbers that have a tolerance.",
        examples=[[{"name": "film", "at": "/problem/faces/x_high/coefficient", "relative": 0.2}]],
    )
    correlations: list[Correlation] = Field(
        default_factory=list,
        max_length=MOST_NUMBERS * MOST_NUMBERS,
        description="Numbers that go together; all others are independent.",
    )
    limits: Limits = Field(
        default_factory=list,
        description="Limits that the stack-ups and the samples are held against.",
        examples=[[{"result": "probe A", "at_most": 60}]],
    )
    samples: Samples | None = Field(
        None,
        description="Samples by which the spread of the results and the probability that limits hold are found; none "
        "if left out.",
        examples=[{"method": "sobol", "count": 128, "replicates": 8, "seed": 7}],
    )
    quantiles: list[_Part] = Field(
        default=[0.025, 0.5, 0.975],
        max_length=MOST_QUANTILES,
        description="Which quantiles of the results are found from the samples.",
        examples=[[0.025, 0.5, 0.975]],
    )
    confidence: _Part = Field(
        0.95, description="Of all intervals: how often they hold the true value.", examples=[0.95]
    )
    variance_indices: VarianceIndices | None = Field(
        None, description="Sobol indices, of independent numbers only; none if left out."
    )
