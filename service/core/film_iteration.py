"""Film faces of a body whose conductivity varies, or that radiate: iterated until what is left over is known small.

On such a face the inflow is F(theta) = D(ambient) - D(u(theta)) with D what the face gives off, which increases. One
step solves the linear body with a film of coefficient H and the ambient theta' + F(theta') / H, read off where the
last field theta' was known. What is left over,

    r = H (ambient used - theta) - F(theta),

is read off at places of the face, see `film_reading`.

**Bound.** Let c be the least slope of -F over theta on the face, which is D' / f. The difference e of the field found
and the true one has div(k grad e) = 0, e = 0 on held faces, no inflow where the inflow is given, and the inflow
r - s e on the film face with s >= c (mean value theorem). Tested with (e - M)+, M = max |r| / c, the weak form is

    integral of k |grad (e - M)+|^2 = integral over the films of (r - s e) (e - M)+ <= 0,

so e <= M everywhere, and e >= -M alike (maximum principle). Held data that are off by d make it max(M, d).

**Convergence.** The error of a step is that of the last one times (H - s) / H or less, by the same maximum principle;
with H half-way between the least and the greatest slope that is below one for every Biot number. Where the potential
hardly varies along the face it is near zero, as in Newton's method. Mixing of the last few steps (Anderson, J. ACM 12,
1965) shortens the rest; it cannot spoil the bound, which holds for whatever was used.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from service.core.anderson import Mixing
from service.core.conditions import Condition, Held, Inflow
from service.core.errors import AccuracyNotReached, NotPhysical
from service.core.faces import Face
from service.core.field import KeepGoing, Setting
from service.core.film_ambient import iterated_ambient, map_on
from service.core.film_faces import BEYOND, FilmFace, middle_slope
from service.core.film_reading import BETWEEN, FilmBound, Reading, is_settled, read_face
from service.core.kirchhoff import Transformed
from service.core.laws import Kirchhoff
from service.core.problem import Body
from service.core.span import span_of
from service.core.split import Part, lines_of, parts_of

# Steps at the most, and points along an axis of a face.
MOST_STEPS, MOST_POINTS = 120, 260

# A coefficient is kept while the middle of the slopes is within this part of it.
KEPT = 0.1

# A piece is halved where what it leaves, twice, is more than this part of what is allowed; those that leave less than
# the second part of the worst are not halved together with it.
SHARE, WORST = 0.33, 0.01


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


def iterate(data: Transformed, films: list[FilmFace], wanted: float, keep_going: KeepGoing | None) -> Iterated:
    """Iterate until theta is off by no more than wanted; `films` are changed on the way and serve the next call.

    Raises AccuracyNotReached, in theta, where MOST_STEPS or MOST_POINTS do not suffice.
    """
    mixing = Mixing()
    best = math.inf
    for step in range(1, MOST_STEPS + 1):
        if keep_going is not None:
            keep_going()
        setting, data_parts = _setting(data, films, wanted)
        # What is left over is that of the field which the maps lead to; how far those are off is in other bounds.
        read = replace(setting, body=_of_exact_maps(setting.body))
        readings = [read_face(data, read, film, wanted, keep_going) for film in films]
        error = max([reading.error for reading in readings], default=0.0)
        best = min(best, error)
        if error <= wanted:
            bounds = {film.face: reading.bound for film, reading in zip(films, readings, strict=True)}
            # Inflows that are off raise the field more than the linear films let them where those are too good.
            ratios = [film.coefficient / bounds[film.face].slope for film in films]
            error += setting.map_error * (max([1.0, *ratios]) - 1.0)
            return Iterated(setting, data_parts, bounds, error, step)
        if all(is_settled(film, reading, wanted) for film, reading in zip(films, readings, strict=True)):
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


def _assume_next(kirchhoff: Kirchhoff, films: list[FilmFace], readings: Sequence[Reading], mixing: Mixing) -> None:
    found = [
        reading.theta[film.axes[0].at_points, film.axes[1].at_points]
        for film, reading in zip(films, readings, strict=True)
    ]
    changed = False
    for film, theta in zip(films, found, strict=True):
        middle = middle_slope(kirchhoff, film.law, theta)
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


def _setting(data: Transformed, films: Sequence[FilmFace], wanted: float) -> tuple[Setting, tuple[Part, ...]]:
    """The linear body of a step, and its parts without those that the iteration adds."""
    coefficients = {film.face: film.coefficient for film in films}
    given = {film.face: data.given[film.face].times(1 / film.coefficient) for film in films}
    iterated = {film.face: iterated_ambient(data, film, wanted) for film in films}
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


def _cut(data: Transformed, film: FilmFace, reading: Reading, wanted: float) -> bool:
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
    theta = map_on(data.body, film, reading.theta[film.axes[0].at_points, film.axes[1].at_points])
    film.assumed = theta.at(axes[0].points, axes[1].points)
    film.axes = (axes[0], axes[1])
    return True
