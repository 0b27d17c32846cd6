"""How far flux and totals may be off where theta is off because film faces were iterated.

Lengths are scaled by 1 / sqrt(conductivity) along each axis, where the error e of theta is harmonic, |e| <= E, zero on
held faces and without inflow on others but the films, whose inflow is off by G = leftover + greatest slope * E at the
most. Reflection continues e across the other faces.

**Flux.** In a ball of radius d without a film face |grad e| <= 3 E / d (gradient estimate of harmonic functions,
Gilbarg and Trudinger, section 2.7). Near films: in the ball of radius R, half the least extent, e is the sum of a layer
of inflow on each film plane in it and a rest without inflow there. A layer's slope is at most G square to the plane
and G ln(2 R / max(d, l)) + G along it, where l is a length over which its inflow changes by no more than G: in a piece
the leftover is nearly a polynomial, whose slopes Markov's inequality bounds, and what is in proportion to e changes
over the length that the film itself sets. The rest adds 3 (E + n G R) / R for n films.

**Totals.** Let w solve the same equation with w = 1 on the rectangle of a held face, 0 on the other held faces and no
inflow elsewhere. By Green's identity the inflow of the rectangle is off by the integral of w times what the films'
inflow is off by, and 0 <= w <= 1.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Held
from service.core.faces import Face, axes_along, axis_of
from service.core.field import far_along
from service.core.film_iteration import Iterated
from service.core.kirchhoff import Transformed
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.profiles import DEGREE

FloatArray = NDArray[np.float64]


# A leftover of one degree more than the pieces, bounded by 1 from -1 to 1, has slopes of at most this (Markov 1889).
CURVED_MARKOV = float((DEGREE + 1) ** 2)


@dataclass(frozen=True)
class _FilmError:
    """A film face: where it is, G in scaled lengths, and the length l. flow: G in flow per area."""

    face: Face
    inflow: float
    smooth_over: float
    flow: float


class FlowError:
    """Bounds on what the error of theta does to flux and totals; all zero where theta is exact."""

    def __init__(self, data: Transformed, iterated: Iterated) -> None:
        self._body: Body = data.body
        self._data = data
        self._setting = iterated.setting
        self._error = iterated.error
        self._roots = [math.sqrt(k) for k in data.body.conductivity]
        self._films = [self._film(face, iterated) for face in iterated.films]
        extents = [length / root for length, root in zip(data.body.size, self._roots, strict=True)]
        self._radius = 0.5 * min(extent for extent in extents if math.isfinite(extent))

    def _film(self, face: Face, iterated: Iterated) -> _FilmError:
        bound = iterated.films[face]
        flow = bound.leftover + bound.slope_most * iterated.error
        root = self._roots[axis_of(face)]
        cell = min(bound.finest[axis] / self._roots[axis] for axis in axes_along(face))
        return _FilmError(face, flow / root, min(cell / (2 * CURVED_MARKOV), root / bound.slope_most), flow)

    def flux(self, places: Sequence[FloatArray], shape: tuple[int, ...]) -> FloatArray:
        """Bound on each component at places: three arrays that broadcast to the shape."""
        if self._error == 0.0:
            return np.zeros(shape)
        distances = {face: self._distance(face, places[axis_of(face)]) for face in self._body.present_faces}
        return max(self._roots) * self._by_films(distances, shape)

    def face_total(self, face: Face, rectangle: Rectangle) -> float:
        """Bound on the flow through a rectangle of a face."""
        condition = self._body.faces[face]
        for film in self._films:
            if film.face == face:
                return self._area(axis_of(face), rectangle) * film.flow
        if not isinstance(condition, Held):
            return 0.0
        return sum(self._area(axis_of(film.face), None) * film.flow for film in self._films)

    def plane_total(self, axis: int, position: float, rectangle: Rectangle) -> float:
        """Bound on the flow through a rectangle of a plane square to an axis."""
        if self._error == 0.0:
            return 0.0
        first, second = axes_along(axis)
        reach = {axis: (position, position), first: (rectangle.p_low, rectangle.p_high)}
        reach[second] = (rectangle.q_low, rectangle.q_high)
        distances = {}
        for face in self._body.present_faces:
            low, high = reach[axis_of(face)]
            end = self._body.end_of(face)
            distances[face] = np.array(max(low - end, end - high, 0.0) / self._roots[axis_of(face)])
        slope = float(self._by_films(distances, ()))
        return self._area(axis, rectangle) * self._roots[axis] * slope

    def _distance(self, face: Face, places: FloatArray) -> FloatArray:
        return np.abs(places - self._body.end_of(face)) / self._roots[axis_of(face)]

    def _by_films(self, distances: dict[Face, FloatArray], shape: tuple[int, ...]) -> FloatArray:
        near = np.full(shape, 3 * self._error / self._radius)
        nearest = np.full(shape, math.inf)
        for film in self._films:
            distance = distances[film.face]
            nearest = np.minimum(nearest, distance)
            across = np.maximum(distance, film.smooth_over)
            layer = 5 + np.log(np.maximum(2 * self._radius / across, 1.0))
            near = near + np.where(distance < self._radius, film.inflow * layer, 0.0)
        with np.errstate(divide="ignore"):
            return np.minimum(near, 3 * self._error / nearest) if self._films else np.zeros(shape)

    def _area(self, axis: int, rectangle: Rectangle | None) -> float:
        """Area of a section or a rectangle of it, along an endless axis up to where nothing of the data shows."""
        along = axes_along(axis)
        ends = [(self._body.begins[other], self._body.size[other]) for other in along]
        if rectangle is not None:
            ends = [(rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)]
        area = 1.0
        for other, (low, high) in zip(along, ends, strict=True):
            if math.isinf(low):
                low = far_along(self._setting, other, high=False)
            if math.isinf(high):
                high = far_along(self._setting, other)
            area *= high - low
        return area
