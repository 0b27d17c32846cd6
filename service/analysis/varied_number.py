"""Looks at one number on intervals around its nominal, until the derivatives of all results by it settle.

Each is a generator that yields points and is sent what the results are there, so that many numbers share their waves.
If truncation is larger than rounding the radius is divided by 8, if it is smaller it is multiplied by 8; of all looks
each result keeps the best.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.analysis.interpolants import ROUGH, BoolArray, Slopes, better, chosen, rule_of, slopes_of

Side = Literal["both", "below", "above"]

# Degrees of the nested interpolants.
DEGREES = (4, 8)

# What the radius is multiplied or divided by from one look to the next; a number that is not zero is never varied by
# more than an eighth of itself.
STEP = 8.0

# Looks in the middle of an interval, and at either end of one.
MOST_LOOKS, MOST_LOOKS_ASIDE = 3, 2

# Tries to find a radius at which cases have results.
MOST_TRIES = 3


@dataclass
class Centre:
    """Results with all nominals, shape (n_results,), filled in by the first wave."""

    values: FloatArray = field(default_factory=lambda: np.empty(0))
    bounds: FloatArray = field(default_factory=lambda: np.empty(0))


@dataclass(frozen=True)
class Number:
    """A number to be varied: its nominal and its first radius, and the results with all nominals."""

    nominal: float
    radius: float
    centre: Centre

    @property
    def widest(self) -> float:
        """The largest radius it is varied by."""
        return max(abs(self.nominal) / STEP, self.radius) if self.nominal != 0 else self.radius * STEP**MOST_LOOKS


@dataclass(frozen=True)
class Entry:
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


Steps = Generator[FloatArray, Evaluations, Entry]


@dataclass
class _Course:
    """How a run of looks at one place went: the best of them, the last radius, and where cases failed."""

    radius: float
    best: Slopes | None = None
    failed: dict[float, Failure] = field(default_factory=dict)


def vary(number: Number) -> Steps:
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


def _looks(number: Number, place: float, radius: float, most: int) -> Generator[FloatArray, Evaluations, _Course]:
    """Looks at intervals of growing or falling radius, until all results settle, or one of them fails."""
    course = _Course(radius)
    for _ in range(most):
        course.radius = radius
        look = yield from _look_closely(number, place, radius, course.failed)
        if look is None:
            break
        course.best = better(course.best, look)
        if not np.all(course.best.settled):
            radius /= STEP
        elif np.any(course.best.too_narrow) and radius < number.widest:
            radius = min(radius * STEP, number.widest)
        else:
            break
    return course


def _look_closely(
    number: Number, place: float, radius: float, failed: dict[float, Failure]
) -> Generator[FloatArray, Evaluations, Slopes | None]:
    """A look at one interval, with more points if the fewer do not settle; None, and why, if a case of these failed."""
    best: Slopes | None = None
    values = bounds = np.empty((0, 0))
    for degree in DEGREES:
        rule = rule_of(degree, place)
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
        best = better(best, slopes_of(rule, number.nominal, radius, values, bounds))
        if np.all(best.settled):
            break
    return best


def _from_both_sides(number: Number, middle: Slopes, radius: float) -> Steps:
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
    entry = _smooth_entry(chosen(plain, better(low, high), middle), "both", radius)
    return Entry(
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


def _smooth_entry(look: Slopes, side: Side, radius: float) -> Entry:
    smooth = look.truncation <= np.maximum(ROUGH * np.abs(look.first), look.rounding)
    return Entry(
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


def _no_entry(number: Number, why: Failure | None) -> Entry:
    unknown = np.full(len(number.centre.values), np.nan)
    no = np.zeros(len(unknown), dtype=bool)
    return Entry(unknown, unknown, unknown, unknown, unknown, unknown, no, no, "both", np.nan, why)
