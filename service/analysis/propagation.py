"""What spread in the numbers does to the results, by samples: means, quantiles, the probability that limits hold.

Every estimate has an interval for a given confidence (`intervals`). Where samples are plainly at random that of a
probability is Clopper and Pearson's (Biometrika 26, 1934), that of a quantile is between two order statistics, both
right for any number of samples; those of mean and standard deviation are approximate. From Sobol sequences and Latin
hypercubes independent replicates are drawn, and all intervals are approximate and come from how these differ. A
probability never has a narrower one than as many plain samples with the same counts would have, so that replicates
that all say "always" do not prove it. A quantile has no end on the side where too few samples lie beyond it.

A case whose margin is within its error bound, or that has no results, counts as a failure towards the lower end of the
interval and as a success towards the upper end. All intervals of results are wider by the error bounds. A case without
results might lie below all others or above: quantiles count it both ways, and mean and standard deviation of all are
then not known at all.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.analysis.distributions import Distribution, Method, numbers_of, parts
from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray
from service.analysis.intervals import (
    of_count,
    of_mean,
    ranks_at_random,
    ranks_of_replicates,
    standard_error,
    student,
)
from service.analysis.limits import Limit, bounds_of, margins, surely_held, surely_passed

# Cases in a wave.
WAVE = 512


@dataclass(frozen=True)
class Sampling:
    """How numbers are sampled: `replicates` times `count` cases.

    At random one replicate does; others take at least two, and a Sobol sequence a count that is a power of 2.
    """

    count: int
    replicates: int = 1
    method: Method = "random"
    seed: int = 0

    @property
    def cases(self) -> int:
        """How many cases it takes."""
        return self.count * self.replicates


@dataclass(frozen=True)
class Estimate:
    """Values with the ends of their intervals, arrays of one shape; an end is infinite where samples do not tell."""

    value: FloatArray
    low: FloatArray
    high: FloatArray


@dataclass(frozen=True)
class Probability:
    """How often limits hold, arrays of shape (n_limits,).

    estimate: NaN where no case has results. undecided: cases with a margin within the error bound.
    """

    estimate: Estimate
    undecided: NDArray[np.int_]


@dataclass(frozen=True)
class Propagation:
    """Spread of every result, arrays of shape (n_results,).

    mean, standard_deviation: of cases with results; their intervals are those of all cases, so that where cases have no
    results a mean has no finite end, and a standard deviation none but 0. quantiles: shape (n_quantiles, n_results).
    lowest, highest: seen.
    bounds: how far off a value may be at the most. limits: each alone; together: all of them at once, shape (1,).
    n_cases: computed; failures: how many have no results, by the code of the failure, and an example of each.
    """

    mean: Estimate
    standard_deviation: Estimate
    quantiles: Estimate
    lowest: FloatArray
    highest: FloatArray
    bounds: FloatArray
    limits: Probability
    together: Probability
    n_cases: int
    failures: Mapping[str, tuple[int, Failure]]


def propagate(
    evaluate: Evaluate,
    distributions: Sequence[Distribution],
    sampling: Sampling,
    *,
    limits: Sequence[Limit] = (),
    quantiles: Sequence[float] = (0.025, 0.5, 0.975),
    correlation: FloatArray | None = None,
    confidence: float = 0.95,
) -> Propagation:
    """Samples of the numbers, and the spread of the results.

    distributions: one a number. correlation: see `distributions.numbers_of`.
    """
    points = parts(len(distributions), sampling.count, sampling.replicates, sampling.method, sampling.seed)
    cases = numbers_of(points, distributions, correlation).reshape(-1, len(distributions))
    return spread_of(in_waves(evaluate, cases), sampling, limits, quantiles, confidence)


def in_waves(evaluate: Evaluate, cases: FloatArray) -> Evaluations:
    """Results of many cases, asked for wave by wave so that what is done is known and kept."""
    answers = [evaluate(cases[start : start + WAVE]) for start in range(0, len(cases), WAVE)]
    return Evaluations(
        values=np.concatenate([answer.values for answer in answers]),
        bounds=np.concatenate([answer.bounds for answer in answers]),
        failures={
            number * WAVE + row: why for number, answer in enumerate(answers) for row, why in answer.failures.items()
        },
    )


def spread_of(
    results: Evaluations, sampling: Sampling, limits: Sequence[Limit], quantiles: Sequence[float], confidence: float
) -> Propagation:
    """The spread of results of the cases of a sampling, in their order."""
    has = np.ones(len(results.values), dtype=bool)
    has[list(results.failures)] = False
    known = results.values[has]
    bounds = results.bounds[has]
    # What is independent of each other: cases, or replicates of which each has an equal part of the mean of all.
    n_pieces = len(known) if sampling.method == "random" else sampling.replicates
    if len(known) == len(has):
        mean, deviation = _mean(known, bounds, n_pieces, confidence), _deviation(known, bounds, n_pieces, confidence)
    else:
        mean, deviation = _mean_of_some(known), _deviation_of_some(known)
    alone, together = _probabilities(results, has, sampling, limits, confidence)
    nothing = np.full(results.values.shape[1], np.nan)
    counts = Counter(why.code for why in results.failures.values())
    examples = {why.code: why for _, why in sorted(results.failures.items(), reverse=True)}
    return Propagation(
        mean=mean,
        standard_deviation=deviation,
        quantiles=_quantiles(results, has, sampling, quantiles, confidence),
        lowest=known.min(axis=0) if np.any(has) else nothing,
        highest=known.max(axis=0) if np.any(has) else nothing,
        bounds=np.max(bounds, axis=0, initial=0.0),
        limits=alone,
        together=together,
        n_cases=len(has),
        failures={code: (count, examples[code]) for code, count in sorted(counts.items())},
    )


# --- results of cases ---


def _mean(values: FloatArray, bounds: FloatArray, n_pieces: int, confidence: float) -> Estimate:
    low, high = of_mean(_of_pieces(values, n_pieces), values, confidence)
    bound = bounds.mean(axis=0)
    return Estimate(values.mean(axis=0), low - bound, high + bound)


def _deviation(values: FloatArray, bounds: FloatArray, n_pieces: int, confidence: float) -> Estimate:
    """From the mean of the squares about the mean, with what the mean of all is off itself; right without bias.

    The wider of the interval of the mean of squares and of Student's on a logarithmic scale, which keeps it above zero.
    """
    mean = values.mean(axis=0)
    if n_pieces < 2:
        unknown = np.full_like(mean, np.nan)
        return Estimate(unknown, np.zeros_like(mean), np.full_like(mean, np.inf))
    squares = (values - mean) ** 2 + standard_error(_of_pieces(values, n_pieces)) ** 2
    pieces = _of_pieces(squares, n_pieces)
    variance = squares.mean(axis=0)
    low, high = of_mean(pieces, squares, confidence)
    part = np.divide(standard_error(pieces), variance, out=np.zeros_like(variance), where=variance > 0)
    with np.errstate(over="ignore"):
        factor = np.exp(student(n_pieces, confidence) * part)
        low, high = np.minimum(low, variance / factor), np.maximum(high, variance * factor)
    # Standard deviations are a norm, so that they differ by that of the errors at the most.
    bound = np.sqrt((bounds**2).mean(axis=0))
    low = np.maximum(np.sqrt(np.maximum(low, 0.0)) - bound, 0.0)
    return Estimate(np.sqrt(variance), low, np.sqrt(high) + bound)


def _mean_of_some(values: FloatArray) -> Estimate:
    """The mean of the cases with results. What the others would add is not known."""
    unknown = np.full(values.shape[1], np.inf)
    return Estimate(values.mean(axis=0) if len(values) else np.full_like(unknown, np.nan), -unknown, unknown)


def _deviation_of_some(values: FloatArray) -> Estimate:
    unknown = np.full(values.shape[1], np.inf)
    value = values.std(axis=0, ddof=1) if len(values) > 1 else np.full_like(unknown, np.nan)
    return Estimate(value, np.zeros_like(unknown), unknown)


def _of_pieces(values: FloatArray, n_pieces: int) -> FloatArray:
    """Means of each piece."""
    means: FloatArray = values.reshape(n_pieces, -1, values.shape[1]).mean(axis=1)
    return means


def _quantiles(
    results: Evaluations, has: NDArray[np.bool_], sampling: Sampling, quantiles: Sequence[float], confidence: float
) -> Estimate:
    """Quantiles of cases with results, in intervals of all: those without lie below all others at the lower ends, and
    above at the upper."""
    is_random = sampling.method == "random"
    levels = np.asarray(quantiles, dtype=float)
    if np.any(has):
        # Of evenly spread samples each stands for an equal part of all, and lies in the middle of it.
        value = np.quantile(results.values[has], levels, axis=0, method="median_unbiased" if is_random else "hazen")
    else:
        value = np.full((len(levels), results.values.shape[1]), np.nan)
    at_low = np.where(has[:, None], results.values - results.bounds, -np.inf)
    at_high = np.where(has[:, None], results.values + results.bounds, np.inf)
    none = np.full((1, results.values.shape[1]), np.inf)
    low, high = np.empty_like(value), np.empty_like(value)
    for ends, side, chosen in ((at_low, 0, low), (at_high, 1, high)):
        ordered = np.concatenate([-none, np.sort(ends, axis=0), none])
        for place, level in enumerate(levels):
            if is_random:
                chosen[place] = ordered[ranks_at_random(len(has), level, confidence)[side]]
                continue
            is_below = ends <= ordered[int(np.ceil(level * len(has)))]
            each = is_below.reshape(sampling.replicates, sampling.count, -1).mean(axis=1)
            ranks = ranks_of_replicates(each, sampling.count, level, confidence)[side].astype(int)
            chosen[place] = np.take_along_axis(ordered, ranks[None], axis=0)[0]
    # A low confidence leaves the interval narrower than it is to the next sample.
    return Estimate(value, np.fmin(low, value), np.fmax(high, value))


# --- limits ---


def _probabilities(
    results: Evaluations, has: NDArray[np.bool_], sampling: Sampling, limits: Sequence[Limit], confidence: float
) -> tuple[Probability, Probability]:
    """Of each limit alone, and of all together."""
    margin = margins(limits, results.values)
    bound = bounds_of(limits, results.bounds)
    held, passed = surely_held(margin, bound), surely_passed(margin, bound)
    seems = np.asarray(margin >= 0)
    alone = _probability(held, passed, seems, has, sampling, confidence)
    together = _probability(
        np.asarray(held.all(axis=1))[:, None],
        np.asarray(passed.any(axis=1))[:, None],
        np.asarray(seems.all(axis=1))[:, None],
        has,
        sampling,
        confidence,
    )
    return alone, together


def _probability(
    held: NDArray[np.bool_],
    passed: NDArray[np.bool_],
    seems: NDArray[np.bool_],
    has: NDArray[np.bool_],
    sampling: Sampling,
    confidence: float,
) -> Probability:
    """held, passed: whatever the error; seems: by the values; each of shape (n_cases, n_limits)."""
    n = len(has)
    with_results = int(np.sum(has))
    value = seems[has].sum(axis=0) / with_results if with_results else np.full(seems.shape[1], np.nan)
    may_hold = ~passed
    may_hold[~has] = True
    low = of_count(held.sum(axis=0), n, confidence)[0]
    high = of_count(may_hold.sum(axis=0), n, confidence)[1]
    if sampling.method != "random":
        low = np.minimum(low, _end(held, sampling, confidence, -1.0))
        high = np.maximum(high, _end(may_hold, sampling, confidence, 1.0))
    undecided = np.sum(~held & may_hold & has[:, None], axis=0)
    return Probability(Estimate(value, low, high), undecided)


def _end(which: NDArray[np.bool_], sampling: Sampling, confidence: float, side: float) -> FloatArray:
    """The end of Student's interval of how often something is so in independent replicates."""
    each = which.reshape(sampling.replicates, sampling.count, -1).mean(axis=1)
    half = student(sampling.replicates, confidence) * standard_error(each)
    return np.clip(each.mean(axis=0) + side * half, 0.0, 1.0)
