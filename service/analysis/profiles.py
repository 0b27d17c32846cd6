"""Intervals of single unknowns that follow the sum of squares itself, not its parabola at the minimum.

The end of an interval is where the unknown is farthest from the minimum while the sum of squares, least over all
others, has risen by the square of the coverage factor (Venzon and Moolgavkar, Applied Statistics 37 (1988) 87). It is
found by linearising the results where the search stands: the farthest point of an ellipsoid. All ends are looked for
together.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from service.analysis.evaluations import FloatArray
from service.analysis.fitting import Found, Rows, bounded_step
from service.analysis.looks import Look, Looker

# Looks one end may take; four or five are usual.
MOST_LOOKS = 15

# An end has settled when it would move by less than this part of its distance from the minimum.
SETTLED = 0.005

# How many times farther from the minimum a step may go than the one before: a linearisation sees no farther.
FARTHER = 2.0


@dataclass(frozen=True)
class Profile:
    """Ends of an interval in coordinates; NaN where a search did not settle. An end may be that of the range."""

    low: float
    high: float


def profile_intervals(
    looker: Looker,
    rows: Callable[[Look], Rows],
    found: Found,
    numbers: Sequence[int],
    uncertainties: FloatArray,
    rise: float,
) -> list[Profile]:
    """Intervals of some unknowns.

    found: the minimum. numbers: places of the unknowns. uncertainties: theirs, in coordinates, for the first step.
    rise: of the sum of squares to the ends.
    """
    level = found.squares + rise
    ends = [_End(k, side, found, size) for k, size in zip(numbers, uncertainties, strict=True) for side in (-1.0, 1.0)]
    for _ in range(MOST_LOOKS):
        steps = [(end, place) for end in ends if (place := end.next_place(looker, level)) is not None]
        for (end, _), look in zip(steps, looker.look([place for _, place in steps]), strict=True):
            end.take(look, rows)
    places = [end.at if end.settled else float("nan") for end in ends]
    return [Profile(low, high) for low, high in zip(places[::2], places[1::2], strict=True)]


class _End:
    """The search for one end: where it stands, what is left over there, and how far from the minimum it may go next."""

    def __init__(self, number: int, side: float, found: Found, uncertainty: float) -> None:
        self._number, self._side = number, side
        self._middle = self._tried = self.at = float(found.look.place[number])
        self._place, self._left, self._slopes = found.look.place, found.left, found.slopes
        self._reach = 2 * FARTHER * uncertainty
        self._has_moved = False
        self.settled = False

    def next_place(self, looker: Looker, level: float) -> FloatArray | None:
        """Where to look next, None once the end has settled."""
        if self.settled:
            return None
        low, high = looker.coordinates.low, looker.coordinates.high
        k, side = self._number, self._side
        away = min(max(side * (self._farthest(level) - self._middle), 0.0), self._reach)
        aim = min(max(self._middle + side * away, low[k]), high[k])
        is_inside = low[k] < aim < high[k] or float(self._left @ self._left) <= level
        if self._has_moved and is_inside and abs(aim - self.at) <= SETTLED * abs(aim - self._middle):
            self.at, self.settled = aim, True
            return None
        self._tried = aim
        return self._others(aim, low, high)

    def take(self, look: Look | None, rows: Callable[[Look], Rows]) -> None:
        """Go to the place looked at; half-way to it next if nothing was seen there."""
        if look is None:
            self._reach = abs(0.5 * (self._tried + self.at) - self._middle)
            return
        self._place, self.at, self._has_moved = look.place, float(look.place[self._number]), True
        self._reach = FARTHER * max(abs(self.at - self._middle), 0.5 * self._reach)
        self._left, self._slopes = rows(look)

    def _farthest(self, level: float) -> float:
        """Where the unknown is at the farthest point of the ellipsoid."""
        k = self._number
        u, sizes, basis = np.linalg.svd(self._slopes, full_matrices=False)
        told = sizes > 1e-9 * sizes[0]
        if (~told & (np.abs(basis[:, k]) > 1e-6)).any() or len(sizes) < len(self._place):
            return self._side * np.inf
        forces = u.T @ self._left
        least = float(self._left @ self._left - (forces[told] ** 2).sum())
        weights = basis[told, k] / sizes[told]
        reach = np.sqrt(max(level - least, 0.0) * float(weights @ weights))
        return self.at - float(weights @ forces[told]) + self._side * float(reach)

    def _others(self, aim: float, low: FloatArray, high: FloatArray) -> FloatArray:
        """The place with the unknown at its aim and all others where they leave least over."""
        k = self._number
        place = self._place.copy()
        place[k] = aim
        free = np.arange(len(place)) != k
        if free.any():
            left = self._left + self._slopes[:, k] * (aim - self.at)
            place[free] += bounded_step(left, self._slopes[:, free], low[free] - place[free], high[free] - place[free])
        return place
