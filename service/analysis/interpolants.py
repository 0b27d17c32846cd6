"""Derivatives of the interpolant through values at Chebyshev points, and how far off they may be.

The interpolant sum c_k T_k (Trefethen, Approximation Theory and Approximation Practice, 2013, chapters 3 and 4) is
differentiated at one place, and how fast the c_k fall tells what the terms left out come to. Where the interval is a
64th of the distance to the nearest singularity on either side, 5 points give 8 digits and 9 points all of them.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from functools import lru_cache

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from service.analysis.evaluations import FloatArray

BoolArray = NDArray[np.bool_]

# Truncation aimed at in parts of the derivative, a tenth of what is promised, and rounding beyond which the interval is
# made wider.
TARGET, TOO_UNSURE = 1e-7, 5e-7

# Truncation above this part of the derivative is a result that does not look smooth.
ROUGH = 1e-3

# A derivative is never trusted to be better than this part of what the next coarser interpolant was off by: with the
# radius at a 64th of the distance to a singularity the true part is 4e-8.
COARSER = 3e-4

# Coefficients fall less evenly than the geometric series they are taken for; over random functions with poles, decays
# and waves the estimate without this is too small in one of fifty, by 2, with it in one of a thousand.
UNEVEN = 4.0

# Slowest fall of coefficients from one to the next that is extrapolated.
SLOWEST = 0.9

ROUNDING = float(np.finfo(float).eps)


@dataclass(frozen=True)
class Rule:
    """Derivatives at one place of [-1, 1] from values at Chebyshev points.

    points: cos(pi j / degree), shape (degree + 1,), but for the exact middle. place: 0, or -1 or 1 for an end.
    coefficients: c = coefficients @ values. first, second: weights of values. steep, bent: how large the first and
    second derivative of T_k can be near place, for k up to 2 degree.
    """

    place: float
    points: FloatArray
    coefficients: FloatArray
    first: FloatArray
    second: FloatArray
    steep: FloatArray
    bent: FloatArray

    @property
    def own(self) -> int:
        """The number of the point at the place, whose value is known."""
        return int(np.flatnonzero(self.points == self.place)[0])


@lru_cache(maxsize=16)
def rule_of(degree: int, place: float) -> Rule:
    """The rule of an even degree for the middle, 0, or an end, -1 or 1."""
    points = np.sin(np.pi * np.arange(degree, -degree - 1, -2) / (2 * degree))
    coefficients: FloatArray = np.linalg.inv(chebyshev.chebvander(points, degree)).astype(np.float64)
    slopes, bends = (
        np.array([chebyshev.chebval(place, chebyshev.chebder(np.eye(degree + 1)[k], order)) for k in range(degree + 1)])
        for order in (1, 2)
    )
    k = np.arange(2 * degree + 1.0)
    # |T_k'| = k |sin k theta| / sin theta and what it is at the ends; T_k'' in the same manner.
    steep, bent = (k, k**2) if place == 0 else (k**2, k**2 * (k**2 - 1) / 3)
    return Rule(place, points, coefficients, slopes @ coefficients, bends @ coefficients, steep, bent)


@dataclass(frozen=True)
class Slopes:
    """First and second derivatives of all results from one interval, each array of shape (n_results,).

    truncation: estimate of what higher degrees would change. rounding: what the bounds of the values come to, infinite
    ones left out. affine: no bend was seen within the bounds. bounded: all values have finite ones. settled: truncation
    matters neither beside the derivative nor beside rounding.
    """

    first: FloatArray
    truncation: FloatArray
    rounding: FloatArray
    second: FloatArray
    second_truncation: FloatArray
    second_rounding: FloatArray
    affine: BoolArray
    bounded: BoolArray
    settled: BoolArray

    @property
    def error(self) -> FloatArray:
        """Of the first derivative; infinite where a value has no finite bound."""
        return np.where(self.bounded, self.truncation + self.rounding, np.inf)

    @property
    def second_error(self) -> FloatArray:
        """Of the second derivative."""
        return np.where(self.bounded, self.second_truncation + self.second_rounding, np.inf)

    @property
    def too_narrow(self) -> BoolArray:
        """Whether rounding keeps a derivative that is not zero from what is promised."""
        size = np.abs(self.first)
        return self.settled & (self.rounding > TOO_UNSURE * size) & (self.rounding < size)


def slopes_of(rule: Rule, nominal: float, radius: float, values: FloatArray, bounds: FloatArray) -> Slopes:
    """Derivatives at a nominal number, which lies at the place of the rule in an interval of this radius.

    values, bounds: of the results at the points of the rule, shape (degree + 1, n_results).
    """
    degree = len(rule.points) - 1
    here = values[rule.own]
    finite = np.all(np.isfinite(values), axis=0)
    bounded = np.all(np.isfinite(bounds), axis=0)
    differences = np.subtract(values, here, out=np.zeros_like(values), where=finite)
    first = rule.first @ differences / radius
    # A point of the interval is off by half a unit in its last digit, which changes the value by that times the slope.
    spread = (
        np.where(bounded, bounds, 0.0)
        + ROUNDING * np.where(finite, np.abs(values), 0.0)
        + ROUNDING * (abs(nominal) + radius) * np.abs(first)
    )
    # What values within their bounds leave no doubt of.
    sizes = np.maximum(np.abs(rule.coefficients @ differences) - np.abs(rule.coefficients) @ spread, 0.0)
    second = rule.second @ differences / radius**2
    coarse = rule_of(degree // 2, rule.place)
    coarse_first = coarse.first @ differences[::2] / radius
    coarse_second = coarse.second @ differences[::2] / radius**2
    truncation = _left_out(sizes, rule.steep) / radius + COARSER * np.abs(first - coarse_first)
    truncation[~finite & np.isfinite(here)] = np.inf
    rounding = np.abs(rule.first) @ spread / radius
    return Slopes(
        first=first,
        truncation=truncation,
        rounding=rounding,
        second=second,
        second_truncation=_left_out(sizes, rule.bent) / radius**2 + COARSER * np.abs(second - coarse_second),
        second_rounding=np.abs(rule.second) @ spread / radius**2,
        affine=np.all(sizes[2:] == 0, axis=0),
        bounded=bounded,
        settled=truncation <= np.maximum(TARGET * np.abs(first), rounding),
    )


def _left_out(sizes: FloatArray, weights: FloatArray) -> FloatArray:
    """What Chebyshev coefficients above the degree N add to a derivative, with those they are mistaken for.

    sizes: |c_k| for k = 0 .. N, shape (N + 1, n_results); weights: those of T_k for k = 0 .. 2 N. On the points T_(N+j)
    looks like T_(N-j). The c_k go on as they fell from N / 2 to N.
    """
    degree = len(sizes) - 1
    earlier = sizes[[degree // 2 - 1, degree // 2]]
    later = sizes[[degree - 1, degree]]
    ratios = np.divide(later, earlier, out=np.where(later > 0, 1.0, 0.0), where=earlier > 0)
    fall = np.minimum(np.max(ratios, axis=0) ** (2 / degree), SLOWEST)
    tail = np.zeros(sizes.shape[1])
    for j in range(1, degree + 1):
        tail += (
            UNEVEN
            * np.maximum(later[1] * fall**j, later[0] * fall ** (j + 1))
            * (weights[degree + j] + weights[degree - j])
        )
    return tail


def better(known: Slopes | None, new: Slopes) -> Slopes:
    """For each result that with the smaller error, settled if either is."""
    if known is None:
        return new
    best = chosen(new.truncation + new.rounding < known.truncation + known.rounding, new, known)
    return replace(best, settled=known.settled | new.settled)


def chosen(which: BoolArray, yes: Slopes, no: Slopes) -> Slopes:
    """For each result that of `yes` where `which` is true."""
    parts = (part.name for part in fields(Slopes))
    return Slopes(*(np.where(which, getattr(yes, part), getattr(no, part)) for part in parts))
