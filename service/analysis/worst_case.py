"""How far results come within the zones of their numbers, of all cases that are computed.

Each number is taken alone to the ends of its zone and half-way there. A polynomial through these values with the slope
and the bend at the nominal tells where that number by itself makes a result lowest and highest, be it at an end or
inside, and such places are put together for all numbers. Where numbers are few all corners are computed; else a design
of corners from a Hadamard matrix and its reflection, whose main effects no pair of numbers disturbs (Box and Hunter,
Technometrics 3, 1961), and the corner that these point to. The worst is that of everything computed in the zones,
samples among it. Between cases nothing is proved.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from itertools import product

import numpy as np
from scipy.linalg import hadamard

from service.analysis.derivatives import Derivatives
from service.analysis.evaluations import Evaluate, Evaluations, Failure, FloatArray
from service.analysis.interpolants import BoolArray

# All corners of so many numbers are computed.
FEW = 5

# Where each number is looked at alone, in parts of the way to the ends of its zone.
PARTS = np.array([-1.0, -0.5, 0.5, 1.0])

# Steps in which the polynomial of one number is searched, from the nominal to an end.
STEPS = 64

SIDES = (-1.0, 1.0)


@dataclass(frozen=True)
class Zone:
    """Numbers from nominal - minus to nominal + plus, arrays of shape (n_numbers,)."""

    nominal: FloatArray
    plus: FloatArray
    minus: FloatArray

    @property
    def low(self) -> FloatArray:
        """The lower ends."""
        return self.nominal - self.minus

    @property
    def high(self) -> FloatArray:
        """The upper ends."""
        return self.nominal + self.plus

    def offsets(self, parts: FloatArray) -> FloatArray:
        """How far from the nominal numbers are these parts of the way to the lower (< 0) or the upper ends."""
        return parts * np.where(parts < 0, self.minus, self.plus)

    def places(self, part: float) -> FloatArray:
        """All numbers a part of the way to their lower (< 0) or upper ends."""
        return self.nominal + self.offsets(np.full(len(self.nominal), part))


@dataclass(frozen=True)
class Extreme:
    """The lowest or the highest of every result among computed cases.

    values: shape (n_results,), NaN where no case has the result. bounds: how far that of these same cases may be off.
    numbers: of the case it is from, shape (n_results, n_numbers).
    """

    values: FloatArray
    bounds: FloatArray
    numbers: FloatArray


class Watched:
    """An `Evaluate` that keeps the extremes of every result among the cases in a zone.

    n_cases: how many were computed, inside or outside. failures: how many cases in the zone have no results, by the
    code of the failure, with the first of each.
    """

    def __init__(self, evaluate: Evaluate, zone: Zone) -> None:
        self._evaluate = evaluate
        self._zone = zone
        self._tops: dict[float, _Top] = {}
        self.n_cases = 0
        self.failures: dict[str, tuple[int, Failure]] = {}

    def __call__(self, cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        """What the evaluator gives."""
        answers = self._evaluate(cases, accuracy=accuracy)
        self.n_cases += len(cases)
        inside = np.all((cases >= self._zone.low) & (cases <= self._zone.high), axis=1)
        for row in sorted(answers.failures):
            if inside[row]:
                count, first = self.failures.get(answers.failures[row].code, (0, answers.failures[row]))
                self.failures[first.code] = count + 1, first
        for side in SIDES:
            top = self._tops.setdefault(side, _Top.none(answers.values.shape[1], len(self._zone.nominal)))
            if np.any(inside):
                top.take(cases[inside], side * answers.values[inside], answers.bounds[inside])
        return answers

    @property
    def lowest(self) -> Extreme:
        """The lowest in the zone so far."""
        return self._tops[-1.0].extreme(-1.0)

    @property
    def highest(self) -> Extreme:
        """The highest in the zone so far."""
        return self._tops[1.0].extreme(1.0)


@dataclass
class _Top:
    """The highest so far of results, or of their negatives. reach: the highest that any of the cases may truly be."""

    values: FloatArray
    bounds: FloatArray
    reach: FloatArray
    numbers: FloatArray

    @classmethod
    def none(cls, n_results: int, n_numbers: int) -> _Top:
        least = np.full(n_results, -np.inf)
        return cls(least, np.full(n_results, np.nan), least.copy(), np.full((n_results, n_numbers), np.nan))

    def take(self, cases: FloatArray, values: FloatArray, bounds: FloatArray) -> None:
        known = np.where(np.isnan(values), -np.inf, values)
        results = np.arange(known.shape[1])
        rows = np.argmax(known, axis=0)
        better = known[rows, results] > self.values
        self.values = np.where(better, known[rows, results], self.values)
        self.bounds = np.where(better, bounds[rows, results], self.bounds)
        self.numbers = np.where(better[:, None], cases[rows], self.numbers)
        reaches = np.where(np.isfinite(known), known + bounds, known)
        self.reach = np.maximum(self.reach, reaches.max(axis=0))

    def extreme(self, side: float) -> Extreme:
        found = np.isfinite(self.bounds) & np.isfinite(self.values)
        beyond = np.subtract(self.reach, self.values, out=np.zeros_like(self.values), where=found)
        return Extreme(
            np.where(np.isnan(self.bounds), np.nan, side * self.values),
            np.where(found, np.maximum(self.bounds, beyond), self.bounds),
            self.numbers,
        )


@dataclass(frozen=True)
class Alone:
    """Results with one number at a time away from its nominal.

    values, bounds: at `PARTS` of the way to the ends of its zone, shape (4, n_results, n_numbers). changes: from the
    nominal results. failures: why there are none, by the place in `PARTS` and the number. bend: by how much results
    depart from their slope on the way, more than the values are off, shape (n_results, n_numbers); NaN where no slope
    is known.
    """

    values: FloatArray
    bounds: FloatArray
    changes: FloatArray
    failures: Mapping[tuple[int, int], Failure]
    bend: FloatArray

    @property
    def low_end(self) -> FloatArray:
        """Results with each number at its lower end."""
        return self.values[0]

    @property
    def high_end(self) -> FloatArray:
        """Results with each number at its upper end."""
        return self.values[-1]


def most_cases_of_worst(n_results: int, n_numbers: int) -> int:
    """The most cases that `look` takes."""
    alone = len(PARTS) * n_numbers
    if n_numbers <= FEW:
        return int(alone + 2**n_numbers + 4 * n_results)
    return int(alone + 2 * _order(n_numbers) + 8 * n_results)


def look(evaluate: Watched, zone: Zone, slopes: Derivatives) -> Alone:
    """Compute the cases in which results are likely to be worst, in three waves.

    slopes: of the nominal numbers of the zone.
    """
    once = _Once(evaluate, zone.nominal, slopes)
    alone = _alone(once, zone, slopes)
    places = {side: _best_alone(alone, zone, slopes, side) for side in SIDES}
    is_few = len(zone.nominal) <= FEW
    signs = _all_signs(len(zone.nominal)) if is_few else _design(len(zone.nominal))
    wave = [zone.offsets(signs), *places.values()]
    if not is_few:
        wave += [_by_slope(zone, slopes, side) for side in SIDES]
    found = once(np.concatenate(wave))
    at_corners = Evaluations(found.values[: len(signs)], found.bounds[: len(signs)])
    last = []
    for side, place in places.items():
        corner = _best_corner(at_corners, signs, zone, side) if is_few else None
        if corner is None:
            corner = _by_effects(at_corners, signs, zone, place, side)
            last.append(corner)
        inside = (place > -zone.minus) & (place < zone.plus)
        last.append(np.where(inside, place, corner))
    once(np.concatenate(last))
    return alone


@dataclass
class _Once:
    """Computes cases at offsets from the nominal numbers, none of them twice."""

    evaluate: Watched
    nominal: FloatArray
    slopes: Derivatives
    _known: dict[tuple[float, ...], tuple[FloatArray, FloatArray, Failure | None]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self._known[tuple(self.nominal.tolist())] = self.slopes.values, self.slopes.bounds, None

    def __call__(self, offsets: FloatArray) -> Evaluations:
        keys = [tuple(case) for case in (self.nominal + offsets).tolist()]
        new = [key for key in dict.fromkeys(keys) if key not in self._known]
        if new:
            answers = self.evaluate(np.array(new))
            for row, key in enumerate(new):
                self._known[key] = answers.values[row], answers.bounds[row], answers.failures.get(row)
        values, bounds, failures = zip(*(self._known[key] for key in keys), strict=True)
        return Evaluations(
            np.array(values), np.array(bounds), {row: why for row, why in enumerate(failures) if why is not None}
        )


def _alone(once: _Once, zone: Zone, slopes: Derivatives) -> Alone:
    n_numbers = len(zone.nominal)
    steps = zone.offsets(PARTS[:, None] * np.ones(n_numbers))
    found = once(np.concatenate([np.diag(row) for row in steps]))
    shape = len(PARTS), n_numbers, -1
    values, bounds = (np.swapaxes(part.reshape(shape), 1, 2) for part in (found.values, found.bounds))
    slope = np.where(PARTS[:, None, None] < 0, slopes.below, slopes.above)
    with np.errstate(invalid="ignore"):
        changes = values - slopes.values[:, None]
    changes[~np.isfinite(changes)] = np.nan
    departure = np.abs(changes - slope * steps[:, None, :])
    departure -= bounds + slopes.bounds[:, None]
    # An end without a result or without a bound tells no bend; what is left of the others does.
    departure = np.where(np.isfinite(departure), departure, 0.0)
    bend = np.where(np.isnan(slopes.first), np.nan, np.maximum(departure.max(axis=0), 0.0))
    failures = {(row // n_numbers, row % n_numbers): why for row, why in found.failures.items()}
    return Alone(values, bounds, changes, failures, bend)


def _best_alone(alone: Alone, zone: Zone, slopes: Derivatives, side: float) -> FloatArray:
    """Where each number by itself makes each result lowest (side -1) or highest: offsets (n_results, n_numbers)."""
    way = np.arange(1, STEPS + 1) / STEPS
    gains_of_ways, parts = [], []
    for half, end, slope, reach in (
        (1, 0, -slopes.below, zone.minus),
        (2, 3, slopes.above, zone.plus),
    ):
        curve = _curve(
            slope * reach,
            slopes.second * reach**2 / 2,
            alone.changes[half],
            alone.changes[end],
            way,
        )
        # Where the end has no result, what is half-way to it.
        middle = curve[..., STEPS // 2 - 1]
        middle[...] = np.where(np.isnan(middle), alone.changes[half], middle)
        gains_of_ways.append(side * np.where(np.isnan(curve), -np.inf, curve))
        parts.append(np.copysign(way, PARTS[end]))
    gains, places = np.concatenate(gains_of_ways, axis=-1), np.concatenate(parts)
    doubt = _finite(slopes.bounds[:, None] + np.fmax.reduce(alone.bounds, axis=0))
    ends = np.flatnonzero(np.abs(places) == 1)
    at_end = np.argmax(gains[..., ends], axis=-1)
    end_gain = np.take_along_axis(gains[..., ends], at_end[..., None], axis=-1)[..., 0]
    inner = np.argmax(gains, axis=-1)
    gain = np.take_along_axis(gains, inner[..., None], axis=-1)[..., 0]
    # A crest that is not clear of the ends is none.
    is_inner = gain > np.where(np.isfinite(end_gain), end_gain + doubt, -np.inf)
    chosen = zone.offsets(np.where(is_inner, places[inner], places[ends][at_end]))
    return np.where(gain > doubt, chosen, _by_slope(zone, slopes, side))


def _curve(slope: FloatArray, bend: FloatArray, half: FloatArray, end: FloatArray, way: FloatArray) -> FloatArray:
    """Changes along the way from the nominal to an end, shape (n_results, n_numbers, len(way)).

    a t + b t^2 + c t^3 + d t^4 through the changes half-way and at the end, with a = slope, b = bend as far as these
    are known.
    """
    # Without the slope a parabola, without the bend a cubic.
    a = np.where(np.isnan(slope), 4 * half - end, slope)
    half, end = half - a / 2, end - a
    b = np.where(np.isnan(slope), end, np.where(np.isnan(bend), 8 * half - end, bend))
    half, end = half - b / 4, end - b
    d = np.where(np.isnan(slope) | np.isnan(bend), 0.0, 2 * end - 16 * half)
    c = end - d
    a, b, c, d = (part[..., None] for part in (a, b, c, d))
    curve: FloatArray = way * (a + way * (b + way * (c + way * d)))
    return curve


def _by_slope(zone: Zone, slopes: Derivatives, side: float) -> FloatArray:
    """The corner that is worst to first order, for each result: offsets (n_results, n_numbers).

    A number whose slope is not known, or not known from zero, stays at its nominal, so that results share corners.
    """
    known = np.isfinite(slopes.first_error) & slopes.smooth
    is_clear = np.isfinite(slopes.first) & ~(known & (np.abs(slopes.first) <= slopes.first_error))
    rises = np.where(is_clear, side * slopes.above * zone.plus, 0.0)
    falls = np.where(is_clear, -side * slopes.below * zone.minus, 0.0)
    return np.where(np.maximum(rises, falls) <= 0, 0.0, np.where(rises >= falls, zone.plus, -zone.minus))


def _all_signs(n_numbers: int) -> FloatArray:
    return np.array(list(product(SIDES, repeat=n_numbers)))


def _order(n_numbers: int) -> int:
    """Order of the Hadamard matrix that has a column for each number beside the first, which is constant."""
    return 1 << n_numbers.bit_length()


def _design(n_numbers: int) -> FloatArray:
    columns = hadamard(_order(n_numbers), dtype=float)[:, 1 : n_numbers + 1]
    return np.concatenate([columns, -columns])


def _best_corner(found: Evaluations, signs: FloatArray, zone: Zone, side: float) -> FloatArray:
    """Offsets of the worst of all corners, for each result."""
    gains = np.where(np.isnan(found.values), -np.inf, side * found.values)
    return zone.offsets(signs[np.argmax(gains, axis=0)])


def _by_effects(found: Evaluations, signs: FloatArray, zone: Zone, place: FloatArray, side: float) -> FloatArray:
    """Offsets of the corner that main effects point to, for each result; a number without any stays at `place`."""
    known = np.isfinite(found.values)
    values = np.where(known, found.values, 0.0)
    means = []
    for sign in SIDES:
        rows = (signs == sign).astype(float).T
        counts = rows @ known
        means.append(np.divide(rows @ values, counts, out=np.zeros_like(counts), where=counts > 0))
    effect = side * (means[1] - means[0]).T
    doubt = 2 * _finite(found.bounds).max(axis=0, initial=0.0)[:, None]
    return np.where(np.abs(effect) > doubt, zone.offsets(np.sign(effect)), place)


def _finite(bounds: FloatArray) -> FloatArray:
    finite: BoolArray = np.isfinite(bounds)
    return np.where(finite, bounds, 0.0)
