"""What spread in the numbers does to the results, by samples: means, quantiles, the probability that limits hold.

Every estimate has an interval that holds with a given confidence. Where samples are plainly at random that of a
probability is Clopper and Pearson's (Biometrika 26, 1934), that of a quantile is between two order statistics
(David and Nagaraja, Order Statistics, 2003, section 7.1), both right for any number of samples; those of mean and
standard deviation are the usual ones for many. From Sobol sequences and Latin hypercubes independent replicates are
drawn, and the interval is Student's of the values of the replicates. A probability never has a narrower one than as
many plain samples with the same counts would have, so that replicates that all say "always" do not prove it.

A case whose margin is within its error bound, or that has no results, counts as a failure towards the lower end of the
interval and as a success towards the upper end. All intervals of results are wider by the error bounds, and those of
quantiles by cases without results, which might lie below all others or above.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from service.analysis.distributions import Distribution, Method, numbers_of, parts
from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray
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

    mean, standard_deviation: of cases with results. quantiles: shape (n_quantiles, n_results). lowest, highest: seen.
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
    replicates = [
        _Results(results.values[rows][has[rows]], results.bounds[rows][has[rows]], int(np.sum(~has[rows])))
        for rows in np.split(np.arange(len(has)), sampling.replicates)
    ]
    pooled = _Results(results.values[has], results.bounds[has], int(np.sum(~has)))
    levels = np.asarray(quantiles, dtype=float)
    if sampling.method == "random":
        mean, deviation = _mean_at_random(pooled, confidence), _deviation_at_random(pooled, confidence)
        within = _quantiles_at_random(pooled, levels, confidence)
    else:
        mean = _of_replicates(_mean, pooled, replicates, pooled.mean_bound, confidence)
        deviation = _of_replicates(_deviation, pooled, replicates, pooled.deviation_bound, confidence)
        deviation = replace(deviation, low=np.maximum(deviation.low, 0.0))
        within = _quantiles_of_replicates(pooled, replicates, levels, confidence)
    alone, together = _probabilities(results, has, sampling, limits, confidence)
    nothing = np.full(results.values.shape[1], np.nan)
    counts = Counter(why.code for why in results.failures.values())
    examples = {why.code: why for _, why in sorted(results.failures.items(), reverse=True)}
    return Propagation(
        mean=mean,
        standard_deviation=deviation,
        quantiles=within,
        lowest=pooled.values.min(axis=0) if np.any(has) else nothing,
        highest=pooled.values.max(axis=0) if np.any(has) else nothing,
        bounds=pooled.largest_bound,
        limits=alone,
        together=together,
        n_cases=len(has),
        failures={code: (count, examples[code]) for code, count in sorted(counts.items())},
    )


# --- results of cases ---


@dataclass(frozen=True)
class _Results:
    """Values and bounds of the cases that have results, shape (n_cases, n_results), and how many others there are."""

    values: FloatArray
    bounds: FloatArray
    failed: int

    @property
    def mean_bound(self) -> FloatArray:
        return self.bounds.sum(axis=0) / max(len(self.bounds), 1)

    @property
    def deviation_bound(self) -> FloatArray:
        """Standard deviations are a norm of the values, so that they differ by that of the errors at the most."""
        return np.sqrt((self.bounds**2).sum(axis=0) / max(len(self.bounds) - 1, 1))

    @property
    def largest_bound(self) -> FloatArray:
        return np.max(self.bounds, axis=0, initial=0.0)


def _mean(some: _Results) -> FloatArray:
    return some.values.mean(axis=0) if len(some.values) else np.full(some.values.shape[1], np.nan)


def _deviation(some: _Results) -> FloatArray:
    return some.values.std(axis=0, ddof=1) if len(some.values) > 1 else np.full(some.values.shape[1], np.nan)


def _quantiles(some: _Results, levels: FloatArray) -> FloatArray:
    if not len(some.values):
        return np.full((len(levels), some.values.shape[1]), np.nan)
    return np.quantile(some.values, levels, axis=0, method="median_unbiased")


def _mean_at_random(pooled: _Results, confidence: float) -> Estimate:
    n = len(pooled.values)
    mean, deviation = _mean(pooled), _deviation(pooled)
    half = stats.t.ppf((1 + confidence) / 2, max(n - 1, 1)) * deviation / np.sqrt(max(n, 1)) + pooled.mean_bound
    return Estimate(mean, mean - half, mean + half)


def _deviation_at_random(pooled: _Results, confidence: float) -> Estimate:
    """From the fourth moment, on a logarithmic scale."""
    n = max(len(pooled.values), 1)
    deviation = _deviation(pooled)
    fourth = ((pooled.values - _mean(pooled)) ** 4).sum(axis=0) / n
    # Var(s^2) = (mu_4 - sigma^4) / n to first order.
    squares = np.sqrt(np.maximum(fourth - deviation**4, 0.0) / n)
    part = np.divide(squares, 2 * deviation**2, out=np.zeros_like(squares), where=deviation > 0)
    factor = np.exp(stats.norm.ppf((1 + confidence) / 2) * part)
    bound = pooled.deviation_bound
    return Estimate(deviation, np.maximum(deviation / factor - bound, 0.0), deviation * factor + bound)


def _quantiles_at_random(pooled: _Results, levels: FloatArray, confidence: float) -> Estimate:
    """Between order statistics. Cases without results might lie anywhere."""
    value = _quantiles(pooled, levels)
    n_results = pooled.values.shape[1]
    nowhere = np.full((pooled.failed, n_results), np.inf)
    ends = np.full((1, n_results), np.inf)
    lower = np.sort(np.concatenate([-ends, -nowhere, pooled.values - pooled.bounds]), axis=0)
    upper = np.sort(np.concatenate([pooled.values + pooled.bounds, nowhere, ends]), axis=0)
    n = len(pooled.values) + pooled.failed
    outside = (1 - confidence) / 2
    first = stats.binom.ppf(outside, n, levels).astype(int)
    last = stats.binom.ppf(1 - outside, n, levels).astype(int)
    return Estimate(value, lower[first], upper[last])


def _of_replicates(
    statistic: Callable[[_Results], FloatArray],
    pooled: _Results,
    replicates: Sequence[_Results],
    bound: FloatArray,
    confidence: float,
) -> Estimate:
    """Student's interval of a statistic of independent replicates, with the value of all of them in it."""
    value = statistic(pooled)
    each = np.stack([statistic(some) for some in replicates])
    half = _student(len(each), confidence) * each.std(axis=0, ddof=1)
    middle = each.mean(axis=0)
    return Estimate(value, np.minimum(middle - half, value) - bound, np.maximum(middle + half, value) + bound)


