"""What tolerances of numbers add up to in the results, to first order.

A number may lie from nominal - minus to nominal + plus. The worst case adds up what each does on its worse side. The
root sum of squares takes each as lying in the middle of its zone give or take half of its width, which are added as
standard deviations are: sqrt(t^T C t) with t the slope times half the width and C the correlations (JCGM 100:2008, the
"GUM", equations 10 and 13). Both are of the linear part of the result; its values at the corners of the zone that are
worst to first order show how much bend there is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.analysis.derivatives import Derivatives
from service.analysis.evaluations import Evaluate, Evaluations, FloatArray


@dataclass(frozen=True)
class StackUp:
    """Stack-up of every result; arrays of shape (n_results,) or (n_results, n_numbers).

    worst_low, worst_high: the worst case. middle: the result with all numbers in the middles of their zones.
    root_sum_square: to either side of that. slope_error: estimate of how far off each of these may be, because the
    slopes are and the nominal value is. low_shares, high_shares: what each number adds to either side of the worst
    case, in units of the result, >= 0. variance_shares: part of each number of the square of the root sum square; they
    add up to 1, and one may be negative where numbers are correlated. NaN where a derivative is not known.
    """

    nominal: FloatArray
    worst_low: FloatArray
    worst_high: FloatArray
    middle: FloatArray
    root_sum_square: FloatArray
    slope_error: FloatArray
    low_shares: FloatArray
    high_shares: FloatArray
    variance_shares: FloatArray


@dataclass(frozen=True)
class Corners:
    """Every result at the two corners of the zone that are worst for it to first order.

    numbers_low, numbers_high: shape (n_results, n_numbers); low, high: rows of results, one a result, of which the
    result's own is taken: values and bounds of shape (n_results,), NaN where the case failed. failures of both are
    numbered as the results are. n_cases: cases that were computed, corners that results share counting once.
    """

    numbers_low: FloatArray
    numbers_high: FloatArray
    low: Evaluations
    high: Evaluations
    n_cases: int


def stack_up(
    slopes: Derivatives, plus: FloatArray, minus: FloatArray, correlation: FloatArray | None = None
) -> StackUp:
    """The stack-up of tolerances plus and minus, each >= 0, of shape (n_numbers,).

    correlation: of the numbers, shape (n_numbers, n_numbers), for the root sum of squares; None if independent.
    """
    # At a kink each side has a slope of its own, and a number need not leave its nominal.
    rises, falls = slopes.above * plus, -slopes.below * minus
    high_shares = np.maximum(np.maximum(rises, falls), 0.0)
    low_shares = np.maximum(np.maximum(-rises, -falls), 0.0)
    nominal = slopes.values
    total, shares = variance(slopes.first, (plus + minus) / 2, correlation)
    return StackUp(
        nominal=nominal,
        worst_low=nominal - low_shares.sum(axis=1),
        worst_high=nominal + high_shares.sum(axis=1),
        middle=nominal + slopes.first @ ((plus - minus) / 2),
        root_sum_square=np.sqrt(total),
        slope_error=slopes.bounds + slopes.first_error @ np.maximum(plus, minus),
        low_shares=low_shares,
        high_shares=high_shares,
        variance_shares=shares,
    )


def variance(
    slopes: FloatArray, deviations: FloatArray, correlation: FloatArray | None = None
) -> tuple[FloatArray, FloatArray]:
    """Variances of results to first order, and the part of each number in them.

    slopes: shape (n_results, n_numbers); deviations: standard deviations of the numbers, shape (n_numbers,).
    Returns shapes (n_results,) and (n_results, n_numbers). The part is the covariance of the number's own term with the
    result, in parts of the variance, 0 where there is none.
    """
    terms = slopes * deviations
    covariances = terms * (terms if correlation is None else terms @ correlation)
    # Correlations of -1 may leave nothing but rounding.
    total = np.maximum(covariances.sum(axis=1), 0.0)
    shares = np.divide(covariances, total[:, None], out=np.zeros_like(covariances), where=total[:, None] != 0)
    return total, shares


def most_cases_of_corners(n_results: int) -> int:
    """The most cases that the corners of so many results take."""
    return 2 * n_results


def corners(
    evaluate: Evaluate, nominal: FloatArray, slopes: Derivatives, plus: FloatArray, minus: FloatArray
) -> Corners:
    """Results at the corners where each is lowest and highest to first order, in one wave.

    nominal, plus, minus: shape (n_numbers,). A number whose slope is not known, or not known from zero, stays at its
    nominal, so that results share corners.
    """
    known = np.isfinite(slopes.first_error) & slopes.smooth
    is_clear = np.isfinite(slopes.first) & ~(known & (np.abs(slopes.first) <= slopes.first_error))
    rises = np.where(is_clear, slopes.above * plus, 0.0)
    falls = np.where(is_clear, -slopes.below * minus, 0.0)
    high = nominal + np.where(np.maximum(rises, falls) <= 0, 0.0, np.where(rises >= falls, plus, -minus))
    low = nominal + np.where(np.maximum(-rises, -falls) <= 0, 0.0, np.where(-rises >= -falls, plus, -minus))
    cases, rows = np.unique(np.concatenate([low, high]), axis=0, return_inverse=True)
    answers = evaluate(cases)
    n_results = len(low)
    rows = rows.reshape(-1)

    def own(rows: NDArray[np.intp]) -> Evaluations:
        results = np.arange(n_results)
        failures = {int(result): answers.failures[row] for result, row in enumerate(rows) if row in answers.failures}
        return Evaluations(answers.values[rows, results], answers.bounds[rows, results], failures)

    return Corners(low, high, own(rows[:n_results]), own(rows[n_results:]), len(cases))
