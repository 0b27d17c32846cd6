"""Where one number makes all limits hold: the intervals, with edges to full accuracy.

The number is looked at all over its range. Between neighbours of which one holds and the other does not the edge is
closed in; extremes that show between neighbours are looked into, and followed where they come near a limit. Where all
that finds no place at which all limits hold, the least miss is looked for, and what it finds to hold has its edges
found in turn. Every search goes on in waves, all edges and extremes at once. What is narrower than the scan and does
not show on it can be missed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from service.analysis.edges import Edge, Edges, narrow_invalid
from service.analysis.evaluations import Evaluate, Failure, FloatArray
from service.analysis.hidden import approach, look_for_hidden
from service.analysis.limits import Held, Limit, surely_held
from service.analysis.samples import CasesUsedUp, Range, Samples, runs

# Cases that searches rarely need more of beside the places looked at first: those of ten edges, or of two edges, four
# extremes and where cases begin to fail.
SEARCHED = 160

Verdict = Literal["everywhere", "somewhere", "nowhere", "undecided"]


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
class Missed:
    """A limit that does not hold for sure somewhere, with its margin there and the bound of it.

    held_elsewhere: whether it surely holds in some other case.
    """

    limit: int
    margin: float
    error_bound: float
    held_elsewhere: bool


@dataclass(frozen=True)
class Nearest:
    """Where the worst margin is best, or nearest to nothing: the limit it belongs to, the margin and its bound.

    missed: all limits that do not hold for sure there.
    """

    number: float
    limit: int
    margin: float
    error_bound: float
    missed: tuple[Missed, ...]


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
    the worst violation is least, if there is no interval and any case did not fail; where the limit it belongs to does
    not change with the number, that is no better than elsewhere, and the number as it stands is told. unchanged: limits
    whose results do not change over the range by more than their bounds. cases: how many were computed. complete: False
    where searches were stopped because no more cases were allowed.
    """

    holds: Verdict
    intervals: tuple[Interval, ...]
    touches: tuple[Touch, ...]
    nearest: Nearest | None
    invalid: tuple[Invalid, ...]
    tried: tuple[Tried, ...]
    unchanged: tuple[int, ...]
    cases: int
    complete: bool


@dataclass(frozen=True)
class Solutions:
    """Where a result has a value: where it crosses it, and where it meets it without crossing for sure.

    nearest: where it comes nearest, if it never crosses and any case did not fail. The rest as in `Sizing`.
    """

    crossings: tuple[Edge, ...]
    touches: tuple[Touch, ...]
    nearest: Nearest | None
    invalid: tuple[Invalid, ...]
    unchanged: tuple[int, ...]
    cases: int
    complete: bool


def fewest_cases(scan: Range, sizes: int = 0) -> int:
    """How many cases are looked at before any search."""
    return scan.count + sizes


def where_limits_hold(
    evaluate: Evaluate,
    scan: Range,
    limits: Sequence[Limit],
    units: Sequence[str],
    sizes: Sequence[float] = (),
    *,
    as_it_stands: float | None = None,
    most_cases: float = np.inf,
) -> Sizing:
    """The intervals of one number over which all limits hold.

    evaluate: of cases of the one number. units: of each limit; those of one unit are compared as they are, those of
    several in parts of how far their results change. sizes: a list of which is told one by one whether they hold.
    most_cases: no more than these are computed, at least `fewest_cases`.
    """
    places = np.concatenate([scan.places(), np.asarray(sizes, dtype=float)])
    samples = Samples(evaluate, limits, units, places, most_cases)
    tried = tuple(_tried(samples, size) for size in sizes)
    samples.keep(scan.low, scan.high)
    edges, complete = _searched(samples, (1,))
    intervals = _intervals(samples, edges)
    touches = _touches(samples, edges)
    is_covered = len(intervals) == 1 and intervals[0].low.kind == intervals[0].high.kind == "range"
    if intervals:
        holds: Verdict = "everywhere" if is_covered and not touches else "somewhere"
    else:
        holds = "undecided" if touches else "nowhere"
    nearest = None if intervals else _nearest(samples, samples.worst, as_it_stands)
    unchanged = _unchanged(samples)
    return Sizing(holds, intervals, touches, nearest, _invalid(samples), tried, unchanged, samples.cases, complete)


