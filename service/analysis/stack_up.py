"""What tolerances of numbers add up to in the results, to first order.

A number may lie from nominal - minus to nominal + plus. The worst case adds up what each does on its worse side. The
root sum of squares takes each as lying in the middle of its zone give or take half of its width, which are added as
standard deviations are: sqrt(t^T C t) with t the slope times half the width and C the correlations (JCGM 100:2008, the
"GUM", equations 10 and 13). Both are of the linear part of the result, which is unsafe where it bends; what it comes to
in truth is computed, see `worst_case`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.analysis.derivatives import Derivatives
from service.analysis.evaluations import FloatArray


@dataclass(frozen=True)
class StackUp:
    """Stack-up of every result; arrays of shape (n_results,) or (n_results, n_numbers).

    worst_low, worst_high: the worst case. middle: the result with all numbers in the middles of their zones.
    root_sum_square: to either side of that. slope_error: estimate of how far off each of these may be, because the
    slopes are and the nominal value is. low_shares, high_shares: what each number adds to either side of the worst
    case, in units of the result, >= 0. variance_shares: part of each number of the square of the root sum square; they
    add up to 1, and one may be negative where numbers are correlated. NaN where a derivative is not known, shares also
    where the root sum square is no larger than what the slopes err by.
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
    total, shares = variance(slopes, (plus + minus) / 2, correlation)
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
    slopes: Derivatives, deviations: FloatArray, correlation: FloatArray | None = None
) -> tuple[FloatArray, FloatArray]:
    """Variances of results to first order, and the part of each number in them.

    deviations: standard deviations of the numbers, shape (n_numbers,). Returns shapes (n_results,) and
    (n_results, n_numbers). The part is the covariance of the number's own term with the result, in parts of the
    variance; NaN where the deviation of the result is no larger than what the slopes err by.
    """
    terms = slopes.first * deviations
    covariances = terms * (terms if correlation is None else terms @ correlation)
    # Correlations of -1 may leave nothing but rounding.
    total = np.maximum(covariances.sum(axis=1), 0.0)
    doubt = slopes.first_error @ deviations
    told = ~(np.isfinite(doubt) & (np.sqrt(total) <= doubt)) & (total > 0)
    shares = np.divide(covariances, total[:, None], out=np.full_like(covariances, np.nan), where=told[:, None])
    return total, shares
