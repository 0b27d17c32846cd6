"""Limits on results: by how much they hold, and whether that is more than the results may be off."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from service.analysis.evaluations import FloatArray

Held = Literal["yes", "no", "undecided"]


@dataclass(frozen=True)
class Limit:
    """What a result must not pass.

    result: its number among the results. at_most, at_least: infinite where there is no limit on that side.
    """

    result: int
    at_most: float = math.inf
    at_least: float = -math.inf


def margins(limits: Sequence[Limit], values: FloatArray) -> FloatArray:
    """By how much each limit holds, negative where it does not; of the nearer side where it has two.

    values: shape (..., n_results), NaN where there is none. Returns shape (..., n_limits).
    """
    chosen = [limit.result for limit in limits]
    at_most = np.array([limit.at_most for limit in limits])
    at_least = np.array([limit.at_least for limit in limits])
    return np.minimum(at_most - values[..., chosen], values[..., chosen] - at_least)


def bounds_of(limits: Sequence[Limit], bounds: FloatArray) -> FloatArray:
    """How far off the margins may be: shape (..., n_limits) from that of the results, (..., n_results)."""
    return bounds[..., [limit.result for limit in limits]]


def surely_held(margin: FloatArray, bound: FloatArray) -> NDArray[np.bool_]:
    """Where a limit holds whatever the error; never where there is no value."""
    return margin >= bound


def surely_passed(margin: FloatArray, bound: FloatArray) -> NDArray[np.bool_]:
    """Where a limit does not hold whatever the error; never where there is no value."""
    return margin < -bound


def verdict(margin: float, bound: float) -> Held:
    """Whether a limit holds: undecided where the margin is within the error."""
    if surely_held(np.array(margin), np.array(bound)):
        return "yes"
    return "no" if surely_passed(np.array(margin), np.array(bound)) else "undecided"
