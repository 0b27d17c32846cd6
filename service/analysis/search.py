"""The search for unknowns: whether all is linear, where each start leads to, and a map with what it averages over."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import qmc

from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.fitting import Found, Rows, bounded_step, fit
from service.analysis.looks import Look, Looker, Straight, look_for_straight
from service.analysis.readings import IntArray, Readings, Weighing
from service.analysis.smoothing import Smoothed, Smoothing, SmoothMap
from service.analysis.unknowns import Coordinates, Unknown

# A result counts as an affine function of everything if over the whole ranges it departs from one by less than this
# part of the least standard uncertainty it is read with.
STRAIGHT = 1e-3

# Places of the ranges that are looked at for each start: searches begin at those that leave least over.
SCREENED = 4

# Two of them are beside each other within so many of the distances they have from each other on the average.
BESIDE = 1.5

# Rounds in which a map and what it is averaged over settle, and the part of a standard uncertainty they settle to.
MOST_ROUNDS, ROUND_SETTLED = 10, 1e-3

# Least sum of squares a search is measured by where uncertainties are scaled, in parts of that of the readings: it then
# settles to 1e-14 of them.
ROUNDING = 1e-20

# A problem is linear after all if the solution is within this part of a standard uncertainty of what was foreseen.
TURNED_OUT = 0.01


class NothingSeen(Exception):
    """No start has results. failure: why, of the first case that has none."""

    def __init__(self, failure: Failure | None) -> None:
        super().__init__("No case has results.")
        self.failure = failure


@dataclass(frozen=True)
class Question:
    """What is asked.

    starts: places a search begins at, the given one first. is_scaled: uncertainties are known but for a common factor.
    """

    evaluate: Evaluate
    unknowns: tuple[Unknown, ...]
    readings: Readings
    smooth: SmoothMap | None
    starts: int
    seed: int
    is_scaled: bool


@dataclass(frozen=True, eq=False)
class Solved:
    """The solution and what led to it.

    looker, weighing: as they were used. rows: what is left over, with the cost of a map. found: where the search came
    to. minima: where all starts came to, the best first, a map taken as the likeliest of one departure. linear: all
    readings are affine functions. smoothed: the average over maps around the solution, None without a map.
    """

    looker: Looker
    weighing: Weighing
    rows: Callable[[Look], Rows]
    found: Found
    minima: tuple[Found, ...]
    linear: bool
    smoothed: Smoothed | None


def solve(question: Question) -> Solved:
    """The solution. Raises NothingSeen if no start has results."""
    needed = np.unique(question.readings.columns)
    # Whether results are affine in the numbers does not depend on how they are looked for.
    plain = _Search(question, Coordinates(_without_logarithms(question.unknowns), *_entries(question.smooth)))
    straight = look_for_straight(plain.looker, plain.start, _slack(question, needed), question.seed)
    is_known_linear = not question.unknowns and question.smooth is not None and question.smooth.affine
    if is_known_linear and straight is None:
        raise NothingSeen(plain.looker.failure)
    if straight is not None and (is_known_linear or straight.affine[needed].all()):
        solved = plain.linear(straight)
        if is_known_linear and solved is None:
            raise NothingSeen(plain.looker.failure)
        if solved is not None and (is_known_linear or solved.found.settled):
            return solved
    if not any(unknown.logarithmic for unknown in question.unknowns):
        search = plain
    else:
        search = _Search(question, Coordinates(question.unknowns, *_entries(question.smooth)))
        search.looker.cases, search.looker.failure = plain.looker.cases, plain.looker.failure
    is_affine = straight is not None and straight.affine_entries
    if straight is not None:
        readings = question.readings
        search.looker.step = straight.step(readings.columns, readings.standard_uncertainties)
    search.looker.affine_entries = is_affine or (question.smooth is not None and question.smooth.affine)
    return search.curved()


def _without_logarithms(unknowns: Sequence[Unknown]) -> list[Unknown]:
    return [Unknown(unknown.name, unknown.low, unknown.high, unknown.start) for unknown in unknowns]


def _entries(smooth: SmoothMap | None) -> tuple[int, float]:
    return (0, 1.0) if smooth is None else (smooth.start.size, smooth.typical)


def _slack(question: Question, needed: IntArray) -> FloatArray | None:
    """Departures from straight lines that do not matter, one for each needed result; None where that is not known."""
    if question.is_scaled:
        return None
    spreads, columns = question.readings.standard_uncertainties, question.readings.columns
    return STRAIGHT * np.array([spreads[columns == column].min() for column in needed])


class _Search:
    """A search in given coordinates."""

    def __init__(self, question: Question, coordinates: Coordinates) -> None:
        self._question = question
        self.looker = Looker(question.evaluate, coordinates, np.unique(question.readings.columns))
        self._weighing = Weighing(question.readings, question.unknowns, coordinates)
        numbers = [unknown.start for unknown in question.unknowns]
        smooth = question.smooth
        self.start = coordinates.places(np.concatenate((numbers, [] if smooth is None else smooth.start.ravel())))
        self._smoothing = None if smooth is None else Smoothing(smooth, len(numbers))
        self._departure: float | None = None

    def linear(self, straight: Straight) -> Solved | None:
        """The solution where readings are affine functions; not settled if they turn out not to be."""
        step, smoothed = self._step(straight.look)
        place = straight.look.place + step
        if straight.affine.all():
            values, bounds = self.looker.values(place[None])
            look: Look | None = Look(place, values[0], bounds[0], straight.look.slopes, straight.look.doubts)
        else:
            smooth = self._question.smooth
            self.looker.affine_entries = straight.affine_entries or (smooth is not None and smooth.affine)
            look = self.looker.look([place])[0]
        if look is None or np.isnan(look.values[self.looker.needed]).any():
            return None
        more, _ = self._step(look)
        left, slopes = self._weighing.rows(look)
        foreseen = float(((slopes @ more) ** 2).sum()) <= TURNED_OUT**2 * self._unit(float(left @ left))
        self._departure = None if smoothed is None else smoothed.departure
        found = Found(look, *self._rows(look), settled=foreseen)
        return Solved(self.looker, self._weighing, self._rows, found, (found,), True, smoothed)

    def curved(self) -> Solved:
        """The solution by iteration."""
        found = fit(self.looker, self._rows, self._weighing.doubts, self._starts(), self._unit)
        if not found:
            raise NothingSeen(self.looker.failure)
        best, smoothed = found[0], None
        if self._smoothing is not None:
            best, smoothed = self._settle(best)
        return Solved(self.looker, self._weighing, self._rows, best, tuple(found), False, smoothed)

    def _starts(self) -> list[FloatArray]:
        """The given place, and those of many spread over the ranges that promise most."""
        count, wanted = self.looker.coordinates.count, self._question.starts - 1
        if not count or not wanted:
            return [self.start]
        cube = qmc.LatinHypercube(count, rng=np.random.default_rng(self._question.seed))
        if self._smoothing is not None:
            # What a place leaves over says little before a map has made up for it.
            return [self.start, *(np.concatenate((place, self.start[count:])) for place in cube.random(wanted))]
        places = cube.random(SCREENED * wanted)
        values, bounds = self.looker.values(places)
        slopes = np.zeros((values.shape[1], count))
        squares = np.array(
            [
                np.inf if np.isnan(seen[self.looker.needed]).any() else float(left @ left)
                for place, seen, bound in zip(places, values, bounds, strict=True)
                for left in [self._weighing.rows(Look(place, seen, bound, slopes, slopes))[0]]
            ]
        )
        # A place with a better one beside it leads to where that does (multi level single linkage: Rinnooy Kan and
        # Timmer, Mathematical Programming 39 (1987) 57).
        beside = BESIDE * len(places) ** (-1 / count)
        places = places[np.argsort(squares, kind="stable")]
        lowest: list[FloatArray] = []
        others: list[FloatArray] = []
        for number, place in enumerate(places):
            is_lowest = np.all(np.abs(places[:number] - place).max(axis=1) > beside)
            (lowest if is_lowest else others).append(place)
        return [self.start, *(lowest + others)[:wanted]]

    def _settle(self, found: Found) -> tuple[Found, Smoothed]:
        """The mean over departures of the map in place of the best map of one departure."""
        step, smoothed = self._averaged(found.look)
        for _ in range(MOST_ROUNDS):
            look = self.looker.look([found.look.place + step])[0]
            if look is None:
                break
            self._departure = smoothed.departure
            found = Found(look, *self._rows(look))
            step, smoothed = self._averaged(look)
            if float(np.linalg.norm(found.slopes @ step)) <= ROUND_SETTLED:
                found.settled = True
                return found, smoothed
        found.settled = False
        return found, smoothed

    def _rows(self, look: Look) -> Rows:
        """What a look leaves over of readings, prior values and the cost of a map."""
        left, slopes = self._weighing.rows(look)
        if self._smoothing is None:
            return left, slopes
        if self._departure is None:
            self._departure = self._smoothing.average(look.place, left, slopes).departure
        cost, cost_slopes = self._smoothing.rows(look.place, self._departure)
        return np.concatenate((left, cost)), np.vstack((slopes, cost_slopes))

    def _step(self, look: Look) -> tuple[FloatArray, Smoothed | None]:
        """The step to the solution of the linear problem about a look, within the ranges."""
        if self._smoothing is not None:
            return self._averaged(look)
        low, high = self._room(look)
        return bounded_step(*self._weighing.rows(look), low, high), None

    def _averaged(self, look: Look) -> tuple[FloatArray, Smoothed]:
        """The step where there is a map, and what is averaged over around the look."""
        assert self._smoothing is not None
        left, slopes = self._weighing.rows(look)
        low, high = self._room(look)
        smoothed = self._smoothing.average(look.place, left, slopes)
        step = smoothed.step
        free = np.ones(len(step), dtype=bool)
        while ((step < low) | (step > high))[free].any():
            # What leaves its range is held at its end, and the rest follows.
            free &= (step >= low) & (step <= high)
            held = np.where(free, 0.0, np.clip(step, low, high))
            step = held + self._smoothing.average(look.place, left + slopes @ held, slopes, free).step
        return step, smoothed

    def _room(self, look: Look) -> tuple[FloatArray, FloatArray]:
        """How far a step may go."""
        coordinates = self.looker.coordinates
        return coordinates.low - look.place, coordinates.high - look.place

    def _unit(self, squares: float) -> float:
        """Of the sum of squares: 1, or what is left over a degree of freedom where uncertainties are scaled."""
        if not self._question.is_scaled:
            return 1.0
        freedom = self._weighing.count - self.looker.coordinates.size
        readings = self._question.readings
        rounding = ROUNDING * float(((readings.values / readings.standard_uncertainties) ** 2).sum())
        return max(squares / freedom, rounding) if freedom > 0 else 1.0
