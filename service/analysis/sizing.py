"""Where one number makes all limits hold: the intervals, with edges to full accuracy.

The number is looked at all over its range. Between neighbours of which one holds and the other does not the edge is
closed in; where neighbours agree but come near a limit between them the extreme is looked for. Every search goes on in
waves, all edges and extremes at once. What is narrower than the scan and does not show on it can be missed.

Source of the searches: Chandrupatla, Advances in Engineering Software 28 (1997) 145 (roots), Computer Methods in
Applied Mechanics and Engineering 152 (1998) 211 (extremes).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.optimize.elementwise import find_minimum, find_root

from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.limits import Held, Limit
from service.analysis.samples import Range, Samples, runs

# Where cases begin to fail is told to this part of the widest step and of the number, by so many halvings at the most.
HALVED = 1e-6
HALVINGS = 24

# Edges are closed in again when cases failed within their brackets, so many times at the most.
PASSES = 3

# Widths of a root's bracket and of an extreme's in parts of the number: full accuracy, and the square root of that,
# which is what an extreme's value determines of its place.
ROOT_WIDTH, EXTREME_WIDTH = 1e-15, 1e-8
MOST_STEPS = 80

# An extreme between three neighbours is looked for if the middle one would reach a limit by going this many times as
# far as its neighbours are beyond it; a parabola goes an eighth of the sum.
FARTHEST = 4.0

# It is given up once three neighbours bend by less than this part of what is left to the limit.
FLAT = 0.1

# The slope at an edge is taken over this part of its bracket to either side.
SLOPE_STEP = 1e-3

# An edge is proved where the margin is beyond its bound on either side: tried this many times bound / slope away.
PROOF_AT = (1.5, 12.0)

ROOT_TOLERANCES = {"xatol": 0.0, "xrtol": ROOT_WIDTH, "fatol": 0.0}

# Highest cases around which the nearest miss is looked for.
MOST_APPROACHED = 3

Ends = Literal["limit", "range", "invalid"]
Verdict = Literal["everywhere", "somewhere", "nowhere", "undecided"]


@dataclass(frozen=True)
class Edge:
    """Where an interval ends.

    kind: at a limit, at the end of the range that was looked at, or where cases begin to fail. number: of the edge.
    error_bound: by how much the true edge may be off; 0 at the end of the range. limit: which one ends it, and slope:
    the derivative of that limit's result by the number, with an estimate of its error; None for the other kinds, and
    where cases beside it fail.
    """

    kind: Ends
    number: float
    error_bound: float = 0.0
    limit: int | None = None
    slope: float | None = None
    slope_error: float | None = None


@dataclass(frozen=True)
class Interval:
    """All limits hold from `low` to `high`."""

    low: Edge
    high: Edge


@dataclass(frozen=True)
class Touch:
    """Where the bounds leave open whether all limits hold: a limit is met without being crossed.

    number: where the worst margin is least in size, with the limit it belongs to, the margin and its bound. low, high:
    it is open nowhere outside.
    """

    number: float
    low: float
    high: float
    limit: int
    margin: float
    error_bound: float


@dataclass(frozen=True)
class Nearest:
    """Where the worst margin is best, or nearest to nothing: the limit it belongs to, the margin and its bound."""

    number: float
    limit: int
    margin: float
    error_bound: float


@dataclass(frozen=True)
class Invalid:
    """Cases fail from `low` to `high`. error_bound: they may do so by this much further to either side."""

    low: float
    high: float
    error_bound: float
    failure: Failure


@dataclass(frozen=True)
class Tried:
    """One size of a list: whether all limits hold, with the worst of them; None of all of it where the case failed."""

    number: float
    held: Held | None
    limit: int | None
    margin: float | None
    error_bound: float | None
    failure: Failure | None


@dataclass(frozen=True)
class Sizing:
    """Where all limits hold.

    holds: in all of the range, in the intervals, nowhere, or nowhere for sure but perhaps at a touch. nearest: where
    the worst violation is least, if there is no interval and any case did not fail. spacing: features narrower than
    this may have been missed. cases: how many were computed.
    """

    holds: Verdict
    intervals: tuple[Interval, ...]
    touches: tuple[Touch, ...]
    nearest: Nearest | None
    invalid: tuple[Invalid, ...]
    tried: tuple[Tried, ...]
    spacing: float
    cases: int


@dataclass(frozen=True)
class Solutions:
    """Where a result has a value: where it crosses it, and where it meets it without crossing for sure.

    nearest: where it comes nearest, if it never crosses and any case did not fail. The rest as in `Sizing`.
    """

    crossings: tuple[Edge, ...]
    touches: tuple[Touch, ...]
    nearest: Nearest | None
    invalid: tuple[Invalid, ...]
    spacing: float
    cases: int


def usual_cases(scan: Range, sizes: int = 0) -> int:
    """How many cases a search takes, about: the scan, two edges, two extremes and where cases begin to fail."""
    return scan.count + sizes + 2 * 16 + 2 * 16 + 20


def where_limits_hold(
    evaluate: Evaluate, scan: Range, limits: Sequence[Limit], units: Sequence[str], sizes: Sequence[float] = ()
) -> Sizing:
    """The intervals of one number over which all limits hold.

    evaluate: of cases of the one number. units: of each limit; those of one unit are compared as they are, those of
    several in parts of how far their results change. sizes: a list of which is told one by one whether they hold.
    """
    samples = Samples(evaluate, limits, units, np.concatenate([scan.places(), np.asarray(sizes, dtype=float)]))
    tried = tuple(_tried(samples, size) for size in sizes)
    samples.keep(scan.low, scan.high)
    edges = _edges(samples, scan)
    intervals = _intervals(samples, edges)
    if not intervals:
        _approach(samples, 1)
    touches = _touches(samples, edges)
    is_covered = len(intervals) == 1 and intervals[0].low.kind == intervals[0].high.kind == "range"
    if intervals:
        holds: Verdict = "everywhere" if is_covered and not touches else "somewhere"
    else:
        holds = "undecided" if touches else "nowhere"
    nearest = None if intervals else _nearest(samples, samples.worst)
    return Sizing(holds, intervals, touches, nearest, _invalid(samples), tried, _spacing(scan), samples.cases)


def where_equal(evaluate: Evaluate, scan: Range, result: int, value: float) -> Solutions:
    """Where one result has a value."""
    samples = Samples(evaluate, [Limit(result, at_least=value)], [""], scan.places())
    edges = _edges(samples, scan)
    for side in (1, -1) if not edges else ():
        _approach(samples, side)
    touches = _touches(samples, edges)
    nearest = None if edges else _nearest(samples, -np.abs(samples.worst))
    return Solutions(tuple(edges), touches, nearest, _invalid(samples), _spacing(scan), samples.cases)


def _spacing(scan: Range) -> float:
    return float(np.diff(scan.places()).max())


def _tried(samples: Samples, size: float) -> Tried:
    index = int(np.searchsorted(samples.numbers, size))
    if size in samples.failures:
        return Tried(size, None, None, None, None, samples.failures[size])
    limit = samples.binding(index)
    held: Held = ("no", "undecided", "yes")[samples.signs[index] + 1]
    margin, bound = float(samples.margins[index, limit]), float(samples.bounds[index, limit])
    return Tried(size, held, limit, margin, bound, None)


# Edges


def _edges(samples: Samples, scan: Range) -> list[Edge]:
    """Where the worst margin passes through nothing, in order."""
    _narrow_invalid(samples)
    _look_into_ends(samples)
    _look_for_hidden(samples)
    closed: list[tuple[float, float, float]] = []
    for _ in range(PASSES):
        _narrow_invalid(samples)
        brackets = _open_brackets(samples, closed)
        if not brackets:
            break
        low, high = np.array(brackets).T
        found = find_root(samples.worst_at, (low, high), tolerances=ROOT_TOLERANCES)
        closed += [(float(found.x[index]), *brackets[index]) for index in np.flatnonzero(found.success)]
    # Where cases went on failing beside it an edge is known to lie between two that did not.
    _narrow_invalid(samples)
    closed += [(low, low, high) for low, high in _open_brackets(samples, closed)]
    return _proved(samples, sorted(closed))


def _open_brackets(samples: Samples, closed: Sequence[tuple[float, float, float]]) -> list[tuple[float, float]]:
    """Neighbours within a stretch that are decided differently, undecided ones between them left out.

    closed: roots, each with the bracket it was found in.
    """
    found = []
    for first, last in samples.stretches():
        signs, numbers = samples.signs[first : last + 1], samples.numbers[first : last + 1]
        for before, after in pairwise(np.flatnonzero(signs)):
            pair = float(numbers[before]), float(numbers[after])
            is_open = not any(low <= pair[0] and pair[1] <= high for _, low, high in closed)
            found += [pair] if signs[before] != signs[after] and is_open else []
    return found


def _narrow_invalid(samples: Samples) -> None:
    """Halve steps of which one end failed, so that it is known where cases begin to fail."""
    widest = HALVED * np.diff(samples.numbers).max(initial=0.0)
    for _ in range(HALVINGS):
        ends = samples.numbers[:-1], samples.numbers[1:]
        between = samples.usable[:-1] != samples.usable[1:]
        wide = between & (ends[1] - ends[0] > np.minimum(widest, HALVED * np.abs(ends[1])))
        if not wide.any():
            break
        samples.look(0.5 * (ends[0] + ends[1])[wide])


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


def _look_for_hidden(samples: Samples) -> None:
    """Look for extremes between neighbours on one side of the limits that may reach over to the other."""
    for side in (1, -1):
        worst, signs = side * samples.worst, side * samples.signs
        # The middle one may be undecided; what it touches may be passed beside it.
        alike = (signs[:-2] == 1) & (signs[1:-1] >= 0) & (signs[2:] == 1)
        rises = np.maximum(worst[:-2], worst[2:]) - worst[1:-1]
        near = worst[1:-1] < FARTHEST * rises
        _descend(samples, side, np.flatnonzero(alike & near & _lowest(worst)) + 1, until_passed=True)


def _lowest(worst: FloatArray) -> NDArray[np.bool_]:
    """Which of all but the first and last is below its neighbours."""
    lower, higher = np.minimum(worst[:-2], worst[2:]), np.maximum(worst[:-2], worst[2:])
    return (worst[1:-1] <= lower) & (worst[1:-1] < higher)


def _descend(samples: Samples, side: int, middles: NDArray[np.intp], *, until_passed: bool) -> None:
    """Look for the lowest worst margin times `side` around some cases that are below their neighbours.

    until_passed: go on only until it is below nothing for sure, or plainly stays above.
    """
    if not middles.size:
        return

    def sized(numbers: FloatArray) -> FloatArray:
        at = samples.at(numbers)
        # What is not a number ends the search for that element.
        return np.where(until_passed & (samples.signs[at] == -side), np.nan, side * samples.worst[at])

    bracket = tuple(samples.numbers[middles + step] for step in (-1, 0, 1))
    tolerances = {"xatol": 0.0, "xrtol": EXTREME_WIDTH, "fatol": 0.0, "frtol": FLAT if until_passed else 0.0}
    find_minimum(sized, bracket, tolerances=tolerances, maxiter=MOST_STEPS)


def _proved(samples: Samples, roots: Sequence[tuple[float, float, float]]) -> list[Edge]:
    """Edges with what ends them, the slope there, and how far off they may be.

    roots: each with a bracket that is decided on both sides. The margin is continuous, so the edge lies between the
    nearest cases that are decided; some more are looked at on either side where the slope lets them be.
    """
    if not roots:
        return []
    root, low, high = np.array(roots).T
    step = SLOPE_STEP * (high - low)
    sides = np.maximum(root - step, low), np.minimum(root + step, high)
    samples.look(np.concatenate([root, *sides]))
    at, before, after = samples.at(root), samples.at(sides[0]), samples.at(sides[1])
    limits = np.array([samples.binding(index) for index in at])
    values = [samples.values[place, limits] for place in (before, at, after)]
    slopes = (values[2] - values[0]) / (sides[1] - sides[0])
    with np.errstate(divide="ignore", invalid="ignore"):
        # What the values are off by, and how the slopes to either side differ, which is more than their mean is off.
        slope_errors = (samples.bounds[before, limits] + samples.bounds[after, limits]) / (sides[1] - sides[0])
        slope_errors += np.abs(
            (values[2] - values[1]) / (sides[1] - root) - (values[1] - values[0]) / (root - sides[0])
        )
        rooms = samples.bounds[at, limits] / np.abs(slopes) + np.spacing(np.abs(root))
    rooms[np.isnan(rooms)] = 0.0
    places = [np.clip(root + sign * far * rooms, low, high) for far in PROOF_AT for sign in (-1, 1)]
    samples.look(np.concatenate(places))
    numbers, signs = samples.numbers, samples.signs
    edges = []
    for index, number in enumerate(root):
        # The nearest cases that are decided as the ends of the bracket are.
        ends = signs[np.searchsorted(numbers, (low[index], high[index]))]
        before = numbers[(signs == ends[0]) & (numbers <= number)].max()
        after = numbers[(signs == ends[1]) & (numbers >= number)].min()
        off = max(number - before, after - number)
        slope = (float(slopes[index]), float(slope_errors[index])) if np.isfinite(slope_errors[index]) else (None, None)
        edges.append(Edge("limit", float(number), float(off), int(limits[index]), *slope))
    return edges


# What the edges enclose


def _intervals(samples: Samples, edges: Sequence[Edge]) -> tuple[Interval, ...]:
    """Where all limits hold, from edge to edge and end to end of each stretch."""
    found = []
    for first, last in samples.stretches():
        signs, numbers = samples.signs[first : last + 1], samples.numbers[first : last + 1]
        if not signs.any():
            continue
        holds = signs[np.flatnonzero(signs)[0]] == 1
        low = _end_of_stretch(samples, first, first - 1)
        for edge in edges:
            if numbers[0] <= edge.number <= numbers[-1]:
                found += [Interval(low, edge)] if holds else []
                low, holds = edge, not holds
        found += [Interval(low, _end_of_stretch(samples, last, last + 1))] if holds else []
    return tuple(found)


def _end_of_stretch(samples: Samples, index: int, beyond: int) -> Edge:
    if not 0 <= beyond < samples.numbers.size:
        return Edge("range", float(samples.numbers[index]))
    return Edge("invalid", float(samples.numbers[index]), float(abs(samples.numbers[beyond] - samples.numbers[index])))


def _touches(samples: Samples, edges: Sequence[Edge]) -> tuple[Touch, ...]:
    """Runs of undecided cases that do not belong to an edge."""
    open_runs = _open_runs(samples, edges)
    samples.look(np.array([place for run in open_runs for place in _just_outside(samples, *run)]))
    found = []
    for at, low, high in _open_runs(samples, edges):
        limit = samples.binding(at)
        margin, bound = float(samples.margins[at, limit]), float(samples.bounds[at, limit])
        ends = float(samples.numbers[low]), float(samples.numbers[high])
        found.append(Touch(float(samples.numbers[at]), *ends, limit, margin, bound))
    return tuple(found)


def _open_runs(samples: Samples, edges: Sequence[Edge]) -> list[tuple[int, int, int]]:
    """Of each run of undecided cases away from an edge the one nearest to a limit, and the neighbours of the run."""
    found = []
    usable, numbers = samples.usable, samples.numbers
    for first, last in runs(usable & (samples.signs == 0)):
        low = first - 1 if first > 0 and usable[first - 1] else first
        high = last + 1 if last + 1 < numbers.size and usable[last + 1] else last
        if not any(numbers[low] <= edge.number <= numbers[high] for edge in edges):
            at = first + int(np.argmin(np.abs(samples.worst[first : last + 1])))
            found.append((at, low, high))
    return found


def _just_outside(samples: Samples, at: int, low: int, high: int) -> list[float]:
    """Where a parabola through an undecided case comes out of the bound on either side, and as far again."""
    limit = samples.binding(at)
    room = 2.0 * samples.bounds[at, limit] / samples.scale[limit]
    found = []
    for end in (low, high):
        rise = abs(samples.worst[end] - samples.worst[at])
        part = min(1.0, 2.0 * np.sqrt(room / rise)) if rise > 0.0 else 1.0
        found.append(float(samples.numbers[at] + part * (samples.numbers[end] - samples.numbers[at])))
    return found


def _approach(samples: Samples, side: int) -> None:
    """Look for where the worst margin times `side` is highest, around the highest cases."""
    worst = -side * samples.worst
    lowest = np.flatnonzero(_lowest(worst)) + 1
    best = lowest[np.argsort(worst[lowest], kind="stable")[:MOST_APPROACHED]]
    _descend(samples, -side, best, until_passed=False)


def _nearest(samples: Samples, merit: FloatArray) -> Nearest | None:
    """The case of greatest merit; None where all failed."""
    if not samples.usable.any():
        return None
    index = int(np.nanargmax(merit))
    limit = samples.binding(index)
    margin, bound = float(samples.margins[index, limit]), float(samples.bounds[index, limit])
    return Nearest(float(samples.numbers[index]), limit, margin, bound)


def _invalid(samples: Samples) -> tuple[Invalid, ...]:
    """Runs of cases that failed for one reason."""
    found = []
    numbers = samples.numbers
    for first, last in runs(~samples.usable):
        reasons = [samples.failures[float(number)] for number in numbers[first : last + 1]]
        begin = first
        for index in range(first, last + 1):
            if index == last or reasons[index + 1 - first].code != reasons[index - first].code:
                around = numbers[max(begin - 1, 0)], numbers[min(index + 1, numbers.size - 1)]
                off = max(numbers[begin] - around[0], around[1] - numbers[index])
                found.append(Invalid(float(numbers[begin]), float(numbers[index]), float(off), reasons[begin - first]))
                begin = index + 1
    return tuple(found)