def where_equal(
    evaluate: Evaluate,
    scan: Range,
    result: int,
    value: float,
    *,
    as_it_stands: float | None = None,
    most_cases: float = np.inf,
) -> Solutions:
    """Where one result has a value. most_cases: as for `where_limits_hold`."""
    samples = Samples(evaluate, [Limit(result, at_least=value)], [""], scan.places(), most_cases)
    edges, complete = _searched(samples, (1, -1))
    touches = _touches(samples, edges)
    nearest = None if edges else _nearest(samples, -np.abs(samples.worst), as_it_stands)
    unchanged = _unchanged(samples)
    return Solutions(tuple(edges), touches, nearest, _invalid(samples), unchanged, samples.cases, complete)


def _searched(samples: Samples, sides: tuple[int, ...]) -> tuple[list[Edge], bool]:
    """All edges, and whether the cases allowed sufficed. sides: where the worst margin is led to without an edge."""
    known = Edges(samples)
    edges: list[Edge] | None = None
    try:
        known.close_in()
        look_for_hidden(samples)
        known.close_in()
        for side in sides if not known.roots else ():
            approach(samples, side)
            narrow_invalid(samples)
        known.close_in()
        edges = known.proved()
        _look_beside_touches(samples, edges)
    except CasesUsedUp:
        return known.as_known() if edges is None else edges, False
    return edges, True


def _unchanged(samples: Samples) -> tuple[int, ...]:
    return tuple(np.flatnonzero(~samples.changes).tolist())


def _tried(samples: Samples, size: float) -> Tried:
    index = int(np.searchsorted(samples.numbers, size))
    if size in samples.failures:
        return Tried(size, None, None, None, None, samples.failures[size])
    limit = samples.binding(index)
    held: Held = ("no", "undecided", "yes")[samples.signs[index] + 1]
    margin, bound = float(samples.margins[index, limit]), float(samples.bounds[index, limit])
    return Tried(size, held, limit, margin, bound, None)


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
    found = []
    for at, low, high in _open_runs(samples, edges):
        limit = samples.binding(at)
        margin, bound = float(samples.margins[at, limit]), float(samples.bounds[at, limit])
        ends = float(samples.numbers[low]), float(samples.numbers[high])
        found.append(Touch(float(samples.numbers[at]), *ends, limit, margin, bound))
    return tuple(found)


def _look_beside_touches(samples: Samples, edges: Sequence[Edge]) -> None:
    """Look where it is decided on either side of what is open."""
    open_runs = _open_runs(samples, edges)
    samples.look(np.array([place for run in open_runs for place in _just_outside(samples, *run)]))


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


def _nearest(samples: Samples, merit: FloatArray, as_it_stands: float | None) -> Nearest | None:
    """The case of greatest merit; None where all failed.

    Where the limit that decides does not change beyond its bounds, the one nearest to the number as it stands of those
    that are as good.
    """
    if not samples.usable.any():
        return None
    index = int(np.nanargmax(merit))
    limit = samples.binding(index)
    if not samples.changes[limit] and as_it_stands is not None:
        alike = np.flatnonzero(merit >= merit[index] - 2.0 * np.nanmax(samples.bounds[:, limit]) / samples.scale[limit])
        index = int(alike[np.argmin(np.abs(samples.numbers[alike] - as_it_stands))])
        limit = samples.binding(index)
    margin, bound = float(samples.margins[index, limit]), float(samples.bounds[index, limit])
    return Nearest(float(samples.numbers[index]), limit, margin, bound, _missed(samples, index))


def _missed(samples: Samples, index: int) -> tuple[Missed, ...]:
    """The limits that do not hold for sure in a case, worst first."""
    held = np.asarray(surely_held(samples.margins, samples.bounds))
    margins, bounds = samples.margins[index], samples.bounds[index]
    order = np.argsort(margins / samples.scale, kind="stable")
    return tuple(
        Missed(int(limit), float(margins[limit]), float(bounds[limit]), bool(held[:, limit].any()))
        for limit in order
        if not held[index, limit]
    )


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
