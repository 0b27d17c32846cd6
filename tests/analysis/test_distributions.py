"""Distributions and samples of them, against their known moments and scipy's tests of goodness of fit."""

from __future__ import annotations

from fractions import Fraction
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from scipy import stats

from service.analysis.distributions import (
    Distribution,
    Method,
    is_correlation_matrix,
    lognormal,
    normal,
    numbers_of,
    parts,
    root_of,
    tabulated,
    triangular,
    truncated_normal,
    uniform,
)

METHODS: list[Method] = ["random", "sobol", "latin_hypercube"]


def lognormal_of_scipy(mean: float, deviation: float) -> Any:
    """The parameters of the logarithm from the moments (Johnson, Kotz and Balakrishnan, 1994, chapter 14)."""
    spread = np.log(1 + (deviation / mean) ** 2)
    return stats.lognorm(spread**0.5, scale=mean / (1 + (deviation / mean) ** 2) ** 0.5)


# Means and standard deviations from the textbook formulas, worked out by hand, and scipy's own distribution.
KNOWN = [
    pytest.param(normal(5, 2), 5.0, 2.0, stats.norm(5, 2), id="normal"),
    pytest.param(uniform(2, 8), 5.0, 6 / 12**0.5, stats.uniform(2, 6), id="uniform"),
    pytest.param(triangular(0, 6, 6), 4.0, 2**0.5, stats.triang(1, 0, 6), id="triangular"),
    pytest.param(lognormal(5, 2), 5.0, 2.0, lognormal_of_scipy(5, 2), id="lognormal"),
    # Cut at one standard deviation on either side: 1 - 2 phi(1) / (2 Phi(1) - 1) of the variance is left.
    pytest.param(truncated_normal(5, 2, 3, 7), 5.0, 2 * 0.2911250947**0.5, stats.truncnorm(-1, 1, 5, 2),
                 id="truncated normal"),
    # Half of all between 0 and 1, half between 1 and 3.
    pytest.param(tabulated(np.array([0.0, 1, 3]), np.array([0.0, 0.5, 1])), 1.25, (1 / 6 + 13 / 6 - 1.5625) ** 0.5,
                 stats.rv_histogram((np.array([0.5, 0.5]), np.array([0.0, 1, 3])), density=False), id="tabulated"),
]  # fmt: skip


def test_normal_distribution_cut_far_within_is_even() -> None:
    for deviation in (900, 1100, 1e9):
        spread = truncated_normal(20, deviation, 19, 21)
        np.testing.assert_allclose(spread.ppf(np.array([0, 0.25, 1])), [19, 19.5, 21], rtol=1e-7)
        np.testing.assert_allclose(spread.std(), 2 / 12**0.5, rtol=1e-7)


@pytest.mark.parametrize(("distribution", "mean", "deviation", "of_scipy"), KNOWN)
def test_means_and_deviations_are_those_of_the_textbook(
    distribution: Distribution, mean: float, deviation: float, of_scipy: Any
) -> None:
    np.testing.assert_allclose([distribution.mean(), distribution.std()], [mean, deviation], rtol=1e-9)
    np.testing.assert_allclose([of_scipy.mean(), of_scipy.std()], [mean, deviation], rtol=1e-9)


@pytest.mark.parametrize("half", [1e-2, 1e-4, 1e-6, 1e-8, 1e-12])
def test_narrow_spreads_by_quantiles_keep_their_digits(half: float) -> None:
    """Even from low to high in two pieces: the standard deviation is the whole width over sqrt(12)."""
    low, high = 300 - half, 300 + half
    spread = tabulated(np.array([low, 300.0, high]), np.array([0, 0.5, 1]))
    np.testing.assert_allclose(spread.mean(), 300, rtol=1e-15)
    np.testing.assert_allclose(spread.std(), (high - low) / 12**0.5, rtol=1e-12)


def test_narrowest_spread_by_quantiles_there_is() -> None:
    above = np.nextafter(300.0, 301)
    spread = tabulated(np.array([300.0, above]), np.array([0.0, 1]))
    assert 300 <= spread.mean() <= above
    np.testing.assert_allclose(spread.std(), (above - 300) / 12**0.5, rtol=1e-12)
    assert np.all(np.isin(spread.ppf(np.array([0.01, 0.99])), [300, above]))


def test_quantiles_of_uneven_pieces_have_exact_moments() -> None:
    """Against rational arithmetic: the second moment of a piece is (a^2 + a b + b^2) / 3."""
    values, probabilities = [Fraction(v) for v in (1000, 1001, 1005, 1005.5)], [Fraction(p) for p in (0, 0.5, 0.625, 1)]
    pieces = list(zip(pairwise(values), pairwise(probabilities), strict=True))
    mean = sum(((a + b) / 2 * (q - p) for (a, b), (p, q) in pieces), Fraction(0))
    square = sum(((a * a + a * b + b * b) / 3 * (q - p) for (a, b), (p, q) in pieces), Fraction(0))
    spread = tabulated(np.array(values, dtype=float), np.array(probabilities, dtype=float))
    np.testing.assert_allclose(spread.mean(), float(mean), rtol=1e-15)
    np.testing.assert_allclose(spread.std(), float(square - mean**2) ** 0.5, rtol=1e-14)


