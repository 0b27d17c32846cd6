"""Sampled propagation, against exact distributions; intervals hold as often as they say."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from service.analysis.distributions import normal, uniform
from service.analysis.evaluations import FloatArray
from service.analysis.limits import Limit
from service.analysis.propagation import (
    WAVE,
    Estimate,
    Propagation,
    Sampling,
    propagate,
)
from tests.analysis.formulas import Counted

SPREADS = [normal(10, 1), normal(4, 2), normal(0, 0.5)]


def linear(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    """Normal, mean 2, variance 1 + 4 + 1."""
    return x - y * 1 - 4 + 2 * z


EXACT = stats.norm(2, 6**0.5)
SAMPLINGS = [
    pytest.param(Sampling(400, 1, "random"), id="random"),
    pytest.param(Sampling(64, 8, "sobol"), id="sobol"),
    pytest.param(Sampling(60, 8, "latin_hypercube"), id="latin hypercube"),
]


def run(sampling: Sampling, seed: int, evaluate: Counted | None = None, limit: float = 5.0) -> Propagation:
    return propagate(
        evaluate or Counted([linear]),
        SPREADS,
        Sampling(sampling.count, sampling.replicates, sampling.method, seed),
        limits=[Limit(0, at_most=limit)],
    )


def is_within(estimate: Estimate, exact: float, place: int | tuple[int, ...] = 0) -> bool:
    return bool(estimate.low[place] <= exact <= estimate.high[place])


@pytest.mark.parametrize("sampling", SAMPLINGS)
def test_intervals_hold_as_often_as_they_say(sampling: Sampling) -> None:
    """Over 100 seeds each interval of 95 % misses the exact value no more often than 999 of 1000 binomials do."""
    misses = np.zeros(6, dtype=int)
    for seed in range(100):
        found = run(sampling, seed)
        misses += ~np.array(
            [
                is_within(found.mean, 2.0),
                is_within(found.standard_deviation, 6**0.5),
                *(is_within(found.quantiles, EXACT.ppf(q), (k, 0)) for k, q in enumerate((0.025, 0.5, 0.975))),
                is_within(found.limits.estimate, EXACT.cdf(5.0)),
            ]
        )
    assert np.all(misses <= stats.binom.ppf(0.999, 100, 0.05)), misses


@pytest.mark.parametrize("sampling", SAMPLINGS)
@pytest.mark.parametrize("limit", [100.0, -100.0])
def test_probability_never_collapses_to_certainty(sampling: Sampling, limit: float) -> None:
    found = run(sampling, 1, limit=limit).limits.estimate
    assert found.value[0] == (1 if limit > 0 else 0)
    # Clopper and Pearson's interval where all of n agree: 1 - (alpha / 2)^(1 / n).
    expected = 1 - 0.025 ** (1 / sampling.cases)
    np.testing.assert_allclose(found.high[0] - found.low[0], expected, rtol=1e-9)


def test_few_samples_leave_the_outer_quantiles_open() -> None:
    found = run(Sampling(20), 1).quantiles
    assert found.low[0, 0] == -np.inf
    assert found.high[2, 0] == np.inf
    assert np.all(np.isfinite([found.low[1, 0], found.high[1, 0]]))


def test_better_methods_have_narrower_intervals() -> None:
    widths = [run(sampling.values[0], 3).mean for sampling in SAMPLINGS]  # type: ignore[arg-type]
    plain, sobol, cube = (float(found.high[0] - found.low[0]) for found in widths)
    assert sobol < plain / 3
    assert cube < plain / 3


def test_several_limits_hold_together_less_often_than_each() -> None:
    """A result from 0 to 1 evenly: at most 0.7 and at least 0.2."""
    found = propagate(
        Counted([lambda x: x]),
        [uniform(0, 1)],
        Sampling(512, 4, "sobol"),
        limits=[Limit(0, at_most=0.7), Limit(0, at_least=0.2)],
    )
    np.testing.assert_allclose(found.limits.estimate.value, [0.7, 0.8], atol=2e-3)
    np.testing.assert_allclose(found.together.estimate.value, [0.5], atol=2e-3)
    assert is_within(found.together.estimate, 0.5)


def test_undecided_cases_count_both_ways() -> None:
    """A bound of 0.1 leaves about a tenth of an even spread on either side of the limit."""
    sure, unsure = (
        propagate(Counted([lambda x: x], bound), [uniform(0, 1)], Sampling(1000), limits=[Limit(0, at_most=0.5)]).limits
        for bound in (0.0, 0.1)
    )
    assert sure.undecided[0] == 0
    assert 150 < unsure.undecided[0] < 250
    assert unsure.estimate.value == sure.estimate.value
    np.testing.assert_allclose(unsure.estimate.low, sure.estimate.low - 0.1, atol=0.03)
    np.testing.assert_allclose(unsure.estimate.high, sure.estimate.high + 0.1, atol=0.03)


@pytest.mark.parametrize("sampling", SAMPLINGS)
def test_bounds_of_values_widen_what_comes_of_them(sampling: Sampling) -> None:
    exact, rough = run(sampling, 1, Counted([linear], 0.0)), run(sampling, 1, Counted([linear], 0.25))
    for part in ("mean", "standard_deviation", "quantiles"):
        one, other = getattr(exact, part), getattr(rough, part)
        np.testing.assert_array_equal(one.value, other.value)
        np.testing.assert_allclose(other.high - one.high, 0.25, rtol=0.01)
        np.testing.assert_allclose(one.low - other.low, 0.25, rtol=0.01)


@pytest.mark.parametrize("sampling", SAMPLINGS)
def test_failed_cases_are_counted_and_count_both_ways(sampling: Sampling) -> None:
    evaluate = Counted([linear], fails=lambda x, y, z: x > 11)
    found, all_known = run(sampling, 2, evaluate), run(sampling, 2)
    count, example = found.failures["not_physical"]
    assert example.message == "That is no body."
    assert count == pytest.approx(stats.norm.sf(1) * sampling.cases, abs=25)
    assert found.n_cases == sampling.cases
    assert np.all(np.isfinite(found.mean.value))
    # Whatever those cases had come to, the intervals cover what all cases tell.
    assert found.limits.estimate.low[0] <= all_known.limits.estimate.low[0]
    assert found.limits.estimate.high[0] >= all_known.limits.estimate.high[0]
    assert np.all(found.quantiles.low <= all_known.quantiles.value)
    assert np.all(found.quantiles.high >= all_known.quantiles.value)
    assert found.quantiles.low[0, 0] == -np.inf
    assert found.quantiles.high[2, 0] == np.inf


def test_nothing_but_failures_is_no_answer_and_no_error() -> None:
    found = run(Sampling(30), 2, Counted([linear], fails=lambda x, y, z: x < 1e9))
    assert np.isnan(found.mean.value[0])
    assert np.isnan(found.limits.estimate.value[0])
    assert (found.limits.estimate.low[0], found.limits.estimate.high[0]) == (0, 1)


def test_waves_are_of_bounded_size_and_results_do_not_depend_on_the_run() -> None:
    evaluate = Counted([linear])
    found = run(Sampling(WAVE + 100), 4, evaluate)
    assert evaluate.waves == [WAVE, 100]
    np.testing.assert_array_equal(found.quantiles.low, run(Sampling(WAVE + 100), 4).quantiles.low)


def test_correlated_numbers_spread_a_difference_less() -> None:
    correlation = np.array([[1, 0.9], [0.9, 1.0]])
    found = propagate(
        Counted([lambda x, y: x - y]),
        [normal(0, 1), normal(0, 1)],
        Sampling(256, 8, "sobol"),
        correlation=correlation,
    )
    # Var(x - y) = 1 + 1 - 2 * 0.9.
    assert is_within(found.standard_deviation, 0.2**0.5)
    np.testing.assert_allclose(found.standard_deviation.value, 0.2**0.5, rtol=0.02)
