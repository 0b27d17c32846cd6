"""Tolerance stack-ups, against sums by hand and an example of the Guide to the expression of uncertainty."""

from __future__ import annotations

import numpy as np

from service.analysis.derivatives import Derivatives, derivatives, first_radii
from service.analysis.evaluations import FloatArray
from service.analysis.stack_up import stack_up, variance
from tests.analysis.formulas import Counted


def slopes_of(evaluate: Counted, nominal: FloatArray) -> Derivatives:
    return derivatives(evaluate, nominal, first_radii(nominal, np.ones(len(nominal))))


def gap(housing: FloatArray, block: FloatArray, shim: FloatArray) -> FloatArray:
    return housing - 2 * block - shim


def test_linear_stack_with_unequal_sides() -> None:
    """Housing 50 +0.3 / -0.1, block 20 +0.05 / -0.15, shim 9 +0.02 / -0.02."""
    nominal, plus, minus = np.array([50.0, 20, 9]), np.array([0.3, 0.05, 0.02]), np.array([0.1, 0.15, 0.02])
    evaluate = Counted([gap])
    slopes = slopes_of(evaluate, nominal)
    found = stack_up(slopes, plus, minus)
    np.testing.assert_allclose(found.high_shares, [[0.3, 0.3, 0.02]], rtol=1e-9)
    np.testing.assert_allclose(found.low_shares, [[0.1, 0.1, 0.02]], rtol=1e-9)
    np.testing.assert_allclose(
        np.array([found.worst_low, found.nominal, found.worst_high]), np.array([[0.78], [1], [1.62]]), rtol=1e-9
    )
    # Middles 50.1, 19.95 and 9; halves 0.2, 0.1 and 0.02.
    np.testing.assert_allclose(found.middle, 1.2, rtol=1e-9)
    np.testing.assert_allclose(found.root_sum_square, np.sqrt(0.2**2 + 0.2**2 + 0.02**2), rtol=1e-9)
    np.testing.assert_allclose(found.variance_shares, np.array([[0.04, 0.04, 0.0004]]) / 0.0804, rtol=1e-9)


def test_kink_is_worse_on_both_sides() -> None:
    """The hottest of two places rises whichever way the number goes."""
    evaluate = Counted([lambda x: np.maximum(3 * (x - 2), 2 - x)])
    slopes = slopes_of(evaluate, np.array([2.0]))
    found = stack_up(slopes, np.array([0.1]), np.array([0.5]))
    np.testing.assert_allclose([found.worst_low[0], found.worst_high[0]], [0, 0.5], atol=1e-7)


def test_guide_to_uncertainty_example_h2() -> None:
    """Resistance, reactance and impedance from five simultaneous readings: JCGM 100:2008, H.2, from memory.

    R = 127.732, u = 0.071; X = 219.847, u = 0.295; Z = 254.260, u = 0.236 ohm.
    """
    readings = np.array(
        [
            [5.007, 4.994, 5.005, 4.990, 4.999],
            [19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3],
            [1.0456, 1.0438, 1.0468, 1.0428, 1.0433],
        ]
    )
    evaluate = Counted(
        [
            lambda volt, ampere, phase: volt / ampere * np.cos(phase),
            lambda volt, ampere, phase: volt / ampere * np.sin(phase),
            lambda volt, ampere, phase: volt / ampere + 0 * phase,
        ]
    )
    slopes = slopes_of(evaluate, readings.mean(axis=1))
    deviations = readings.std(axis=1, ddof=1) / 5**0.5
    total, shares = variance(slopes, deviations, np.corrcoef(readings))
    # The last digit of each figure.
    np.testing.assert_allclose(slopes.values, [127.732, 219.847, 254.260], rtol=0, atol=6e-4)
    np.testing.assert_allclose(np.sqrt(total), [0.071, 0.295, 0.236], rtol=0, atol=6e-4)
    np.testing.assert_allclose(shares.sum(axis=1), 1)


def test_full_correlation_adds_up_or_cancels() -> None:
    """Where nothing is left of two numbers there are no shares of it."""
    evaluate = Counted([lambda x, y: x + y, lambda x, y: x - y])
    total, shares = variance(slopes_of(evaluate, np.ones(2)), np.array([2.0, 2]), np.ones((2, 2)))
    np.testing.assert_allclose(total, np.array([16.0, 0]), atol=1e-9)
    np.testing.assert_allclose(shares, np.array([[0.5, 0.5], [np.nan, np.nan]]))


def test_shares_of_what_does_not_vary_are_not_told() -> None:
    """Noise of 1e-9 within bounds of 1e-8: whatever its slopes come to, nobody is behind it."""
    evaluate = Counted([lambda x, y: 5 + 1e-9 * np.sin(1e9 * x + 7e8 * y)], bound=1e-8)
    nominal = np.array([2.0, 3.0])
    found = stack_up(slopes_of(evaluate, nominal), np.full(2, 0.1), np.full(2, 0.1))
    assert found.root_sum_square[0] > 0
    np.testing.assert_array_equal(found.variance_shares, [[np.nan, np.nan]])
