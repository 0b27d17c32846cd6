"""Looks at one number on intervals around its nominal, until the derivatives of all results by it settle.

Each is a generator that yields points and is sent what the results are there, so that many numbers share their waves.
If truncation is larger than rounding the radius is divided by 8, if it is smaller it is multiplied by 8; of all looks
each result keeps the best.

Detail much finer than an interval, as the few microns of a layer in a stack of decimetres, may leave hardly a trace at
its points: a narrow step around the nominal changes no slope but that at the nominal. Two probes, a thousandth and a
millionth of the interval from the nominal, therefore go with the first points. A derivative that they contradict is
looked for again at their scale; if they still do, what they tell takes its place, and the difference is its error.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np

from service.analysis.evaluations import Evaluations, Failure, FloatArray
from service.analysis.interpolants import ROUGH, ROUNDING, BoolArray, Slopes, better, chosen, rule_of, slopes_of

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

# Steps from the nominal that derivatives are held against, in parts of the first radius.
PROBES = np.array([1e-3, 1e-6])

# Slopes to probes that differ by more than this part of them show detail, which bends of the interval do not explain.
SCATTERED = 0.02


@dataclass
class Centre:
    """Results with all nominals, shape (n_results,), filled in by the first wave."""

    values: FloatArray = field(default_factory=lambda: np.empty(0))
    bounds: FloatArray = field(default_factory=lambda: np.empty(0))


@dataclass(frozen=True)
class Number:
    """A number to be varied: its nominal and its first radius, and the results with all nominals.

    ceiling: the radius is never made wider than this. looks: at most so many in the middle of an interval.
    """

    nominal: float
    radius: float
    centre: Centre
    ceiling: float = np.inf
    looks: int = MOST_LOOKS

    @property
    def widest(self) -> float:
        """The largest radius it is varied by."""
        usual = max(abs(self.nominal) / STEP, self.radius) if self.nominal != 0 else self.radius * STEP**MOST_LOOKS
        return min(usual, self.ceiling)

    def narrower(self, radius: float) -> Number:
        """The same number, looked at again from a smaller radius."""
        return replace(self, radius=radius, ceiling=STEP * radius, looks=2)


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


class _Probes:
    """Results a little way from the nominal. A probe that has no result, or none yet, contradicts nothing."""

    def __init__(self, number: Number) -> None:
        self._number = number
        self._found: dict[float, Evaluations] = {}

    def offsets(self, side: float) -> FloatArray:
        """Of the probes on one side, -1 or 1, as they are once they are added to the nominal."""
        nominal = self._number.nominal
        exact: FloatArray = nominal + side * self._number.radius * PROBES - nominal
        return exact

    def points(self, side: float) -> FloatArray:
        """Where the probes of a side are."""
        return self._number.nominal + self.offsets(side)

    def take(self, side: float, answers: Evaluations) -> None:
        """Keep what was found there."""
        self._found[side] = answers

    def complete(self) -> Generator[FloatArray, Evaluations, None]:
        """Ask for the side that is missing."""
        for side in (1.0, -1.0):
            if side not in self._found:
                self.take(side, (yield self.points(side)))

    @property
    def failed(self) -> bool:
        """Whether one that was asked for has no result."""
        return any(answers.failures for answers in self._found.values())

    def slopes(self, side: float) -> tuple[FloatArray, FloatArray]:
        """Slopes from the nominal to each probe and how far off they are, NaN if unknown: (n_probes, n_results)."""
        centre, answers = self._number.centre, self._found.get(side)
        if answers is None:
            unknown = np.full((len(PROBES), len(centre.values)), np.nan)
            return unknown, unknown
        offsets = self.offsets(side)[:, None]
        known = np.isfinite(answers.values) & np.isfinite(centre.values) & np.isfinite(answers.bounds + centre.bounds)
        known &= offsets != 0
        change = np.subtract(answers.values, centre.values, out=np.zeros_like(answers.values), where=known)
        slope = np.divide(change, offsets, out=np.full_like(change, np.nan), where=known)
        spread = answers.bounds + centre.bounds + ROUNDING * np.abs(answers.values)
        spread += ROUNDING * (abs(self._number.nominal) + np.abs(offsets)) * np.abs(slope)
        return slope, np.divide(spread, np.abs(offsets), out=np.full_like(change, np.nan), where=known)

    def contradiction(self, entry: Entry, radius: float) -> FloatArray:
        """By how much any of them differs from the slope of an entry, beyond all errors: shape (n_results,).

        radius: of the interval the entry is from. A probe that is not near beside it is none.
        """
        most = np.zeros(len(entry.first))
        bend = np.where(np.isfinite(entry.second), entry.second, 0.0)
        for side, slope in ((1.0, entry.above), (-1.0, entry.below)):
            for offset, there, spread in zip(self.offsets(side), *self.slopes(side), strict=True):
                if abs(offset) <= radius / STEP:
                    # What third derivatives come to in so short a step of a result that the interval resolves.
                    curved = (offset / radius) ** 2 * (np.abs(slope) + np.abs(bend) * radius)
                    beyond = np.abs(there - slope - bend * offset / 2) - spread - curved - entry.first_error
                    most = np.fmax(most, beyond)
        return most

    @property
    def scattered(self) -> BoolArray:
        """Whether the probes of a side differ: there is detail between their distances."""
        apart = np.zeros(len(self._number.centre.values), dtype=bool)
        for side in self._found:
            slope, spread = self.slopes(side)
            apart |= np.abs(slope[0] - slope[1]) > spread.sum(axis=0) + SCATTERED * np.abs(slope).max(axis=0)
        return apart

    @property
    def kinked(self) -> BoolArray:
        """Whether the nearest probes of both sides differ."""
        (above, above_spread), (below, below_spread) = self.slopes(1.0), self.slopes(-1.0)
        size = SCATTERED * np.fmax(np.abs(above[-1]), np.abs(below[-1]))
        kinked: BoolArray = np.abs(above[-1] - below[-1]) > above_spread[-1] + below_spread[-1] + size
        return kinked

    def in_place_of(self, entry: Entry, radius: float) -> Entry:
        """An entry with what the nearest probe tells where any still contradicts it."""
        missed = self.contradiction(entry, radius) > 0
        slopes, spreads = (np.concatenate(parts) for parts in zip(self.slopes(1.0), self.slopes(-1.0), strict=True))
        doubt = np.fmax.reduce(np.abs(slopes - entry.first) + spreads, axis=0) + entry.first_error
        above, below = slopes[len(PROBES) - 1], slopes[-1]
        nearest = np.where(np.isnan(above), below, above)
        first = np.where(missed & ~self.kinked & np.isfinite(nearest), nearest, entry.first)
        return Entry(
            first=first,
            first_error=np.where(missed, doubt, entry.first_error),
            second=np.where(missed, np.nan, entry.second),
            second_error=np.where(missed, np.nan, entry.second_error),
            below=np.where(missed & ~self.kinked, first, entry.below),
            above=np.where(missed & ~self.kinked, first, entry.above),
            smooth=entry.smooth & ~missed,
            affine=entry.affine & ~missed,
            side=entry.side,
            radius=entry.radius,
        )


def vary(number: Number) -> Steps:
    """The entry of a number; yields points that are wanted and is sent what they gave."""
    probes = _Probes(number)
    run = _varied(number, probes)
    points = next(run)
    near = probes.points(1.0)
    answers = yield np.concatenate([near, points])
    probes.take(1.0, answers.part(0, len(near)))
    entry = yield from _going_on(run, answers.part(len(near), len(near) + len(points)))
    if entry.failure is not None:
        return entry
    if probes.failed:
        yield from probes.complete()
    for radius in number.radius * PROBES:
        missed = probes.contradiction(entry, entry.radius) > 0
        if not np.any(missed & ~probes.kinked):
            break
        again = yield from _varied(number.narrower(float(radius)), probes)
        if again.failure is None:
            entry = _merged(missed, again, entry)
    return probes.in_place_of(entry, entry.radius)


def _going_on(run: Steps, answers: Evaluations) -> Steps:
    """The rest of a run that waits for answers."""
    while True:
        try:
            points = run.send(answers)
        except StopIteration as finished:
            entry: Entry = finished.value
            return entry
        answers = yield points


def _merged(which: BoolArray, yes: Entry, no: Entry) -> Entry:
    """For each result what `yes` tells where `which` is true."""
    parts = {
        name: np.where(which, getattr(yes, name), getattr(no, name))
        for name in ("first", "first_error", "second", "second_error", "below", "above", "smooth", "affine")
    }
    return Entry(**parts, side=yes.side, radius=yes.radius)


def _varied(number: Number, probes: _Probes) -> Steps:
    """The entry of a number by looks alone; probes tell when more of them are of no use."""
    radius, why = number.radius, None
    for _ in range(MOST_TRIES):
        course = yield from _looks(number, 0.0, radius, number.looks, probes)
        if course.best is not None:
            entry = _smooth_entry(course.best, "both", course.radius)
            if np.all(course.best.settled):
                return entry
            yield from probes.complete()
            if np.any((probes.contradiction(entry, course.radius) > 0) & ~probes.kinked):
                return entry
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


def _looks(
    number: Number, place: float, radius: float, most: int, probes: _Probes | None = None
) -> Generator[FloatArray, Evaluations, _Course]:
    """Looks at intervals of growing or falling radius, until all results settle, or one of them fails.

    Where the probes show detail far finer than the interval no radius near it will do.
    """
    course = _Course(radius)
    for _ in range(most):
        course.radius = radius
        look = yield from _look_closely(number, place, radius, course.failed)
        if look is None:
            break
        course.best = better(course.best, look)
        if not np.all(course.best.settled):
            if probes is not None and np.any(probes.scattered & ~course.best.settled):
                break
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
