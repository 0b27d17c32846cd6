"""Distributions and samples of them, against their known moments and scipy's tests of goodness of fit."""

from __future__ import annotations

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

# Means and standard deviations from the textbook formulas, worked out by hand.
KNOWN = [
    pytest.param(normal(5, 2), 5.0, 2.0, id="normal"),
    pytest.param(uniform(2, 8), 5.0, 6 / 12**0.5, id="uniform"),
    pytest.param(triangular(0, 6, 6), 4.0, 2**0.5, id="triangular"),
    pytest.param(lognormal(5, 2), 5.0, 2.0, id="lognormal"),
    # Cut at one standard deviation on either side: 1 - 2 phi(1) / (2 Phi(1) - 1) of the variance is left.
    pytest.param(truncated_normal(5, 2, 3, 7), 5.0, 2 * 0.2911250947**0.5, id="truncated normal"),
    # Half of all between 0 and 1, half between 1 and 3.
    pytest.param(tabulated(np.array([0.0, 1, 3]), np.array([0.0, 0.5, 1])), 1.25, (1 / 6 + 13 / 6 - 1.5625) ** 0.5,
                 id="tabulated"),
]  # fmt: skip


def test_normal_distribution_cut_far_within_is_even() -> None:
    for deviation in (900, 1100, 1e9):
        spread = truncated_normal(20, deviation, 19, 21)
        np.testing.assert_allclose(spread.ppf(np.array([0, 0.25, 1])), [19, 19.5, 21], rtol=1e-7)
        np.testing.assert_allclose(spread.std(), 2 / 12**0.5, rtol=1e-7)


@pytest.mark.parametrize(("distribution", "mean", "deviation"), KNOWN)
def test_means_and_deviations_are_those_of_the_textbook(
    distribution: Distribution, mean: float, deviation: float
) -> None:
    np.testing.assert_allclose([distribution.mean(), distribution.std()], [mean, deviation], rtol=1e-9)


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize(("distribution", "mean", "deviation"), KNOWN)
def test_samples_follow_their_distribution(
    distribution: Distribution, mean: float, deviation: float, method: Method
) -> None:
    drawn = numbers_of(parts(1, 1024, 2, method, seed=7), [distribution]).reshape(-1)
    assert stats.kstest(drawn, distribution.cdf).pvalue > 1e-3  # type: ignore[attr-defined]
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
    for number, spread in enumerate(spreads):
        assert stats.kstest(drawn[:, number], spread.cdf).pvalue > 1e-3  # type: ignore[attr-defined]
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
