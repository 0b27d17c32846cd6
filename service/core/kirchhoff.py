"""A body whose conductivity varies with the potential, as a body of constant conductivity in theta.

Held potentials become held thetas, given inflows and sources stay what they are. Uniform data and patches transform
exactly, and so do readings where the law is one straight line over each of their cells: what is bilinear in the
potential is quadratic in theta along both axes, which curved pieces hold. Otherwise pieces are halved, and the error
that is left, read off between their points, goes with the map into every bound.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Film, Held, Insulated, map_of
from service.core.faces import Face, axes_along
from service.core.field import KeepGoing
from service.core.laws import ConductivityLaw, FilmLaw, Kirchhoff
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.profiles import DEGREE, chebyshev_places
from service.core.split import reference_level

FloatArray = NDArray[np.float64]

# Error of a curved map that is aimed at, in parts of the range of its data, and below which it is rounding.
GOAL, ROUNDING = 1e-12, 4e-15

# Pieces along an axis at the most, and into how many those of an endless axis, which stay straight, are cut.
MOST_PIECES, STRAIGHT_PIECES = 48, 40

# Places between neighbouring points of a piece at which the error is read off, and how many times that it may be.
READ_OFF, BETWEEN = 4, 2.0

# Differences that are looked at in one run.
IN_RUN = 1_000_000

# Degree of what a face gives off by radiation.
RADIATED = 4

# A polynomial of the degree of a piece that is bounded by 1 from -1 to 1 has slopes of at most this (Markov 1889).
MARKOV = float(DEGREE**2)

ZERO = FaceMap.uniform(0.0)


@dataclass(frozen=True, eq=False)
class Transformed:
    """The data of a body in theta.

    body: as given. kirchhoff: its transformation, with theta = 0 at the reference level. held: maps of the held faces.
    ambients: theta of the ambient of each film face, which says where the flux is finite and what may be hottest, and
    drives nothing. given: of each film face what it would give off at its ambient, a flow per area, which drives it.
    """

    body: Body
    kirchhoff: Kirchhoff
    laws: Mapping[Face, FilmLaw]
    held: Mapping[Face, FaceMap]
    ambients: Mapping[Face, FaceMap]
    given: Mapping[Face, FaceMap]

    def with_films(self, coefficients: Mapping[Face, float], ambients: Mapping[Face, FaceMap]) -> Body:
        """The body in theta, its film faces with these coefficients and ambients."""
        faces = dict(self.body.faces)
        for face, face_map in self.held.items():
            faces[face] = Held(face_map)
        for face, coefficient in coefficients.items():
            faces[face] = Film(coefficient, ambients[face])
        return replace(self.body, faces=faces, law=None)

    def with_films_alone(self, coefficients: Mapping[Face, float], ambients: Mapping[Face, FaceMap]) -> Body:
        """The same body driven by the ambients of its films only."""
        faces = dict(self.body.faces)
        for face, condition in self.body.faces.items():
            faces[face] = Held(ZERO) if isinstance(condition, Held) else Insulated()
        for face, coefficient in coefficients.items():
            faces[face] = Film(coefficient, ambients[face])
        return replace(self.body, faces=faces, sources=(), law=None)


def kirchhoff_of(body: Body) -> Kirchhoff:
    """The transformation of a body's law, from its reference level."""
    return Kirchhoff(body.law or ConductivityLaw.constant(), reference_level(body))


