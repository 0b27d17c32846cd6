"""Where else readings are met: lines along which unknowns that are hardly told apart make up for each other.

Of a group of such unknowns one goes its way, step by step to the end of its range, or of its interval where it is told,
and the others are fitted anew at each step. Derivatives at the solution say nothing of how such a valley bends.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from service.analysis.evaluations import FloatArray
from service.analysis.fitting import Found, Rows, bounded_step, fall
from service.analysis.looks import Look
from service.analysis.unknowns import Coordinates

# Looks one line may take; one to three a place are usual.
MOST_LOOKS = 14

# Unknowns that go their way, and unknowns there may be altogether: beyond, it would take more cases than all the rest.
MOST_LINES, MOST_UNKNOWNS = 2, 12

# Parts of the way: the first step, the longest of those after it, which are doubled, and the least before a line ends.
FIRST_STEP, MOST_STEP, LEAST_STEP = 1 / 32, 1 / 4, 1 / 64

# A place has settled when the sum of squares could still fall by this part of its unit: a tenth of a standard
# uncertainty.
SETTLED = 0.01

# Looks after the first that one place may take.
MOST_CORRECTIONS = 3

Looks = Callable[[Sequence[FloatArray]], Sequence[Look | None]]


def most_looks(unknowns: int) -> int:
    """The most looks that following takes."""
    return 2 * min(unknowns - 1, MOST_LINES) * MOST_LOOKS if 1 < unknowns <= MOST_UNKNOWNS else 0


def straight_looks(found: Found) -> Looks:
    """Looks where all results are affine functions: without a case."""
    look = found.look

    def looks(places: Sequence[FloatArray]) -> list[Look | None]:
        return [
            Look(place, look.values + look.slopes @ (place - look.place), look.bounds, look.slopes, look.doubts)
            for place in places
        ]

    return looks


def follow(
    looks: Looks,
    coordinates: Coordinates,
    rows: Callable[[Look], Rows],
    doubt: float,
    found: Found,
    reaches: Sequence[tuple[int, float]],
    unit: float,
    rise: float,
) -> list[FloatArray]:
    """Places along each line, in order, shape (n_places, size), the solution left out.

    doubt: by how much slopes of the rows may be off. found: the solution. reaches: the unknowns that go, and how far.
    unit: of the sum of squares. rise: how much more of it counts as met about as well.
    """
    lines = [
        _Line(number, found, end, (coordinates.low, coordinates.high), doubt, SETTLED * unit, found.squares + rise)
        for number, reach in reaches
        for end in (found.look.place[number] - reach, found.look.place[number] + reach)
    ]
    for _ in range(MOST_LOOKS):
        going = [line for line in lines if not line.has_ended]
        if not going:
            break
        for line, look in zip(going, looks([line.next_place() for line in going]), strict=True):
            line.take(look, rows)
    return [np.array(line.places) for line in lines if line.places]


class _Line:
    """One unknown on its way: the places behind it and the one in work."""

    def __init__(
        self,
        number: int,
        found: Found,
        end: float,
        room: tuple[FloatArray, FloatArray],
        doubt: float,
        settled: float,
        level: float,
    ) -> None:
        self._number, self._low, self._high = number, *room
        self._doubt, self._settled, self._level = doubt, settled, level
        self._end = min(max(end, float(self._low[number])), float(self._high[number]))
        self._base = self._now = (found.look.place, found.left, found.slopes)
        self._way = self._end - float(found.look.place[number])
        self._step = FIRST_STEP
        self._corrections = 0
        self.places: list[FloatArray] = []
        self.has_ended = self._way == 0

    def next_place(self) -> FloatArray:
        """The place in work, corrected, or the next."""
        place = self._now[0].copy()
        if self._now is self._base:
            place[self._number] += self._step * self._way
            if (self._end - place[self._number]) * self._way < FIRST_STEP * self._way**2:
                place[self._number] = self._end
        return place + self._others(place)

    def take(self, look: Look | None, rows: Callable[[Look], Rows]) -> None:
        """Go on from the place looked at, correct it, or try a nearer one."""
        if look is None:
            self._come_nearer()
            return
        self._now = (look.place, *rows(look))
        _, left, slopes = self._now
        gain = fall(left, slopes @ self._others(look.place))
        if gain > self._settled:
            self._corrections += 1
            if self._corrections > MOST_CORRECTIONS:
                self._come_nearer()
        elif float(left @ left) > self._level:
            self._come_nearer()
        else:
            self.places.append(look.place)
            self._base, self._corrections = self._now, 0
            self._step = min(2 * self._step, MOST_STEP)
            self.has_ended = look.place[self._number] == self._end

    def _come_nearer(self) -> None:
        self._now, self._corrections = self._base, 0
        self._step /= 2
        self.has_ended = self._step < LEAST_STEP

    def _others(self, aim: FloatArray) -> FloatArray:
        """The step of all other coordinates that leaves least over with the unknown at its aim."""
        place, left, slopes = self._now
        k = self._number
        step = np.zeros(len(place))
        free = np.arange(len(place)) != k
        # Along a direction of which slopes tell no more than their error nothing moves.
        damped = np.vstack((slopes[:, free], self._doubt * np.eye(len(place) - 1)))
        after = np.concatenate((left + slopes[:, k] * (aim[k] - place[k]), np.zeros(len(place) - 1)))
        step[free] = bounded_step(after, damped, (self._low - place)[free], (self._high - place)[free])
        return step
