"""Derivatives of results by numbers, from values at Chebyshev points around the nominal numbers.

Around p the result is looked at on [p - r, p + r] at 5 Chebyshev points, nested in 9 (Trefethen, Approximation Theory
and Approximation Practice, 2013, chapters 3 and 4). Its interpolant sum c_k T_k is differentiated at p, and how fast
the c_k fall tells what the terms left out come to. Where r is a 64th of the distance to the nearest singularity of
the result, 5 points give 8 digits and 9 points all of them, so that a number usually takes four cases, a stubborn one
eight. All numbers share their waves.

What a derivative may be off by has two parts. `truncation` is estimated from the coefficients. `rounding` is the sum of
|weight| times the bound of each value and holds whatever the values err by within their bounds. If truncation is the
larger r is divided by 8, if rounding is it is multiplied by 8; of all looks each entry keeps the best.

Where cases fail on one side (a size at its limit) p is the end of an interval on the other side. Where the looks do not
converge, however small r, both sides are differentiated apart: a kink at p, as the highest potential has where two
places compete, shows as two derivatives that differ.
"""

from __future__ import annotations

from collections.abc import Generator, Mapping, Sequence
from dataclasses import dataclass, field, fields, replace
from functools import lru_cache
from typing import Literal

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray

BoolArray = NDArray[np.bool_]
Side = Literal["both", "below", "above"]

# Degrees of the nested interpolants.
DEGREES = (4, 8)

# The first radius in parts of the number.
RADIUS = 1 / 64

# What the radius is multiplied or divided by from one look to the next; a number that is not zero is never varied by
# more than an eighth of itself.
STEP = 8.0

# Looks in the middle of an interval, and at either end of one.
MOST_LOOKS, MOST_LOOKS_ASIDE = 3, 2

# Cases that each number may take, and those that all stubborn ones share beside, enough for a kink.
CASES_EACH, CASES_SHARED = 8, 48

# Tries to find a radius at which cases have results.
MOST_TRIES = 3

# Truncation aimed at in parts of the derivative, a tenth of what is promised, and rounding beyond which the interval is
# made wider.
TARGET, TOO_UNSURE = 1e-7, 5e-7

# Truncation above this part of the derivative is a result that does not look smooth.
ROUGH = 1e-3

# A look is never trusted to be better than this part of what the next coarser interpolant was off by: with the radius
# at a 64th of the distance to a singularity the true part is 4e-8.
COARSER = 3e-4

# Coefficients fall less evenly than the geometric series they are taken for; over random functions with poles, decays
# and waves the estimate without this is too small in one of fifty, by 2, with it in one of a thousand.
UNEVEN = 4.0

# Slowest fall of coefficients from one to the next that is extrapolated.
SLOWEST = 0.9

# Accuracy the cases are asked for, in parts of the span of their data.
ACCURACY = 1e-12

ROUNDING = float(np.finfo(float).eps)

_SPENT = Failure("too-many-cases", "All cases that these derivatives may take were used up before it was varied.")


@dataclass(frozen=True)
class Derivatives:
    """First and second derivatives of every result by every number.

    values, bounds: the results with the nominal numbers, shape (n_results,).
    first, second: shape (n_results, n_numbers), in units of result / number and result / number^2; first_error,
    second_error: estimates of how far off these are, infinite where the values have no finite bound. All are NaN for a
    number that could not be varied. below, above: first derivatives on either side, which are `first` except at a kink.
    smooth: no where the result has a kink there, or none was ruled out; then `first` is the mean of both sides, its
    error reaches to either, and `second` is NaN. affine: no bend was seen within the bounds of the values.
    sides: from which side of its nominal each number was varied. radii: by how much at the last look.
    failures: why a number could not be varied, by its place. n_cases: cases that were computed.
    """

    values: FloatArray
    bounds: FloatArray
    first: FloatArray
    first_error: FloatArray
    second: FloatArray
    second_error: FloatArray
    below: FloatArray
    above: FloatArray
    smooth: BoolArray
    affine: BoolArray
    sides: tuple[Side, ...]
    radii: FloatArray
    failures: Mapping[int, Failure]
    n_cases: int


