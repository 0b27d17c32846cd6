"""How numbers spread, alone and together, and samples of them.

A distribution is a frozen one of scipy.stats, or one of those here that keep more digits. Numbers that go together are
joined by a Gaussian copula: each is a rising function of a normal score, and the correlations are those of the scores,
which are also those of the numbers where these are normal (Nelsen, An Introduction to Copulas, 2006, section 2.3).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np
from scipy import special, stats
from scipy.stats import qmc

from service.analysis.evaluations import FloatArray

Method = Literal["random", "sobol", "latin_hypercube"]

# An eigenvalue of a correlation matrix of n numbers may be negative by this times n: rounding of its entries.
NEGATIVE = 1e-9

# Numbers that scipy's Sobol sequence is long in bits; its points lie on a grid, of which the middles of cells are used.
SOBOL_BITS = 30

# A normal distribution cut to a zone of which half is this part of its standard deviation has an even density there to
# 5e-7 and a standard deviation to 7e-8; scipy loses more digits of a narrower one.
NEARLY_EVEN = 1e-3


class Distribution(Protocol):
    """What is asked of a distribution: scipy.stats frozen distributions answer it."""

    def ppf(self, q: FloatArray) -> FloatArray:
        """The value below which the part q of all lie."""
        ...

    def isf(self, q: FloatArray) -> FloatArray:
        """The value above which the part q of all lie."""
        ...

    def mean(self) -> float:
        """The mean."""
        ...

    def std(self) -> float:
        """The standard deviation."""
        ...


def normal(mean: float, standard_deviation: float) -> Distribution:
    """The normal distribution."""
    return stats.norm(mean, standard_deviation)


def truncated_normal(mean: float, standard_deviation: float, low: float, high: float) -> Distribution:
    """A normal distribution of which only what lies from low to high is left.

    mean, standard_deviation: of the whole one; the mean lies in the zone.
    """
    if high - low < 2 * NEARLY_EVEN * standard_deviation:
        return uniform(low, high)
    ends = (low - mean) / standard_deviation, (high - mean) / standard_deviation
    return stats.truncnorm(*ends, mean, standard_deviation)


def uniform(low: float, high: float) -> Distribution:
    """All values from low to high alike."""
    return stats.uniform(low, high - low)


def triangular(low: float, mode: float, high: float) -> Distribution:
    """From low to high, the density falling off straight from the mode, which lies among them."""
    return stats.triang((mode - low) / (high - low), low, high - low)


def lognormal(mean: float, standard_deviation: float) -> Distribution:
    """The number whose logarithm is normal, with this mean > 0 and standard deviation of the number itself."""
    return _Lognormal(mean, standard_deviation)


def tabulated(values: FloatArray, probabilities: FloatArray) -> Distribution:
    """The distribution with given quantiles, evenly spread between them.

    values: rising. probabilities: that the number is below each, rising from 0 to 1.
    """
    return _Tabulated(values, probabilities)


@dataclass(frozen=True)
class _Lognormal:
    """See `lognormal`."""

    average: float
    deviation: float

    @property
    def _spread(self) -> float:
        """Variance of the logarithm."""
        return math.log1p((self.deviation / self.average) ** 2)

    def _at(self, score: FloatArray) -> FloatArray:
        number: FloatArray = self.average * np.exp(math.sqrt(self._spread) * score - self._spread / 2)
        return number

    def ppf(self, q: FloatArray) -> FloatArray:
        """As Distribution."""
        return self._at(special.ndtri(q))

    def isf(self, q: FloatArray) -> FloatArray:
        """As Distribution."""
        return self._at(-special.ndtri(q))

    def mean(self) -> float:
        """As Distribution."""
        return self.average

    def std(self) -> float:
        """As Distribution."""
        return self.deviation


@dataclass(frozen=True)
class _Tabulated:
    """See `tabulated`."""

    values: FloatArray
    probabilities: FloatArray

    def ppf(self, q: FloatArray) -> FloatArray:
        """As Distribution."""
        return np.interp(q, self.probabilities, self.values)

    def isf(self, q: FloatArray) -> FloatArray:
        """As Distribution."""
        return np.interp(q, 1 - self.probabilities[::-1], self.values[::-1])

    def mean(self) -> float:
        """As Distribution."""
        return float(self.values[0] + self._middles @ self._shares)

    def std(self) -> float:
        """As Distribution: about the mean piece by piece, so that a narrow spread far from zero keeps its digits."""
        off = self._middles - self._middles @ self._shares
        return float(np.sqrt((off**2 + np.diff(self.values) ** 2 / 12) @ self._shares))

    @property
    def _middles(self) -> FloatArray:
        """Of each piece, from the lowest value."""
        above = self.values - self.values[0]
        return (above[1:] + above[:-1]) / 2

    @property
    def _shares(self) -> FloatArray:
        """What part of all each piece has."""
        return np.diff(self.probabilities)


def is_correlation_matrix(matrix: FloatArray) -> bool:
    """Whether a matrix is symmetric, with ones on its diagonal, and no combination has a negative variance."""
    is_square = matrix.ndim == 2 and matrix.shape[0] == matrix.shape[1]
    if not is_square or not np.array_equal(matrix, matrix.T) or not np.all(np.diag(matrix) == 1):
        return False
    return bool(np.linalg.eigvalsh(matrix)[0] >= -NEGATIVE * len(matrix))


def root_of(correlation: FloatArray) -> FloatArray:
    """A matrix whose product with its transpose is the correlation matrix, which may be singular."""
    values, vectors = np.linalg.eigh(correlation)
    root = vectors * np.sqrt(np.maximum(values, 0.0))
    # Rows of unit length, so that each score keeps a variance of 1.
    return root / np.linalg.norm(root, axis=1, keepdims=True)


def parts(n_numbers: int, count: int, replicates: int, method: Method, seed: int) -> FloatArray:
    """Points of the unit cube, shape (replicates, count, n_numbers), strictly between 0 and 1.

    Each replicate is drawn by itself: plainly at random, from a scrambled Sobol sequence (count a power of 2), or as a
    Latin hypercube. The same arguments give the same points.
    """
    drawn = np.empty((replicates, count, n_numbers))
    for replicate, seeds in enumerate(np.random.SeedSequence(seed).spawn(replicates)):
        source = np.random.default_rng(seeds)
        if method == "sobol":
            sequence = qmc.Sobol(n_numbers, bits=SOBOL_BITS, rng=source)
            drawn[replicate] = sequence.random_base2(count.bit_length() - 1) + 0.5 ** (SOBOL_BITS + 1)
        elif method == "latin_hypercube":
            drawn[replicate] = qmc.LatinHypercube(n_numbers, rng=source).random(count)
        else:
            drawn[replicate] = source.random((count, n_numbers))
    smallest = np.finfo(float).eps / 2
    return np.clip(drawn, smallest, 1 - smallest)


def numbers_of(
    points: FloatArray, distributions: Sequence[Distribution], correlation: FloatArray | None = None
) -> FloatArray:
    """Numbers at points of the unit cube, both of shape (..., n_numbers).

    correlation: of the normal scores, shape (n_numbers, n_numbers); independent if None.
    """
    scores = special.ndtri(points)
    if correlation is not None:
        scores = scores @ root_of(correlation).T
    drawn = np.empty_like(scores)
    for place, distribution in enumerate(distributions):
        score = scores[..., place]
        # From the nearer end, since the far one has lost its digits.
        drawn[..., place] = np.where(
            score <= 0, distribution.ppf(special.ndtr(score)), distribution.isf(special.ndtr(-score))
        )
    return drawn
