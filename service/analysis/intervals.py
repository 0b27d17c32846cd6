"""Intervals of means and quantiles that hold with a given confidence, from pieces that are independent of each other.

A piece is one case where cases are drawn plainly at random, and a whole replicate where cases within one are spread
evenly. All intervals are approximate; how often they hold is tested for results that bend and that have long tails.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy import special, stats

from service.analysis.evaluations import FloatArray

# Parts of a skewness that are looked at, since the ends do not move one way with it.
PARTS = np.linspace(1 / 16, 1, 16)

# How many times the skewness that cases show is heeded: they seldom show the rare ones that make it.
SEEN = 2.0

# A smaller skewness moves no end.
STRAIGHT = 1e-6

# Ranks are rounded outwards, and this much of one is rounding of its product.
RANK_ROUNDING = 1e-9


@cache
def student(n_pieces: int, confidence: float) -> float:
    """Student's factor of the standard error of a mean of pieces."""
    return float(stats.t.ppf((1 + confidence) / 2, n_pieces - 1))


def standard_error(pieces: FloatArray) -> FloatArray:
    """Of the mean of pieces, shape (n_pieces, ...)."""
    error: FloatArray = pieces.std(axis=0, ddof=1) / np.sqrt(len(pieces))
    return error


def of_mean(pieces: FloatArray, cases: FloatArray, confidence: float) -> tuple[FloatArray, FloatArray]:
    """Low and high end for the mean of pieces, shape (n_pieces, n_results).

    The wider of Student's interval and of that of Hall's monotone transformation (J. R. Statist. Soc. B 54, 1992),
    which heeds that the mean of a few long-tailed values is skewed: by the skewness of the pieces or twice that of the
    cases, shape (n_cases, n_results), or by any part of these. Infinite ends of fewer than two pieces.
    """
    if len(pieces) < 2:
        unknown = np.full(pieces.shape[1], np.inf)
        return -unknown, unknown
    factor = student(len(pieces), confidence)
    below = above = np.full(pieces.shape[1], factor)
    for skewness in (_skewness_of_mean(pieces), SEEN * _skewness_of_mean(cases)):
        for part in PARTS:
            below = np.maximum(below, _straightened(factor, part * skewness))
            above = np.maximum(above, -_straightened(-factor, part * skewness))
    middle, error = pieces.mean(axis=0), standard_error(pieces)
    return middle - below * error, middle + above * error


def _skewness_of_mean(values: FloatArray) -> FloatArray:
    """Skewness of the mean of independent values, shape (n, n_results), by that of the values; 0 of fewer than 3."""
    n = len(values)
    off = values - values.mean(axis=0)
    largest = np.abs(off).max(axis=0)
    off = np.divide(off, largest, out=np.zeros_like(off), where=largest > 0)
    size = (off**2).mean(axis=0)
    if n < 3:
        return np.zeros_like(size)
    third = (off**3).mean(axis=0) * np.sqrt(n * (n - 1)) / (n - 2)
    return np.divide(third, size**1.5, out=np.zeros_like(third), where=size > 0) / np.sqrt(n)


def _straightened(factor: float, skewness: FloatArray) -> FloatArray:
    """What Hall's transformation takes to a factor: the errors of the mean that go with it."""
    is_straight = np.abs(skewness) < STRAIGHT
    bent = np.where(is_straight, 1.0, skewness)
    return np.where(is_straight, factor, 3 / bent * (np.cbrt(1 + bent * (factor - bent / 6)) - 1))


def of_count(counts: NDArray[np.int_], n: int, confidence: float) -> tuple[FloatArray, FloatArray]:
    """Low and high end for the probability of what is so counts times in n plain samples, arrays of one shape.

    Clopper and Pearson's (Biometrika 26, 1934), right for any number of samples.
    """
    outside = (1 - confidence) / 2
    # Where none or all are so, that end is certain, and the parameters here are only valid ones.
    low = special.betaincinv(np.maximum(counts, 1), n - np.maximum(counts, 1) + 1, outside)
    high = special.betainccinv(np.minimum(counts, n - 1) + 1, n - np.minimum(counts, n - 1), outside)
    return np.where(counts > 0, low, 0.0), np.where(counts < n, high, 1.0)


def ranks_at_random(n: int, level: float, confidence: float) -> tuple[int, int]:
    """Ranks, from 1, of the order statistics of n plain samples between which a quantile lies; 0 and n + 1 for none.

    Right for any number of samples (David and Nagaraja, Order Statistics, 2003, section 7.1).
    """
    outside = (1 - confidence) / 2
    return int(stats.binom.ppf(outside, n, level)), int(stats.binom.ppf(1 - outside, n, level)) + 1


def ranks_of_replicates(
    below: FloatArray, count: int, level: float, confidence: float
) -> tuple[FloatArray, FloatArray]:
    """Ranks as those of `ranks_at_random`, each of shape (n_results,), of all cases of replicates of count each.

    below: how often a case of each replicate lies below the quantile of all, shape (n_replicates, n_results).
    Woodruff's interval (J. Amer. Statist. Assoc. 47, 1952): that part is a mean of independent ones, which no evenness
    biases. Its spread counts as at least that of the case next to the quantile, which may lie on either side.
    """
    n = below.size // below.shape[1] * count
    spread = np.maximum(below.std(axis=0, ddof=1), 0.5 / count) / np.sqrt(len(below))
    half = student(len(below), confidence) * spread
    low = np.ceil(n * (level - half) - RANK_ROUNDING)
    high = np.floor(n * (level + half) + RANK_ROUNDING) + 1
    return np.clip(low, 0, n + 1), np.clip(high, 0, n + 1)