class NominalFailed(Exception):
    """The case with the nominal numbers has no results."""

    def __init__(self, failure: Failure) -> None:
        super().__init__(failure.message)
        self.failure = failure


def most_cases(n_numbers: int) -> int:
    """The most cases that derivatives by so many numbers take; a well-behaved number takes 4 or 8 of these."""
    return 1 + CASES_EACH * n_numbers + CASES_SHARED


def first_radii(nominal: FloatArray, steps: FloatArray) -> FloatArray:
    """By how much each number is varied at first, shape (n_numbers,): a 64th of itself, or its step where it is 0."""
    return np.where(nominal == 0, steps, np.abs(nominal) * RADIUS)


def derivatives(
    evaluate: Evaluate, nominal: FloatArray, radii: FloatArray, *, accuracy: float = ACCURACY
) -> Derivatives:
    """Derivatives at the nominal numbers.

    nominal: shape (n_numbers,), at least one. radii: by how much each number is varied at first, > 0, in the unit of
    the number; see `first_radii`. accuracy: what cases are asked for, in parts of the span of their data.
    Raises NominalFailed if the case with the nominal numbers has no results.
    """
    centre = _Centre()
    runs = [_vary(_Number(float(number), float(radius), centre)) for number, radius in zip(nominal, radii, strict=True)]
    entries, n_cases = _in_waves(evaluate, nominal, centre, runs, accuracy)
    has_none = ~np.isfinite(centre.values)

    def columns(part: str) -> FloatArray:
        table = np.stack([getattr(entry, part) for entry in entries], axis=-1)
        if table.dtype == float:
            table[has_none] = np.nan
        return table

    return Derivatives(
        values=centre.values,
        bounds=centre.bounds,
        first=columns("first"),
        first_error=columns("first_error"),
        second=columns("second"),
        second_error=columns("second_error"),
        below=columns("below"),
        above=columns("above"),
        smooth=columns("smooth").astype(bool),
        affine=columns("affine").astype(bool),
        sides=tuple(entry.side for entry in entries),
        radii=np.array([entry.radius for entry in entries]),
        failures={place: entry.failure for place, entry in enumerate(entries) if entry.failure is not None},
        n_cases=n_cases,
    )


# --- waves ---

_Steps = Generator[FloatArray, Evaluations, "_Entry"]


def _in_waves(
    evaluate: Evaluate, nominal: FloatArray, centre: _Centre, runs: Sequence[_Steps], accuracy: float
) -> tuple[list[_Entry], int]:
    """What each run of a number returns, and how many cases it took.

    All points that are waited for go into one wave; the first has the nominal case at its head. Numbers that come last
    go without once all cases are used up, and are left with the looks they had.
    """
    wanted = {place: next(run) for place, run in enumerate(runs)}
    entries: dict[int, _Entry] = {}
    n_cases = 0
    while wanted:
        head = 1 if n_cases == 0 else 0
        rows: dict[int, slice] = {}
        end = head
        for place, points in wanted.items():
            if n_cases + end + len(points) <= most_cases(len(runs)):
                rows[place] = slice(end, end + len(points))
                end += len(points)
        cases = np.repeat(nominal[None, :], end, axis=0)
        for place, row in rows.items():
            cases[row, place] = wanted[place]
        n_cases += end
        answers = evaluate(cases, accuracy=accuracy) if end else _nothing(0, centre)
        if head:
            if 0 in answers.failures:
                raise NominalFailed(answers.failures[0])
            centre.values, centre.bounds = answers.values[0], answers.bounds[0]
        still: dict[int, FloatArray] = {}
        for place in wanted:
            try:
                found = _of_rows(answers, rows[place]) if place in rows else _nothing(len(wanted[place]), centre)
                still[place] = runs[place].send(found)
            except StopIteration as finished:
                entries[place] = finished.value
        wanted = still
    return [entries[place] for place in range(len(runs))], n_cases


def _of_rows(answers: Evaluations, rows: slice) -> Evaluations:
    failures = {row - rows.start: why for row, why in answers.failures.items() if rows.start <= row < rows.stop}
    return Evaluations(answers.values[rows], answers.bounds[rows], failures)


