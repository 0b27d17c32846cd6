"""Film faces of a body whose conductivity varies, or that radiate: iterated until what is left over is known small.

On such a face the inflow is F(theta) = D(ambient) - D(u(theta)) with D what the face gives off, which increases. One
step solves the linear body with a film of coefficient H and the ambient theta' + F(theta') / H, read off where the
last field theta' was known. What is left over,

    r = H (ambient used - theta) - F(theta),

is read off at the knots of the ambient and half-way between them.

**Bound.** Let c be the least slope of -F over theta on the face, which is D' / f. The difference e of the field found
and the true one has div(k grad e) = 0, e = 0 on held faces, no inflow where the inflow is given, and the inflow
r - s e on the film face with s >= c (mean value theorem). Tested with (e - M)+, M = max |r| / c, the weak form is

    integral of k |grad (e - M)+|^2 = integral over the films of (r - s e) (e - M)+ <= 0,

so e <= M everywhere, and e >= -M alike (maximum principle). Held data that are off by d make it max(M, d).

**Between the points** of the curved pieces that hold the ambient, r is what interpolation of a smooth function leaves:
its next derivative times the polynomial that vanishes at the points (on the straight pieces of an endless axis, times a
parabola). It is read off where that polynomial is largest, once between any two points, and twice the largest value
read off bounds it as long as that derivative does not more than double between places where it is read off. Pieces are
halved where much is left over, which grades them toward jumps and edges.

**Convergence.** The error of a step is that of the last one times (H - s) / H or less, by the same maximum principle;
with H half-way between the least and the greatest slope that is below one for every Biot number. Where the potential
hardly varies along the face it is near zero, as in Newton's method. Mixing of the last few steps (Anderson, J. ACM 12,
1965) shortens the rest; it cannot spoil the bound, which holds for whatever was used.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core import field as fields
from service.core.conditions import Condition, Film, Held, Inflow
from service.core.errors import AccuracyNotReached, NotPhysical
from service.core.faces import Face, axes_along
from service.core.field import Grid, KeepGoing, Setting
from service.core.kirchhoff import ZERO, Transformed
from service.core.laws import FilmLaw, Kirchhoff
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.profiles import CHEBYSHEV, chebyshev_places
from service.core.span import span_of
from service.core.split import Part, lines_of, parts_of

FloatArray = NDArray[np.float64]

# Steps at the most, and points along an axis of a face.
MOST_STEPS, MOST_POINTS = 120, 260

# Pieces that a face is cut into along an axis at first, beside the knots of its data.
FIRST_PIECES = 2

# How many times what was read off the leftover may be, see the module.
BETWEEN = 2.0

# Places of a piece from -1 to 1 where the polynomial that vanishes at its points is largest, one between any two.
LARGEST = np.sort(np.polynomial.Polynomial.fromroots(CHEBYSHEV).deriv().roots().real)

# Places beyond an open end, in parts of the length that there are pieces on.
BEYOND = np.array([1.0, 8.0, 64.0])

# Steps that are mixed.
MIXED = 5

# How far a mixed step may lead, in steps that are not mixed.
FARTHEST = 10.0

# A coefficient is kept while the middle of the slopes is within this part of it.
KEPT = 0.1

# A piece is halved where what it leaves, twice, is more than this part of what is allowed; those that leave less than
# the second part of the worst are not halved together with it.
SHARE, WORST = 0.33, 0.01

# A face that radiates alone, far below what it comes to, is taken to give off at least this part of the middle.
LEAST_SLOPE = 1e-6

# Parts of the error wanted that the potentials read off may be off by, and that the rank of an ambient is cut at.
READ_OFF, RANK_CUT = 0.05, 0.02

# In place of a slope of zero, which bounds nothing.
TINY = 1e-300

# Farther off than this no bound is looked for yet; its fourth power is still a number.
FAR = 1e30


@dataclass(frozen=True, eq=False)
class FaceAxis:
    """Pieces along one axis of a film face: curved, or straight where the axis has no end.

    knots: finite, increasing. open_high, open_low: whether the axis has no end there.
    """

    knots: FloatArray
    open_low: bool
    open_high: bool

    @property
    def is_curved(self) -> bool:
        """Whether the pieces are curved."""
        return not (self.open_low or self.open_high)

    @cached_property
    def points(self) -> FloatArray:
        """Where the ambient is given."""
        return chebyshev_places(self.knots) if self.is_curved else self.knots

    @cached_property
    def samples(self) -> FloatArray:
        """The points and a place between any two, and some beyond on an open end."""
        places = np.empty(2 * self.points.size - 1)
        places[::2] = self.points
        if self.is_curved:
            half = 0.5 * np.diff(self.knots)[:, None]
            places[1::2] = (self.knots[:-1, None] + half * (1 + LARGEST)).ravel()
        else:
            places[1::2] = 0.5 * (self.knots[1:] + self.knots[:-1])
        reach = self.knots[-1] - self.knots[0]
        low = self.knots[0] - reach * BEYOND[::-1] if self.open_low else BEYOND[:0]
        high = self.knots[-1] + reach * BEYOND if self.open_high else BEYOND[:0]
        return np.concatenate([low, places, high])

    @property
    def at_points(self) -> slice:
        """Which of the samples are points."""
        return slice(self._first, self._first + 2 * self.points.size - 1, 2)

    @property
    def between_points(self) -> slice:
        """Which of the samples lie between them."""
        return slice(self._first + 1, self._first + 2 * self.points.size - 2, 2)

    @property
    def _first(self) -> int:
        """Which sample is the first point."""
        return BEYOND.size if self.open_low else 0

    def reaching_on(self, low: bool, high: bool) -> FaceAxis:
        """The axis with one more piece on an open end, as long as all that there are."""
        reach = self.knots[-1] - self.knots[0]
        more = [self.knots[0] - reach] * low + [self.knots[-1] + reach] * high
        return FaceAxis(np.sort(np.concatenate([self.knots, more])), self.open_low, self.open_high)

    def halved(self, pieces: NDArray[np.bool_]) -> FaceAxis:
        """The axis with some of its pieces halved."""
        middles = 0.5 * (self.knots[1:] + self.knots[:-1])
        return FaceAxis(np.sort(np.concatenate([self.knots, middles[pieces]])), self.open_low, self.open_high)


@dataclass(eq=False)
class FilmFace:
    """A film face while it is iterated.

    coefficient: H of the linear film. assumed: theta at the points of both axes, from which the ambient is made.
    """

    face: Face
    law: FilmLaw
    axes: tuple[FaceAxis, FaceAxis]
    coefficient: float
    assumed: FloatArray


@dataclass(frozen=True, eq=False)
class FilmBound:
    """What is known of an iterated film face.

    leftover: bound on r over the whole face, a flow per area. slope, slope_most: of -F over theta, least and greatest
    where the face's theta lies. finest: least distance of knots along each axis of the body, infinite along none.
    """

    leftover: float
    slope: float
    slope_most: float
    finest: tuple[float, float, float]


@dataclass(frozen=True, eq=False)
class Iterated:
    """A body in theta, ready to be asked.

    setting: its field. data_parts: its parts without those that the iteration adds. films: what is known of each film
    face. error: bound on how far theta may be off, everywhere. steps: how many were taken.
    """

    setting: Setting
    data_parts: tuple[Part, ...]
    films: Mapping[Face, FilmBound]
    error: float
    steps: int


@dataclass(frozen=True, eq=False)
class _Reading:
    """What one step shows of a film face: theta and r at its samples, and what bounds r."""

    theta: FloatArray
    leftover: FloatArray
    bound: FilmBound

    @property
    def error(self) -> float:
        return self.bound.leftover / self.bound.slope


class _Mixing:
    """Mixes the last steps of a fixed-point iteration so that the change left is least (Anderson 1965)."""

    def __init__(self) -> None:
        self._assumed: list[FloatArray] = []
        self._change: list[FloatArray] = []

    def forget(self) -> None:
        """Begin anew, as after a change of the map that is iterated."""
        self._assumed, self._change = [], []

    def next(self, assumed: FloatArray, found: FloatArray) -> FloatArray:
        """What to assume next, where `assumed` led to `found`."""
        change = found - assumed
        if self._change and np.abs(change).max() > 2 * np.abs(self._change[-1]).max():
            self.forget()
        self._assumed, self._change = [*self._assumed[-MIXED:], assumed], [*self._change[-MIXED:], change]
        if len(self._change) == 1:
            return found
        changes, steps = np.diff(self._change, axis=0).T, np.diff(self._assumed, axis=0).T
        shares = np.linalg.lstsq(changes, change, rcond=1e-10)[0]
        mixed = found - (steps + changes) @ shares
        # Steps that hardly differ are not drawn out to far away.
        return np.asarray(mixed if np.abs(mixed - found).max() <= FARTHEST * np.abs(change).max() else found)


def first_faces(data: Transformed) -> list[FilmFace]:
    """Film faces as they are before the first step: theta is assumed to be that of the ambient."""
    body = data.body
    faces = []
    for face, law in data.laws.items():
        axes = [_first_axis(body, face, index) for index in (0, 1)]
        ambient = data.ambients[face]
        assumed = ambient.at(axes[0].points, axes[1].points)
        film = FilmFace(face, law, (axes[0], axes[1]), 1.0, assumed)
        film.coefficient = max(
            _middle_slope(data.kirchhoff, law, assumed), _loaded_slope(data, law, float(ambient_of(body, face).highest))
        )
        faces.append(film)
    return faces


def ambient_of(body: Body, face: Face) -> FaceMap:
    """The ambient of a film face."""
    film = body.faces[face]
    assert isinstance(film, Film)
    return film.ambient


def _loaded_slope(data: Transformed, law: FilmLaw, ambient: float) -> float:
    """The secant of what a face gives off over theta, from its ambient to where it would give off the whole load.

    A face that radiates into the cold hardly gives off anything there: its slope says nothing of how hot it will be.
    """
    if law.radiation is None:
        return 0.0
    load = _load(data.body)
    absolute = ambient + law.radiation.zero
    level = (load / law.radiation.coefficient + absolute**4) ** 0.25 - law.radiation.zero
    held = [condition.value.highest for condition in data.body.faces.values() if isinstance(condition, Held)]
    places = np.array([ambient, max([level, ambient + abs(absolute) * 1e-3, *held])])
    flows, thetas = law.given_off(places), data.kirchhoff.theta(places)
    return float((flows[1] - flows[0]) / (thetas[1] - thetas[0]))


def _load(body: Body) -> float:
    """The greatest inflow and generation per area of a section, about: what a film face may have to give off."""
    inflows = [condition.inflow.highest for condition in body.faces.values() if isinstance(condition, Inflow)]
    depth = max(length for length in body.size if math.isfinite(length))
    return max([0.0, *inflows]) + depth * sum(max(source.density, 0.0) for source in body.sources)


def iterate(data: Transformed, films: list[FilmFace], wanted: float, keep_going: KeepGoing | None) -> Iterated:
    """Iterate until theta is off by no more than wanted; `films` are changed on the way and serve the next call.

    Raises AccuracyNotReached, in theta, where MOST_STEPS or MOST_KNOTS do not suffice.
    """
    mixing = _Mixing()
    best = math.inf
    for step in range(1, MOST_STEPS + 1):
        if keep_going is not None:
            keep_going()
        setting, data_parts = _setting(data, films, wanted)
        # What is left over is that of the field which the maps lead to; how far those are off is in other bounds.
        read = replace(setting, body=_of_exact_maps(setting.body))
        readings = [_read(data, read, film, wanted, keep_going) for film in films]
        error = max([reading.error for reading in readings], default=0.0)
        best = min(best, error)
        if error <= wanted:
            bounds = {film.face: reading.bound for film, reading in zip(films, readings, strict=True)}
            # Inflows that are off raise the field more than the linear films let them where those are too good.
            ratios = [film.coefficient / bounds[film.face].slope for film in films]
            error += setting.map_error * (max([1.0, *ratios]) - 1.0)
            return Iterated(setting, data_parts, bounds, error, step)
        if all(_is_settled(film, reading, wanted) for film, reading in zip(films, readings, strict=True)):
            cut = [_cut(data, film, reading, wanted) for film, reading in zip(films, readings, strict=True)]
            if not any(cut):
                break
            mixing.forget()
        else:
            _assume_next(data.kirchhoff, films, readings, mixing)
    _check_above_absolute_zero(data, films)
    raise AccuracyNotReached(wanted, best)


def _check_above_absolute_zero(data: Transformed, films: Sequence[FilmFace]) -> None:
    """Raise NotPhysical where a face that radiates has come to absolute zero, below which nothing is given off."""
    for film in films:
        if film.law.radiation is not None:
            lowest = float(data.kirchhoff.potential(film.assumed).min())
            if lowest + film.law.radiation.zero <= 0.0:
                raise below_absolute_zero(film.face, lowest)


def below_absolute_zero(face: Face, lowest: float) -> NotPhysical:
    """What is said of a body with a face that radiates and a potential that is no temperature."""
    return NotPhysical(
        f"The face {face} radiates, and the potential would come down to {lowest:g}, which is not above absolute "
        "zero: there is no such steady state. Take out less than the surroundings can give.",
        ("faces", face),
    )


def _assume_next(kirchhoff: Kirchhoff, films: list[FilmFace], readings: Sequence[_Reading], mixing: _Mixing) -> None:
    found = [
        reading.theta[film.axes[0].at_points, film.axes[1].at_points]
        for film, reading in zip(films, readings, strict=True)
    ]
    changed = False
    for film, theta in zip(films, found, strict=True):
        middle = _middle_slope(kirchhoff, film.law, theta)
        # At absolute zero a face that radiates alone has no slope; a film needs one.
        if middle > 0.0 and abs(middle - film.coefficient) > KEPT * film.coefficient:
            film.coefficient, changed = middle, True
    if changed:
        # Another coefficient is another map.
        mixing.forget()
    assumed = np.concatenate([film.assumed.ravel() for film in films])
    mixed = mixing.next(assumed, np.concatenate([values.ravel() for values in found]))
    if changed:
        mixing.forget()
    start = 0
    for film in films:
        film.assumed = mixed[start : start + film.assumed.size].reshape(film.assumed.shape)
        start += film.assumed.size


def _first_axis(body: Body, face: Face, index: int) -> FaceAxis:
    axis = axes_along(face)[index]
    begin, end = body.begins[axis], body.size[axis]
    ambient = ambient_of(body, face)
    knots = ambient.first_knots if index == 0 else ambient.second_knots
    if ambient.curved[index]:
        # The pieces of a formula are no places where anything happens, but for its kinks.
        knots = np.array(ambient.kinks[index])
    knots = knots[np.isfinite(knots)]
    finite = [place for place in (begin, end) if math.isfinite(place)]
    if len(finite) < 2:
        # Along an endless axis pieces widen from where the data end.
        reach = max(length for length in body.size if math.isfinite(length))
        scale = math.sqrt(body.conductivity[axis] / min(body.conductivity))
        finite = sorted({*finite, *knots}) or [0.0]
        spread = reach * scale * np.array([0.25, 0.5, 1.0, 2.0, 4.0])
        spreads = [np.array(finite)]
        if begin == -math.inf:
            spreads.append(finite[0] - spread)
        if end == math.inf:
            spreads.append(finite[-1] + spread)
        return FaceAxis(np.unique(np.concatenate(spreads)), begin == -math.inf, end == math.inf)
    places = np.concatenate([np.linspace(begin, end, FIRST_PIECES + 1), knots[(knots > begin) & (knots < end)]])
    return FaceAxis(np.unique(places), False, False)


def _middle_slope(kirchhoff: Kirchhoff, law: FilmLaw, theta: FloatArray) -> float:
    """Half-way between the least and greatest slope of what is given off over theta, at some places."""
    potential = kirchhoff.potential(theta)
    slopes = law.slope(potential) / kirchhoff.factor(potential)
    return 0.5 * float(slopes.min() + slopes.max())


def _setting(data: Transformed, films: Sequence[FilmFace], wanted: float) -> tuple[Setting, tuple[Part, ...]]:
    """The linear body of a step, and its parts without those that the iteration adds."""
    coefficients = {film.face: film.coefficient for film in films}
    given = {film.face: data.given[film.face].times(1 / film.coefficient) for film in films}
    iterated = {film.face: _iterated(data, film, wanted) for film in films}
    driven = data.with_films(coefficients, given)
    alone = data.with_films_alone(coefficients, iterated)
    data_parts = parts_of(driven, 0.0)
    parts = data_parts + parts_of(alone, 0.0)
    shown = data.with_films(coefficients, data.ambients)
    # The lines know where all that drives the body changes; the knots of an iterated ambient hold those of its data.
    finest = {face: own if not own.is_uniform else given[face] for face, own in iterated.items()}
    lines = lines_of(data.with_films(coefficients, finest))
    span = span_of(shown, lines, data_parts)
    sizes = [max(abs(face_map.lowest), abs(face_map.highest)) for face_map in (*given.values(), *iterated.values())]
    return Setting(shown, lines, parts, 0.0, max([span, *sizes])), data_parts


def _of_exact_maps(body: Body) -> Body:
    """The body with its maps taken as they are."""
    faces: dict[Face, Condition] = {}
    for face, condition in body.faces.items():
        match condition:
            case Held(value=face_map):
                faces[face] = Held(replace(face_map, error=0.0, slope_error=0.0))
            case Inflow(inflow=face_map):
                faces[face] = Inflow(replace(face_map, error=0.0, slope_error=0.0))
            case _:
                faces[face] = condition
    return replace(body, faces=faces)


def _iterated(data: Transformed, film: FilmFace, wanted: float) -> FaceMap:
    """The part of a film's ambient that follows from its own potential: theta' - D(u(theta')) / H."""
    table = film.assumed - film.law.given_off(data.kirchhoff.potential(film.assumed)) / film.coefficient
    # A change of the ambient by this much leaves over no more than the part of what is allowed.
    small = RANK_CUT * wanted * _least_slope(data, film) / film.coefficient
    if np.ptp(table) <= small:
        middle = 0.5 * float(table.max() + table.min())
        return FaceMap.uniform(middle) if middle != 0.0 else ZERO
    return _map_on(data.body, film, _of_low_rank(table, small))


def _map_on(body: Body, film: FilmFace, table: FloatArray) -> FaceMap:
    """The map with these values at the points of a film face, carried on where an axis has no end."""
    knots = []
    for index, axis in enumerate(film.axes):
        ends = np.array([-math.inf] * axis.open_low), np.array([math.inf] * axis.open_high)
        knots.append(np.concatenate([ends[0], axis.knots, ends[1]]))
        table = np.concatenate([table[:1]] * axis.open_low + [table] + [table[-1:]] * axis.open_high)
        table = table.T if index == 0 else table
    first, second = axes_along(film.face)
    curved = (film.axes[0].is_curved, film.axes[1].is_curved)
    extent, begins = (body.size[first], body.size[second]), (body.begins[first], body.begins[second])
    return FaceMap(knots[0], knots[1], table.T, True, extent, 0.0, begins, curved)


def _least_slope(data: Transformed, film: FilmFace) -> float:
    potential = data.kirchhoff.potential(film.assumed)
    least = float((film.law.slope(potential) / data.kirchhoff.factor(potential)).min())
    return max(least, LEAST_SLOPE * film.coefficient)


def _of_low_rank(table: FloatArray, small: float) -> FloatArray:
    """The table off by no more than `small` in any entry, of as few products as that allows."""
    left, singular, right = np.linalg.svd(table, full_matrices=False)
    # No entry is off by more than the root of the sum of squares of what is left out.
    left_out = np.sqrt(np.cumsum(singular[::-1] ** 2))[::-1]
    rank = max(int(np.count_nonzero(left_out > small)), 1)
    return np.asarray((left[:, :rank] * singular[:rank]) @ right[:rank])


def _read(data: Transformed, setting: Setting, film: FilmFace, wanted: float, keep_going: KeepGoing | None) -> _Reading:
    """theta and the leftover of a film face at its samples, with the bound over the whole face."""
    kirchhoff, law, body = data.kirchhoff, film.law, data.body
    samples = (film.axes[0].samples, film.axes[1].samples)
    axes = [np.array([body.end_of(film.face)])] * 3
    for axis, places in zip(axes_along(film.face), samples, strict=True):
        axes[axis] = places
    tolerance = min(READ_OFF * wanted * min(_least_slope(data, film) / film.coefficient, 1.0), setting.span)
    grid = Grid(axes[0], axes[1], axes[2])
    try:
        found = fields.on_grid(setting, grid, tolerance=tolerance, with_flux=False, keep_going=keep_going)
    except AccuracyNotReached as error:
        # What can be had may do: its bound is counted below.
        found = fields.on_grid(setting, grid, tolerance=error.bound, with_flux=False, keep_going=keep_going)
    theta = found.potential.reshape(samples[0].size, samples[1].size)
    own = _iterated(data, film, wanted).at(*samples)
    leftover = film.coefficient * (own - theta) + law.given_off(kirchhoff.potential(theta))
    least, most = _slopes(kirchhoff, law, theta, found.potential_bound)
    allowance = data.given[film.face].error + found.potential_bound * max(
        abs(film.coefficient - least), abs(most - film.coefficient)
    )
    bound = BETWEEN * float(np.abs(leftover).max()) + allowance
    # The slopes have to hold wherever the true theta may lie.
    for _ in range(4):
        wider = min(2 * bound / least, FAR)
        least, most = _slopes(kirchhoff, law, theta, wider)
        if bound / least <= wider:
            break
    finest = [math.inf] * 3
    for axis, along in zip(axes_along(film.face), film.axes, strict=True):
        finest[axis] = float(np.diff(along.knots).min())
    return _Reading(theta, leftover, FilmBound(bound, least, most, (finest[0], finest[1], finest[2])))


def _slopes(kirchhoff: Kirchhoff, law: FilmLaw, theta: FloatArray, wider: float) -> tuple[float, float]:
    """Bounds of the slope of what is given off over theta, where theta lies within `wider` of these values."""
    low, high = kirchhoff.potential(np.array([theta.min() - wider, theta.max() + wider]))
    least, most = kirchhoff.factor_range(float(low), float(high))
    slopes = law.slope(np.array([low, high]))
    return max(float(slopes[0]) / most, TINY), float(slopes[1]) / least


def _is_settled(film: FilmFace, reading: _Reading, wanted: float) -> bool:
    """Whether what is left over at the points is small against that between them, or against what is wanted."""
    at_points = float(np.abs(reading.leftover[film.axes[0].at_points, film.axes[1].at_points]).max())
    return at_points <= max(0.1 * float(np.abs(reading.leftover).max()), 0.02 * wanted * reading.bound.slope)


def _cut(data: Transformed, film: FilmFace, reading: _Reading, wanted: float) -> bool:
    """Halve the pieces that leave too much over; whether there were any and there was room."""
    allowed = SHARE * wanted * reading.bound.slope / BETWEEN
    axes = []
    for index, axis in enumerate(film.axes):
        # At points of the other axis, so that only what this axis leaves is seen.
        at_points = np.moveaxis(reading.leftover, index, 0)[:, film.axes[1 - index].at_points]
        between = np.abs(at_points[axis.between_points]).max(axis=1).reshape(axis.knots.size - 1, -1).max(axis=1)
        # The worst first: where all is halved at once, little room is left to grade.
        halved = between > max(allowed, WORST * float(between.max()))
        room = (MOST_POINTS - axis.points.size) * (axis.knots.size - 1) // (axis.points.size - 1)
        if halved.sum() > room:
            worst = np.argsort(np.where(halved, -between, math.inf), kind="stable")[: max(room, 0)]
            halved = np.zeros_like(halved)
            halved[worst] = True
        size = np.abs(at_points).max(axis=1)
        low = axis.open_low and bool(size[: BEYOND.size].max() > allowed)
        high = axis.open_high and bool(size[-BEYOND.size :].max() > allowed)
        axes.append(axis.halved(halved).reaching_on(low, high))
    if axes[0].knots.size == film.axes[0].knots.size and axes[1].knots.size == film.axes[1].knots.size:
        return False
    theta = _map_on(data.body, film, reading.theta[film.axes[0].at_points, film.axes[1].at_points])
    film.assumed = theta.at(axes[0].points, axes[1].points)
    film.axes = (axes[0], axes[1])
    return True
