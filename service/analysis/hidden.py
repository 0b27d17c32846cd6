"""Extremes of margins between the places of a scan, where a limit may hold or be passed without a place that shows it.

An extreme that shows beyond the errors is looked into by halving the steps beside it until the margin is seen to be
smooth there, or a kink: then a parabola, or its two slopes, tell how far it can go. If that may reach over the limit it
is followed. A peak that does not show at any place stays unseen.

Source of the search: Chandrupatla, Computer Methods in Applied Mechanics and Engineering 152 (1998) 211.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize.elementwise import find_minimum

from service.analysis.evaluations import FloatArray
from service.analysis.samples import Samples

# Width of an extreme's bracket in parts of the number: the square root of full accuracy, which is what an extreme's
# value determines of its place.
EXTREME_WIDTH = 1e-8
MOST_STEPS = 80

# Rises from an extreme to its neighbours are those of something smooth, or of a kink, if they are no more than this
# part of the rises to the neighbours after these: a parabola has a quarter, a kink a half, the tails of a peak that is
# narrower than the steps have all.
LEVELLED = 0.75

# Steps beside extremes are halved so many times at the most: to a 16 000th.
HALVINGS = 14

# An extreme between three neighbours is looked for if the middle one would reach a limit by going this many times as
# far as its neighbours are beyond it; a parabola goes an eighth of the sum.
FARTHEST = 4.0

# It is given up once three neighbours bend by less than this part of what is left to the limit.
FLAT = 0.1

# Highest cases around which the nearest miss is looked for.
MOST_APPROACHED = 3


def look_for_hidden(samples: Samples) -> None:
    """Look wherever the limits may be passed, or hold, between neighbours that say the opposite."""
    _look_into_ends(samples)
    _look_into_extremes(samples)
    for side in (1, -1):
        worst, signs = side * samples.worst, side * samples.signs
        # The middle one may be undecided; what it touches may be passed beside it.
        alike = (signs[:-2] == 1) & (signs[1:-1] >= 0) & (signs[2:] == 1)
        rises = np.maximum(worst[:-2], worst[2:]) - worst[1:-1]
        near = worst[1:-1] < FARTHEST * rises
        _descend(samples, side, np.flatnonzero(alike & near & _lowest(worst)) + 1, FLAT)


def approach(samples: Samples, side: int) -> None:
    """Look for where the worst margin times `side` is highest, around the highest cases that show beyond the errors."""
    worst, bounds = -side * samples.worst, samples.worst_bounds
    rises = np.maximum(worst[:-2], worst[2:]) - worst[1:-1]
    shows = rises > 2.0 * np.maximum(np.maximum(bounds[:-2], bounds[2:]), bounds[1:-1])
    lowest = np.flatnonzero(_lowest(worst) & shows) + 1
    best = lowest[np.argsort(worst[lowest], kind="stable")[:MOST_APPROACHED]]
    _descend(samples, -side, best, 0.0)


def _look_into_ends(samples: Samples) -> None:
    """Look into the first and last step of each stretch, where an extreme has no neighbours on both sides.

    Where a parabola through the three outermost cases has its extreme if that is within the step, half-way if not.
    """
    places = []
    for first, last in samples.stretches():
        if last < first + 2:
            continue
        for end in (slice(first, first + 3), slice(last, last - 3 if last > 2 else None, -1)):
            (x, y, z), (a, b, c) = samples.numbers[end], samples.worst[end]
            near, far = (b - a) / (y - x), (c - b) / (z - y)
            bend = (far - near) / (z - x)
            extreme = 0.5 * (x + y) - 0.5 * near / bend if bend else np.inf
            places.append(extreme if min(x, y) < extreme < max(x, y) else 0.5 * (x + y))
    samples.look(np.array(places))


def _look_into_extremes(samples: Samples) -> None:
    """Halve the steps beside extremes of each margin, and of the least, that lead towards nothing."""
    for _ in range(HALVINGS):
        rough = np.zeros(samples.numbers.size, dtype=bool)
        columns = np.column_stack([samples.margins, samples.worst])
        bounds = np.column_stack([samples.bounds, samples.worst_bounds])
        for margin, bound in zip(columns.T, bounds.T, strict=True):
            for side in (1, -1):
                rough |= _rough(side * margin, bound)
        at = np.flatnonzero(rough)
        if not at.size:
            break
        numbers = samples.numbers
        samples.look(np.concatenate([0.5 * (numbers[at] + numbers[at + step]) for step in (-1, 1)]))


def _rough(margin: FloatArray, bound: FloatArray) -> NDArray[np.bool_]:
    """Where a margin is least between neighbours that are decided as it is, and not seen to level off there."""
    around = np.pad(margin, 2, constant_values=np.nan)
    errors = np.pad(bound, 2, constant_values=np.nan)
    size = margin.size
    held = around > errors
    is_extreme = held[2 : size + 2]
    is_rough = np.zeros(size, dtype=bool)
    for step in (-1, 1):
        near, far = slice(2 + step, size + 2 + step), slice(2 + 2 * step, size + 2 + 2 * step)
        rise = around[near] - margin
        is_extreme = is_extreme & held[near] & (rise >= 0.0)
        # Where there is no case after the next it has not been seen to level off.
        is_rough |= (rise > bound + errors[near]) & ~(rise <= LEVELLED * (around[far] - margin))
    return is_extreme & is_rough


def _lowest(worst: FloatArray) -> NDArray[np.bool_]:
    """Which of all but the first and last is below its neighbours."""
    lower, higher = np.minimum(worst[:-2], worst[2:]), np.maximum(worst[:-2], worst[2:])
    return (worst[1:-1] <= lower) & (worst[1:-1] < higher)


def _descend(samples: Samples, side: int, middles: NDArray[np.intp], flat: float) -> None:
    """Look for the lowest worst margin times `side` around some cases that are below their neighbours.

    Each search ends where that is below nothing for sure, or bends by less than `flat` of what is left to it.
    """
    if not middles.size:
        return

    def sized(numbers: FloatArray) -> FloatArray:
        at = samples.at(numbers)
        # What is not a number ends the search for that element.
        return np.where(samples.signs[at] == -side, np.nan, side * samples.worst[at])

    bracket = tuple(samples.numbers[middles + step] for step in (-1, 0, 1))
    tolerances = {"xatol": 0.0, "xrtol": EXTREME_WIDTH, "fatol": 0.0, "frtol": flat}
    find_minimum(sized, bracket, tolerances=tolerances, maxiter=MOST_STEPS)