def transform(body: Body, keep_going: KeepGoing | None = None) -> Transformed:
    """The data of a body in theta. keep_going: asked between runs of large maps."""
    kirchhoff = kirchhoff_of(body)
    reference = kirchhoff.reference
    held, ambients, given, laws = {}, {}, {}, {}
    for face in body.present_faces:
        condition = body.faces[face]
        face_map = map_of(condition)
        if face_map is None or not isinstance(condition, Held | Film):
            continue
        low, high = face_map.lowest, face_map.highest
        most, bend = kirchhoff.factor_range(low, high)[1], kirchhoff.bend
        lengths = tuple(body.size[axis] for axis in axes_along(face))
        degree = kirchhoff.degree(low, high)
        in_theta = _through(face_map, _Function(kirchhoff.theta, most, bend, degree), lengths, keep_going)
        if isinstance(condition, Held):
            held[face] = in_theta
            continue
        laws[face] = FilmLaw(condition.coefficient, condition.radiation, reference)
        # The film is driven by what it gives off; its ambient in theta is shown to no one who asks for its error.
        ambients[face] = replace(in_theta, error=0.0, slope_error=0.0)
        steepest = float(laws[face].slope(np.array([high]))[0])
        gives = _Function(laws[face].given_off, steepest, laws[face].bend(high), RADIATED)
        given[face] = _through(face_map, gives, lengths, keep_going)
    return Transformed(body, kirchhoff, laws, held, ambients, given)


@dataclass(frozen=True)
class _Function:
    """A function of the data of a face.

    steepest, bend: greatest slope and second derivative over those data. degree: of the polynomial that it is there,
    None where it is none.
    """

    of: Callable[[FloatArray], FloatArray]
    steepest: float
    bend: float
    degree: int | None


def exact_degree(face_map: FaceMap, degree: int | None, lengths: tuple[float, ...]) -> int | None:
    """Degree of the curved pieces that a polynomial of a face's data is exactly; None where there are none."""
    straight = face_map.bilinear and not any(face_map.curved) and all(math.isfinite(length) for length in lengths)
    return degree if straight else None


def _through(
    face_map: FaceMap, through: _Function, lengths: tuple[float, ...], keep_going: KeepGoing | None
) -> FaceMap:
    """The map of a function of its data."""
    function, steepest, bend = through.of, through.steepest, through.bend
    usual = float(function(np.array([face_map.usual]))[0])
    peaks = face_map.peaks
    if peaks is not None:
        lowest, highest = (
            replace(peak, value=float(function(np.array([peak.value]))[0]), slack=steepest * peak.slack)
            for peak in peaks
        )
        peaks = lowest, highest
    slope = _steepest_slope(face_map)
    off, slope_off = steepest * face_map.error, steepest * face_map.slope_error + bend * face_map.error * slope
    if bend == 0.0 or not face_map.bilinear or face_map.is_uniform:
        table = function(face_map.table)
        return replace(face_map, table=table, usual=usual, peaks=peaks, error=off, slope_error=slope_off)
    read_off = _ReadOff(face_map, through, lengths, keep_going)
    found, error = read_off.map()
    finest = min(float(np.diff(knots).min()) for knots in (found.first_knots, found.second_knots))
    return replace(
        found,
        usual=usual,
        peaks=peaks,
        error=off + error,
        slope_error=slope_off + 2 * MARKOV * error / finest,
    )


def _steepest_slope(face_map: FaceMap) -> float:
    """The steepest slope of data given at places, about; 0 for patches."""
    if not face_map.bilinear:
        return 0.0
    slopes = [
        np.abs(np.diff(face_map.table, axis=index)).max(initial=0.0) / float(np.diff(places).min())
        for index, places in enumerate((face_map.first_places, face_map.second_places))
    ]
    return float(max(slopes))


