"""Sobol indices: which part of the variance of a result each number is behind, alone and together with others."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis.distributions import Distribution, numbers_of, parts
from service.analysis.evaluations import Evaluate, Evaluations, FloatArray
from service.analysis.interpolants import BoolArray
from service.analysis.propagation import Estimate, in_waves

# Resamples for the intervals.
RESAMPLES = 500


@dataclass(frozen=True)
class VarianceIndices:
    """Sobol indices of every result by every number, arrays of shape (n_results, n_numbers).

    NaN where a result does not vary beyond what its values may be off.

    first: the part of the variance that goes if the number alone is fixed. total: the part that stays if all others
    are. n_cases: computed; n_left_out: rows of the base sample that were left out, since a case of theirs failed.
    """

    first: Estimate
    total: Estimate
    n_cases: int
    n_left_out: int


def cases_of_indices(count: int, n_numbers: int) -> int:
    """How many cases the indices from a base sample of count take."""
    return count * (n_numbers + 2)


def variance_indices(
    evaluate: Evaluate, distributions: Sequence[Distribution], count: int, *, seed: int = 0, confidence: float = 0.95
) -> VarianceIndices:
    """Sobol indices of independent numbers, from a base sample of count cases, a power of 2.

    First-order ones by Saltelli et al. (Computer Physics Communications 181, 2010, table 2 b), total ones by Jansen
    (same, table 2 f), values counted from their mean. Intervals by resampling rows of the base sample: estimates.
    """
    n_numbers = len(distributions)
    both = numbers_of(parts(2 * n_numbers, count, 1, "sobol", seed)[0], [*distributions, *distributions])
    base, other = both[:, :n_numbers], both[:, n_numbers:]
    crossed = np.repeat(base[None], n_numbers, axis=0)
    for number in range(n_numbers):
        crossed[number, :, number] = other[:, number]
    cases = np.concatenate([base[None], other[None], crossed])
    results = in_waves(evaluate, cases.reshape(-1, n_numbers))
    values = results.values.reshape(n_numbers + 2, count, -1)
    failed = np.zeros(n_numbers * count + 2 * count, dtype=bool)
    failed[list(results.failures)] = True
    values = values[:, ~failed.reshape(n_numbers + 2, count).any(axis=0)]
    left = values.shape[1]
    if left < 2:
        nothing = np.full((values.shape[2], n_numbers), np.nan)
        empty = Estimate(nothing, nothing, nothing)
        return VarianceIndices(empty, empty, len(results.values), count - left)
    source = np.random.default_rng(np.random.SeedSequence(seed).spawn(2)[1])
    resampled = np.stack([_indices(values[:, source.integers(left, size=left)]) for _ in range(RESAMPLES)])
    outside = (1 - confidence) / 2
    low, high = np.quantile(resampled, [outside, 1 - outside], axis=0)
    first, total = _indices(values)
    still = _may_be_constant(results)
    for part in (first, total, low, high):
        part[..., still, :] = np.nan
    return VarianceIndices(
        first=Estimate(first, low[0], high[0]),
        total=Estimate(total, low[1], high[1]),
        n_cases=len(results.values),
        n_left_out=count - left,
    )


def _may_be_constant(results: Evaluations) -> BoolArray:
    """Whether one value of a result, shape (n_results,), is within the bounds of all cases."""
    with np.errstate(invalid="ignore"):
        highest = np.fmin.reduce(results.values + results.bounds, axis=0)
        lowest = np.fmax.reduce(results.values - results.bounds, axis=0)
    still: BoolArray = lowest <= highest
    return still


def _indices(values: FloatArray) -> FloatArray:
    """First-order and total indices, shape (2, n_results, n_numbers).

    values: at the base sample, the other, and the base with each number from the other: (n_numbers + 2, n, n_results).
    """
    base, other, crossed = values[0], values[1], values[2:]
    mean = (base.mean(axis=0) + other.mean(axis=0)) / 2
    size = ((base - mean) ** 2).mean(axis=0) / 2 + ((other - mean) ** 2).mean(axis=0) / 2
    first = ((other - mean) * (crossed - base)).mean(axis=1).T
    total = ((crossed - base) ** 2).mean(axis=1).T / 2
    return np.stack(
        [np.divide(part, size[:, None], out=np.zeros_like(part), where=size[:, None] > 0) for part in (first, total)]
    )
