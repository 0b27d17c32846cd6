"""What the error of maps that stand for formulas adds to answers.

Of the field: held values and ambients that are off by e move it by at most e (maximum principle), a given inflow that
is off by e by at most e times what a unit of inflow on that face raises.

Of the flux at a scaled distance s from a held or film face whose data are off by e: no more than 2 e / s. In a
half-space the slope along the face is at most (2 / pi) e / s, three times that beside a film, and across it 0.968 e / s
(integrals of the absolute slope of the kernels of a line). Close to the face the slopes of the error take over: the
flux that data with slopes e' drive is e' times a number that grows with the logarithm of the smallest distance over
the largest, which NEAR allows for down to a billionth of a piece. On an edge with another held face the error may be a
jump, beside which the gradient is (2 / pi) e / d at a distance d (see `unbounded`). An inflow off by e moves the flux
by as many times e.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import reduce

import numpy as np
from numpy.typing import NDArray

from service.core import time_error, time_form
from service.core.conditions import Film, Held, Inflow, map_of
from service.core.faces import Face, axes_along, axis_of
from service.core.lines.line import VALUE, Line
from service.core.lines.places import Places
from service.core.maps import FaceMap, Rectangle
from service.core.problem import Body
from service.core.split import Part, parts_of

FloatArray = NDArray[np.float64]

# Flux per slope of the error of the data close to a face, or per error of an inflow.
NEAR = 16.0

# Flux at a scaled distance from a face, times that distance, per error of its data.
FAR = 2.0

# Logarithms of distances: the flow beside an edge where the error jumps is had down to exp(-LOGARITHMS) of the body.
LOGARITHMS = 70.0

# Places along each axis of a face at which the rise of a unit of inflow is read, and what is allowed for between them:
# a rise that is an arch over the face is off by no more than 1 - cos(pi / 16) twice.
RISE_PLACES, BETWEEN = 9, 1.05

# Where slopes are not asked for, rises and flows need no more than this accuracy.
STEP = time_error.COARSEST_STEP


@dataclass(frozen=True)
class Source:
    """A face whose data may be off: by how much in all, and the slopes of that per scaled length of the face.

    axis, place: where the face is. is_inflow: whether the data are an inflow; then slope is that of the field it makes.
    edges: where the held faces are that it meets, if it is held itself: the axis and the place of each.
    """

    axis: int
    place: float
    error: float
    slope: float
    is_inflow: bool
    edges: tuple[tuple[int, float], ...] = ()

    def gradient(self, distance: FloatArray, from_edge: FloatArray | float = math.inf) -> FloatArray:
        """What the scaled gradient may be off by at scaled distances from the face and from the held ones it meets.

        On the edge itself it is that of the data.
        """
        if self.is_inflow:
            return np.full_like(distance, NEAR * self.slope)
        with np.errstate(divide="ignore"):
            beside_edge = np.where((distance == 0.0) & (from_edge == 0.0), 0.0, FAR * self.error / from_edge)
            return np.minimum(FAR * self.error / distance, NEAR * self.slope + beside_edge)

    def mean_gradient(self, near: float, far: float) -> float:
        """Mean of that between two distances, which may be equal."""
        if self.is_inflow or far == near:
            return float(self.gradient(np.array([near]))[0])
        turn = min(max(FAR * self.error / (NEAR * self.slope), near), far)
        beside_edge = LOGARITHMS if turn > near else 0.0
        beyond = FAR * self.error * (math.log(far / turn) + beside_edge)
        return (NEAR * self.slope * (turn - near) + beyond) / (far - near)


def sources_of(body: Body) -> tuple[Source, ...]:
    """The faces of a body whose data are those of formulas."""
    found, scales = [], scales_of(body)
    for face, condition in body.faces.items():
        face_map = map_of(condition)
        if face_map is None or face_map.error == 0.0:
            continue
        axis = axis_of(face)
        if isinstance(condition, Inflow):
            found.append(Source(axis, body.end_of(face), 0.0, face_map.error * scales[axis], is_inflow=True))
        else:
            slope = face_map.slope_error / min(scales[along] for along in axes_along(face))
            edges = _held_beside(body, face) if isinstance(condition, Held) else ()
            found.append(Source(axis, body.end_of(face), face_map.error, slope, is_inflow=False, edges=edges))
    return tuple(found)


def _held_beside(body: Body, face: Face) -> tuple[tuple[int, float], ...]:
    """Axis and place of the held faces that meet a face in an edge."""
    return tuple(
        (axis_of(other), body.end_of(other))
        for other in body.present_faces
        if axis_of(other) != axis_of(face) and isinstance(body.faces[other], Held)
    )


def of_potential(body: Body, lines: tuple[Line, Line, Line]) -> float:
    """What the field may be off by anywhere."""
    levels, rises = [0.0], 0.0
    for face, condition in body.faces.items():
        if isinstance(condition, Held | Film):
            face_map = map_of(condition)
            assert face_map is not None
            levels.append(face_map.error)
        elif isinstance(condition, Inflow) and condition.inflow.error > 0.0:
            rises += condition.inflow.error * _rise(body, lines, face)
    return max(levels) + rises


def _rise(body: Body, lines: tuple[Line, Line, Line], face: Face) -> float:
    """What a unit of inflow on a face raises the potential by anywhere: it is largest on that face."""
    part = _unit_part(body, face)
    places = []
    for axis, line in enumerate(lines):
        if axis == axis_of(face):
            at = np.array([body.end_of(face)])
        elif line.is_endless:
            at = np.array([line.stretch[1]])
        else:
            at = np.linspace(0.0, line.length, RISE_PLACES)
        places.append(Places(at, VALUE))
    return BETWEEN * float(time_form.on_grid(time_form.integrate(lines, part, places, STEP)).max())


def _unit_part(body: Body, face: Face) -> Part:
    driven = replace(body, faces={**body.faces, face: Inflow(FaceMap.uniform(1.0))})
    return next(part for part in parts_of(driven, 0.0) if part.cause == face)


def scales_of(body: Body) -> tuple[float, float, float]:
    """Scaled length per length along each axis; of a stack by the layer that conducts best."""
    x, y, z = (1 / math.sqrt(max(conductivities)) for conductivities in _conductivities(body))
    return x, y, z


def _conductivities(body: Body) -> list[list[float]]:
    """Those of all layers along each axis."""
    every = [layer.conductivity for layer in body.layers] or [body.conductivity]
    return [[conductivity[axis] for conductivity in every] for axis in range(3)]


def _largest_factor(body: Body) -> float:
    """Largest flux per scaled gradient along any axis.

    Where layers differ the gradient is larger in those that conduct less, by no more than they differ.
    """
    contrast = max(max(along) / min(along) for along in _conductivities(body))
    return contrast / min(scales_of(body))


def of_flux(body: Body, columns: Sequence[FloatArray], *, tensor: bool) -> FloatArray | float:
    """What a component of the flux may be off by at places, to broadcast to the field."""
    total: FloatArray | float = 0.0
    for source in sources_of(body):
        distances = [_distance(body, columns, axis, place, tensor) for axis, place in source.edges]
        from_edge = reduce(np.minimum, distances, np.array(math.inf))
        total = total + source.gradient(_distance(body, columns, source.axis, source.place, tensor), from_edge)
    return total * _largest_factor(body)


def _distance(body: Body, columns: Sequence[FloatArray], axis: int, place: float, tensor: bool) -> FloatArray:
    """Scaled distances of places from a face, to broadcast to the field."""
    distance = np.abs(columns[axis] - place) * scales_of(body)[axis]
    return distance.reshape([-1 if other == axis else 1 for other in range(3)]) if tensor else distance


def of_flow(body: Body, axis: int, place: float, rectangle: Rectangle) -> float:
    """What the flow through a rectangle of a plane square to an axis may be off by."""
    total = 0.0
    first, second = axes_along(axis)
    ends = {
        first: (rectangle.p_low, rectangle.p_high),
        second: (rectangle.q_low, rectangle.q_high),
        axis: (place, place),
    }
    for source in sources_of(body):
        scale = scales_of(body)[source.axis]
        near, far = sorted(abs(end - source.place) * scale for end in ends[source.axis])
        total += source.mean_gradient(near, far)
    return total * _largest_factor(body) * rectangle.area if total > 0.0 else 0.0
