"""Lines on the surface where the flux density has no finite value.

- Inside a face: where its data jump (flux like 1/r beside a held face, like ln r along an inflow or film face), and
  where the slope of a held face's data jumps (ln r).
- On a side of a stack that is given an inflow: where two bonded layers meet that conduct unlike along it (ln r).
- On an edge of two held faces: where their values differ (1/r).
- On an edge of a held face with an inflow or film face that gives or takes a flow there (ln r).

The last is an edge where the flux is withheld even if the held data happen to drive just the flow the other face
gives. At other edges of a rectangular body the local solution is a polynomial to first order and the flux is finite;
on an edge of held faces that agree it follows from their data alone.
Source: local solutions in a corner of angle pi/2 (Carslaw and Jaeger 1959, chapter V; Grisvard, Elliptic Problems in
Nonsmooth Domains, 1985, chapter 4, for the powers that occur; from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations, pairwise

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Film, Held, Inflow, map_of
from service.core.faces import AXES, Face, axes_along, axis_of
from service.core.maps import FaceMap
from service.core.problem import Body

FloatArray = NDArray[np.float64]

# Data that differ by less than this part of their size do not jump: they were given in decimal.
SAME = 1e-12


@dataclass(frozen=True, eq=False)
class LocalData:
    """Data of a face seen from the four sides of places on it: values and slopes along its two axes, (4, ...)."""

    values: FloatArray
    slopes: tuple[FloatArray, FloatArray]


def local_data(face_map: FaceMap, p: FloatArray, q: FloatArray) -> LocalData:
    """Limits of the data from both sides along both axes; on the border of the face from inside only."""
    knots_p, knots_q, table = face_map.first_knots, face_map.second_knots, face_map.table
    p, q = np.broadcast_arrays(p, q)
    if face_map.is_uniform:
        nothing = np.zeros((1, *p.shape))
        return LocalData(np.full((1, *p.shape), face_map.lowest), (nothing, nothing))
    if any(face_map.curved):
        return _curved_data(face_map, p, q)
    values, slopes_p, slopes_q = [], [], []
    for side_p in ("left", "right"):
        i = np.clip(np.searchsorted(knots_p, p, side=side_p) - 1, 0, knots_p.size - 2)
        for side_q in ("left", "right"):
            j = np.clip(np.searchsorted(knots_q, q, side=side_q) - 1, 0, knots_q.size - 2)
            if not face_map.bilinear:
                values.append(table[i, j])
                slopes_p.append(np.zeros(p.shape))
                slopes_q.append(np.zeros(p.shape))
                continue
            width_p, width_q = knots_p[i + 1] - knots_p[i], knots_q[j + 1] - knots_q[j]
            s, t = _share(p, knots_p[i], width_p), _share(q, knots_q[j], width_q)
            low, high = table[i, j] * (1 - t) + table[i, j + 1] * t, table[i + 1, j] * (1 - t) + table[i + 1, j + 1] * t
            near, far = table[i, j] * (1 - s) + table[i + 1, j] * s, table[i, j + 1] * (1 - s) + table[i + 1, j + 1] * s
            values.append(low * (1 - s) + high * s)
            slopes_p.append((high - low) / width_p)
            slopes_q.append((far - near) / width_q)
    return LocalData(np.array(values), (np.array(slopes_p), np.array(slopes_q)))


def _curved_data(face_map: FaceMap, p: FloatArray, q: FloatArray) -> LocalData:
    """The same of a formula, which has no jumps; its slopes differ at the kinks that it has, not at other knots."""
    first, second = face_map.first, face_map.second

    def sums(along_first: FloatArray, along_second: FloatArray) -> FloatArray:
        return np.asarray((along_first * along_second).sum(axis=1).reshape(p.shape))

    at_p, at_q = first.at(p.ravel()), second.at(q.ravel())
    kinks_p, kinks_q = face_map.kinks
    sides_p = [first.slope_from(p.ravel(), side) for side in ("left", "right")]
    sides_q = [second.slope_from(q.ravel(), side) for side in ("left", "right")]
    values, slopes_p, slopes_q = sums(at_p, at_q), [], []
    for index in range(4):
        both_p, both_q = 0.5 * (sides_p[0] + sides_p[1]), 0.5 * (sides_q[0] + sides_q[1])
        slope_p = np.where(np.isin(p.ravel(), kinks_p)[:, None], sides_p[index // 2], both_p)
        slope_q = np.where(np.isin(q.ravel(), kinks_q)[:, None], sides_q[index % 2], both_q)
        slopes_p.append(sums(slope_p, at_q))
        slopes_q.append(sums(at_p, slope_q))
    return LocalData(np.array([values] * 4), (np.array(slopes_p), np.array(slopes_q)))


def _share(place: FloatArray, start: FloatArray, width: FloatArray) -> FloatArray:
    """Which part of its piece a place has behind it; 0 on a piece without an end, along which nothing changes."""
    endless = np.isinf(width)
    return np.where(endless, 0.0, (place - np.where(endless, 0.0, start)) / np.where(endless, 1.0, width))


def has_no_finite_flux(body: Body, places: Sequence[FloatArray], shape: tuple[int, ...]) -> NDArray[np.bool_]:
    """Where the flux has no finite value; places: three arrays that broadcast to the shape."""
    found = np.zeros(shape, dtype=bool)
    for face in body.present_faces:
        axis = axis_of(face)
        on_face = places[axis] == body.end_of(face)
        if not on_face.any():
            continue
        found |= on_face & _jumps(body, face, places)
        if axis != 2 and body.layers and isinstance(body.faces[face], Inflow):
            found |= on_face & _between_unlike_layers(body, face, places)
        if isinstance(body.faces[face], Held):
            for other in body.present_faces:
                if axis_of(other) != axis:
                    on_edge = on_face & (places[axis_of(other)] == body.end_of(other))
                    if on_edge.any():
                        found |= on_edge & _edge_mismatch(body, face, other, places)
    return found


def _face_data(body: Body, face: Face, places: Sequence[FloatArray]) -> LocalData | None:
    face_map = map_of(body.faces[face])
    first, second = axes_along(face)
    return None if face_map is None else local_data(face_map, places[first], places[second])


def _varies(values: FloatArray, size: float) -> NDArray[np.bool_]:
    return np.asarray(values.max(axis=0) - values.min(axis=0) > SAME * size)


def _jumps(body: Body, face: Face, places: Sequence[FloatArray]) -> NDArray[np.bool_]:
    face_map = map_of(body.faces[face])
    data = _face_data(body, face, places)
    if data is None or face_map is None or face_map.is_uniform:
        return np.zeros((), dtype=bool)
    size = max(abs(face_map.lowest), abs(face_map.highest))
    found = _varies(data.values, size)
    if isinstance(body.faces[face], Held) and face_map.bilinear:
        for slopes in data.slopes:
            found = found | _varies(slopes, float(np.abs(slopes).max()))
    return found


def _between_unlike_layers(body: Body, face: Face, places: Sequence[FloatArray]) -> NDArray[np.bool_]:
    """Whether an inflow meets a bonded border of two layers, in which it asks for unlike slopes along its axis."""
    face_map, axis = map_of(body.faces[face]), axis_of(face)
    assert face_map is not None
    unlike = [
        height
        for height, (below, above) in zip(body.interfaces, pairwise(body.layers), strict=True)
        if above.contact_below == math.inf and below.conductivity[axis] != above.conductivity[axis]
    ]
    return np.isin(places[2], unlike) & (face_map.highest != 0.0 or face_map.lowest != 0.0)


def _edge_mismatch(body: Body, held: Face, other: Face, places: Sequence[FloatArray]) -> NDArray[np.bool_]:
    """Whether what a held face shows at its edge with another face disagrees with that face's data."""
    held_data = _face_data(body, held, places)
    assert held_data is not None
    condition = body.faces[other]
    other_data = _face_data(body, other, places)
    values = held_data.values.mean(axis=0)
    if isinstance(condition, Held):
        assert other_data is not None
        theirs = other_data.values.mean(axis=0)
        off = _error_of(body, held) + _error_of(body, other)
        return np.asarray(np.abs(values - theirs) > SAME * np.maximum(np.abs(values), np.abs(theirs)) + off)
    held_map = map_of(body.faces[held])
    assert held_map is not None
    slope = held_data.slopes[axes_along(held).index(axis_of(other))]
    given = np.zeros(()) if other_data is None else np.abs(other_data.values).max(axis=0)
    if isinstance(condition, Film):
        assert other_data is not None
        given = np.abs(other_data.values - held_data.values).max(axis=0)
        given = np.maximum(given - SAME * np.abs(values) - _error_of(body, held) - _error_of(body, other), 0.0)
    return np.asarray((given > 0) | (np.abs(slope).max(axis=0) > held_map.slope_error))