def _nothing(n_cases: int, centre: _Centre) -> Evaluations:
    """What cases that may not be computed any more give."""
    unknown = np.full((n_cases, len(centre.values)), np.nan)
    return Evaluations(unknown, unknown, dict.fromkeys(range(n_cases), _SPENT))


# --- rules ---


@dataclass(frozen=True)
class _Rule:
    """Derivatives at one place of [-1, 1] from values at Chebyshev points.

    points: cos(pi j / degree), shape (degree + 1,), but for the exact middle. place: 0, or -1 or 1 for an end.
    coefficients: c = coefficients @ values. first, second: weights of values. steep, bent: how large the first and
    second derivative of T_k can be near place, for k up to 2 degree.
    """

    place: float
    points: FloatArray
    coefficients: FloatArray
    first: FloatArray
    second: FloatArray
    steep: FloatArray
    bent: FloatArray

    @property
    def own(self) -> int:
        """The number of the point at the place, whose value is known."""
        return int(np.flatnonzero(self.points == self.place)[0])


@lru_cache(maxsize=16)
def _rule(degree: int, place: float) -> _Rule:
    points = np.sin(np.pi * np.arange(degree, -degree - 1, -2) / (2 * degree))
    coefficients: FloatArray = np.linalg.inv(chebyshev.chebvander(points, degree)).astype(np.float64)
    slopes, bends = (
        np.array([chebyshev.chebval(place, chebyshev.chebder(np.eye(degree + 1)[k], order)) for k in range(degree + 1)])
        for order in (1, 2)
    )
    k = np.arange(2 * degree + 1.0)
    # |T_k'| = k |sin k theta| / sin theta and what it is at the ends; T_k'' in the same manner.
    steep, bent = (k, k**2) if place == 0 else (k**2, k**2 * (k**2 - 1) / 3)
    return _Rule(place, points, coefficients, slopes @ coefficients, bends @ coefficients, steep, bent)


# --- one look ---


@dataclass(frozen=True)
class _Look:
    """First and second derivatives of all results from one interval, each array of shape (n_results,).

    settled: whether truncation matters neither beside the derivative nor beside rounding.
    """

    first: FloatArray
    truncation: FloatArray
    rounding: FloatArray
    second: FloatArray
    second_truncation: FloatArray
    second_rounding: FloatArray
    affine: BoolArray
    bounded: BoolArray
    settled: BoolArray

    @property
    def error(self) -> FloatArray:
        """Of the first derivative; infinite where a value has no finite bound."""
        return np.where(self.bounded, self.truncation + self.rounding, np.inf)

    @property
    def second_error(self) -> FloatArray:
        """Of the second derivative."""
        return np.where(self.bounded, self.second_truncation + self.second_rounding, np.inf)

    @property
    def too_narrow(self) -> BoolArray:
        """Whether rounding keeps a derivative that is not zero from what is promised."""
        size = np.abs(self.first)
        return self.settled & (self.rounding > TOO_UNSURE * size) & (self.rounding < size)


