"""Best values of a few numbers within their ranges, under limits.

A wave of cases all over the ranges tells where to begin; local searches from the best of them go on side by side, each
wave holding what all of them want next. The best case that was seen anywhere is the answer. It is the best near it, and
the starts tell how often it was come to; no local search proves that nothing better lies elsewhere.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize
from scipy.stats.qmc import Sobol

from service.analysis.descent import FIRST_CHARGE, LEAST_EXCESS, LEAST_FALL, Descent, Ended, Point, Points
from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.limits import Limit, bounds_of, margins, surely_held, surely_passed
from service.analysis.samples import NOT_FINITE
from service.analysis.scales import scales_of

# Places looked at first: a power of two, which is what a Sobol sequence is even over, about so many for each number.
PLACES_A_NUMBER, FEWEST_PLACES, MOST_PLACES = 4, 16, 128

# Points drawn to find places where rectangles are apart, and how many of the others are moved until they are.
DRAWN, MOVED = 4096, 32

# Rectangles are kept farther apart by this part of the widest clearance, which is more than rounding takes.
KEPT_CLEAR = 1e-10

# Two starts are as far from each other as this part of the ranges, along some number.
APART = 0.15

# Limits are aimed to hold by so many bounds of their results, and by what a search may leave missing, so that they do
# hold for sure.
BOUNDS_INSIDE = 2.0

# A search stops when its model promises the least fall; so many times that may be left as the model is none too good:
# along a curved valley a hundred times narrower than long some 500 were seen.
LEFT = 1000.0

# A kink is looked for around the best case this far along each number, in parts of the ranges, and a quarter as far:
# what bends does so a sixteenth as much there, a kink a quarter. More than an eighth, their geometric mean, is a kink.
KINK_AT, KINK_NEARER, KINK_BENDS = 4e-3, 0.25, 0.125

# Where limits weigh more than this, goals and margins changing by about 1 over the ranges, or had to be charged more
# than that before they held, they leave hardly any room between them, as in a cusp: a model promises little there.
HEAVIEST, DEAREST = 50.0, 1e4

# What counts as one: goals, and margins that bind, in parts of the scale; numbers in parts of their ranges.
SAME_GOAL, BINDS, SAME_NUMBERS, AT_END = 1e-4, 1e-4, 1e-2, 1e-6


@dataclass(frozen=True)
class Goal:
    """What is to be best: the largest of some results as low as can be, or the least of them as high as can be."""

    results: tuple[int, ...]
    sense: Literal["lowest", "highest"]

    @property
    def sign(self) -> float:
        """1 where low is good, -1 where high is."""
        return 1.0 if self.sense == "lowest" else -1.0


@dataclass(frozen=True)
class Start:
    """One local search. first, last: numbers it began and ended with. first_goal, last_goal: there.

    ended: why. same_goal, same_numbers: whether it came to the goal, and to the numbers, of the best.
    """

    first: FloatArray
    last: FloatArray
    first_goal: float
    last_goal: float
    ended: Ended
    same_goal: bool = False
    same_numbers: bool = False


@dataclass(frozen=True)
class Best:
    """The best case seen.

    numbers: shape (n_numbers,). values, bounds: of all results, shape (n_results,). goal, goal_bound: what was to be
    best. left: an estimate of how much better it could be nearby; None where limits are missed, no search converged
    there, or results have kinks there, so that nothing is known of it. leading: places in the goal's list of results
    that are the largest (least) together. margins, margin_bounds: of each limit. binding: the limits that hold only
    just. at_low, at_high: the numbers at an end of their range. clearances: of rectangles, shape (n_clearances,).
    held_elsewhere: whether each limit surely holds in some case.
    """

    numbers: FloatArray
    values: FloatArray
    bounds: FloatArray
    goal: float
    goal_bound: float
    left: float | None
    leading: tuple[int, ...]
    margins: FloatArray
    margin_bounds: FloatArray
    binding: tuple[int, ...]
    at_low: tuple[int, ...]
    at_high: tuple[int, ...]
    clearances: FloatArray
    held_elsewhere: tuple[bool, ...]


@dataclass(frozen=True)
class BestValues:
    """Outcome of a search.

    best: None where no case could be had. at_first: the goal with the numbers as they stand and its bound; None where
    they were not given, lie outside or fail. first_holds: whether all limits hold there, for sure or perhaps. starts:
    best first. cases, failed: how many were computed, and failed. failures: one of each code. complete: False where
    searches were stopped because no more cases were allowed. has_room: False where no place was found with all
    rectangles apart. goal_changes: whether the results of the goal differ between cases by more than their bounds.
    """

    best: Best | None
    at_first: tuple[float, float] | None
    first_holds: bool | None
    starts: tuple[Start, ...]
    cases: int
    failed: int
    failures: Mapping[str, Failure]
    complete: bool
    has_room: bool
    goal_changes: bool = True


def most_places(n_numbers: int) -> int:
    """How many places all over the ranges are looked at first."""
    wanted = np.clip(PLACES_A_NUMBER * n_numbers, FEWEST_PLACES, MOST_PLACES)
    return int(2 ** np.ceil(np.log2(wanted)))


def best_values(
    evaluate: Evaluate,
    ranges: Sequence[tuple[float, float]],
    goal: Goal,
    limits: Sequence[Limit],
    units: Sequence[str],
    *,
    first: FloatArray | None = None,
    apart: Callable[[FloatArray], FloatArray] | None = None,
    n_starts: int = 4,
    most_cases: int = 2000,
    seed: int = 0,
) -> BestValues:
    """Best values of some numbers.

    ranges: low < high of each number. units: of each result, to compare margins of several units. first: the numbers as
    they stand, one of the starts. apart: clearances of rectangles in cases, shape (n_cases, n_clearances), at least 0
    where they are apart as far as they have to be; costs no case. n_starts: local searches beside that from `first`.
    most_cases: no more than these are computed.
    """
    search = _Search(evaluate, ranges, goal, limits, units, apart, most_cases)
    places = search.places(first, seed)
    if not places.size:
        return BestValues(None, None, None, (), 0, 0, {}, complete=True, has_room=False)
    search.look(places[:most_cases])
    search.settle_scales()
    starts = search.starts(n_starts, has_first=search.stands(first))
    descents = [Descent(search.u[index], search.point(index), search.apart, search.kept_clear) for index in starts]
    ended = search.side_by_side(descents)
    return search.outcome(starts, descents, ended, has_first=search.stands(first))


class _Search:
    """All cases seen, in parts of the ranges, and what is thought of them."""

    def __init__(
        self,
        evaluate: Evaluate,
        ranges: Sequence[tuple[float, float]],
        goal: Goal,
        limits: Sequence[Limit],
        units: Sequence[str],
        apart: Callable[[FloatArray], FloatArray] | None,
        most_cases: int,
    ) -> None:
        self._evaluate = evaluate
        self._low, self._high = np.array(ranges, dtype=float).T
        self._goal = goal
        self._limits = limits
        self._units = units
        self._clearances = apart
        self._most_cases = most_cases
        self._sides = [
            side
            for limit in limits
            for side in (replace(limit, at_least=-np.inf), replace(limit, at_most=np.inf))
            if np.isfinite([side.at_most, side.at_least]).any()
        ]
        self._scales = np.ones(len(units))
        self.u = np.zeros((0, len(ranges)))
        self._values = self._bounds = np.zeros((0, len(units)))
        self._failures: dict[str, Failure] = {}
        self._failed = 0
        self.kept_clear = 0.0

    # Places

    def numbers(self, u: FloatArray) -> FloatArray:
        """Numbers from parts of their ranges; exact at both ends."""
        return np.where(u < 1.0, self._low + u * (self._high - self._low), self._high)

    def apart(self, u: FloatArray) -> FloatArray:
        """Clearances at places, shape (n_places, n_clearances)."""
        if self._clearances is None:
            return np.zeros((len(u), 0))
        return self._clearances(self.numbers(u))

    def stands(self, first: FloatArray | None) -> bool:
        """Whether the numbers as they stand lie within the ranges, with all rectangles apart."""
        if first is None or np.any((first < self._low) | (first > self._high)):
            return False
        return bool((self.apart(self._parts(first)[None]) >= 0.0).all())

    def _parts(self, numbers: FloatArray) -> FloatArray:
        return (numbers - self._low) / (self._high - self._low)

    def places(self, first: FloatArray | None, seed: int) -> FloatArray:
        """Where to look first: the numbers as they stand, and places spread evenly, all with rectangles apart."""
        wanted = most_places(self._low.size)
        drawn = Sobol(self._low.size, rng=seed).random(wanted if self._clearances is None else DRAWN)
        clearances = self.apart(drawn)
        self.kept_clear = KEPT_CLEAR * float(np.abs(clearances).max(initial=0.0))
        clear = clearances.min(axis=1, initial=np.inf)
        places = drawn[clear >= 0.0][:wanted]
        if len(places) < wanted:
            nearly = np.argsort(-np.where(clear < 0.0, clear, -np.inf), kind="stable")[
                : min(MOVED, wanted - len(places))
            ]
            moved = [self._moved_apart(drawn[index]) for index in nearly]
            places = np.concatenate([places, *(place[None] for place in moved if place is not None)])
        if first is not None and self.stands(first):
            places = np.concatenate([self._parts(first)[None], places])
        return places

    def _moved_apart(self, u: FloatArray) -> FloatArray | None:
        """The nearest place to one at which all rectangles are apart, None if none was found."""
        found = minimize(
            lambda place: float(((place - u) ** 2).sum()),
            u,
            jac=lambda place: 2.0 * (place - u),
            method="SLSQP",
            bounds=[(0.0, 1.0)] * u.size,
            constraints={"type": "ineq", "fun": lambda place: self.apart(place[None])[0]},
        )
        place = np.clip(found.x, 0.0, 1.0)
        return place if (self.apart(place[None]) >= 0.0).all() else None

    # Cases

    def look(self, u: FloatArray) -> Points:
        """Compute cases in one wave."""
        found = self._evaluate(self.numbers(u))
        values, bounds = found.values.copy(), found.bounds.copy()
        wanted = [*self._goal.results, *(limit.result for limit in self._limits)]
        bad = np.asarray(~np.isfinite(np.stack([values, bounds])[:, :, wanted]).all(axis=(0, 2)))
        values[bad], bounds[bad] = np.nan, np.nan
        for index in np.flatnonzero(bad):
            failure = found.failures.get(int(index), NOT_FINITE)
            self._failures.setdefault(failure.code, failure)
        self._failed += int(bad.sum())
        begin = len(self.u)
        self.u = np.concatenate([self.u, u])
        self._values = np.concatenate([self._values, values])
        self._bounds = np.concatenate([self._bounds, bounds])
        return [None if bad[index] else self.point(begin + index) for index in range(len(u))]

    def settle_scales(self) -> None:
        """Take what makes results comparable from the cases seen so far."""
        wanted = sorted({*self._goal.results, *(limit.result for limit in self._limits)})
        self._scales[wanted] = scales_of(self._values[:, wanted], [self._units[result] for result in wanted])

    def point(self, index: int) -> Point:
        """A case that did not fail as a local search takes it."""
        results = list(self._goal.results)
        goals = self._goal.sign * self._values[index, results] / self._scales[results]
        noise = float((self._bounds[index, results] / self._scales[results]).max())
        sides = [side.result for side in self._sides]
        inside = BOUNDS_INSIDE * self._bounds[index, sides] / self._scales[sides] + LEAST_EXCESS
        held = margins(self._sides, self._values[index]) / self._scales[sides]
        return Point(np.concatenate([goals, inside - held]), goals.size, noise)

    def _usable(self) -> NDArray[np.intp]:
        results = [*self._goal.results, *(limit.result for limit in self._limits)]
        return np.flatnonzero(np.isfinite(self._values[:, results]).all(axis=1))

    def starts(self, count: int, *, has_first: bool) -> list[int]:
        """Cases from which to search: the numbers as they stand, and the best that are not close to each other."""
        usable = self._usable()
        points = [self.point(index) for index in usable]
        merits = [point.charged(FIRST_CHARGE) for point in points]
        chosen = [0] if has_first and usable.size and usable[0] == 0 else []
        count += len(chosen)
        for index in usable[np.argsort(merits, kind="stable")]:
            away = [float(np.abs(self.u[index] - self.u[other]).max()) for other in chosen]
            if len(chosen) < count and min(away, default=np.inf) > APART:
                chosen.append(int(index))
        return chosen

    def side_by_side(self, descents: Sequence[Descent]) -> list[Ended]:
        """Run local searches, one wave for what all of them want next; the last ones give way when cases run out."""
        ended: list[Ended] = ["cases used up"] * len(descents)
        steps = [descent.steps() for descent in descents]
        wanted = {index: next(step) for index, step in enumerate(steps)}
        while wanted:
            while wanted and len(self.u) + sum(map(len, wanted.values())) > self._most_cases:
                wanted.popitem()
            found = iter(self.look(np.concatenate(list(wanted.values())))) if wanted else iter(())
            for index, places in list(wanted.items()):
                try:
                    wanted[index] = steps[index].send([next(found) for _ in places])
                except StopIteration as stop:
                    ended[index] = stop.value
                    del wanted[index]
        return ended

    # Outcome

    def outcome(
        self, starts: Sequence[int], descents: Sequence[Descent], ended: Sequence[Ended], *, has_first: bool
    ) -> BestValues:
        """The best case seen, and how the searches came to it."""
        usable = self._usable()
        has_first = has_first and usable.size > 0 and usable[0] == 0
        best = self._best(usable) if usable.size else None
        has_kink = best is not None and self._has_kink(best)
        tried = [
            Start(
                self.numbers(self.u[start]),
                self.numbers(descent.u),
                self._goal_at(start)[0],
                self._goal.sign * self._scale() * descent.here.goal,
                why,
            )
            for start, descent, why in zip(starts, descents, ended, strict=True)
        ]
        compared = [self._compared(start, best) for start in tried] if best is not None else []
        compared.sort(key=lambda start: self._goal.sign * start.last_goal)
        if best is not None:
            alike = [
                (descent, end)
                for descent, start, end in zip(descents, tried, ended, strict=True)
                if self._compared(start, best).same_goal
            ]
            settled = bool(alike) and all(end == "converged" and _is_regular(descent) for descent, end in alike)
            is_missed = bool(surely_passed(best.margins, best.margin_bounds).any())
            best = replace(best, left=self._left(best, [descent for descent, _ in alike]))
            if is_missed or has_kink or not settled:
                best = replace(best, left=None)
        return BestValues(
            best=best,
            at_first=self._goal_at(0) if has_first else None,
            first_holds=not self._passed()[0].any() if has_first else None,
            starts=tuple(compared),
            cases=len(self.u),
            failed=self._failed,
            failures=self._failures,
            complete="cases used up" not in ended,
            has_room=True,
            goal_changes=usable.size < 2 or self._goal_changes(usable),
        )

    def _goal_changes(self, usable: NDArray[np.intp]) -> bool:
        results = list(self._goal.results)
        values, bounds = self._values[usable][:, results], self._bounds[usable][:, results]
        return bool((np.ptp(values, axis=0) > 2.0 * bounds.max(axis=0)).any())

    def _scale(self) -> float:
        return float(self._scales[self._goal.results[0]])

    def _goal_at(self, index: int) -> tuple[float, float]:
        results = list(self._goal.results)
        goal = self._goal.sign * (self._goal.sign * self._values[index, results]).max()
        return float(goal), float(self._bounds[index, results].max())

    def _passed(self) -> NDArray[np.bool_]:
        """Which limits are passed for sure in each case, shape (n_cases, n_limits)."""
        return np.asarray(surely_passed(margins(self._limits, self._values), bounds_of(self._limits, self._bounds)))

    def _best(self, usable: NDArray[np.intp]) -> Best:
        """The best case: one that holds all limits for sure before one that may, and that before the least excess."""
        held = margins(self._limits, self._values), bounds_of(self._limits, self._bounds)
        tiers = np.where(self._passed().any(axis=1), 2, np.where(surely_held(*held).all(axis=1), 0, 1))
        points = {int(index): self.point(index) for index in usable}
        index = min(
            points,
            key=lambda place: (
                tiers[place],
                points[place].goal if tiers[place] < 2 else points[place].excess,
                points[place].goal,
            ),
        )
        u, point = self.u[index], points[index]
        scales = self._scales[[limit.result for limit in self._limits]]
        only_just = held[0][index] <= BINDS * scales + BOUNDS_INSIDE * held[1][index]
        near = point.values[: point.n_goals] >= point.goal - SAME_GOAL - 2.0 * point.noise
        goal, goal_bound = self._goal_at(index)
        return Best(
            numbers=self.numbers(u),
            values=self._values[index],
            bounds=self._bounds[index],
            goal=goal,
            goal_bound=goal_bound,
            left=None,
            leading=tuple(np.flatnonzero(near).tolist()),
            margins=held[0][index],
            margin_bounds=held[1][index],
            binding=tuple(np.flatnonzero(only_just).tolist()),
            at_low=tuple(np.flatnonzero(u <= AT_END).tolist()),
            at_high=tuple(np.flatnonzero(u >= 1.0 - AT_END).tolist()),
            clearances=self.apart(u[None])[0],
            held_elsewhere=tuple(
                bool(surely_held(*each).any()) for each in zip(*(part.T for part in held), strict=True)
            ),
        )

    def _left(self, best: Best, alike: Sequence[Descent]) -> float:
        """What the searches that came to the best leave, as far as they can tell.

        Each thought that little was left, stopped short of the others, and was kept inside of limits that cost it.
        """
        left = LEFT * (LEAST_FALL * self._scale() + best.goal_bound)
        sides = [side.result for side in self._sides]
        inside = BOUNDS_INSIDE * best.bounds[sides] / self._scales[sides] + LEAST_EXCESS
        for descent in alike:
            short = abs(self._goal.sign * self._scale() * descent.here.goal - best.goal)
            kept = self._scale() * float(np.maximum(descent.weights[descent.here.n_goals :], 0.0) @ inside)
            left = max(left, short + kept)
        return left

    def _has_kink(self, best: Best) -> bool:
        """Whether a result of the goal or of a limit has a kink at or beside the best case.

        Of its bends over two lengths along each number that has room, since tangents do not tell of kinks. Not known,
        and denied, where no more cases are allowed.
        """
        here = self._parts(best.numbers)
        axes = np.flatnonzero((here >= KINK_AT) & (here <= 1.0 - KINK_AT))
        steps = np.array([-1.0, -KINK_NEARER, KINK_NEARER, 1.0]) * KINK_AT
        places = (here + steps[:, None] * np.eye(here.size)[axes][:, None]).reshape(-1, here.size)
        is_apart = (self.apart(places) >= 0.0).all() if len(places) else False
        if not is_apart or len(self.u) + len(places) > self._most_cases:
            return False
        begin = len(self.u)
        self.look(places)
        results = sorted({*self._goal.results, *(limit.result for limit in self._limits)})
        values = self._values[begin:, results].reshape(axes.size, 4, -1)
        noise = 4.0 * self._bounds[begin:, results].reshape(axes.size, 4, -1).max(axis=1)
        far = np.abs(values[:, 0] + values[:, 3] - 2.0 * best.values[results])
        near = np.abs(values[:, 1] + values[:, 2] - 2.0 * best.values[results])
        return bool((near - noise > KINK_BENDS * (far + noise)).any())

    def _compared(self, start: Start, best: Best) -> Start:
        """A start with whether it came to the best."""
        same_goal = abs(start.last_goal - best.goal) <= SAME_GOAL * self._scale() + 2.0 * best.goal_bound
        away = np.abs(start.last - best.numbers) / (self._high - self._low)
        return replace(start, same_goal=same_goal, same_numbers=bool(same_goal and away.max() <= SAME_NUMBERS))


def _is_regular(descent: Descent) -> bool:
    """Whether a search ended where limits hold as far as it aims at, with weights of usual size."""
    heaviest = float(np.abs(descent.weights[descent.here.n_goals :]).max(initial=0.0))
    return descent.here.excess <= LEAST_EXCESS and heaviest <= HEAVIEST and descent.charge <= DEAREST
