"""Film faces of a body in theta: the pieces they are cut into, and the film that each begins its iteration with."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Film, Held, Inflow
from service.core.faces import Face, axes_along
from service.core.kirchhoff import Transformed
from service.core.laws import FilmLaw, Kirchhoff
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.profiles import CHEBYSHEV, chebyshev_places

FloatArray = NDArray[np.float64]

# Pieces that a face is cut into along an axis at first, beside the knots of its data.
FIRST_PIECES = 2

# Places of a piece from -1 to 1 where the polynomial that vanishes at its points is largest, one between any two.
LARGEST = np.sort(np.polynomial.Polynomial.fromroots(CHEBYSHEV).deriv().roots().real)

# Places beyond an open end, in parts of the length that there are pieces on.
BEYOND = np.array([1.0, 8.0, 64.0])

# A face that radiates alone, far below what it comes to, is taken to give off at least this part of the middle.
LEAST_SLOPE = 1e-6


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
            middle_slope(data.kirchhoff, law, assumed), _loaded_slope(data, law, float(ambient_of(body, face).highest))
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


def middle_slope(kirchhoff: Kirchhoff, law: FilmLaw, theta: FloatArray) -> float:
    """Half-way between the least and greatest slope of what is given off over theta, at some places."""
    potential = kirchhoff.potential(theta)
    slopes = law.slope(potential) / kirchhoff.factor(potential)
    return 0.5 * float(slopes.min() + slopes.max())


def least_slope(data: Transformed, film: FilmFace) -> float:
    """The least slope of what a face gives off over theta where theta is assumed to be, above zero."""
    potential = data.kirchhoff.potential(film.assumed)
    least = float((film.law.slope(potential) / data.kirchhoff.factor(potential)).min())
    return max(least, LEAST_SLOPE * film.coefficient)