def _look(rule: _Rule, number: _Number, radius: float, values: FloatArray, bounds: FloatArray) -> _Look:
    """values, bounds: at the points of the rule, shape (degree + 1, n_results)."""
    degree = len(rule.points) - 1
    finite = np.all(np.isfinite(values), axis=0)
    bounded = np.all(np.isfinite(bounds), axis=0)
    differences = np.subtract(values, number.centre.values, out=np.zeros_like(values), where=finite)
    first = rule.first @ differences / radius
    # A point of the interval is off by half a unit in its last digit, which changes the value by that times the slope.
    spread = (
        np.where(bounded, bounds, 0.0)
        + ROUNDING * np.where(finite, np.abs(values), 0.0)
        + ROUNDING * (abs(number.nominal) + radius) * np.abs(first)
    )
    # What values within their bounds leave no doubt of.
    sizes = np.maximum(np.abs(rule.coefficients @ differences) - np.abs(rule.coefficients) @ spread, 0.0)
    second = rule.second @ differences / radius**2
    coarse = _rule(degree // 2, rule.place)
    coarse_first = coarse.first @ differences[::2] / radius
    coarse_second = coarse.second @ differences[::2] / radius**2
    truncation = _left_out(sizes, rule.steep) / radius + COARSER * np.abs(first - coarse_first)
    truncation[~finite & np.isfinite(number.centre.values)] = np.inf
    rounding = np.abs(rule.first) @ spread / radius
    return _Look(
        first=first,
        truncation=truncation,
        rounding=rounding,
        second=second,
        second_truncation=_left_out(sizes, rule.bent) / radius**2 + COARSER * np.abs(second - coarse_second),
        second_rounding=np.abs(rule.second) @ spread / radius**2,
        affine=np.all(sizes[2:] == 0, axis=0),
        bounded=bounded,
        settled=truncation <= np.maximum(TARGET * np.abs(first), rounding),
    )


def _left_out(sizes: FloatArray, weights: FloatArray) -> FloatArray:
    """What Chebyshev coefficients above the degree N add to a derivative, with those they are mistaken for.

    sizes: |c_k| for k = 0 .. N, shape (N + 1, n_results); weights: those of T_k for k = 0 .. 2 N. On the points T_(N+j)
    looks like T_(N-j). The c_k go on as they fell from N / 2 to N.
    """
    degree = len(sizes) - 1
    earlier = sizes[[degree // 2 - 1, degree // 2]]
    later = sizes[[degree - 1, degree]]
    ratios = np.divide(later, earlier, out=np.where(later > 0, 1.0, 0.0), where=earlier > 0)
    fall = np.minimum(np.max(ratios, axis=0) ** (2 / degree), SLOWEST)
    tail = np.zeros(sizes.shape[1])
    for j in range(1, degree + 1):
        tail += (
            UNEVEN
            * np.maximum(later[1] * fall**j, later[0] * fall ** (j + 1))
            * (weights[degree + j] + weights[degree - j])
        )
    return tail


def _better(known: _Look | None, new: _Look) -> _Look:
    """For each result the look with the smaller error, settled if either is."""
    if known is None:
        return new
    best = _chosen(new.truncation + new.rounding < known.truncation + known.rounding, new, known)
    return replace(best, settled=known.settled | new.settled)


def _chosen(which: BoolArray, yes: _Look, no: _Look) -> _Look:
    parts = (part.name for part in fields(_Look))
    return _Look(*(np.where(which, getattr(yes, part), getattr(no, part)) for part in parts))


# --- one number ---


@dataclass
class _Centre:
    """Results with all nominals, shape (n_results,), filled in by the first wave."""

    values: FloatArray = field(default_factory=lambda: np.empty(0))
    bounds: FloatArray = field(default_factory=lambda: np.empty(0))


@dataclass(frozen=True)
class _Number:
    """A number to be varied: its nominal and its first radius, and the results with all nominals."""

    nominal: float
    radius: float
    centre: _Centre

    @property
    def widest(self) -> float:
        return max(abs(self.nominal) / STEP, self.radius) if self.nominal != 0 else self.radius * STEP**MOST_LOOKS


@dataclass(frozen=True)
class _Entry:
    """What is known of the derivatives by one number; see Derivatives."""

    first: FloatArray
    first_error: FloatArray
    second: FloatArray
    second_error: FloatArray
    below: FloatArray
    above: FloatArray
    smooth: BoolArray
    affine: BoolArray
    side: Side
    radius: float
    failure: Failure | None = None


@dataclass
class _Course:
    """How a run of looks at one place went: the best of them, the last radius, and where cases failed."""

    radius: float
    best: _Look | None = None
    failed: dict[float, Failure] = field(default_factory=dict)


def _vary(number: _Number) -> _Steps:
    """The entry of a number; yields points that are wanted and is sent what they gave."""
    radius, why = number.radius, None
    for _ in range(MOST_TRIES):
        course = yield from _looks(number, 0.0, radius, MOST_LOOKS)
        if course.best is not None:
            if np.all(course.best.settled):
                return _smooth_entry(course.best, "both", course.radius)
            return (yield from _from_both_sides(number, course.best, course.radius))
        why = next(iter(course.failed.values()))
        offsets = np.array(list(course.failed))
        for place, side, is_free in ((1.0, "below", offsets > 0), (-1.0, "above", offsets < 0)):
            if np.all(is_free):
                aside = yield from _looks(number, place, radius, MOST_LOOKS_ASIDE)
                if aside.best is not None:
                    return _smooth_entry(aside.best, "below" if side == "below" else "above", aside.radius)
        radius /= STEP
    return _no_entry(number, why)


def _looks(number: _Number, place: float, radius: float, most: int) -> Generator[FloatArray, Evaluations, _Course]:
    """Looks at intervals of growing or falling radius, until all results settle, or one of them fails."""
    course = _Course(radius)
    for _ in range(most):
        course.radius = radius
        look = yield from _look_closely(number, place, radius, course.failed)
        if look is None:
            break
        course.best = _better(course.best, look)
        if not np.all(course.best.settled):
            radius /= STEP
        elif np.any(course.best.too_narrow) and radius < number.widest:
            radius = min(radius * STEP, number.widest)
        else:
            break
    return course


def _look_closely(
    number: _Number, place: float, radius: float, failed: dict[float, Failure]
) -> Generator[FloatArray, Evaluations, _Look | None]:
    """A look at one interval, with more points if the fewer do not settle; None, and why, if a case of these failed."""
    best: _Look | None = None
    values = bounds = np.empty((0, 0))
    for degree in DEGREES:
        rule = _rule(degree, place)
        new = np.ones(degree + 1, dtype=bool)
        if best is None:
            new[rule.own] = False
        else:
            new[::2] = False
        offsets = radius * (rule.points[new] - place)
        answers = yield number.nominal + offsets
        if answers.failures:
            failed.update({float(offsets[row]): why for row, why in answers.failures.items()})
            break
        all_values, all_bounds = np.empty((2, degree + 1, len(answers.values[0])))
        if best is None:
            all_values[rule.own], all_bounds[rule.own] = number.centre.values, number.centre.bounds
        else:
            all_values[::2], all_bounds[::2] = values, bounds
        all_values[new], all_bounds[new] = answers.values, answers.bounds
        values, bounds = all_values, all_bounds
        best = _better(best, _look(rule, number, radius, values, bounds))
        if np.all(best.settled):
            break
    return best


def _from_both_sides(number: _Number, middle: _Look, radius: float) -> _Steps:
    """The entry of a number where looks across it do not converge: is there a kink?"""
    below = yield from _looks(number, 1.0, number.radius, MOST_LOOKS_ASIDE)
    above = yield from _looks(number, -1.0, number.radius, MOST_LOOKS_ASIDE)
    entry = _smooth_entry(middle, "both", radius)
    if below.best is None or above.best is None:
        return entry
    low, high = below.best, above.best
    apart, doubt = np.abs(high.first - low.first), high.error + low.error
    # Looks across a kink converge to nothing, so that one that settled is believed.
    kink = ~middle.settled & (apart > doubt)
    plain = ~middle.settled & ~kink & (np.minimum(low.error, high.error) < middle.error)
    entry = _smooth_entry(_chosen(plain, _better(low, high), middle), "both", radius)
    return _Entry(
        first=np.where(kink, (low.first + high.first) / 2, entry.first),
        first_error=np.where(kink, apart / 2 + np.maximum(low.error, high.error), entry.first_error),
        second=np.where(kink, np.nan, entry.second),
        second_error=np.where(kink, np.nan, entry.second_error),
        below=np.where(kink, low.first, entry.first),
        above=np.where(kink, high.first, entry.first),
        smooth=entry.smooth & ~kink,
        affine=entry.affine & ~kink,
        side="both",
        radius=radius,
    )


def _smooth_entry(look: _Look, side: Side, radius: float) -> _Entry:
    smooth = look.truncation <= np.maximum(ROUGH * np.abs(look.first), look.rounding)
    return _Entry(
        first=look.first,
        first_error=look.error,
        second=np.where(smooth, look.second, np.nan),
        second_error=np.where(smooth, look.second_error, np.nan),
        below=look.first,
        above=look.first,
        smooth=smooth,
        affine=look.affine,
        side=side,
        radius=radius,
    )


def _no_entry(number: _Number, why: Failure | None) -> _Entry:
    unknown = np.full(len(number.centre.values), np.nan)
    no = np.zeros(len(unknown), dtype=bool)
    return _Entry(unknown, unknown, unknown, unknown, unknown, unknown, no, no, "both", np.nan, why)