def _quantiles_of_replicates(
    pooled: _Results, replicates: Sequence[_Results], levels: FloatArray, confidence: float
) -> Estimate:
    """Cases without results might lie anywhere: if all lie below, a quantile of all is a lower one of the others."""

    def at(moved: FloatArray) -> Estimate:
        inside = np.clip(moved, 0.0, 1.0)
        bound = pooled.largest_bound
        return _of_replicates(lambda some: _quantiles(some, inside), pooled, replicates, bound, confidence)

    lost = pooled.failed / (len(pooled.values) + pooled.failed)
    left = 1 - lost or 1.0
    return Estimate(
        at(levels).value,
        np.where((levels <= lost)[:, None], -np.inf, at((levels - lost) / left).low),
        np.where((levels >= 1 - lost)[:, None], np.inf, at(levels / left).high),
    )


def _student(n_replicates: int, confidence: float) -> float:
    return float(stats.t.ppf((1 + confidence) / 2, n_replicates - 1) / np.sqrt(n_replicates))


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
    low = np.array([_exactly(int(count), n, confidence)[0] for count in held.sum(axis=0)])
    high = np.array([_exactly(int(count), n, confidence)[1] for count in may_hold.sum(axis=0)])
    if sampling.method != "random":
        low = np.minimum(low, _end(held, sampling, confidence, -1.0))
        high = np.maximum(high, _end(may_hold, sampling, confidence, 1.0))
    undecided = np.sum(~held & may_hold & has[:, None], axis=0)
    return Probability(Estimate(value, low, high), undecided)


def _exactly(count: int, n: int, confidence: float) -> tuple[float, float]:
    found = stats.binomtest(count, n).proportion_ci(confidence, method="exact")
    return float(found.low), float(found.high)


def _end(which: NDArray[np.bool_], sampling: Sampling, confidence: float, side: float) -> FloatArray:
    """The end of Student's interval of how often something is so in independent replicates."""
    each = which.reshape(sampling.replicates, sampling.count, -1).mean(axis=1)
    half = _student(sampling.replicates, confidence) * each.std(axis=0, ddof=1)
    return np.clip(each.mean(axis=0) + side * half, 0.0, 1.0)