class _ReadOff:
    """Reads a function of a map off at the points of curved pieces, which are halved until that is exact enough."""

    def __init__(
        self, face_map: FaceMap, through: _Function, lengths: tuple[float, ...], keep_going: KeepGoing | None
    ) -> None:
        self._source = face_map
        self._function = through.of
        self._keep_going = keep_going
        self._degree = exact_degree(face_map, through.degree, lengths)
        self._curved = (math.isfinite(lengths[0]), math.isfinite(lengths[1]))
        values = self._function(face_map.table)
        self._goal = GOAL * float(np.ptp(values))
        self._rounding = ROUNDING * float(np.abs(values).max())

    def map(self) -> tuple[FaceMap, float]:
        """The map, and its error between the points."""
        knots = [
            own if curved else _cut_evenly(own)
            for own, curved in zip((self._source.first_knots, self._source.second_knots), self._curved, strict=True)
        ]
        found = self._on(knots)
        if self._degree is not None:
            # Nothing but rounding is left, for which a place in each piece will do.
            middles = (0.5 * (knots[0][1:] + knots[0][:-1]), 0.5 * (knots[1][1:] + knots[1][:-1]))
            return found, self._error(found, middles)
        while True:
            finer = [self._finer(found, index) for index in (0, 1)]
            if all(new.size == old.size for new, old in zip(finer, knots, strict=True)):
                break
            knots = finer
            found = self._on(knots)
        return found, self._error(found, (self._samples(found, 0), self._samples(found, 1)))

    def _error(self, found: FaceMap, at: tuple[FloatArray, FloatArray]) -> float:
        error = float(self._departures(found, at, 0).max())
        return BETWEEN * error if error > self._rounding else 0.0

    def _on(self, knots: list[FloatArray]) -> FaceMap:
        places = [chebyshev_places(own) if curved else own for own, curved in zip(knots, self._curved, strict=True)]
        kinks = self._source.kinks
        if not any(self._source.curved):
            first, second = (
                tuple(float(knot) for knot in own[1:-1])
                for own in (self._source.first_knots, self._source.second_knots)
            )
            kinks = first, second
        return replace(
            self._source,
            first_knots=knots[0],
            second_knots=knots[1],
            table=self._function(self._source.at(places[0], places[1])),
            curved=self._curved,
            degree=DEGREE if self._degree is None else self._degree,
            kinks=kinks,
        )

    def _departures(self, found: FaceMap, at: tuple[FloatArray, FloatArray], index: int) -> FloatArray:
        """The largest departure at each place along an axis from any along the other, in runs of bounded size."""
        other = 1 - index
        own, source = (
            [profiles.at(at[i]) for i, profiles in enumerate((m.first, m.second))] for m in (found, self._source)
        )
        run = max(IN_RUN // max(at[other].size, 1), 1)
        largest = []
        for start in range(0, at[index].size, run):
            if self._keep_going is not None:
                self._keep_going()
            rows = slice(start, start + run)
            wanted = self._function(source[index][rows] @ source[other].T)
            largest.append(np.abs(own[index][rows] @ own[other].T - wanted).max(axis=1))
        return np.concatenate(largest)

    def _samples(self, found: FaceMap, index: int) -> FloatArray:
        """Places between the points of a map along an axis."""
        places = found.first_places if index == 0 else found.second_places
        places = places[np.isfinite(places)]
        parts = (np.arange(READ_OFF) + 0.5) / READ_OFF
        return np.asarray((places[:-1, None] + np.diff(places)[:, None] * parts).ravel())

    def _finer(self, found: FaceMap, index: int) -> FloatArray:
        """The knots along an axis, with those pieces halved that are off by too much."""
        knots = found.first_knots if index == 0 else found.second_knots
        if not self._curved[index]:
            return knots
        other = found.second_places if index == 0 else found.first_places
        other = other[np.isfinite(other)]
        room = MOST_PIECES - (knots.size - 1)
        if room <= 0:
            return knots
        samples = self._samples(found, index)
        departures = self._departures(found, (samples, other) if index == 0 else (other, samples), index)
        along = departures.reshape(knots.size - 1, -1).max(axis=1)
        halved = along > max(0.5 * self._goal, self._rounding)
        if halved.sum() > room:
            worst = np.argsort(np.where(halved, -along, math.inf), kind="stable")[:room]
            halved = np.zeros_like(halved)
            halved[worst] = True
        middles = 0.5 * (knots[1:] + knots[:-1])
        return np.sort(np.concatenate([knots, middles[halved]]))


def _cut_evenly(knots: FloatArray) -> FloatArray:
    """Knots along an endless axis, the pieces between its data cut into many, which stay straight."""
    finite = knots[np.isfinite(knots)]
    parts = np.arange(STRAIGHT_PIECES) / STRAIGHT_PIECES
    cut = (finite[:-1, None] + np.diff(finite)[:, None] * parts).ravel()
    return np.unique(np.concatenate([knots, cut]))