@pytest.mark.parametrize("part", [1e-3, 1e-6, 1e-9, 1.0, 1000.0])
def test_lognormal_has_the_moments_it_is_given(part: float) -> None:
    """By Gauss and Hermite's rule over the score where it converges, which knows nothing of the closed form."""
    spread = lognormal(300, 300 * part)
    assert (spread.mean(), spread.std()) == (300, 300 * part)
    if part <= 1:
        nodes, weights = np.polynomial.hermite_e.hermegauss(60)
        values = np.where(nodes < 0, spread.ppf(stats.norm.cdf(nodes)), spread.isf(stats.norm.sf(nodes))) / 300 - 1
        weights /= weights.sum()
        np.testing.assert_allclose(weights @ values, 0, atol=1e-12)
        np.testing.assert_allclose((weights @ values**2) ** 0.5, part, rtol=1e-6)


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize(("distribution", "mean", "deviation", "of_scipy"), KNOWN)
def test_samples_follow_their_distribution(
    distribution: Distribution, mean: float, deviation: float, of_scipy: Any, method: Method
) -> None:
    drawn = numbers_of(parts(1, 1024, 2, method, seed=7), [distribution]).reshape(-1)
    assert stats.kstest(drawn, of_scipy.cdf).pvalue > 1e-3
    assert abs(drawn.mean() - mean) < 4 * deviation / len(drawn) ** 0.5


@pytest.mark.parametrize("method", METHODS)
def test_points_are_the_same_for_the_same_seed_and_lie_inside(method: Method) -> None:
    one, again, other = (parts(3, 64, 4, method, seed) for seed in (1, 1, 2))
    np.testing.assert_array_equal(one, again)
    assert not np.any(one == other)
    assert not np.any(one[0] == one[1])
    assert 0 < one.min() < one.max() < 1


@pytest.mark.parametrize("method", ["sobol", "latin_hypercube"])
def test_every_replicate_has_one_point_in_each_stratum(method: Method) -> None:
    strata = np.sort(np.floor(parts(3, 64, 4, method, 5) * 64), axis=1)
    assert np.all(strata == np.arange(64)[None, :, None])


def test_correlated_normals_have_the_correlation() -> None:
    correlation = np.array([[1, 0.8, -0.3], [0.8, 1, 0], [-0.3, 0, 1.0]])
    drawn = numbers_of(parts(3, 2**14, 1, "sobol", 3)[0], [normal(0, 1), normal(10, 2), normal(-5, 0.1)], correlation)
    np.testing.assert_allclose(np.corrcoef(drawn.T), correlation, atol=0.01)


def test_numbers_keep_their_own_distributions_under_correlation() -> None:
    spreads = [uniform(0, 1), lognormal(3, 2)]
    drawn = numbers_of(parts(2, 2**12, 1, "random", 3)[0], spreads, np.array([[1, 0.9], [0.9, 1]]))
    for number, of_scipy in enumerate([stats.uniform(0, 1), lognormal_of_scipy(3, 2)]):
        assert stats.kstest(drawn[:, number], of_scipy.cdf).pvalue > 1e-3
    # Spearman's rank correlation under a Gaussian copula: 6 / pi asin(rho / 2).
    np.testing.assert_allclose(stats.spearmanr(drawn).statistic, 6 / np.pi * np.arcsin(0.45), atol=0.01)


def test_full_correlation_leaves_one_number_free() -> None:
    drawn = numbers_of(parts(2, 64, 1, "random", 3)[0], [normal(0, 1), normal(1, 2)], np.array([[1, -1], [-1, 1.0]]))
    np.testing.assert_allclose(drawn[:, 1], 1 - 2 * drawn[:, 0], rtol=0, atol=1e-7)


def test_far_ends_keep_their_digits() -> None:
    """Both tails of a normal distribution as far out as the cube goes, mirror images to rounding."""
    ends = numbers_of(np.array([[1e-15], [1 - 1e-15]]), [normal(0, 1)])
    np.testing.assert_allclose(ends[0], -ends[1], rtol=1e-2)
    np.testing.assert_allclose(ends[0], stats.norm.ppf(1e-15), rtol=1e-12)


@pytest.mark.parametrize(
    ("matrix", "is_one"),
    [
        ([[1.0]], True),
        ([[1, 0.5], [0.5, 1]], True),
        ([[1, 1], [1, 1]], True),
        ([[1, 0.5], [0.4, 1]], False),
        ([[1, 1.2], [1.2, 1]], False),
        ([[2, 0], [0, 1]], False),
        ([[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]], False),
        ([[1, 0, 0], [0, 1, 0]], False),
    ],
)
def test_correlation_matrices_are_told(matrix: list[list[float]], is_one: bool) -> None:
    assert is_correlation_matrix(np.array(matrix, dtype=float)) is is_one


def test_root_of_a_correlation_matrix() -> None:
    correlation = np.array([[1, 0.86, -0.36], [0.86, 1, -0.65], [-0.36, -0.65, 1]])
    root = root_of(correlation)
    np.testing.assert_allclose(root @ root.T, correlation, atol=1e-14)
