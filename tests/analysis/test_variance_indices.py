"""Sobol indices, against a function whose indices are known in closed form, and against scipy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from service.analysis.distributions import uniform
from service.analysis.evaluations import FloatArray
from service.analysis.variance_indices import cases_of_indices, variance_indices
from tests.analysis.formulas import Counted


def ishigami(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    return np.sin(x) + 7 * np.sin(y) ** 2 + 0.1 * z**4 * np.sin(x)


ISHIGAMI_SPREADS = [uniform(-np.pi, np.pi)] * 3


def test_indices_of_the_ishigami_function() -> None:
    """First 0.3139, 0.4424, 0; total 0.5576, 0.4424, 0.2437 (a = 7, b = 0.1; Saltelli et al. 2008, from memory).

    The closed forms: V = a^2/8 + b pi^4/5 + b^2 pi^8/18 + 1/2.
    """
    pi, a, b = np.pi, 7, 0.1
    size = a**2 / 8 + b * pi**4 / 5 + b**2 * pi**8 / 18 + 0.5
    first = np.array([0.5 * (1 + b * pi**4 / 5) ** 2, a**2 / 8, 0]) / size
    total = first + np.array([1, 0, 1]) * b**2 * pi**8 * (1 / 18 - 1 / 50) / size
    np.testing.assert_allclose(first, [0.3139, 0.4424, 0], atol=5e-5)
    np.testing.assert_allclose(total, [0.5576, 0.4424, 0.2437], atol=5e-5)

    evaluate = Counted([ishigami, lambda x, y, z: 0 * x + 3])
    found = variance_indices(evaluate, ISHIGAMI_SPREADS, 4096, seed=1)
    # Plain sampling of as many has a standard error of about 1 / sqrt(4096), which is 0.016.
    np.testing.assert_allclose(found.first.value[0], first, rtol=0, atol=0.016)
    np.testing.assert_allclose(found.total.value[0], total, rtol=0, atol=0.016)
    assert np.all((found.first.low[0] <= first) & (first <= found.first.high[0]))
    assert np.all((found.total.low[0] <= total) & (total <= found.total.high[0]))
    # A result that does not vary has none.
    assert np.all(np.isnan([found.total.value[1], found.first.low[1]]))
    assert found.n_cases == evaluate.n_cases == cases_of_indices(4096, 3)


def test_indices_are_those_of_scipy_on_the_same_cases() -> None:
    evaluate = Counted([ishigami])
    asked: list[FloatArray] = []

    def watched(cases: FloatArray, *, accuracy: float | None = None):  # type: ignore[no-untyped-def]
        asked.append(cases)
        return evaluate(cases)

    found = variance_indices(watched, ISHIGAMI_SPREADS, 256, seed=5)
    values = ishigami(*np.concatenate(asked).T).reshape(5, 1, 256)
    expected = stats.sobol_indices(func={"f_A": values[0], "f_B": values[1], "f_AB": values[2:]}, n=256)
    np.testing.assert_allclose(found.first.value[0], expected.first_order, rtol=1e-9, atol=1e-12)
    np.testing.assert_allclose(found.total.value[0], expected.total_order, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("count", [16, 64, 256])
def test_intervals_of_indices_hold_as_often_as_they_say(count: int) -> None:
    """Over 200 seeds each misses no more often than 999 of 1000 binomials do, and they are no wider for it."""
    exact = np.array([[0.313905, 0.442411, 0], [0.557589, 0.442411, 0.243684]])
    misses, widths = np.zeros((2, 3)), []
    for seed in range(200):
        found = variance_indices(Counted([ishigami]), ISHIGAMI_SPREADS, count, seed=seed)
        low, high = (
            np.array([getattr(part, end)[0] for part in (found.first, found.total)]) for end in ("low", "high")
        )
        misses += (exact < low) | (high < exact)
        widths.append(high - low)
    assert np.all(misses <= stats.binom.ppf(0.999, 200, 0.05)), misses
    # The standard error of as many plain rows is about 1 / sqrt(count) of the first, and more of the total.
    assert np.all(np.median(widths, axis=0) < 16 / count**0.5)


def test_indices_of_noise_within_the_bounds_are_not_told() -> None:
    evaluate = Counted([lambda x, y: 20 + 1e-9 * np.sin(1e7 * x) + 1e-10 * np.sin(1e7 * y)], bound=2e-9)
    found = variance_indices(evaluate, [uniform(0, 1)] * 2, 64)
    for part in (found.first, found.total):
        assert np.all(np.isnan([part.value, part.low, part.high]))


def test_intervals_of_indices_are_wider_by_the_bounds() -> None:
    """A tenth of y is hidden by as large an error: x alone may be behind all of it."""

    def found(bound: float) -> FloatArray:
        evaluate = Counted([lambda x, y: x + 0.1 * y + bound * np.sin(1e5 * y)], bound)
        total = variance_indices(evaluate, [uniform(0, 1)] * 2, 256).total
        return np.array([total.low[0], total.high[0]])

    sure, unsure = found(1e-9), found(0.05)
    exact = np.array([1, 0.01]) / 1.01
    assert np.all((sure[0] <= exact) & (exact <= sure[1]))
    assert np.all((unsure[0] <= exact) & (exact <= unsure[1]))
    assert sure[0, 1] > 0.008
    assert unsure[0, 1] == 0


def test_indices_do_without_rows_that_failed() -> None:
    found = variance_indices(Counted([ishigami], fails=lambda x, y, z: x > 3.1), ISHIGAMI_SPREADS, 512, seed=1)
    assert 0 < found.n_left_out < 30
    np.testing.assert_allclose(found.first.value[0], [0.3139, 0.4424, 0], atol=0.06)
    np.testing.assert_array_equal(found.first.low, -np.inf)
    np.testing.assert_array_equal(found.total.high, np.inf)


def test_indices_of_nothing_but_failures_are_no_numbers() -> None:
    found = variance_indices(Counted([ishigami], fails=lambda x, y, z: x > -9), ISHIGAMI_SPREADS, 16)
    assert found.n_left_out == 16
    assert np.all(np.isnan(found.total.value))


def test_noise_within_the_bounds_has_no_indices() -> None:
    """A result of one value but for noise of 1e-9: with bounds of 1e-8 it may be constant, with 1e-10 it is not."""

    def noise(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
        return 5 + 1e-9 * np.sin(1e3 * x + 3e2 * y + z)

    told = [
        np.isfinite(variance_indices(Counted([noise], bound=bound), ISHIGAMI_SPREADS, 64).total.value).all()
        for bound in (1e-8, 1e-10)
    ]
    assert told == [False, True]
