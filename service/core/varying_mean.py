"""Means of the potential over a face of a body whose conductivity varies.

The mean of the potential is not the potential of the mean of theta. Where the face is held it follows from its data;
on a film face without radiation from its total flow, which is in proportion to the mean difference from the ambient;
on other faces the potential is integrated by Gauss's rule on panels that narrow toward the breaks of the face's data
and the edges, where the field is least smooth.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from service.core import field as fields
from service.core import totals
from service.core.bounded import Bounded
from service.core.conditions import Film, Held, map_of
from service.core.faces import Face, axes_along
from service.core.field import Grid, KeepGoing
from service.core.film_iteration import Iterated
from service.core.flow_error import FlowError
from service.core.kirchhoff import Transformed
from service.core.maps import Rectangle
from service.core.solvability import map_integral

FloatArray = NDArray[np.float64]

# Rounding of an integral of a map, relative to the sizes of its products.
GIVEN = 2e-15

# Points on a panel along an axis, by how much panels narrow toward a break, how often at first and at the most, and
# intervals between breaks at the most.
POINTS, NARROWING, FIRST_PANELS, MOST_PANELS, MOST_INTERVALS = 6, 0.15, 1, 5, 10


def mean(
    data: Transformed,
    iterated: Iterated,
    face: Face,
    rectangle: Rectangle,
    tolerance: float,
    keep_going: KeepGoing | None,
) -> Bounded:
    """Mean of the potential over a rectangle of a face. tolerance: of theta."""
    condition = data.body.faces[face]
    if isinstance(condition, Held):
        return _of_map(condition, rectangle)
    if isinstance(condition, Film) and condition.radiation is None:
        ambient = _of_map(condition, rectangle)
        total = totals.face_total(iterated.setting, face, rectangle, None, tolerance)
        if total.value is not None and total.error_bound is not None:
            per = condition.coefficient * rectangle.area
            off = total.error_bound + FlowError(data, iterated).face_total(face, rectangle)
            return Bounded(ambient.value - total.value / per, ambient.error_bound + off / per)
    return _by_panels(data, iterated, face, rectangle, tolerance, keep_going)


def _of_map(condition: Held | Film, rectangle: Rectangle) -> Bounded:
    face_map = map_of(condition)
    assert face_map is not None
    low, high = (rectangle.p_low, rectangle.q_low), (rectangle.p_high, rectangle.q_high)
    value, size = map_integral(face_map, low, high)
    return Bounded(value / rectangle.area, GIVEN * size / rectangle.area + face_map.error)


def _by_panels(
    data: Transformed,
    iterated: Iterated,
    face: Face,
    rectangle: Rectangle,
    tolerance: float,
    keep_going: KeepGoing | None,
) -> Bounded:
    """By Gauss's rule on more and more panels: the last step is more than what is left."""
    before = _with_panels(data, iterated, face, rectangle, tolerance, FIRST_PANELS, keep_going).value
    for panels in range(FIRST_PANELS + 1, MOST_PANELS + 1):
        found = _with_panels(data, iterated, face, rectangle, tolerance, panels, keep_going)
        step = abs(found.value - before)
        if step <= found.error_bound:
            break
        before = found.value
    return Bounded(found.value, found.error_bound + step)


def _with_panels(
    data: Transformed,
    iterated: Iterated,
    face: Face,
    rectangle: Rectangle,
    tolerance: float,
    panels: int,
    keep_going: KeepGoing | None,
) -> Bounded:
    face_map = map_of(data.body.faces[face])
    knots = (np.zeros(0), np.zeros(0)) if face_map is None else (face_map.first_knots, face_map.second_knots)
    first = _rule(rectangle.p_low, rectangle.p_high, knots[0], panels)
    second = _rule(rectangle.q_low, rectangle.q_high, knots[1], panels)
    axes = [np.array([data.body.end_of(face)])] * 3
    for axis, (places, _) in zip(axes_along(face), (first, second), strict=True):
        axes[axis] = places
    grid = Grid(axes[0], axes[1], axes[2])
    found = fields.on_grid(iterated.setting, grid, tolerance=tolerance, with_flux=False, keep_going=keep_going)
    theta = found.potential.reshape(first[0].size, second[0].size)
    off = data.kirchhoff.potential_bound(theta, found.potential_bound + iterated.error)
    weights = first[1][:, None] * second[1]
    potential = data.kirchhoff.potential(theta)
    rounding = GIVEN * float(np.abs(potential).max())
    return Bounded(
        float((weights * potential).sum()) / rectangle.area,
        float((weights * off).sum()) / rectangle.area + rounding,
    )


def _rule(low: float, high: float, knots: FloatArray, panels: int) -> tuple[FloatArray, FloatArray]:
    """Gauss points and weights on panels that narrow toward the ends and the knots between them."""
    inner = knots[(knots > low) & (knots < high)]
    breaks = np.concatenate([[low], inner if inner.size < MOST_INTERVALS else [], [high]])
    narrowed = 0.5 * NARROWING ** np.arange(panels - 1, -1, -1)
    parts = np.concatenate([[0.0], narrowed, 1 - narrowed[::-1][1:], [1.0]])
    cuts = np.unique(breaks[:-1, None] + np.diff(breaks)[:, None] * parts)
    nodes, weights = np.polynomial.legendre.leggauss(POINTS)
    half, middle = 0.5 * np.diff(cuts), 0.5 * (cuts[1:] + cuts[:-1])
    return (middle[:, None] + half[:, None] * nodes).ravel(), (half[:, None] * weights).ravel()
