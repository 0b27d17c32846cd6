"""What a step of the iteration shows of a film face: theta, what is left over of its condition, and a bound on that.

The leftover r, see `film_iteration`, is read off at the knots of the ambient and half-way between them. Between the
points of the curved pieces that hold the ambient, r is what interpolation of a smooth function leaves: its next
derivative times the polynomial that vanishes at the points (on the straight pieces of an endless axis, times a
parabola). It is read off where that polynomial is largest, once between any two points, and twice the largest value
read off bounds it as long as that derivative does not more than double between places where it is read off. Pieces are
halved where much is left over, which grades them toward jumps and edges.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core import field as fields
from service.core.errors import AccuracyNotReached
from service.core.faces import axes_along
from service.core.field import Grid, KeepGoing, Setting
from service.core.film_ambient import iterated_ambient
from service.core.film_faces import FilmFace, least_slope
from service.core.kirchhoff import Transformed
from service.core.laws import FilmLaw, Kirchhoff

FloatArray = NDArray[np.float64]

# How many times what was read off the leftover may be, see the module.
BETWEEN = 2.0

# Part of the error wanted that the potentials read off may be off by.
READ_OFF = 0.05

# In place of a slope of zero, which bounds nothing.
TINY = 1e-300

# Farther off than this no bound is looked for yet; its fourth power is still a number.
FAR = 1e30


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
class Reading:
    """What one step shows of a film face: theta and r at its samples, and what bounds r."""

    theta: FloatArray
    leftover: FloatArray
    bound: FilmBound

    @property
    def error(self) -> float:
        """What theta may be off by for this face's sake."""
        return self.bound.leftover / self.bound.slope


def read_face(
    data: Transformed, setting: Setting, film: FilmFace, wanted: float, keep_going: KeepGoing | None
) -> Reading:
    """theta and the leftover of a film face at its samples, with the bound over the whole face."""
    kirchhoff, law, body = data.kirchhoff, film.law, data.body
    samples = (film.axes[0].samples, film.axes[1].samples)
    axes = [np.array([body.end_of(film.face)])] * 3
    for axis, places in zip(axes_along(film.face), samples, strict=True):
        axes[axis] = places
    tolerance = min(READ_OFF * wanted * min(least_slope(data, film) / film.coefficient, 1.0), setting.span)
    grid = Grid(axes[0], axes[1], axes[2])
    try:
        found = fields.on_grid(setting, grid, tolerance=tolerance, with_flux=False, keep_going=keep_going)
    except AccuracyNotReached as error:
        # What can be had may do: its bound is counted below.
        found = fields.on_grid(setting, grid, tolerance=error.bound, with_flux=False, keep_going=keep_going)
    theta = found.potential.reshape(samples[0].size, samples[1].size)
    own = iterated_ambient(data, film, wanted).at(*samples)
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
    return Reading(theta, leftover, FilmBound(bound, least, most, (finest[0], finest[1], finest[2])))


def _slopes(kirchhoff: Kirchhoff, law: FilmLaw, theta: FloatArray, wider: float) -> tuple[float, float]:
    """Bounds of the slope of what is given off over theta, where theta lies within `wider` of these values."""
    low, high = kirchhoff.potential(np.array([theta.min() - wider, theta.max() + wider]))
    least, most = kirchhoff.factor_range(float(low), float(high))
    slopes = law.slope(np.array([low, high]))
    return max(float(slopes[0]) / most, TINY), float(slopes[1]) / least


def is_settled(film: FilmFace, reading: Reading, wanted: float) -> bool:
    """Whether what is left over at the points is small against that between them, or against what is wanted."""
    at_points = float(np.abs(reading.leftover[film.axes[0].at_points, film.axes[1].at_points]).max())
    return at_points <= max(0.1 * float(np.abs(reading.leftover).max()), 0.02 * wanted * reading.bound.slope)
