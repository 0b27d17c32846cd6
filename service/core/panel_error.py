"""What the answers of three refinements tell of their error, each with half as many panels as the one before.

Totals are stationary in the density, so that with n panels along an axis of a spot they err by a n^(-3) + b n^(-4) on
held pads and by a n^(-2) + b n^(-3) behind films alone; these terms are removed (Richardson). The error left over is
smaller than the last step of that; the bound is SAFETY such steps.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core.bounded import Bounded

FloatArray = NDArray[np.float64]

# Steps of the extrapolation that its error is told as. With four it would just cover a total that errs by n^(-2) where
# n^(-3) and n^(-4) were removed.
SAFETY = 6.0

# The error is not told as less than this part of the first extrapolation, so that a step that vanishes by chance does
# not count; nor as less than what changes would come to that go on to fall at their pace, or at the slowest. Below this
# part of the final pace it may still become slower, and counts with this power.
LEAST_STEP, PACE_SAFETY, SLOWEST_PACE = 0.2, 1.5, 1.25

# The same where there are films alone, whose changes are seen to fall by 3.2 where the extrapolation takes 4.
LEAST_STEP_OF_FILMS = 0.6
RESOLVED_PACE, UNRESOLVED_PACE = 0.75, 0.75

# Local values gain between one order, on a pad and beside its border, and three. What is left is told from the pace of
# their changes, and is no more than the last; a change that vanishes by chance counts as that of three orders.
FASTEST_PACE, CHANGE_SAFETY = 8.0, 2.5

TINY = 1e-300

# Bounds of totals fall at the most with this power of the number of panels along an axis, those of fields with this.
ORDER_OF_TOTALS, ORDER_OF_FIELDS = 4.0, 2.0


def extrapolated(values: Sequence[Bounded], *, held: bool) -> Bounded:
    """The limit of a total at three refinements, the finest first, each with half as many panels as the one before."""
    order = 3 if held else 2
    fine, middle, coarse = (value.value for value in values)
    once = fine + (fine - middle) / (2.0**order - 1)
    before = middle + (middle - coarse) / (2.0**order - 1)
    twice = once + (once - before) / (2.0 ** (order + 1) - 1)
    change = fine - middle
    if change == 0.0:
        return Bounded(twice, SAFETY * abs(twice - once) + 2 * max(value.error_bound for value in values))
    # As if the changes went on to fall as they do, or more slowly while panels do not resolve a narrow gap yet.
    pace = max(abs((middle - coarse) / change), SLOWEST_PACE)
    if pace < RESOLVED_PACE * 2.0**order:
        pace **= UNRESOLVED_PACE
    further = fine + change / (pace - 1)
    least = LEAST_STEP if held else LEAST_STEP_OF_FILMS
    error = max(SAFETY * abs(twice - once), least * abs(once - fine), PACE_SAFETY * abs(further - twice))
    return Bounded(twice, error + 2 * max(value.error_bound for value in values))


def left_over(last: FloatArray, before: FloatArray) -> FloatArray:
    """What local values may still be off by after a last change and the one before it, both >= 0."""
    # Changes fall by 2 to 8 from one to the next, from places on a pad's border to those well off it.
    pace = np.clip(before / np.maximum(last, TINY), SLOWEST_PACE, FASTEST_PACE)
    return np.asarray(np.maximum(last, before / FASTEST_PACE) * np.minimum(1.0, CHANGE_SAFETY / (pace - 1.0)))


def change_of(values: Sequence[Bounded]) -> Bounded:
    """The first of the values at three refinements, with what it may still be off by."""
    fine, middle, coarse = values
    left = left_over(np.abs(fine.value - middle.value), np.abs(middle.value - coarse.value))
    return Bounded(fine.value, float(left) + fine.error_bound + middle.error_bound)


def times_too_wide(bound: float, wanted: float) -> float:
    """How many times too wide a bound is."""
    return bound / wanted if wanted > 0.0 else math.inf if bound > 0.0 else 0.0