def _error_of(body: Body, face: Face) -> float:
    """By how much the data of a face may be off, since they stand for a formula."""
    face_map = map_of(body.faces[face])
    return 0.0 if face_map is None else face_map.error


@dataclass(frozen=True, eq=False)
class HeldEdge:
    """Places on an edge of two held faces, where each part of the problem shows only its own face.

    index: of these places in the answer. potential: mean of what the held faces there say. slopes: along x, y, z,
    from the faces' data.
    """

    index: tuple[NDArray[np.intp], ...]
    potential: FloatArray
    slopes: FloatArray


def held_edges(body: Body, columns: Sequence[FloatArray], *, tensor: bool) -> list[HeldEdge]:
    """What held faces say where two or three of them meet.

    columns: coordinates along x, y, z, read as a tensor product or side by side.
    """
    held = [face for face in body.present_faces if isinstance(body.faces[face], Held)]
    found = []
    for first, second in combinations(held, 2):
        if axis_of(first) == axis_of(second):
            continue
        on_first, on_second = (columns[axis_of(face)] == body.end_of(face) for face in (first, second))
        if not (on_first.any() and on_second.any()):
            continue
        if tensor:
            chosen = [np.arange(column.size) for column in columns]
            chosen[axis_of(first)], chosen[axis_of(second)] = np.flatnonzero(on_first), np.flatnonzero(on_second)
            index = np.ix_(*chosen)
            places = [column[at] for column, at in zip(columns, index, strict=True)]
        else:
            index = np.nonzero(on_first & on_second)
            places = [column[index] for column in columns]
        found.append(HeldEdge(index, *_said_by(body, held, places)))
    return found


def _said_by(body: Body, held: Sequence[Face], places: Sequence[FloatArray]) -> tuple[FloatArray, FloatArray]:
    """Mean potential and slopes of the data of all held faces that the places are on."""
    shape = np.broadcast_shapes(*(place.shape for place in places))
    count, potential = np.zeros(shape), np.zeros(shape)
    slopes, slope_count = np.zeros((3, *shape)), np.zeros((3, *shape))
    for face in held:
        here = np.broadcast_to(places[axis_of(face)] == body.end_of(face), shape)
        data = _face_data(body, face, places)
        assert data is not None
        count += here
        potential += np.where(here, data.values.mean(axis=0), 0.0)
        for axis, slope in zip(axes_along(face), data.slopes, strict=True):
            slopes[axis] += np.where(here, slope.mean(axis=0), 0.0)
            slope_count[axis] += here
    return potential / count, slopes / slope_count


def edge_name(first: Face, second: Face) -> str:
    """Name of the edge of two faces, as answers give it."""
    return f"edge {first}/{second}"


def line_name(face: Face, axis: int, place: float) -> str:
    """Name of a line inside a face, as answers give it."""
    return f"line {AXES[axis]} = {place:g} on {face}"
