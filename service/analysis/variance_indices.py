"""Sobol indices: which part of the variance of a result each number is behind, alone and together with others.

The base sample is several independently scrambled Sobol designs. An index is a ratio of means over all of them, and its
interval that of the mean of what each design departs from the ratio (Cochran, Sampling Techniques, 1977, section 6.4).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis.distributions import Distribution, numbers_of, parts
from service.analysis.evaluations import Evaluate, FloatArray
from service.analysis.intervals import of_mean
from service.analysis.propagation import Estimate, in_waves

# Designs that the base sample is made of.
DESIGNS = 8


@dataclass(frozen=True)
class VarianceIndices:
    """Sobol indices of every result by every number, arrays of shape (n_results, n_numbers).

    NaN where a result does not vary beyond what its values may be off.

    first: the part of the variance that goes if the number alone is fixed. total: the part that stays if all others
    are. Their intervals are wider by what the values may be off. n_cases: computed; n_left_out: rows of the base sample
    that were left out, since a case of theirs failed; the indices are then those of the other rows, and their
    intervals, which are of all, have no finite ends.
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
    """Sobol indices of independent numbers, from a base sample of count cases, a power of 2 of at least 16.

    First-order ones by Saltelli et al. (Computer Physics Communications 181, 2010, table 2 b), total ones by Jansen
    (same, table 2 f), values counted from their mean. The intervals are approximate.
    """
    n_numbers = len(distributions)
    points = parts(2 * n_numbers, count // DESIGNS, DESIGNS, "sobol", seed).reshape(count, -1)
    both = numbers_of(points, [*distributions, *distributions])
    base, other = both[:, :n_numbers], both[:, n_numbers:]
    crossed = np.repeat(base[None], n_numbers, axis=0)
    for number in range(n_numbers):
        crossed[number, :, number] = other[:, number]
    cases = np.concatenate([base[None], other[None], crossed])
    results = in_waves(evaluate, cases.reshape(-1, n_numbers))
    failed = np.zeros(len(results.values), dtype=bool)
    failed[list(results.failures)] = True
    left = ~failed.reshape(n_numbers + 2, count).any(axis=0)
    n_left = int(left.sum())
    shape = n_numbers + 2, count, -1
    first, total = _indices(
        results.values.reshape(shape)[:, left], results.bounds.reshape(shape)[:, left], confidence, n_left == count
    )
    return VarianceIndices(first=first, total=total, n_cases=len(results.values), n_left_out=count - n_left)


def _indices(values: FloatArray, bounds: FloatArray, confidence: float, is_whole: bool) -> tuple[Estimate, Estimate]:
    """First-order and total indices.

    values, bounds: at the base sample, the other, and the base with each number from the other, of shape (n_numbers +
    2, n, n_results). is_whole: whether these are all rows of the designs, one design after the other.
    """
    n_numbers, n, n_results = len(values) - 2, *values.shape[1:]
    if n < 2:
        nothing = np.full((n_results, n_numbers), np.nan)
        return (Estimate(nothing, nothing, nothing),) * 2
    base, other, crossed = values[0], values[1], values[2:]
    mean = (base.mean(axis=0) + other.mean(axis=0)) / 2
    # Of each row, what has the variance for its mean, and what has the parts that numbers are behind.
    size = ((base - mean) ** 2 + (other - mean) ** 2) / 2
    alone, with_others = (other - mean) * (crossed - base), (crossed - base) ** 2 / 2
    deviation = np.sqrt(size.mean(axis=0))
    off = np.sqrt((bounds**2).mean(axis=(0, 1)))
    deviation[~(deviation > off)] = np.nan
    first, total = (
        _ratio(part, size / deviation**2, deviation, off, confidence, is_whole) for part in (alone, with_others)
    )
    return first, total


def _ratio(
    part: FloatArray, size: FloatArray, deviation: FloatArray, off: FloatArray, confidence: float, is_whole: bool
) -> Estimate:
    """Means of a part of the variance over the variance, arrays of shape (n_results, n_numbers).

    part: shape (n_numbers, n, n_results). size: of each row, with a mean of 1.
    """
    part = part / deviation**2
    ratio = part.mean(axis=1)
    if not is_whole:
        unknown = np.where(np.isnan(ratio), np.nan, np.inf).T
        return Estimate(ratio.T, -unknown, unknown)
    rows = np.moveaxis(part - ratio[:, None] * size, 1, 0).reshape(len(size), -1)
    pieces = rows.reshape(DESIGNS, -1, rows.shape[1]).mean(axis=1)
    low, high = (ratio + end.reshape(ratio.shape) for end in of_mean(pieces, rows, confidence))
    # The root of each part of the variance is a norm of the result, so that it differs by that of the errors at most.
    least = np.maximum(np.sqrt(np.maximum(low, 0.0)) * deviation - off, 0.0) / (deviation + off)
    most = (np.sqrt(np.maximum(high, 0.0)) * deviation + off) / (deviation - off)
    return Estimate(ratio.T, np.minimum(low, least**2).T, np.maximum(high, most**2).T)
