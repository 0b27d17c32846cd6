"""Results with their derivatives by all coordinates, at many places in one wave of cases."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.unknowns import Coordinates

BoolArray = NDArray[np.bool_]

# Relative step of a difference. Central ones err by its square over 6, 2e-7 of a derivative, and the usual error of a
# value, 1e-9 of the span, weighs 1e-6 of the change of a result that follows the number in proportion. Both weigh about
# the same with the third root of the error of values, so where that is larger steps are as well.
STEP, MOST_STEP = 1e-3, 0.03

# Departure from a straight line over the whole range that does not count, in parts of the change.
STRAIGHT = 1e-7


@dataclass(frozen=True, eq=False)
class Look:
    """What is seen at a place: values and bounds, shape (n_results,), and slopes by coordinates, (n_results, size).

    doubts: an estimate of how far off the slopes are.
    """

    place: FloatArray
    values: FloatArray
    bounds: FloatArray
    slopes: FloatArray
    doubts: FloatArray


class Looker:
    """Takes looks, and counts the cases they cost.

    evaluate: takes the numbers of `coordinates`. needed: columns of the results that have to be finite.
    affine_entries: these results are affine functions of the entries of a map: one difference is exact for them.
    step: of differences, relative.
    """

    def __init__(self, evaluate: Evaluate, coordinates: Coordinates, needed: NDArray[np.intp]) -> None:
        self._evaluate = evaluate
        self.coordinates = coordinates
        self.needed = needed
        self.affine_entries = False
        self.step = STEP
        self.cases = 0
        self.failure: Failure | None = None

    def values(self, places: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Values and bounds at places, shape (n_places, size); a row of NaN where a needed result has none."""
        found = self._evaluate(self.coordinates.numbers(places))
        self.cases += len(places)
        if found.failures and self.failure is None:
            self.failure = found.failures[min(found.failures)]
        has_all = np.all(np.isfinite(found.values[:, self.needed]), axis=1, keepdims=True)
        return np.where(has_all, found.values, np.nan), found.bounds

    def look(self, places: Sequence[FloatArray]) -> list[Look | None]:
        """A look at each place, None where a case of it failed. One wave."""
        plans = [self._offsets(place) for place in places]
        cases = [place + offset for place, (offsets, _) in zip(places, plans, strict=True) for offset in offsets]
        if not cases:
            return []
        values, bounds = self.values(np.array(cases))
        looks: list[Look | None] = []
        first = 0
        for place, (offsets, weights) in zip(places, plans, strict=True):
            mine, off = (table[first : first + len(offsets)] for table in (values, bounds))
            first += len(offsets)
            if np.isnan(mine[:, self.needed]).any():
                looks.append(None)
            else:
                slopes = (weights @ mine).T
                # A value that has no finite bound says nothing about its own error.
                rounding = (np.abs(weights) @ np.where(np.isfinite(off), off, 0.0)).T
                looks.append(Look(place, mine[0], off[0], slopes, rounding + self.step**2 * np.abs(slopes)))
        return looks

    def _offsets(self, place: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Where to look about a place, itself first, and the weights, shape (size, n_offsets), that make slopes of it.

        The slope at 0 of the parabola through 0, a, b is ((b^2 f_a - a^2 f_b) - (b^2 - a^2) f_0) / (a b (b - a)).
        """
        coordinates = self.coordinates
        count, size = coordinates.count, coordinates.size
        step = coordinates.steps(place, self.step)
        pairs = size if not self.affine_entries else count
        near, far = -step, step.copy()
        # At an end of a range both differences go inward: beyond it a number may have no meaning.
        at_low, at_high = place - step < coordinates.low, place + step > coordinates.high
        near, far = np.where(at_low, step, near), np.where(at_low, 2 * step, far)
        near, far = np.where(at_high & ~at_low, -2 * step, near), np.where(at_high & ~at_low, -step, far)
        offsets = np.zeros((1 + 2 * pairs + (size - pairs), size))
        weights = np.zeros((size, len(offsets)))
        for k in range(pairs):
            a, b = near[k], far[k]
            offsets[1 + 2 * k, k], offsets[2 + 2 * k, k] = a, b
            scale = 1.0 / (a * b * (b - a))
            weights[k, 1 + 2 * k], weights[k, 2 + 2 * k] = scale * b * b, -scale * a * a
            weights[k, 0] = -scale * (b * b - a * a)
        for k in range(pairs, size):
            # A whole typical size: the larger the change the less rounding counts.
            column = 1 + 2 * pairs + (k - pairs)
            offsets[column, k] = 1.0
            weights[k, column], weights[k, 0] = 1.0, -1.0
        return offsets, weights


@dataclass(frozen=True, eq=False)
class Straight:
    """What a first wave over the whole ranges says.

    look: at the first place, with slopes that are chords over the whole range. affine: which results are affine
    functions of all coordinates. affine_entries: the needed results are affine functions of the entries of a map.
    errors, changes: of the results over the whole ranges.
    """

    look: Look
    affine: BoolArray
    affine_entries: bool
    errors: FloatArray
    changes: FloatArray

    def step(self, columns: NDArray[np.intp], uncertainties: FloatArray) -> float:
        """What step differences take for readings of these results, shape (n_readings,), with their uncertainties."""
        error, change = (float(np.linalg.norm(sizes[columns] / uncertainties)) for sizes in (self.errors, self.changes))
        return float(np.clip(np.cbrt(error / change), STEP, MOST_STEP)) if change > 0 else STEP


def look_for_straight(looker: Looker, place: FloatArray, slack: FloatArray | None, seed: int) -> Straight | None:
    """Which results are affine functions, by one wave: chords, and places where everything has moved.

    slack: shape (n_needed,), departures of the needed results that do not count; None for so many parts of what they
    change by as rounding may come to. None is returned where a case failed, which says nothing. Three places along each
    line and two off all of them, drawn with the seed, are on one plane by chance only.
    """
    coordinates = looker.coordinates
    count, size = coordinates.count, coordinates.size
    corners = np.repeat(place[None], 2 * count + (size - count), axis=0)
    for k in range(count):
        corners[2 * k, k], corners[2 * k + 1, k] = coordinates.low[k], coordinates.high[k]
    for k in range(count, size):
        corners[count + k, k] += 1.0
    random = np.random.default_rng(seed)
    moved = np.concatenate(
        (random.uniform(0.1, 0.9, (2, count)), place[count:] + random.uniform(-1, 1, (2, size - count))), axis=1
    )
    only_map = np.concatenate((place[:count], moved[0, count:]))
    values, bounds = looker.values(np.vstack((place, corners, moved, only_map)))
    if np.isnan(values[:, looker.needed]).any():
        return None
    base, at = values[0], values[1 : 1 + len(corners)]
    slopes = np.concatenate((at[1 : 2 * count : 2] - at[0 : 2 * count : 2], at[2 * count :] - base)).T
    tests = np.vstack((corners[0 : 2 * count : 2], moved, only_map))
    seen = np.vstack((at[0 : 2 * count : 2], values[-3:]))
    departures = np.abs(seen - (base + (tests - place) @ slopes.T))
    # A value that has no finite bound is judged by the slack alone.
    errors = np.where(np.isfinite(bounds), bounds, 0.0).max(axis=0)
    rounding, changes = 4 * errors, np.ptp(values, axis=0)
    allowed = STRAIGHT * changes
    if slack is not None:
        allowed[looker.needed] = slack
    straight = (departures <= allowed + rounding).all(axis=0)
    map_straight = (departures[-1] <= allowed + rounding)[looker.needed].all()
    doubts = np.broadcast_to(rounding[:, None], slopes.shape)
    look = Look(place, base, bounds[0], slopes, doubts)
    return Straight(look, straight, bool(map_straight) and size > count, errors, changes)
